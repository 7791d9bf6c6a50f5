"""Smallest averages over all distributions that meet linear statements, by linear programmes.

A statement bounds the probability of an open interval, or the mean of rho. The ends of the intervals cut the range
into cells, each an end by itself or the stretch between two. Given how much mass a cell holds, and with which mean,
the smallest average of a step function over it is its lower convex hull; and the hull's corners are places on the
steps, seen from the lower side. So the programme has as columns the corners of each cell and nothing else, and its
solution is exact. Without a statement about the mean one column to a cell is enough.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

from bayesmed.core.envelope import smallest_value
from bayesmed.core.errors import FitError
from bayesmed.core.mapping import Array, odds
from bayesmed.core.steps import WITHIN, Steps

type Index = NDArray[np.intp]

TIGHT = 1e-10
POSSIBLE = 1e-9
"""A largest mass below this counts as none."""
FARTHEST = 15.0  # on the scale of atanh rho
TRACE = np.concatenate([np.linspace(-FARTHEST, -4, 100), np.linspace(-4, 4, 801)[1:-1], np.linspace(4, FARTHEST, 100)])
"""Places, on that scale, between which the odds are as good as straight."""


@dataclass(frozen=True)
class Bound:
    """The statement ``least <= E[f(rho)] <= most``.

    Attributes
    ----------
    event : (float, float) or None
        f is 1 strictly between the two, which may be infinite, and 0 elsewhere; with None, f is rho itself.
    least, most : float
    """

    event: tuple[float, float] | None
    least: float
    most: float


@dataclass(frozen=True)
class Atoms:
    """A distribution on single values, and the average under it that was made smallest."""

    average: float
    places: Array
    weights: Array


@dataclass(frozen=True)
class _Cell:
    """A value (lower = upper) or the stretch between two, of which no event holds only a part.

    ``ends`` tells whether the lower and the upper end belong to it.
    """

    lower: float
    upper: float
    ends: tuple[bool, bool] = (True, True)


def smallest_under(bounds: Sequence[Bound], steps: Steps, lower: float, upper: float) -> Atoms:
    """Return the distribution on a range that meets the bounds and has the smallest average of a step function.

    The smallest value may be approached only and not reached; a place is then put within 1e-9 of the step from
    whose one side it is approached.

    Parameters
    ----------
    bounds : sequence of Bound
        Such that some distribution meets them; see :func:`conflict`.
    steps : Steps
    lower, upper : float
    """
    by_mean = any(bound.event is None for bound in bounds)
    cells = _cells(bounds, lower, upper)
    columns = [_corners(steps, cell) if by_mean else _lowest(steps, cell) for cell in cells]
    places = np.concatenate([column[0] for column in columns])
    values = np.concatenate([column[1] for column in columns])
    cell = np.repeat(np.arange(len(cells)), [column[0].size for column in columns])
    solved = _solve(values, bounds, cells, places, cell)
    weights = np.maximum(solved.x, 0.0)
    kept = weights > POSSIBLE
    weights = weights[kept] / weights[kept].sum()
    return Atoms(float(weights @ values[kept]), places[kept], weights)


def conflict(groups: Sequence[Sequence[Bound]], lower: float, upper: float) -> list[int]:
    """Return the positions of statements that no distribution on a range meets together, none to spare.

    Each group of bounds is one statement. Leave out any one of those returned, and the rest of them can be met.
    An empty list says that all can be met together. By deletion: a statement stays only if those that are left
    without it can be met (Chinneck 2008, Feasibility and Infeasibility in Optimization).
    """
    kept = list(range(len(groups)))
    if _can_meet([groups[k] for k in kept], lower, upper):
        return []
    for k in range(len(groups)):
        others = [j for j in kept if j != k]
        if not _can_meet([groups[j] for j in others], lower, upper):
            kept = others
    return kept


def smallest_odds(bounds: Sequence[Bound], lower: float, upper: float) -> float:
    """Return the smallest E[r], r = rho / sqrt(1 - rho²), over the distributions on a range that meet the bounds.

    It is minus infinity if the range reaches -1 and the bounds let some mass go there, however little.
    The largest is minus that of the bounds mirrored.
    """
    cells = _cells(bounds, lower, upper)
    if lower <= -1:
        corner = np.concatenate([[c.lower, c.upper] for c in cells])
        owner = np.repeat(np.arange(len(cells)), 2)
        least_elsewhere = _solve(-(corner == -1).astype(float), bounds, cells, corner, owner)
        if -least_elsewhere.fun > POSSIBLE:
            return -np.inf
    places = [_curve(cell) for cell in cells]
    owner = np.repeat(np.arange(len(cells)), [place.size for place in places])
    inner = np.concatenate(places)
    if lower <= -1:  # no mass may go to -1, hence none anywhere in its cell but on the cell's upper end
        inner = np.where(owner == 0, cells[0].upper, inner)
    reachable = np.clip(inner, -np.tanh(FARTHEST), np.tanh(FARTHEST))
    return float(_solve(odds(reachable), bounds, cells, inner, owner).fun)


def mirrored(bounds: Sequence[Bound]) -> list[Bound]:
    """Return the bounds that minus rho meets where rho meets these."""
    return [
        Bound(None, -b.most, -b.least) if b.event is None else Bound((-b.event[1], -b.event[0]), b.least, b.most)
        for b in bounds
    ]


def _cells(bounds: Sequence[Bound], lower: float, upper: float) -> list[_Cell]:
    if lower == upper:
        return [_Cell(lower, upper)]
    ends = {end for bound in bounds if bound.event is not None for end in bound.event}
    cuts = sorted(end for end in ends if lower <= end <= upper and abs(end) < 1)
    edges = [lower, *(cut for cut in cuts if lower < cut < upper), upper]
    cells = [_Cell(lower, lower)] if lower in cuts else []
    for start, stop in pairwise(edges):
        cells.append(_Cell(start, stop, (start not in cuts, stop not in cuts)))
        if stop in cuts:
            cells.append(_Cell(stop, stop))
    return cells


def _lowest(steps: Steps, cell: _Cell) -> tuple[Array, Array]:
    """Return the place in a cell where the step function is smallest, and its value, each of shape (1,)."""
    value, place = smallest_value(steps, cell.lower, cell.upper, cell.ends)
    return np.array([place]), np.array([value])


def _corners(steps: Steps, cell: _Cell) -> tuple[Array, Array]:
    """Return the corners of the lower convex hull of the step function over a cell: places and values."""
    places, values = _sided(steps, cell)
    if places.size < 3 or np.ptp(values) == 0:
        return places[[0, -1]], values[[0, -1]]
    from scipy.spatial import ConvexHull

    across = (places - places[0]) / (places[-1] - places[0])
    # Two points far above the rest stand for the upper hull, which is of no interest, and rule out a flat one.
    top = values.max() + 1.0
    points = np.column_stack([np.append(across, [0.0, 1.0]), np.append(values, [top, top])])
    corners = np.sort(ConvexHull(points).vertices)
    corners = corners[corners < places.size]
    return places[corners], values[corners]


def _sided(steps: Steps, cell: _Cell) -> tuple[Array, Array]:
    """Return the ends of a cell and the steps in it, in order, each with the smallest value at or beside it.

    Where the smaller value lies beside the step and not on it, the place is moved there by very little.
    """
    if cell.lower == cell.upper:
        return np.array([cell.lower]), np.atleast_1d(steps.value(cell.lower))
    places, at, between = steps.inner(cell.lower, cell.upper)
    edges = np.concatenate([[cell.lower], places, [cell.upper]])
    beside = np.minimum(WITHIN, np.diff(edges) / 2)
    ends = np.array([cell.lower, cell.upper])
    at_ends = np.where(np.array(cell.ends) & (np.abs(ends) < 1), steps.value(ends), np.inf)
    # A piece is taken before the step at its end: a value that only the step itself has is fragile.
    options = np.stack(
        [
            np.concatenate([[np.inf], between]),
            np.concatenate([between, [np.inf]]),
            np.concatenate([at_ends[:1], at, at_ends[1:]]),
        ]
    )
    moved = np.stack([edges - np.append(0.0, beside), edges + np.append(beside, 0.0), edges])
    side = np.argmin(options, axis=0)
    index = np.arange(edges.size)
    return moved[side, index], options[side, index]


def _curve(cell: _Cell) -> Array:
    """Return places that trace the odds over a cell closely, the ends included."""
    if cell.lower == cell.upper:
        return np.array([cell.lower])
    trace = np.tanh(TRACE)
    return np.concatenate([[cell.lower], trace[(trace > cell.lower) & (trace < cell.upper)], [cell.upper]])


def _can_meet(groups: Sequence[Sequence[Bound]], lower: float, upper: float) -> bool:
    bounds = [bound for group in groups for bound in group]
    cells = _cells(bounds, lower, upper)
    places = np.concatenate([[c.lower, c.upper] for c in cells])
    solved = _programme(np.zeros(places.size), bounds, cells, places, np.repeat(np.arange(len(cells)), 2))
    return bool(solved.status == 0)


def _solve(costs: Array, bounds: Sequence[Bound], cells: Sequence[_Cell], places: Array, owner: Index) -> Any:
    """Return the solution for bounds that can be met."""
    solved = _programme(costs, bounds, cells, places, owner)
    if solved.status != 0:
        raise FitError(f"the linear programme over a set of priors was not solved: {solved.message}")
    return solved


def _programme(costs: Array, bounds: Sequence[Bound], cells: Sequence[_Cell], places: Array, owner: Index) -> Any:
    """Minimise the average cost over weights of `places`, each in the cell that `owner` tells."""
    from scipy.optimize import linprog

    equal, equal_to, below, below_to = [np.ones(places.size)], [1.0], [], []
    for bound in bounds:
        if bound.event is None:
            row = places
        else:
            after, before = bound.event
            row = np.array([_is_in(cell, after, before) for cell in cells], dtype=float)[owner]
        if bound.least == bound.most:
            equal.append(row)
            equal_to.append(bound.most)
            continue
        if bound.event is None or bound.most < 1:
            below.append(row)
            below_to.append(bound.most)
        if bound.event is None or bound.least > 0:
            below.append(-row)
            below_to.append(-bound.least)
    return linprog(
        costs,
        A_ub=np.array(below) if below else None,
        b_ub=below_to or None,
        A_eq=np.array(equal),
        b_eq=equal_to,
        method="highs",
        options={"primal_feasibility_tolerance": TIGHT, "dual_feasibility_tolerance": TIGHT},
    )


def _is_in(cell: _Cell, after: float, before: float) -> bool:
    """True if a cell lies in the open interval between two values."""
    if cell.lower == cell.upper:
        return after < cell.lower < before
    return after <= cell.lower and cell.upper <= before
