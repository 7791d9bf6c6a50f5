"""The belief that every residual correlation between two bounds is equally likely."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from bayesmed.priors.arguments import correlation, doubles, refusal
from bayesmed.priors.prior import Floats, Prior

__all__ = ["Uniform"]


@dataclass(frozen=True)
class Uniform(Prior):
    """ρ uniform between `lower` and `upper`, which may be −1 and 1.

    With a bound at ±1 the effect's mean still exists but its SD does not.

    Parameters
    ----------
    lower, upper : float
        Bounds, −1 ≤ lower < upper ≤ 1.

    Examples
    --------
    >>> float(Uniform(-0.3, 0.3).cdf(0.15))
    0.75
    """

    lower: float
    upper: float

    def __post_init__(self) -> None:
        lower = correlation("Uniform", "lower", self.lower)
        upper = correlation("Uniform", "upper", self.upper)
        if not lower < upper:
            raise refusal("Uniform", "lower", lower, f"it must be less than upper, which is {upper!r}")
        object.__setattr__(self, "lower", lower)
        object.__setattr__(self, "upper", upper)

    def support(self) -> tuple[float, float]:
        """Return the bounds."""
        return self.lower, self.upper

    def odds_moments(self) -> tuple[float, float]:
        """Return E[r] = (√(1−l²) − √(1−u²))/(u−l) and E[r²] = (atanh u − atanh l)/(u−l) − 1.

        Both are rearranged so that narrow bounds lose no digits.
        """
        lower, upper = self.lower, self.upper
        roots = math.sqrt((1 - lower) * (1 + lower)) + math.sqrt((1 - upper) * (1 + upper))
        first = (lower + upper) / roots if roots > 0 else 0.0
        if lower == -1 or upper == 1:
            return first, math.inf
        # atanh u − atanh l = atanh d, and atanh(d)/d − 1 has a series where d is small
        scale = 1 - upper * lower
        d = (upper - lower) / scale
        excess = d**2 / 3 + d**4 / 5 + d**6 / 7 if d < 1e-3 else math.atanh(d) / d - 1
        return first, (excess + upper * lower) / scale

    def rho_mean(self) -> float:
        """Return the middle of the bounds."""
        return (self.lower + self.upper) / 2

    def rho_sd(self) -> float:
        """Return (upper − lower)/√12."""
        return (self.upper - self.lower) / math.sqrt(12)

    def _logpdf(self, x: Floats) -> Floats:
        return np.full(x.shape, -math.log(self.upper - self.lower))

    def _cdf(self, x: Floats) -> Floats:
        cdf: Floats = (x - self.lower) / (self.upper - self.lower)
        return cdf

    def _ppf(self, q: Floats) -> Floats:
        ppf: Floats = self.lower + q * (self.upper - self.lower)
        return ppf

    def _pymc_dist(self) -> Any:
        import pymc as pm

        return pm.Uniform.dist(*doubles(self.lower, self.upper))
