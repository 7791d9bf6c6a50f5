"""Quantiles by safeguarded Newton steps, where only the cdf and the density are known."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from bayesmed.priors.prior import Floats

__all__ = ["invert"]

TIGHT = 4 * float(np.finfo(float).eps)


def invert(
    cdf: Callable[[Floats], Floats],
    density: Callable[[Floats], Floats],
    q: Floats,
    lower: Floats,
    upper: Floats,
) -> Floats:
    """Return for each probability in `q` the smallest x between its bounds with cdf(x) ≥ q, to rounding.

    Parameters
    ----------
    cdf, density : callable
        A non-decreasing function and its derivative, of arrays of one dimension.
    q, lower, upper : ndarray, shape (n,)
        Probabilities, and bounds such that cdf(lower) ≤ q ≤ cdf(upper).

    Notes
    -----
    A Newton step is taken where it stays inside the bracket, every third step halves the bracket instead, so
    poles, flat stretches and jumps cost steps and not accuracy.
    """
    low: Floats = lower.astype(float)
    high: Floats = upper.astype(float)
    x: Floats = np.asarray((low + high) / 2, dtype=float)
    active = np.arange(q.size)
    for step in range(200):
        here = x[active]
        excess = cdf(here) - q[active]
        low[active] = np.where(excess < 0, here, low[active])
        high[active] = np.where(excess >= 0, here, high[active])
        middle = (low[active] + high[active]) / 2
        with np.errstate(all="ignore"):
            newton = here - excess / density(here)
        inside = (newton > low[active]) & (newton < high[active]) & (step % 3 != 2)
        x[active] = np.where(inside, newton, middle)
        reached = np.abs(excess) <= TIGHT * q[active]
        closed = high[active] - low[active] <= TIGHT
        x[active] = np.where(reached, here, np.where(closed, high[active], x[active]))
        active = active[~(reached | closed)]
        if active.size == 0:
            break
    return x
