"""The belief that the residual correlation is one known number."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from bayesmed.priors.arguments import correlation, refusal
from bayesmed.priors.prior import Floats, Prior

__all__ = ["PointMass"]


@dataclass(frozen=True)
class PointMass(Prior):
    """Certainty that ρ is `value`; 0 is the belief that nothing was left out.

    Parameters
    ----------
    value : float
        The residual correlation, strictly between −1 and 1.

    Examples
    --------
    >>> PointMass(0.2).above([0.1, 0.2, 0.3])
    array([1., 0., 0.])
    """

    value: float

    def __post_init__(self) -> None:
        value = correlation("PointMass", "value", self.value)
        if abs(value) == 1:
            raise refusal(
                "PointMass",
                "value",
                value,
                "it must lie strictly between -1 and 1",
            )
        object.__setattr__(self, "value", value)

    def support(self) -> tuple[float, float]:
        """Return `value` twice."""
        return self.value, self.value

    def atoms(self) -> tuple[tuple[float, float], ...]:
        """Return the one atom, of probability 1."""
        return ((self.value, 1.0),)

    def odds_moments(self) -> tuple[float, float]:
        """Return r and r² at `value`."""
        squared = self.value**2 / ((1 - self.value) * (1 + self.value))
        return math.copysign(math.sqrt(squared), self.value), squared

    def rho_mean(self) -> float:
        """Return `value`."""
        return self.value

    def rho_sd(self) -> float:
        """Return 0."""
        return 0.0

    def below(self, x: ArrayLike) -> Floats:
        """Return 1 where `x` is above `value`, else 0."""
        x = np.asarray(x, dtype=float)
        return np.where(np.isnan(x), np.nan, np.where(x > self.value, 1.0, 0.0))[()]

    def to_pymc(self, name: str) -> Any:
        """Register a deterministic called `name` that holds the constant."""
        import pymc as pm
        import pytensor.tensor as pt

        return pm.Deterministic(name, pt.constant(np.float64(self.value)))

    def _logpdf(self, x: Floats) -> Floats:
        return np.full(x.shape, np.inf)

    def _cdf(self, x: Floats) -> Floats:
        return np.ones(x.shape)

    def _ppf(self, q: Floats) -> Floats:
        return np.full(q.shape, self.value)
