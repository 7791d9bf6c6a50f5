"""The member of a family that has a given mean and SD of ρ, for many pairs of these at once."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.special import betainc, betaln, ndtr

from bayesmed.core.errors import PriorError
from bayesmed.priors.arguments import correlation, positive, refusal
from bayesmed.priors.fisher_normal import FisherNormal
from bayesmed.priors.moment_matching import fisher_normal, stretched_beta, truncated_normal
from bayesmed.priors.prior import Floats, Prior
from bayesmed.priors.stretched_beta import StretchedBeta
from bayesmed.priors.truncated_normal import TruncatedNormal

__all__ = ["FAMILIES", "Members", "members", "with_mean_and_sd"]

FAMILIES = ("StretchedBeta", "TruncatedNormal", "FisherNormal")
BOUNDS = (-0.99, 0.99)


@dataclass(frozen=True, eq=False)
class Members:
    """Members of one family, one to a pair of mean and SD.

    Attributes
    ----------
    family : str
    parameters : array, shape (pair, 2)
        The family's two parameters; nan where no member has that mean and SD.
    lower, upper : float
        Bounds of ρ.
    """

    family: str
    parameters: Floats
    lower: float
    upper: float

    @property
    def exist(self) -> NDArray[np.bool_]:
        """Which pairs belong to a member, shape (pair,)."""
        return np.isfinite(self.parameters).all(axis=1)

    def at(self, which: NDArray[np.intp], t: Floats) -> tuple[Floats, Floats]:
        """Return cdf and density of some members on the scale of t = atanh ρ, each of shape (which, t)."""
        first, second = self.parameters[which].T[:, :, None]
        return _curves(self)(first, second, t)

    def prior(self, pair: int) -> Prior:
        """Return one member as a belief."""
        first, second = (float(value) for value in self.parameters[pair])
        if self.family == "StretchedBeta":
            return StretchedBeta(first, second)
        if self.family == "FisherNormal":
            return FisherNormal(first, second)
        return TruncatedNormal(first, second, self.lower, self.upper)


def members(family: str, mean: Floats, sd: Floats, bounds: tuple[float, float] | None = None) -> Members:
    """Return the members of a family that have given means and SDs of ρ.

    Parameters
    ----------
    family : {"StretchedBeta", "TruncatedNormal", "FisherNormal"}
    mean, sd : array, shape (pair,)
        Means strictly between −1 and 1, SDs above 0.
    bounds : (float, float), optional
        Bounds of the TruncatedNormal family, ±0.99 if left out; the others have none to choose.

    Raises
    ------
    PriorError
        For an unknown family, bounds that are none, or bounds given to a family without.
    """
    if family not in FAMILIES:
        raise refusal("members", "family", family, f"it is one of {', '.join(FAMILIES)}")
    if family != "TruncatedNormal":
        if bounds is not None:
            raise refusal("members", "bounds", bounds, f"{family} reaches from -1 to 1 and takes none")
        solve = stretched_beta if family == "StretchedBeta" else fisher_normal
        return Members(family, solve(mean, sd), -1.0, 1.0)
    lower, upper = _bounds(BOUNDS if bounds is None else bounds)
    return Members(family, truncated_normal(mean, sd, lower, upper), lower, upper)


def with_mean_and_sd(
    mean: float, sd: float, family: str = "StretchedBeta", bounds: tuple[float, float] | None = None
) -> Prior:
    """Return the member of a family whose mean and SD of ρ are those given.

    Parameters
    ----------
    mean : float
        Mean of ρ, strictly between −1 and 1.
    sd : float
        SD of ρ, above 0.
    family : {"StretchedBeta", "TruncatedNormal", "FisherNormal"}
    bounds : (float, float), optional
        Bounds of the TruncatedNormal family, ±0.99 if left out.

    Raises
    ------
    PriorError
        If no member has them.

    Examples
    --------
    >>> with_mean_and_sd(0, 0.5)
    StretchedBeta(alpha=1.5, beta=1.5)
    """
    centre = correlation("with_mean_and_sd", "mean", mean)
    spread = positive("with_mean_and_sd", "sd", sd)
    if abs(centre) == 1:
        raise refusal("with_mean_and_sd", "mean", centre, "it must lie strictly between -1 and 1")
    found = members(family, np.array([centre]), np.array([spread]), bounds)
    if not found.exist[0]:
        reach = "" if family == "StretchedBeta" else " with its centre within the bounds" * (family[0] == "T")
        raise PriorError(
            f"with_mean_and_sd: no {family}{reach} has mean {centre:g} and SD {spread:g} of rho; a smaller SD is needed"
        )
    return found.prior(0)


class _Curves(Protocol):
    def __call__(self, first: Floats, second: Floats, t: Floats) -> tuple[Floats, Floats]: ...


def _curves(found: Members) -> _Curves:
    if found.family == "StretchedBeta":
        return _beta_curves
    if found.family == "FisherNormal":
        return _fisher_normal_curves

    def truncated(first: Floats, second: Floats, t: Floats) -> tuple[Floats, Floats]:
        return _truncated_normal_curves(first, second, t, found.lower, found.upper)

    return truncated


def _beta_curves(first: Floats, second: Floats, t: Floats) -> tuple[Floats, Floats]:
    """Cdf and density, the cdf by quadrature of the density between neighbouring places.

    That costs a tenth of the incomplete beta function, which gives the cdf at the first place only. In four-point
    Gauss–Legendre rules over at most half an SD the error is below 1e-9.
    """
    log_constant = np.log(2) - betaln(first, second)

    def density(places: Floats) -> Floats:
        # d(share)/dt = 2 share (1 − share) of share = (1 + tanh t)/2, whose logarithms need no difference from 1.
        exponent = first * -np.log1p(np.exp(-2 * places))
        exponent += second * -np.log1p(np.exp(2 * places))
        exponent += log_constant
        return np.exp(exponent, out=exponent)

    points, weights = np.polynomial.legendre.leggauss(4)
    half = np.diff(t) / 2
    cdf = np.empty((first.size, t.size))
    cdf[:, :1] = betainc(first, second, 1 / (1 + np.exp(-2 * t[0])))
    cdf[:, 1:] = 0.0
    for point, weight in zip(points, weights, strict=True):
        cdf[:, 1:] += weight * half * density(t[:-1] + (1 + point) * half)
    return np.minimum(np.cumsum(cdf, axis=1, out=cdf), 1.0), density(t)


def _fisher_normal_curves(first: Floats, second: Floats, t: Floats) -> tuple[Floats, Floats]:
    z = (t - first) / second
    return ndtr(z), np.exp(-0.5 * z**2) / (second * np.sqrt(2 * np.pi))


def _truncated_normal_curves(
    first: Floats, second: Floats, t: Floats, lower: float, upper: float
) -> tuple[Floats, Floats]:
    rho = np.tanh(t)
    below, mass = ndtr((lower - first) / second), ndtr((upper - first) / second) - ndtr((lower - first) / second)
    z = (rho - first) / second
    cdf = np.clip((ndtr(z) - below) / mass, 0.0, 1.0)
    density = np.exp(-0.5 * z**2) / (second * np.sqrt(2 * np.pi) * mass * np.cosh(t) ** 2)
    return cdf, density


def _bounds(value: Any) -> tuple[float, float]:
    try:
        lower, upper = value
    except (TypeError, ValueError):
        raise refusal("members", "bounds", value, "two correlations are needed, such as (-0.99, 0.99)") from None
    low, high = correlation("members", "bounds[0]", lower), correlation("members", "bounds[1]", upper)
    if not low < high:
        raise refusal("members", "bounds", value, "the first must be less than the second")
    return low, high
