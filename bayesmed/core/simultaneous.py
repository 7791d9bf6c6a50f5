"""The probability that a claim is true at several moderator values at once.

Every draw's effect at a point is a line ``constant - slope r``, so that the claim is true there for the
correlations on one side of its tipping correlation. For several points at once they form one interval: above the
largest of the lower ends and below the smallest of the upper ends. The belief's mass on it, averaged over draws,
is the simultaneous probability. No draws of rho are needed.
"""

import numpy as np

from bayesmed.core.mapping import Array
from bayesmed.core.tipping import Belief, Direction, tipping_correlation


def truth_interval(constant: Array, slope: Array, limit: float, direction: Direction) -> tuple[Array, Array]:
    """Return the open interval of correlations for which a claim is true, as its lower and upper ends.

    Parameters
    ----------
    constant, slope : array, shape (point, draw)
        The effect is ``constant - slope r``.
    limit : float
    direction : "above" or "below"

    Returns
    -------
    lower, upper : array, shape (point, draw)
        -1 and 1 where nothing bounds it; ``lower > upper`` where no correlation makes the claim true.
    """
    crossing = tipping_correlation(constant, slope, limit)
    true_below = (slope > 0) if direction == "above" else (slope < 0)
    certain = (constant > limit) if direction == "above" else (constant < limit)
    flat = slope == 0
    lower = np.where(flat, np.where(certain, -1.0, 1.0), np.where(true_below, -1.0, crossing))
    upper = np.where(flat, np.where(certain, 1.0, -1.0), np.where(true_below, crossing, 1.0))
    return lower, upper


def mass_between(lower: Array, upper: Array, belief: Belief) -> Array:
    """Return the belief's P(lower < rho < upper), zero where the interval is empty; shape is kept.

    Written with the two sides apart, so that an atom at an end counts as outside on either side.
    """
    return np.maximum(0.0, belief.below(upper) + belief.above(lower) - 1.0)


def joint_probability(constant: Array, slope: Array, limit: float, direction: Direction, belief: Belief) -> Array:
    """Return, per draw, the belief's probability that the claim is true at every point.

    Parameters as for :func:`truth_interval`; the result has shape (draw,). Its average over draws is the
    simultaneous posterior probability, its spread gives the Monte Carlo error.
    """
    lower, upper = truth_interval(constant, slope, limit, direction)
    return mass_between(lower.max(axis=0), upper.min(axis=0), belief)
