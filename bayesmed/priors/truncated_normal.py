"""A normal belief about the residual correlation, cut off at bounds."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import erf, erfinv, ndtr, ndtri

from bayesmed.priors.arguments import correlation, doubles, positive, refusal
from bayesmed.priors.prior import Floats, Prior
from bayesmed.priors.quadrature import integrate

__all__ = ["TruncatedNormal"]


@dataclass(frozen=True)
class TruncatedNormal(Prior):
    """ρ normal with `mean` and `sd`, given that it lies between `lower` and `upper`.

    The default bounds stop short of ±1: a density that is not zero at ±1 leaves the SD of an effect infinite,
    however small the density there.

    Parameters
    ----------
    mean, sd : float
        Mean and standard deviation of the normal before it is cut off (`rho_mean` and `rho_sd` give those of
        ρ). The mean lies between the bounds and sd is above 0.
    lower, upper : float
        Bounds, −1 ≤ lower < upper ≤ 1.

    Examples
    --------
    >>> TruncatedNormal(0.3, 0.15).ppf([0.05, 0.95]).round(3)
    array([0.053, 0.547])
    """

    mean: float
    sd: float
    lower: float = -0.99
    upper: float = 0.99

    def __post_init__(self) -> None:
        owner = "TruncatedNormal"
        lower = correlation(owner, "lower", self.lower)
        upper = correlation(owner, "upper", self.upper)
        if not lower < upper:
            raise refusal(owner, "lower", lower, f"it must be less than upper, which is {upper!r}")
        mean = correlation(owner, "mean", self.mean)
        if not lower <= mean <= upper:
            raise refusal(owner, "mean", mean, f"it must lie between the bounds {lower!r} and {upper!r}")
        for field, value in (
            ("mean", mean),
            ("sd", positive(owner, "sd", self.sd)),
            ("lower", lower),
            ("upper", upper),
        ):
            object.__setattr__(self, field, value)

    def support(self) -> tuple[float, float]:
        """Return the bounds."""
        return self.lower, self.upper

    def odds_moments(self) -> tuple[float, float]:
        """Return E[r] and E[r²] by quadrature over φ, ρ = sin φ; E[r²] is infinite with a bound at ±1."""
        breaks = np.arcsin(self._breaks())
        first = integrate(lambda phi: np.sin(phi) * np.exp(self._logpdf(np.sin(phi))), breaks)
        if self.lower == -1 or self.upper == 1:
            return first, math.inf
        second = integrate(
            lambda x: x**2 / ((1 - x) * (1 + x)) * np.exp(self._logpdf(x)), self._breaks(towards_one=True)
        )
        return first, second

    def rho_mean(self) -> float:
        """Return the mean of ρ, by quadrature."""
        return integrate(lambda x: x * np.exp(self._logpdf(x)), self._breaks())

    def rho_sd(self) -> float:
        """Return the standard deviation of ρ, by quadrature."""
        centre = self.rho_mean()
        return math.sqrt(integrate(lambda x: (x - centre) ** 2 * np.exp(self._logpdf(x)), self._breaks()))

    def _breaks(self, *, towards_one: bool = False) -> Floats:
        """Steps of one sd about the mean, which hold all but 1e-18; towards ±1 steps that halve the rest."""
        steps = self.mean + self.sd * np.linspace(-9, 9, 19)
        breaks = np.clip(steps, self.lower, self.upper)
        if towards_one:
            rest = 0.5 ** np.arange(54.0)
            near = np.concatenate([1 - rest, rest - 1])
            breaks = np.concatenate([breaks, near[(near > breaks.min()) & (near < breaks.max())]])
        return breaks

    def _standard(self, x: Floats | float) -> Floats:
        return (np.asarray(x) - self.mean) / self.sd

    def _erf_bounds(self) -> tuple[float, float]:
        """Return erf at both bounds: of opposite sign, as the mean lies between, so nothing cancels."""
        return (
            float(erf(self._standard(self.lower) / math.sqrt(2))),
            float(erf(self._standard(self.upper) / math.sqrt(2))),
        )

    def _logpdf(self, x: Floats) -> Floats:
        low, high = self._erf_bounds()
        log_scale = math.log(self.sd) + 0.5 * math.log(2 * math.pi) + math.log((high - low) / 2)
        log_density: Floats = -0.5 * self._standard(x) ** 2 - log_scale
        return log_density

    def _cdf(self, x: Floats) -> Floats:
        low, high = self._erf_bounds()
        cdf: Floats = (erf(self._standard(x) / math.sqrt(2)) - low) / (high - low)
        return cdf

    def _ppf(self, q: Floats) -> Floats:
        low, high = self._erf_bounds()
        inner = low + q * (high - low)
        mass = (high - low) / 2
        # in the middle by erf, which is exact near 0; in either tail by the tail's own probability
        left = ndtri(ndtr(self._standard(self.lower)) + q * mass)
        right = -ndtri(ndtr(-self._standard(self.upper)) + (1 - q) * mass)
        tails = np.where(inner < 0, left, right)
        with np.errstate(divide="ignore"):
            z = np.where(np.abs(inner) < 0.5, math.sqrt(2) * erfinv(np.clip(inner, -0.5, 0.5)), tails)
        ppf: Floats = self.mean + self.sd * z
        return ppf

    def _pymc_dist(self) -> Any:
        import pymc as pm

        mean, sd, lower, upper = doubles(self.mean, self.sd, self.lower, self.upper)
        return pm.TruncatedNormal.dist(mean, sd, lower=lower, upper=upper)
