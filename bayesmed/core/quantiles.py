"""Quantiles of an effect over draws and belief, by inverting the distribution function that probabilities come from."""

from typing import Any

import numpy as np

from bayesmed.core.belief_table import BeliefTable, belief_table
from bayesmed.core.lines import Lines
from bayesmed.core.mapping import Array, odds
from bayesmed.core.tipping import Belief, claim_probability

APART = 2.0
"""Half the width of the bracket from which the search for a quantile starts, in standard errors of its order."""
ENOUGH = 1e-12
"""How close to the probability asked for a smooth distribution function is at its quantile; one with kinks, to 1e-9."""
ROUNDS = 8
"""Newton steps, after which a search that brackets the quantile takes over."""
LEADS = {1: np.array([1]), 2: np.array([-1, 2]), 3: np.array([1, -3, 3]), 4: np.array([-1, 4, -6, 4])}
"""Weights of values that lie evenly, by their number, which give where the polynomial through them leads next."""


def effect_quantiles(lines: Lines, belief: Belief, probabilities: Array, uniforms: Array) -> Array:
    """Return quantiles of the effect over draws and belief, by inverting its distribution function.

    The distribution function is the one behind ``claim_probability``, so an interval and a probability
    cannot disagree.

    Parameters
    ----------
    lines : Lines
        Points that lie evenly along a moderator take the least time.
    belief : Belief
    probabilities : array, shape (quantile,)
    uniforms : array, shape (draw,)
        One number in (0, 1) per draw, shared by all beliefs, from which the search starts.

    Returns
    -------
    array, shape (point, quantile)
    """
    constant, slope = lines.constant, lines.slope
    if belief.atoms() or not lines.crossing:
        return _searched(constant, slope, belief, probabilities, odds(_inside(belief.ppf(uniforms))))
    table = belief_table(belief)
    r = table.odds(uniforms)
    found = np.empty((len(constant), len(probabilities)))
    for point, (c, k) in enumerate(zip(constant, slope, strict=True)):
        # A point at a time, as its draws stay in the fastest memory.
        below = _LowerProbability(lines, point, table)
        before = found[max(0, point - max(LEADS)) : point]
        solved = _newton(below, probabilities, _led_to(before)) if len(before) else None
        if solved is None:
            solved = _newton(below, probabilities, ordered_quantiles(np.sort(c - k * r), probabilities))
        if solved is None:
            solved = _searched(c[None], k[None], belief, probabilities, r)[0]
        found[point] = solved
    return found


class _LowerProbability:
    """P(effect < value) at one point, over draws and belief.

    An effect is below v where r lies on one side of ``(constant - v) / slope``, so that per draw the distribution
    function of the belief is taken or its complement.
    """

    def __init__(self, lines: Lines, point: int, table: BeliefTable) -> None:
        self._table = table
        self._rate, self._intercept = lines.rate[point], lines.intercept[point]
        self._one_way = lines.one_way[point]

    def at(self, value: Array) -> tuple[Array, Array]:
        """Return probability and density at values, both of shape (value,)."""
        below, density = self._table.below_and_density(self._intercept - value[:, None] * self._rate)
        draws = len(self._rate)
        if self._one_way:
            # One sign for all draws: no more than sums are needed.
            share = below.sum(axis=1) / draws
            return 1 - share if self._one_way > 0 else share, self._one_way * (density @ self._rate) / draws
        return np.mean(np.where(self._rate > 0, 1 - below, below), axis=1), density @ np.abs(self._rate) / draws


def _newton(lower: _LowerProbability, probabilities: Array, start: Array) -> Array | None:
    """Return the quantiles at one point by Newton steps, or None where they cannot be trusted."""
    tail = np.minimum(probabilities, 1 - probabilities)
    value = start
    for _ in range(ROUNDS):
        probability, density = lower.at(value)
        gap = probability - probabilities
        if np.any(np.abs(gap) > tail / 2) or not density.all():
            return None
        value = value - gap / density
        # In a tail the density falls in proportion to what is left of it, about, which bounds what a step leaves.
        if np.all(gap * gap <= ENOUGH * tail):
            return value
    return None


def _led_to(before: Array) -> Array:
    """Return where values that lie evenly lead to next: the polynomial through them, shape (quantile,)."""
    return np.asarray(LEADS[len(before)] @ before)


def ordered_quantiles(ordered: Array, probabilities: Array) -> Array:
    """Return quantiles of sorted values, between neighbours in proportion (definition 7 of Hyndman & Fan 1996).

    Parameters
    ----------
    ordered : array, shape (..., draw)
        Sorted along the last axis: sorting takes less time than ``numpy.quantile``, which parts them at several places.
    probabilities : array, shape (quantile,)

    Returns
    -------
    array, shape (..., quantile)
    """
    place = probabilities * (ordered.shape[-1] - 1)
    left = np.floor(place).astype(int)
    right = np.minimum(left + 1, ordered.shape[-1] - 1)
    low, high = ordered[..., left], ordered[..., right]
    return np.asarray(low + (place - left) * (high - low))


def _searched(constant: Array, slope: Array, belief: Belief, probabilities: Array, r: Array) -> Array:
    """Return quantiles by bracketing, which atoms, flat stretches and slopes of zero do not stop."""
    from scipy.optimize import elementwise

    values = constant - slope * r
    draws = values.shape[1]
    apart = np.maximum(APART * np.sqrt(probabilities * (1 - probabilities) / draws), 1 / draws)
    around = np.quantile(values, np.clip(probabilities + np.multiply.outer([-1, 0, 1], apart), 0, 1).ravel(), axis=1)
    low, start, high = around.reshape(3, len(probabilities), -1).transpose(0, 2, 1)
    width = np.maximum(high - low, 1e-6 * np.maximum(constant.std(axis=1, keepdims=True), 1e-300))

    def gap(value: Array, point: Array, probability: Array) -> Array:
        chosen = point.astype(int)
        below = claim_probability(constant[chosen] - value[:, None], slope[chosen], 0.0, "below", belief)
        return np.asarray(below.mean(axis=-1) - probability)

    points, count = start.shape
    index = np.repeat(np.arange(points, dtype=float), count)
    target = np.tile(probabilities, points)
    bracket = elementwise.bracket_root(
        gap, (start - width).ravel(), (start + width).ravel(), args=(index, target), maxiter=200
    )
    enough: Any = {"xrtol": 1e-10, "fatol": 1e-11}
    root = elementwise.find_root(gap, bracket.bracket, args=(index, target), tolerances=enough)
    # With atoms the function may jump over zero: the point of the jump is the quantile.
    return np.asarray(np.where(root.success, root.x, start.ravel())).reshape(points, count)


def _inside(rho: Array) -> Array:
    return np.clip(rho, -1 + 1e-12, 1 - 1e-12)
