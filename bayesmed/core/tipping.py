"""The tipping distribution: the residual correlation at which each draw crosses the claim's limit.

Every effect is a line in ``r = rho / sqrt(1 - rho²)``: ``effect = constant - slope r``. A draw crosses the limit
c at ``r* = (constant - c) / slope``, and the probability of a claim under any belief is the average over draws of
the belief's mass on the right side of ``rho*``. No draws of rho are needed, so every belief is judged by the same
numbers.
"""

from collections.abc import Callable, Hashable
from functools import lru_cache
from typing import Any, Literal, Protocol

import numpy as np
from scipy.optimize import elementwise

from bayesmed.core.mapping import Array, odds

Direction = Literal["above", "below"]
TINY = 1e-150
"""Numbers whose squares still have all their digits are larger than this, and smaller than its inverse."""
APART = 2.0
"""Half the width of the bracket from which the search for a quantile starts, in standard errors of its order."""
CELLS = 65_536
"""Cells of a support between whose ends a distribution function is interpolated while a quantile is searched for."""


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
    Shapes of `constant` and `slope` are equal and kept.
    """
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


def effect_moments(constant: Array, slope: Array, belief: Belief) -> tuple[Array, Array]:
    """Return mean and SD of the effect over draws (last axis) and belief, from closed forms.

    Infinite moments of the belief's odds stay infinite; a mean that both tails pull to infinity, or whose slope
    has draws of both signs, does not exist and is nan.
    """
    first, second = belief.odds_moments()
    flat = ~np.any(slope != 0, axis=-1)
    mixed = np.any(slope > 0, axis=-1) & np.any(slope < 0, axis=-1)
    if np.isfinite(first):
        mean = constant.mean(axis=-1) - slope.mean(axis=-1) * first
    else:
        with np.errstate(invalid="ignore"):
            mean = np.where(mixed, np.nan, -np.sign(slope.mean(axis=-1)) * first)
        mean = np.where(flat, constant.mean(axis=-1), mean)
    if np.isfinite(second):
        centred = constant - constant.mean(axis=-1, keepdims=True)
        offset = slope.mean(axis=-1, keepdims=True) * first
        deviation = centred + offset - slope * first
        variance = np.mean(deviation**2, axis=-1) + np.mean(slope**2, axis=-1) * (second - first**2)
        spread = np.sqrt(np.maximum(variance, 0.0))
    else:
        spread = np.where(flat, constant.std(axis=-1), np.inf)
    return mean, spread


def effect_quantiles(constant: Array, slope: Array, belief: Belief, probabilities: Array, uniforms: Array) -> Array:
    """Return quantiles of the effect over draws and belief, by inverting its distribution function.

    The distribution function is the one behind :func:`claim_probability`, so an interval and a probability
    cannot disagree.

    Parameters
    ----------
    constant, slope : array, shape (point, draw)
    belief : Belief
    probabilities : array, shape (quantile,)
    uniforms : array, shape (draw,)
        One number in (0, 1) per draw, shared by all beliefs, from which the search starts.

    Returns
    -------
    array, shape (point, quantile)
    """
    r = odds(np.clip(belief.ppf(uniforms), -1 + 1e-12, 1 - 1e-12))
    values = constant - slope * r
    draws = values.shape[1]
    apart = np.maximum(APART * np.sqrt(probabilities * (1 - probabilities) / draws), 1 / draws)
    around = np.quantile(values, np.clip(probabilities + np.multiply.outer([-1, 0, 1], apart), 0, 1).ravel(), axis=1)
    low, start, high = around.reshape(3, len(probabilities), -1).transpose(0, 2, 1)
    scale = np.maximum(constant.std(axis=1, keepdims=True), 1e-300)
    width = np.maximum(high - low, 1e-6 * scale)
    below = _lower_probability(constant, slope, belief)

    def gap(value: Array, point: Array, probability: Array) -> Array:
        return below(value, point.astype(int)) - probability

    return _invert(gap, start, width, probabilities)


def _lower_probability(constant: Array, slope: Array, belief: Belief) -> Callable[[Array, Array], Array]:
    """Return P(effect < value) at points, over draws and belief, as a function of (value, point).

    An effect is below v where r lies on one side of ``(constant - v) / slope``, so that per draw the distribution
    function of the belief is taken or its complement.
    """
    if belief.atoms() or not np.all(slope):

        def exact(value: Array, point: Array) -> Array:
            shifted = constant[point] - value[:, None]
            return np.asarray(claim_probability(shifted, slope[point], 0.0, "below", belief).mean(axis=-1))

        return exact
    table = _table(belief)
    intercept, rate = constant / slope, 1 / slope
    sign = -np.sign(slope) / slope.shape[1]
    base = (slope > 0).mean(axis=1)

    def tabled(value: Array, point: Array) -> Array:
        crossing = intercept[point] - value[:, None] * rate[point]
        return np.asarray(base[point] + np.einsum("ij,ij->i", sign[point], table(crossing)))

    return tabled


def _table(belief: Belief) -> Callable[[Array], Array]:
    """Return P(r < x) of a belief without atoms, interpolated between many places.

    Places are equally far apart in the arc tangent of r, the arc sine of rho, where densities infinite at ±1 are not,
    and lie between the ends of the support, where distribution functions may have kinks. A smooth one is off by under
    1e-9 between neighbours.
    """
    values: Array = _tabulated(belief) if isinstance(belief, Hashable) else _tabulated.__wrapped__(belief)
    steps = np.append(np.diff(values), 0.0)
    lower, upper = np.arcsin(belief.support())

    def below(r: Array) -> Array:
        place = (np.clip(np.arctan(r), lower, upper) - lower) * (CELLS / (upper - lower))
        cell = place.astype(np.intp)
        place -= cell
        place *= steps[cell]
        place += values[cell]
        return np.asarray(place)

    return below


@lru_cache(maxsize=64)
def _tabulated(belief: Any) -> Array:
    lower, upper = np.arcsin(belief.support())
    return np.asarray(belief.below(np.sin(np.linspace(lower, upper, CELLS + 1))))


def _invert(gap: Callable[[Array, Array, Array], Array], start: Array, width: Array, probabilities: Array) -> Array:
    """Find where the increasing function `gap` is zero, from a start and a scale."""
    points, count = start.shape
    index = np.repeat(np.arange(points, dtype=float), count)
    target = np.tile(probabilities, points)
    bracket = elementwise.bracket_root(
        gap, start.ravel() - width.ravel(), start.ravel() + width.ravel(), args=(index, target), maxiter=200
    )
    enough: Any = {"xrtol": 1e-10, "fatol": 1e-11}
    root = elementwise.find_root(gap, bracket.bracket, args=(index, target), tolerances=enough)
    # With atoms the function may jump over zero: the point of the jump is the quantile.
    return np.asarray(np.where(root.success, root.x, start.ravel())).reshape(points, count)
