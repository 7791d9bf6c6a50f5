"""Distributions of other libraries that are families of this package under another name."""

from __future__ import annotations

from typing import Any

from bayesmed.core.errors import PriorError
from bayesmed.priors.adapters import FromScipy, Wrapped, checked_support
from bayesmed.priors.prior import Prior
from bayesmed.priors.stretched_beta import StretchedBeta
from bayesmed.priors.truncated_normal import TruncatedNormal
from bayesmed.priors.uniform import Uniform

__all__ = ["from_preliz", "from_scipy"]


def from_scipy(frozen: Any) -> Prior:
    """Return the belief that a frozen continuous `scipy.stats` distribution is, as a family here if one.

    A beta on (−1, 1), a uniform and a truncated normal become `StretchedBeta`, `Uniform` and
    `TruncatedNormal`, whose moments and PyMC variables are exact; others become `FromScipy`, or `Wrapped`
    where scipy does not know the name.
    """
    import scipy.stats

    generic: Any = frozen.dist
    family: str = generic.name
    if not hasattr(generic, "pdf"):
        raise PriorError(f"a belief about rho cannot be made from the discrete distribution {family}")
    checked_support(family, frozen.support())
    shapes, loc, scale = generic._parse_args(*frozen.args, **frozen.kwds)
    lower, upper = (float(end) for end in frozen.support())
    if family == "rv_histogram" or type(generic) is not type(getattr(scipy.stats, family, None)):
        return Wrapped(frozen)
    if family == "beta" and (loc, scale) == (-1, 2):
        return StretchedBeta(*shapes)
    if family == "uniform":
        return Uniform(lower, upper)
    if family == "truncnorm" and lower <= loc <= upper:
        return TruncatedNormal(loc, scale, lower, upper)
    return FromScipy(family, shapes, loc, scale)


def from_preliz(distribution: Any) -> Prior:
    """Return the belief that a distribution of preliz is, as a family here if one, else `Wrapped`."""
    family = type(distribution).__name__
    bounds: Any = (getattr(distribution, "lower", None), getattr(distribution, "upper", None))
    if family == "BetaScaled" and bounds == (-1, 1):
        return StretchedBeta(distribution.alpha, distribution.beta)
    if family in ("Uniform", "TruncatedNormal") and None not in bounds:
        lower, upper = bounds
        checked_support(repr(distribution), bounds)
        if family == "Uniform":
            return Uniform(lower, upper)
        if lower <= distribution.mu <= upper:
            return TruncatedNormal(distribution.mu, distribution.sigma, lower, upper)
    return Wrapped(distribution)
