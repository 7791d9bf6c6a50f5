"""The smallest set of beliefs that overturns a claim: how much doubt it stands."""

from collections.abc import Callable
from typing import Any

import numpy as np
import pandas as pd
from scipy.optimize import brentq

from bayesmed.conclusions.accuracy import mean_with_error
from bayesmed.conclusions.claim import Claim
from bayesmed.conclusions.envelope import ClaimLines, claim_lines
from bayesmed.core.errors import ArgumentError
from bayesmed.fit.result import FitResult
from bayesmed.priors.prior_set import PriorSet, as_set

CLOSE = 1e-5
"""Accuracy of the size, as a share of the largest tried."""
STEP = 0.02
"""Half the stretch over which the slope of the probability is taken for the error of the size, as such a share."""


def breaking_point(
    result: FitResult,
    sets: Callable[[float], PriorSet],
    largest: float = 1.0,
    at: Any = None,
    claim: Claim | None = None,
) -> pd.DataFrame:
    """Return how far a set of beliefs must grow until some member takes a claim below what it requires.

    Parameters
    ----------
    result : FitResult
    sets : callable
        From a size between 0 and `largest` to a set of priors, larger sizes giving sets that hold the smaller
        ones: ``lambda epsilon: Contaminated(base, epsilon)`` for a share of doubt,
        ``lambda d: Nearby(base, d)`` for a divergence, ``lambda p: Statements(Probability(above=0.3, at_most=p))``
        for the mass of a tail, ``lambda w: AnyOn(-w, w)`` for a width.
    largest : float
        The largest size to try, above 0.
    at : dict, optional
    claim : Claim, optional

    Returns
    -------
    pandas.DataFrame
        One row per moderator point. The moderators;

        size, size_mcse
            The smallest size at which the smallest probability of the claim is below the required one, and its
            error: the Monte Carlo error of the probability divided by how fast the probability falls there, and
            1e-5 of `largest` for the search. The size is 0 where the claim fails already without doubt, and infinite
            where it stands at `largest`; neither has an error (nan).
        probability, mcse
            The smallest probability of the claim at size 0, before any doubt, and its Monte Carlo error.

    Raises
    ------
    PriorError
        If `sets` does not return sets of priors.
    ArgumentError
        If `sets` is not callable, `largest` is not above 0, or the claim does not depend on rho.
    FitError
        If the data inform rho in this fit.
    """
    if not callable(sets):
        raise ArgumentError(
            f"breaking_point: sets={sets!r} must be a function from a size to a set of priors, for example "
            "lambda epsilon: bm.Contaminated(prior, epsilon)"
        )
    if isinstance(largest, bool) or not isinstance(largest, int | float | np.number) or not 0 < largest < np.inf:
        raise ArgumentError(f"breaking_point: largest={largest!r} must be a finite number above 0")
    lines = claim_lines(result, at, claim, "breaking_point")
    if lines.claim.effect == "total":
        raise ArgumentError("claim: the total effect does not depend on rho, so no belief overturns it")
    rows = [_break(lines, k, lambda size: as_set(sets(size)), float(largest)) for k in range(len(lines.steps))]
    found = pd.DataFrame(rows, columns=["size", "size_mcse", "probability", "mcse"])
    return pd.DataFrame({**lines.points.columns, **found})


def _break(
    lines: ClaimLines, point: int, sets: Callable[[float], PriorSet], largest: float
) -> tuple[float, float, float, float]:
    steps, required = lines.steps[point], lines.claim.required

    def smallest(size: float) -> tuple[float, float]:
        by_draw = lines.by_draw(point, sets(size).lowest(steps))
        value, error = mean_with_error(by_draw[None], lines.result)
        return float(value[0]), float(error[0])

    def margin(size: float) -> float:
        # Monte Carlo error is not asked for on the way: it costs more than the average.
        return float(lines.by_draw(point, sets(size).lowest(steps)).mean()) - required

    start, start_error = smallest(0.0)
    if start < required:
        return 0.0, np.nan, start, start_error
    if margin(largest) >= 0:
        return np.inf, np.nan, start, start_error
    size = float(brentq(margin, 0.0, largest, xtol=CLOSE * largest))
    near, far = max(size - STEP * largest, 0.0), min(size + STEP * largest, largest)
    falls = (margin(near) - margin(far)) / (far - near)
    _, error = smallest(size)
    own_error = float(np.hypot(error / falls, CLOSE * largest)) if falls > 0 else np.inf
    return size, own_error, start, start_error
