"""The tipping distribution: the residual correlation at which each draw crosses the claim's limit.

Every effect is a line in ``r = rho / sqrt(1 - rho²)``: ``effect = constant - slope r``. A draw crosses the limit
c at ``r* = (constant - c) / slope``, and the probability of a claim under any belief is the average over draws of
the belief's mass on the right side of ``rho*``. No draws of rho are needed, so every belief is judged by the same
numbers.
"""

from typing import Literal, Protocol

import numpy as np

from bayesmed.core.belief_table import CELLS, BeliefTable, belief_table
from bayesmed.core.lines import Lines
from bayesmed.core.mapping import Array

Direction = Literal["above", "below"]
TINY = 1e-150
"""Numbers whose squares still have all their digits are larger than this, and smaller than its inverse."""


class Belief(Protocol):
    """What the core asks of a prior on the residual correlation."""

    def below(self, x: Array) -> Array:
        """Return P(rho < x)."""
        ...

    def above(self, x: Array) -> Array:
        """Return P(rho > x)."""
        ...

    def ppf(self, q: Array) -> Array:
        """Return quantiles."""
        ...

    def atoms(self) -> tuple[tuple[float, float], ...]:
        """Return (value, probability) of every single value that has a probability of its own."""
        ...

    def support(self) -> tuple[float, float]:
        """Return the ends of the range in which rho lies."""
        ...

    def odds_moments(self) -> tuple[float, float]:
        """Return E[r] and E[r²], infinite where they are."""
        ...


def tipping_correlation(constant: Array, slope: Array, limit: float) -> Array:
    """Return the correlation at which ``constant - slope r`` equals `limit`, nan where the slope is zero.

    Written with a hypotenuse rather than a ratio, so that a slope near zero gives ±1 and not an overflow.
    """
    gap = constant - limit
    length = np.sqrt(gap * gap + slope * slope)
    if length.size and not TINY < length.min() <= length.max() < 1 / TINY:
        # Squares would lose digits, or everything.
        length = np.hypot(gap, slope)
    with np.errstate(invalid="ignore", divide="ignore"):
        crossing = np.copysign(gap, gap * np.sign(slope)) / length
    crossing[slope == 0] = np.nan
    return np.asarray(crossing)


def claim_probability(constant: Array, slope: Array, limit: float, direction: Direction, belief: Belief) -> Array:
    """Return, per draw, the belief's probability that ``constant - slope r`` is above (or below) `limit`.

    The average over draws is the posterior probability of the claim; its spread gives the Monte Carlo error.
    Shapes of `constant` and `slope` are equal and kept. Where there are many draws and no atoms, the belief's
    distribution function is read from its table.
    """
    return lines_probability(Lines(constant, slope), limit, direction, belief)


def lines_probability(lines: Lines, limit: float, direction: Direction, belief: Belief) -> Array:
    """Return the same as :func:`claim_probability`, of lines that keep what the next belief will ask of them."""
    constant, slope = lines.constant, lines.slope
    if constant.size >= CELLS and not belief.atoms() and lines.crossing:
        return _tabled_probability(lines, limit, direction, belief_table(belief))
    crossing = tipping_correlation(constant, slope, limit)
    # A positive slope means that larger correlations lower the effect.
    lower_side = (slope > 0) if direction == "above" else (slope < 0)
    certain = (constant > limit) if direction == "above" else (constant < limit)
    flat = slope == 0
    safe = np.where(flat, 0.0, crossing)
    # One side or the other, never both: distribution functions are what this costs.
    if lower_side.all():
        return np.asarray(belief.below(safe))
    probability = certain.astype(float)
    upper_side = ~lower_side & ~flat
    probability[lower_side] = belief.below(safe[lower_side])
    probability[upper_side] = belief.above(safe[upper_side])
    return probability


def _tabled_probability(lines: Lines, limit: float, direction: Direction, table: BeliefTable) -> Array:
    slope = lines.slope
    probability = lines.intercept - limit * lines.rate
    for point in probability.reshape(-1, probability.shape[-1]):
        # One at a time, as its draws stay in the fastest memory.
        table.below(point)
    upper_side = (slope < 0) if direction == "above" else (slope > 0)
    if upper_side.any():
        np.subtract(1, probability, out=probability, where=upper_side)
    return probability
