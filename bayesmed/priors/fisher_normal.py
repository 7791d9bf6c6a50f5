"""A normal belief on Fisher's scale, atanh ρ."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import ndtr, ndtri

from bayesmed.priors.arguments import doubles, positive, real, refusal
from bayesmed.priors.prior import Floats, Prior
from bayesmed.priors.quadrature import integrate

__all__ = ["FisherNormal"]

FARTHEST = 8.0  # atanh(1 − 2e-7): beyond, a double no longer tells ρ from ±1 with any digits to spare


@dataclass(frozen=True)
class FisherNormal(Prior):
    """atanh ρ normal with `mean` and `sd`, both on that scale: for small ρ nearly those of ρ.

    It reaches ±1 with tails so thin that every moment of an effect exists.

    Parameters
    ----------
    mean, sd : float
        Mean, from −8 to 8, and standard deviation, above 0 and at most 8, of atanh ρ.

    Examples
    --------
    >>> FisherNormal(0, 0.15).ppf([0.025, 0.975]).round(3)
    array([-0.286,  0.286])
    """

    mean: float
    sd: float

    def __post_init__(self) -> None:
        mean = real("FisherNormal", "mean", self.mean)
        sd = positive("FisherNormal", "sd", self.sd)
        if abs(mean) > FARTHEST:
            raise refusal("FisherNormal", "mean", mean, "it is a mean of atanh ρ and must lie between -8 and 8")
        if sd > FARTHEST:
            raise refusal("FisherNormal", "sd", sd, "it is an SD of atanh ρ and must be at most 8")
        object.__setattr__(self, "mean", mean)
        object.__setattr__(self, "sd", sd)

    def support(self) -> tuple[float, float]:
        """Return (−1, 1)."""
        return -1.0, 1.0

    def odds_moments(self) -> tuple[float, float]:
        """Return E[r] = sinh(μ)e^{s²/2} and E[r²] = (cosh(2μ)e^{2s²} − 1)/2, as r = sinh(atanh ρ)."""
        first = math.sinh(self.mean) * math.exp(self.sd**2 / 2)
        # (cosh 2μ e^{2s²} − 1)/2 = sinh²μ e^{2s²} + (e^{2s²} − 1)/2, which loses no digits near 0
        second = math.sinh(self.mean) ** 2 * math.exp(2 * self.sd**2) + math.expm1(2 * self.sd**2) / 2
        return first, second

    def rho_mean(self) -> float:
        """Return the mean of ρ, by quadrature."""
        return self._expect(lambda rho: rho)

    def rho_sd(self) -> float:
        """Return the standard deviation of ρ, by quadrature."""
        centre = self.rho_mean()
        return math.sqrt(self._expect(lambda rho: (rho - centre) ** 2))

    def _expect(self, function: Callable[[Floats], Floats]) -> float:
        """Integrate over the normal, with breaks where it and where tanh bend."""
        bends = (np.linspace(-12, 12, 25) - self.mean) / self.sd
        breaks = np.concatenate([np.linspace(-9, 9, 19), bends[np.abs(bends) < 9]])

        def weighted(z: Floats) -> Floats:
            density = np.exp(-0.5 * z**2) / math.sqrt(2 * math.pi)
            return function(np.tanh(self.mean + self.sd * z)) * density

        return integrate(weighted, breaks)

    def _logpdf(self, x: Floats) -> Floats:
        z = (np.arctanh(x) - self.mean) / self.sd
        log_density: Floats = -0.5 * z**2 - math.log(self.sd) - 0.5 * math.log(2 * math.pi) - np.log1p(-x) - np.log1p(x)
        return log_density

    def _cdf(self, x: Floats) -> Floats:
        with np.errstate(divide="ignore"):  # atanh(−1) is −inf, whose probability is 0 as it should be
            cdf: Floats = ndtr((np.arctanh(x) - self.mean) / self.sd)
        return cdf

    def _ppf(self, q: Floats) -> Floats:
        ppf: Floats = np.tanh(self.mean + self.sd * ndtri(q))
        return ppf

    def _pymc_dist(self) -> Any:
        import pymc as pm

        def on_correlation(mean: Any, sd: Any, size: Any) -> Any:
            # tanh z = 2 logistic(2z) − 1, whose log density is −inf, not NaN, outside (−1, 1)
            return 2 * pm.LogitNormal.dist(2 * mean, 2 * sd, size=size) - 1

        return pm.CustomDist.dist(*doubles(self.mean, self.sd), dist=on_correlation, class_name="FisherNormal")
