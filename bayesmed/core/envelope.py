"""Smallest averages of a step function over sets of distributions that have closed or one-dimensional solutions.

Each function finds a distribution of a set under which the average of a step function is smallest; the largest
follows from :meth:`Steps.negated`. Averages are linear in the distribution, so that over a convex set they are
smallest at an extreme point: a single value, or a uniform distribution that ends at the mode.
"""

import numpy as np

from bayesmed.core.mapping import Array
from bayesmed.core.steps import Steps

LARGEST_LOG_RATE = 300.0


def smallest_value(
    steps: Steps, lower: float, upper: float, ends: tuple[bool, bool] = (True, True)
) -> tuple[float, float]:
    """Return the smallest value of a step function from `lower` to `upper`, and a place that has it.

    `ends` tells whether the bounds belong to the range. A place in the middle of its piece is preferred to one on a
    step.
    """
    if lower == upper:
        return float(steps.value(lower)), lower
    places, at, between = steps.inner(lower, upper)
    edges = np.concatenate([[lower], places, [upper]])
    bounds = np.array([lower, upper])[list(ends)]
    values = np.concatenate([between, at, steps.value(bounds)])
    where = np.concatenate([(edges[:-1] + edges[1:]) / 2, places, bounds])
    best = int(np.argmin(values))
    return float(values[best]), float(where[best])


def smallest_average_from(steps: Steps, mode: float, lower: float, upper: float) -> tuple[float, float]:
    """Return the smallest average over the unimodal distributions on a range, and the end of the one that has it.

    A distribution is unimodal at m if and only if it mixes m itself with uniform distributions that have m for
    one end (Khinchin 1938), so the smallest average is that of one of these. Within a piece the average from m to
    t is monotone in t: only steps and bounds are ends worth trying.

    Returns
    -------
    average, end : float
        The distribution is uniform from `mode` to `end`, or certainty in `mode` if they are equal.
    """
    best = (float(steps.value(mode)), mode)
    for bound in (lower, upper):
        if bound == mode:
            continue
        places, _, between = steps.inner(min(mode, bound), max(mode, bound))
        ends = np.append(places, bound) if bound > mode else np.append(places[::-1], bound)
        values = between if bound > mode else between[::-1]
        # Summed outwards from the mode, so that an end close to it loses no digits.
        averages = np.cumsum(values * np.abs(np.diff(ends, prepend=mode))) / np.abs(ends - mode)
        k = int(np.argmin(averages))
        best = min(best, (float(averages[k]), float(ends[k])), key=lambda found: found[0])
    return best


def tilt(masses: Array, values: Array, divergence: float) -> Array:
    """Return the factors by which masses change to make an average smallest within a Kullback-Leibler ball.

    The smallest E_q[value] over all q with KL(q | p) <= divergence is that of q proportional to
    ``p exp(-k value)``, with k such that the divergence is used up. This is the dual of
    ``sup_{k > 0} -(log E_p exp(-k value) + divergence) / k``. Where even all mass on the smallest value uses up
    less, that is the answer.

    Parameters
    ----------
    masses, values : array, shape (cell,)
        A distribution and the values it averages.
    divergence : float
        Radius of the ball, in nats.

    Returns
    -------
    array, shape (cell,)
        q / p. The average of the factors over `masses` is 1.
    """
    from scipy.optimize import brentq

    present = masses > 0
    excess = values - values[present].min()
    lowest = present & (excess == 0)
    spread = np.average(excess**2, weights=masses) - np.average(excess, weights=masses) ** 2
    if divergence == 0 or spread <= 0:
        return np.ones_like(masses)
    if divergence >= -np.log(masses[lowest].sum()):
        return np.asarray(lowest / masses[lowest].sum())
    here, mass = excess[present], masses[present]

    def unused(log_rate: float) -> float:
        weights = mass * np.exp(-np.exp(log_rate) * here)
        total = weights.sum()
        used = -np.exp(log_rate) * (weights @ here) / total - np.log(total)
        return float(divergence - used)

    # For a small ball the divergence is half the squared rate times the variance.
    start = 0.5 * np.log(2 * divergence / spread)
    low, high = start - 1.0, start + 1.0
    while unused(low) < 0:
        low -= 2.0
    while unused(high) > 0:
        high += 2.0
        if high > LARGEST_LOG_RATE:
            return np.asarray(lowest / masses[lowest].sum())
    rate = np.exp(brentq(unused, low, high, xtol=1e-11))
    # Steps without mass may lie far below the lowest that has some.
    factors = np.where(present, np.exp(-rate * np.where(present, excess, 0.0)), 0.0)
    return np.asarray(factors / (masses @ factors))
