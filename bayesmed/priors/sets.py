"""Sets of beliefs given by a range, by doubt in one belief, or by a mode."""

from __future__ import annotations

import math
from dataclasses import dataclass

from bayesmed.core.envelope import smallest_average_from, smallest_value
from bayesmed.core.mapping import odds
from bayesmed.core.steps import Steps
from bayesmed.priors.accept import coerce
from bayesmed.priors.arguments import correlation, real, refusal
from bayesmed.priors.mixture import Mixture
from bayesmed.priors.point import PointMass
from bayesmed.priors.prior import Prior
from bayesmed.priors.prior_set import PriorSet, bounds
from bayesmed.priors.uniform import Uniform

__all__ = ["AnyOn", "Contaminated", "UnimodalAt"]


@dataclass(frozen=True)
class AnyOn(PriorSet):
    """Every belief about ρ between `lower` and `upper`, certainty in any one value among them.

    With a bound at −1 or 1 the mean of an effect can be anything on that side, up to infinite.

    Parameters
    ----------
    lower, upper : float
        Bounds, −1 ≤ lower ≤ upper ≤ 1. They belong to the range, but −1 and 1.

    Examples
    --------
    >>> AnyOn(0, 1).odds_range()
    (0.0, inf)
    """

    lower: float
    upper: float

    def __post_init__(self) -> None:
        lower, upper = bounds("AnyOn", self.lower, self.upper)
        object.__setattr__(self, "lower", lower)
        object.__setattr__(self, "upper", upper)

    def support(self) -> tuple[float, float]:
        """Return the bounds."""
        return self.lower, self.upper

    def lowest(self, steps: Steps) -> Prior:
        """Return certainty in a value at which the function is smallest."""
        _, place = smallest_value(steps, self.lower, self.upper)
        return PointMass(place)

    def odds_range(self) -> tuple[float, float]:
        """Return r at the bounds."""
        return _odds(self.lower), _odds(self.upper)


@dataclass(frozen=True)
class Contaminated(PriorSet):
    """One belief, trusted but for a share `epsilon` that may be any belief between `lower` and `upper`.

    The members are (1 − ε)·base + ε·q for every q. With the default bounds q may lie anywhere in (−1, 1), and
    the mean of an effect is unbounded however small ε; give bounds inside to speak of means.

    Parameters
    ----------
    base : Prior or float
        The belief held; a number is certainty in it.
    epsilon : float
        Share of doubt, from 0 to 1.
    lower, upper : float
        Bounds of the doubt, −1 ≤ lower ≤ upper ≤ 1.

    Notes
    -----
    Berger & Berliner (1986), Annals of Statistics 14, 461–486, doi:10.1214/aos/1176349933.

    Examples
    --------
    >>> Contaminated(Uniform(-0.2, 0.2), 0.1, -0.6, 0.8).odds_range()[0].__round__(3)
    -0.075
    """

    base: Prior
    epsilon: float
    lower: float = -1.0
    upper: float = 1.0

    def __post_init__(self) -> None:
        lower, upper = bounds("Contaminated", self.lower, self.upper)
        allowed = "it is a share of doubt, from 0 to 1"
        epsilon = real("Contaminated", "epsilon", self.epsilon, allowed)
        if not 0 <= epsilon <= 1:
            raise refusal("Contaminated", "epsilon", epsilon, allowed)
        for field, value in (
            ("base", coerce(self.base)),
            ("epsilon", epsilon),
            ("lower", lower),
            ("upper", upper),
        ):
            object.__setattr__(self, field, value)

    def support(self) -> tuple[float, float]:
        """Return the ends of base and doubt together; of either alone where the other has no weight."""
        ranges = [self.base.support()] * (self.epsilon < 1) + [(self.lower, self.upper)] * (self.epsilon > 0)
        return min(low for low, _ in ranges), max(high for _, high in ranges)

    def lowest(self, steps: Steps) -> Prior:
        """Return the base mixed with certainty in a value at which the function is smallest."""
        _, place = smallest_value(steps, self.lower, self.upper)
        return Mixture([self.base, PointMass(place)], [1 - self.epsilon, self.epsilon])

    def odds_range(self) -> tuple[float, float]:
        """Return (1 − ε)·E[r] of the base plus ε·r at the bounds; `nan` where the base has no E[r]."""
        trusted = (1 - self.epsilon) * self.base.odds_moments()[0] if self.epsilon < 1 else 0.0
        if self.epsilon == 0:
            return trusted, trusted
        return trusted + self.epsilon * _odds(self.lower), trusted + self.epsilon * _odds(self.upper)


@dataclass(frozen=True)
class UnimodalAt(PriorSet):
    """Every belief between `lower` and `upper` whose density nowhere rises away from `mode`.

    The belief may put any probability on `mode` itself. Also with bounds at ±1 the mean of an effect stays
    finite, since no such belief is denser at ±1 than nearer to the mode.

    Parameters
    ----------
    mode : float
        The most probable value, strictly inside (−1, 1) and between the bounds.
    lower, upper : float
        Bounds, −1 ≤ lower ≤ upper ≤ 1.

    Examples
    --------
    >>> UnimodalAt(0.0, -1, 1).odds_range()
    (-1.0, 1.0)
    """

    mode: float
    lower: float
    upper: float

    def __post_init__(self) -> None:
        lower, upper = bounds("UnimodalAt", self.lower, self.upper)
        mode = correlation("UnimodalAt", "mode", self.mode)
        if not lower <= mode <= upper:
            raise refusal("UnimodalAt", "mode", mode, f"it must lie between the bounds {lower!r} and {upper!r}")
        if abs(mode) == 1:
            raise refusal("UnimodalAt", "mode", mode, "it must lie strictly between -1 and 1")
        for field, value in (("mode", mode), ("lower", lower), ("upper", upper)):
            object.__setattr__(self, field, value)

    def support(self) -> tuple[float, float]:
        """Return the bounds."""
        return self.lower, self.upper

    def lowest(self, steps: Steps) -> Prior:
        """Return a uniform belief that has the mode for one end, or certainty in the mode."""
        _, end = smallest_average_from(steps, self.mode, self.lower, self.upper)
        return self._towards(end)

    def odds_range(self) -> tuple[float, float]:
        """Return E[r] of the uniform beliefs from the mode to either bound.

        E[r] of a uniform belief from m to t is (m + t)/(√(1−m²) + √(1−t²)), which grows with t.
        """
        return self._towards(self.lower).odds_moments()[0], self._towards(self.upper).odds_moments()[0]

    def _towards(self, end: float) -> Prior:
        if end == self.mode:
            return PointMass(end)
        return Uniform(min(end, self.mode), max(end, self.mode))


def _odds(rho: float) -> float:
    return float(odds(rho)) if abs(rho) < 1 else math.copysign(math.inf, rho)
