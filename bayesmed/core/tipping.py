"""The tipping distribution: the residual correlation at which each draw crosses the claim's limit.

Every effect is a line in ``r = rho / sqrt(1 - rho²)``: ``effect = constant - slope r``. A draw crosses the limit
c at ``r* = (constant - c) / slope``, and the probability of a claim under any belief is the average over draws of
the belief's mass on the right side of ``rho*``. No draws of rho are needed, so every belief is judged by the same
numbers.
"""

from collections.abc import Callable
from typing import Literal, Protocol

import numpy as np
from scipy.optimize import elementwise

from bayesmed.core.mapping import Array, odds

Direction = Literal["above", "below"]
STRATA = 16
"""Stratified correlations per draw from which the search for a quantile starts."""


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

    def odds_moments(self) -> tuple[float, float]:
        """Return E[r] and E[r²], infinite where they are."""
        ...


def tipping_correlation(constant: Array, slope: Array, limit: float) -> Array:
    """Return the correlation at which ``constant - slope r`` equals `limit`, nan where the slope is zero.

    Written with a hypotenuse rather than a ratio, so that a slope near zero gives ±1 and not an overflow.
    """
    gap = constant - limit
    length = np.hypot(gap, slope)
    with np.errstate(invalid="ignore", divide="ignore"):
        crossing = np.sign(slope) * gap / length
    return np.where(slope == 0, np.nan, crossing)


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
    probability = np.where(lower_side, belief.below(safe), belief.above(safe))
    return np.where(flat, certain.astype(float), probability)


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
    points, count = constant.shape[0], len(probabilities)
    strata = (np.arange(STRATA) + uniforms[:, None]) / STRATA
    r = odds(np.clip(belief.ppf(strata), -1 + 1e-12, 1 - 1e-12))
    start = np.empty((points, count))
    width = np.empty((points, count))
    near = np.array([0.97, 1.03])
    for point in range(points):
        values = (constant[point, :, None] - slope[point, :, None] * r).ravel()
        start[point] = np.quantile(values, probabilities)
        tail = np.minimum(probabilities, 1 - probabilities)
        apart = np.quantile(
            values,
            [np.abs((probabilities > 0.5) - near[0] * tail), np.abs((probabilities > 0.5) - near[1] * tail)],
        )
        width[point] = np.abs(apart[0] - apart[1])
    scale = np.maximum(constant.std(axis=1, keepdims=True), 1e-300)
    width = np.maximum(width, 1e-6 * scale)

    def gap(value: Array, point: Array, probability: Array) -> Array:
        index = point.astype(int)
        below = claim_probability(constant[index] - value[:, None], slope[index], 0.0, "below", belief)
        return below.mean(axis=-1) - probability

    return _invert(gap, start, width, probabilities)


def _invert(gap: Callable[[Array, Array, Array], Array], start: Array, width: Array, probabilities: Array) -> Array:
    """Find where the increasing function `gap` is zero, from a start and a scale."""
    points, count = start.shape
    index = np.repeat(np.arange(points, dtype=float), count)
    target = np.tile(probabilities, points)
    bracket = elementwise.bracket_root(
        gap, start.ravel() - width.ravel(), start.ravel() + width.ravel(), args=(index, target), maxiter=200
    )
    root = elementwise.find_root(gap, bracket.bracket, args=(index, target), tolerances={"xrtol": 1e-10, "fatol": 1e-9})
    # With atoms the function may jump over zero: the point of the jump is the quantile.
    return np.asarray(np.where(root.success, root.x, start.ravel())).reshape(points, count)
