"""Where along a moderator a claim holds under a belief: its edges, their accuracy, and the joint probability."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any, Literal

import numpy as np
import pandas as pd

from bayesmed.conclusions.accuracy import mean_with_error
from bayesmed.conclusions.claim import Claim, as_claim
from bayesmed.conclusions.view import view
from bayesmed.core.errors import ArgumentError, FitError
from bayesmed.core.mapping import Array
from bayesmed.core.simultaneous import mass_between, truth_interval
from bayesmed.fit.grouped import GroupedResult
from bayesmed.fit.result import FitResult
from bayesmed.priors.by_group import ByGroup, as_belief
from bayesmed.study.counterfactual import linear_in_mediator
from bayesmed.study.moderators import coded_columns, kind_of
from bayesmed.study.points import FEW_VALUES, Points, points

COLUMNS = ("from", "to", "from_mcse", "to_mcse", "share", "joint", "joint_mcse")
GRID = 101
"""Values of a continuous moderator at which the claim is first judged, and joint probabilities are taken."""
CURVED_GRID = 21
"""The same where the outcome is not linear in the mediator, and each value costs a pass over all rows and draws."""
CLOSER = 21
"""Values into which a step of the grid is divided where an end of a simultaneous region lies."""
FINE = 1e-6
"""Edges are found to within this share of the observed range, far less than their Monte Carlo error."""
ROUNDING = 1e-6
"""How far a probability at an edge so found may fall short of what is required."""


def regions(
    result: FitResult,
    prior: Any,
    moderator: str,
    claim: Claim | None = None,
    reading: Literal["pointwise", "simultaneous"] = "pointwise",
    at: Mapping[str, Any] | None = None,
) -> pd.DataFrame:
    """Return the moderator values where a claim holds under a belief.

    Parameters
    ----------
    result : FitResult
    prior : prior or number
        The belief about rho.
    moderator : str
        Searched over its observed range (two SDs about its mean where there are only published figures); a categorical,
        boolean, coded or at most five-valued one level by level.
    claim : Claim, optional
    reading : "pointwise" or "simultaneous"
        Pointwise, a value belongs to a region if the claim's probability there reaches what is required.
        Simultaneous, each of these is cut to the longest interval that holds its most probable value and over
        which the claim is true everywhere at once with the probability required. Levels are taken up in the order
        of their probability as long as the claim is true at all of them at once with that probability.
    at : dict, optional
        Other moderators held at one value each; averaged over if left out.

    Returns
    -------
    pandas.DataFrame
        One row a region, or a level. from, to: its edges. from_mcse, to_mcse: their Monte Carlo errors, which are
        those of the probability over its slope, nan where the observed range ends or a level stands. share: of
        the rows used that lie inside, nan where there are only published figures. joint, joint_mcse: the probability
        that the claim is true over the whole region at once (for levels: at all levels shown), on a grid of 101 values
        (21 where the outcome is not linear in the mediator). No region, no rows.

    Raises
    ------
    FitError
        If the data inform rho, so that no one set of draws serves.
    """
    if result.joint:
        raise FitError(
            "the data inform rho in this fit, so no single set of draws serves every rho and regions cannot be "
            "searched for; use fit.compare() at chosen values, which samples again for each belief"
        )
    if reading not in ("pointwise", "simultaneous"):
        raise ArgumentError(f"reading={reading!r} must be 'pointwise' or 'simultaneous'")
    held = points(result.observed, {} if at is None else at)
    if held.dims or moderator in held.names:
        raise ArgumentError(f"at={at!r}: give one value for each other moderator, and {moderator!r} not at all")
    # A copy with a memory of its own: the many points of a search are not worth keeping.
    search = _Search(result.replaced(), as_belief(prior), moderator, as_claim(claim), dict(held.scalars))
    levels = _levels(result, moderator)
    if levels is None:
        return pd.DataFrame(_by_range(search, reading), columns=list(COLUMNS), dtype=float)
    found = pd.DataFrame(_by_level(search, levels, reading), columns=list(COLUMNS))
    return found.astype(dict.fromkeys(COLUMNS[2:], float))


@dataclass(frozen=True, eq=False)
class _Search:
    """A claim judged along a moderator."""

    result: FitResult
    belief: Any
    moderator: str
    claim: Claim
    held: Mapping[str, Any]

    @cached_property
    def size(self) -> int:
        """How many values a grid has."""
        return GRID if linear_in_mediator(self.result.observed) else CURVED_GRID

    @cached_property
    def closer(self) -> int:
        """How many values a step of the grid is divided into."""
        return CLOSER * self.size // GRID + 1

    def points(self, values: Any) -> Points:
        return points(self.result.observed, {self.moderator: list(values), **self.held})

    def probability(self, values: Any) -> tuple[Array, Array]:
        """Return the claim's probability at each value and its Monte Carlo error."""
        return view(self.result, self.points(values), self.belief).probability(self.claim.effect, self.claim)

    def excess(self, value: float) -> float:
        """Return by how much the probability exceeds what is required."""
        return float(self.probability([value])[0][0]) - self.claim.required

    def truth(self, values: Any) -> "_Truth":
        """Return for which correlations each draw meets the claim at each value."""
        chosen, belief, result = self.points(values), self.belief, self.result
        if isinstance(belief, ByGroup):
            assert isinstance(result, GroupedResult)  # the view of the first grid has refused other fits
            groups = list(result.groups_of(chosen))
            if len(groups) > 1:
                true = self.claim.true_of(view(result, chosen, belief).draws(self.claim.effect)) > 0
                # A rho for each group is no one interval: true or not by draw, as if rho were in (-1, 1) or not.
                return _Truth(np.where(true, -1.0, 1.0), np.where(true, 1.0, -1.0), None, result)
            belief = belief.of(groups[0])
        line = result.contrasts(chosen).line(self.claim.effect)
        return _Truth(*truth_interval(*line, self.claim.limit, self.claim.direction), belief, result)


@dataclass(frozen=True, eq=False)
class _Truth:
    """Correlations between which each draw meets the claim, arrays of shape (point, draw)."""

    lower: Array
    upper: Array
    belief: Any
    result: FitResult

    def joint(self, chosen: Any) -> tuple[float, float]:
        """Return the probability that the claim is true at all the chosen points, and its Monte Carlo error."""
        lower, upper = self.lower[chosen].max(axis=0), self.upper[chosen].min(axis=0)
        by_draw = (lower < upper).astype(float) if self.belief is None else mass_between(lower, upper, self.belief)
        mean, error = mean_with_error(by_draw[None], self.result)
        return float(mean[0]), float(error[0])


def _levels(result: FitResult, moderator: str) -> list[Any] | None:
    """Return the levels of a moderator that is judged level by level, None for a continuous one."""
    observed = result.observed
    column = observed.column(moderator) if moderator in observed.covariates else None
    if column is None:
        points(observed, {moderator: [0]})  # says which columns may be named
    assert column is not None
    categorical = kind_of(column, coded=moderator in coded_columns(observed.formulas)) == "categorical"
    levels = column.cat.categories if isinstance(column.dtype, pd.CategoricalDtype) else np.unique(column)
    return list(levels) if categorical or len(levels) <= FEW_VALUES else None


def _by_level(search: _Search, levels: list[Any], reading: str) -> list[tuple[Any, ...]]:
    probability, _ = search.probability(levels)
    holding = np.flatnonzero(probability >= search.claim.required)
    if len(holding) == 0:
        return []
    truth = search.truth(levels)
    kept = list(holding)
    if reading == "simultaneous":
        order = sorted(kept, key=lambda k: -probability[k])
        count = 1
        while count < len(order) and truth.joint(order[: count + 1])[0] >= search.claim.required:
            count += 1
        kept = sorted(order[:count])
    joint = truth.joint(kept)
    column = search.result.observed.column(search.moderator)
    shown = search.points(levels).dims[search.moderator]
    return [(shown[k], shown[k], np.nan, np.nan, float((column == levels[k]).mean()), *joint) for k in kept]


def _by_range(search: _Search, reading: str) -> list[tuple[Any, ...]]:
    observed = search.result.observed
    column = observed.column(search.moderator).to_numpy(dtype=float)
    low, high = observed.span(search.moderator)
    rows = []
    for start, stop in _intervals(search, np.linspace(low, high, search.size)):
        errors = [np.nan if end in (low, high) else _edge_error(search, end, low, high) for end in (start, stop)]
        grid = np.linspace(start, stop, search.size) if stop > start else np.array([start])
        if reading == "simultaneous":
            grid, truth, errors = _cut(search, grid, errors)
        else:
            truth = search.truth(grid)
        inside = (column >= grid[0]) & (column <= grid[-1])
        share = float(np.mean(inside)) if observed.published is None else np.nan
        rows.append((float(grid[0]), float(grid[-1]), *errors, share, *truth.joint(slice(None))))
    return rows


def _intervals(search: _Search, grid: Array) -> list[tuple[float, float]]:
    """Return the intervals in which the probability reaches what is required."""
    from scipy.optimize import brentq

    excess = search.probability(grid)[0] - search.claim.required
    grid, excess = _with_peaks(search.excess, grid, excess)
    holds = excess >= 0
    found = []
    k = 0
    while k < len(grid):
        if not holds[k]:
            k += 1
            continue
        last = k
        while last + 1 < len(grid) and holds[last + 1]:
            last += 1
        span = FINE * (grid[-1] - grid[0])
        start = grid[k] if k == 0 or excess[k] == 0 else brentq(search.excess, grid[k - 1], grid[k], xtol=span)
        at_end = last == len(grid) - 1 or excess[last] == 0
        stop = grid[last] if at_end else brentq(search.excess, grid[last], grid[last + 1], xtol=span)
        found.append((float(start), float(stop)))
        k = last + 1
    return found


def _with_peaks(excess_at: Callable[[float], float], grid: Array, excess: Array) -> tuple[Array, Array]:
    """Add peaks and troughs that may cross the level required between two values of the grid."""
    from scipy.optimize import minimize_scalar

    added = []
    for k in range(1, len(grid) - 1):
        before, here, after = excess[k - 1 : k + 2]
        side = 1.0 if here >= 0 else -1.0
        turning = side * here < side * before and side * here <= side * after
        if turning and abs(here) < max(abs(here - before), abs(here - after)):
            turn = minimize_scalar(
                lambda z, side=side: side * excess_at(z), bounds=(grid[k - 1], grid[k + 1]), method="bounded"
            )
            if turn.fun < 0 and turn.x not in grid:
                added.append((float(turn.x), side * float(turn.fun)))
    if not added:
        return grid, excess
    places, values = np.append(grid, [a for a, _ in added]), np.append(excess, [b for _, b in added])
    order = np.argsort(places)
    return places[order], values[order]


def _edge_error(search: _Search, edge: float, low: float, high: float) -> float:
    """Return the Monte Carlo error of an edge: that of the probability there over the probability's slope."""
    step = (high - low) / (search.size - 1)
    near, far = max(low, edge - step), min(high, edge + step)
    probability, error = search.probability([near, edge, far])
    slope = abs(probability[2] - probability[0]) / (far - near)
    return float(error[1] / slope) if slope > 0 else np.inf


def _cut(search: _Search, grid: Array, errors: list[float]) -> tuple[Array, _Truth, list[float]]:
    """Return the values left of a region that must hold at once, and the errors of its ends."""
    coarse = search.truth(grid)
    first, last = _longest(search, coarse, grid)
    moved = [first > 0, last < len(grid) - 1]
    joint_mcse = coarse.joint(slice(first, last + 1))[1]
    slopes = _joint_slopes(coarse, grid, first, last)
    for side in range(2):
        if moved[side]:
            errors[side] = joint_mcse / slopes[side] if slopes[side] > 0 else np.inf
    # The ends lie within the neighbouring steps of the grid: look there more closely.
    closer = [grid[first : last + 1]]
    if moved[0]:
        closer.append(np.linspace(grid[first - 1], grid[first], search.closer))
    if moved[1]:
        closer.append(np.linspace(grid[last], grid[last + 1], search.closer))
    fine = np.unique(np.concatenate(closer))
    truth = search.truth(fine)
    first, last = _longest(search, truth, fine)
    inside = slice(first, last + 1)
    return fine[inside], replace(truth, lower=truth.lower[inside], upper=truth.upper[inside]), errors


def _longest(search: _Search, truth: _Truth, grid: Array) -> tuple[int, int]:
    """Return the ends of the longest stretch of the grid that holds its best value and is true at once."""
    probability, _ = search.probability(grid)
    best = np.flatnonzero(probability == probability.max())
    middle = (grid[best[0]] + grid[best[-1]]) / 2
    centre = int(best[np.abs(grid[best] - middle).argmin()])
    # Rounding must not shut out an edge at which the probability is what is required.
    required = search.claim.required - ROUNDING
    chosen, last = (centre, centre), len(grid) - 1
    # Going left from the centre shortens how far right one can go, so `last` only ever falls.
    for first in range(centre, -1, -1):
        while last > centre and truth.joint(slice(first, last + 1))[0] < required:
            last -= 1
        if truth.joint(slice(first, last + 1))[0] < required:
            break
        if grid[last] - grid[first] > grid[chosen[1]] - grid[chosen[0]]:
            chosen = first, last
    return chosen


def _joint_slopes(truth: _Truth, grid: Array, first: int, last: int) -> tuple[float, float]:
    """Return by how much the joint probability changes as the left, and the right, end moves by one unit."""
    slopes = []
    left = max(first - 2, 0), min(first + 2, last)
    right = max(last - 2, first), min(last + 2, len(grid) - 1)
    for (near, far), at_left in ((left, True), (right, False)):
        spans = [slice(k, last + 1) if at_left else slice(first, k + 1) for k in (near, far)]
        values = [truth.joint(span)[0] for span in spans]
        slopes.append(abs(values[1] - values[0]) / float(grid[far] - grid[near]) if far > near else 0.0)
    return slopes[0], slopes[1]
