"""Designs on rows whose exposure, mediator and moderators are changed, and the averages that effects need."""

from __future__ import annotations

import weakref
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.core.contrasts import LinearMoments, chunks
from bayesmed.core.errors import ArgumentError, DesignError, FormulaError
from bayesmed.core.mapping import Array
from bayesmed.study.batches import CompleteBatches
from bayesmed.study.changed import repeated, with_values
from bayesmed.study.designs import Design
from bayesmed.study.groups import MOST_ROWS, Groups, groups_of
from bayesmed.study.linearity import Anchors, anchors_of, straight, tested_linear
from bayesmed.study.observe import Observed
from bayesmed.study.points import Points

SETTINGS = 6
"""How often the outcome design is evaluated at a point: two exposure and three mediator values."""

_known_linear: weakref.WeakKeyDictionary[Observed, bool] = weakref.WeakKeyDictionary()


def linear_in_mediator(observed: Observed) -> bool:
    """Return whether the outcome design is linear in the mediator at both exposure values, by evaluation.

    The straight line through two anchors, the quartiles of the mediator, is compared with the design at other
    values: observed ones and some beyond, since the model draws those too. The answer is kept for each study.
    """
    if observed not in _known_linear:
        _known_linear[observed] = tested_linear(observed)
    return _known_linear[observed]


def linear_moments(observed: Observed, points: Points) -> LinearMoments:
    """Return the row averages that give every contrast where the outcome is linear in the mediator.

    Rows whose designs respond alike to exposure and mediator are evaluated once and counted with their
    number, which changes no average.

    Raises
    ------
    DesignError
        If the outcome is not linear in the mediator.
    ArgumentError
        If a formula cannot be evaluated at a point.
    """
    if not linear_in_mediator(observed):
        raise DesignError(
            f"outcome: {observed.outcome_formula!r} is not linear in {observed.mediator_name}; averages "
            "alone do not give its effects."
        )
    anchors = anchors_of(observed)
    groups = groups_of(observed, points.names)
    if observed.batches is not None and (groups.base or len(groups.rows) > 1 or groups.keyed):
        return _over_batches(observed, observed.batches, points, anchors)
    return LinearMoments(**_at_points(observed, groups, points, anchors))


def _at_points(observed: Observed, groups: Groups, points: Points, anchors: Anchors) -> dict[str, Array]:
    parts = [
        _moments(observed, groups, points.values[piece], anchors)
        for piece in chunks(len(points.values), max(1, MOST_ROWS // (SETTINGS * len(groups.rows))))
    ]
    return {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}


def _over_batches(observed: Observed, batches: CompleteBatches, points: Points, anchors: Anchors) -> LinearMoments:
    """Return the averages over all rows as those of batches, weighted by their rows."""
    sums: dict[str, Array] = {}
    for frame in batches.frames():
        here = replace(observed, frame=frame)
        part = _at_points(here, groups_of(here, points.names), points, anchors)
        share = len(frame) / batches.rows.used
        sums = {name: sums.get(name, 0.0) + share * value for name, value in part.items()}
    return LinearMoments(**sums)


@dataclass(frozen=True, eq=False)
class CurvedRows:
    """Designs at one point, for outcomes that are not linear in the mediator.

    Attributes
    ----------
    mediator_low, mediator_high : array, shape (row, mediator_term)
        The mediator designs at x0 and at x1.
    """

    mediator_low: Array
    mediator_high: Array
    _observed: Observed = field(repr=False)
    _frames: tuple[pd.DataFrame, pd.DataFrame] = field(repr=False)

    def outcome_rows(self, which: int, mediator_grid: Array, rows: slice = slice(None)) -> Array:
        """Return the outcome design at exposure value `which` and given mediator values.

        Parameters
        ----------
        which : int
            0 for x0, 1 for x1.
        mediator_grid : array, shape (value,) or (row, value)
            The same values for every row, or each row's own.
        rows : slice
            Which rows, to bound memory.

        Returns
        -------
        array, shape (row, value, outcome_term)

        Raises
        ------
        FormulaError
            If the outcome formula is not defined at a mediator value.
        """
        frame = self._frames[which].iloc[rows]
        grid = np.asarray(mediator_grid, dtype=float)
        values = np.broadcast_to(grid, (len(frame), grid.shape[-1]))
        wanted = values.ravel()
        source = np.repeat(np.arange(len(frame)), values.shape[1])
        design = self._observed.outcome_equation
        try:
            pieces = [design.rows(frame.take(source[piece]), wanted[piece]) for piece in chunks(len(wanted), MOST_ROWS)]
        except FormulaError as error:
            raise FormulaError(
                f"{error} The model lets the mediator take values from {wanted.min():.4g} to "
                f"{wanted.max():.4g}, and the outcome formula must be defined there (for a spline write "
                "extrapolation='extend')."
            ) from None
        return np.concatenate(pieces).reshape(*values.shape, -1)


def curved_rows(observed: Observed, point: Mapping[str, Any]) -> CurvedRows:
    """Return the designs on every row with the moderators set to one point.

    Parameters
    ----------
    observed : Observed
    point : dict
        One of ``points(…).values``.
    """
    if observed.batches is not None:
        raise DesignError(
            f"outcome: {observed.outcome_formula!r} is not linear in {observed.mediator_name}, so its effects need "
            "every row in memory at once; give the study a frame and not batches."
        )
    frames = [with_values(observed.frame, {**point, observed.exposure: x}) for x in observed.contrast]
    try:
        low, high = (observed.mediator_equation.rows(frame) for frame in frames)
    except FormulaError as error:
        raise ArgumentError(f"at: a formula cannot be evaluated at {dict(point)!r}: {error}") from None
    return CurvedRows(low, high, observed, (frames[0], frames[1]))


def _moments(observed: Observed, groups: Groups, values: Sequence[Any], anchors: Anchors) -> dict[str, Array]:
    """Return the averages at some points, summed over the groups in pieces that fit the memory."""
    base = _within(observed, groups, values) if groups.base else None
    sums: dict[str, Array] = {}
    for piece in chunks(len(groups.rows), max(1, MOST_ROWS // (SETTINGS * len(values)))):
        part = _part(observed, groups, piece, values, anchors, base)
        sums = {name: sums[name] + value for name, value in part.items()} if sums else part
    return sums


def _part(
    observed: Observed,
    groups: Groups,
    piece: slice,
    values: Sequence[Any],
    anchors: Anchors,
    base: Array | None,
) -> dict[str, Array]:
    """Return what some of the groups add to the averages at some points."""
    frame, weights = observed.frame.take(groups.rows[piece]), groups.weights[piece]
    low, high = _stacked(observed.mediator_equation, frame, values, _exposures(observed))
    shift = high - low
    intercepts, slopes = _lines(observed, frame, values, anchors)

    def mean(left: Array, right: Array) -> Array:
        return np.asarray(np.einsum("g,kgq,kgp->kqp", weights, left, right, optimize=True))

    indirect = mean(slopes[1], shift)
    # s(x1) v(x1)' - s(x0) v(x0)' = s(x1) [v(x1) - v(x0)]' + [s(x1) - s(x0)] v(x0)'
    total = indirect if base is None else indirect + mean(slopes[1] - slopes[0], base[:, piece])
    offset = intercepts[1] - intercepts[0] - anchors.low * (slopes[1] - slopes[0])
    return {
        "exposure_shift": np.einsum("g,kgp->kp", weights, shift),
        "indirect": indirect,
        "pure_indirect": mean(slopes[0], shift),
        "total": total,
        "total_offset": np.einsum("g,kgq->kq", weights, offset),
    }


def _within(observed: Observed, groups: Groups, values: Sequence[Any]) -> Array:
    """Return the mediator design at x0, averaged within each group, shape (point, group, term)."""
    order = np.argsort(groups.member, kind="stable")
    sums = np.zeros((len(values), len(groups.rows), len(observed.mediator_terms)))
    for piece in chunks(len(order), max(1, MOST_ROWS // len(values))):
        rows = order[piece]
        low = _stacked(observed.mediator_equation, observed.frame.take(rows), values, _exposures(observed)[:1])[0]
        present, starts = np.unique(groups.member[rows], return_index=True)
        sums[:, present] += np.add.reduceat(low, starts, axis=1)
    return np.asarray(sums / np.bincount(groups.member)[:, None])


def _exposures(observed: Observed) -> list[dict[str | None, Any]]:
    return [{observed.exposure: x} for x in observed.contrast]


def _lines(observed: Observed, frame: pd.DataFrame, values: Sequence[Any], anchors: Anchors) -> tuple[Array, Array]:
    """Return the outcome design at the lower anchor and its slope in the mediator, at x0 and x1.

    Each of shape (exposure value, point, row, term). Linearity is tested once more, as formulas may be linear
    on the rows as they are and bend at a moderator value that no row has.
    """
    beyond = float(anchors.tests.max())
    settings = [{**setting, None: m} for setting in _exposures(observed) for m in (anchors.low, anchors.high, beyond)]
    design = _stacked(observed.outcome_equation, frame, values, settings)
    low, high, third = design[0::3], design[1::3], design[2::3]
    slope = (high - low) / (anchors.high - anchors.low)
    if not straight(low, slope, third, beyond, anchors):
        raise ArgumentError(
            f"at: the outcome formula is linear in {observed.mediator_name} on the rows observed but not at "
            "the values asked; ask at values that occur."
        )
    return low, slope


def _stacked(
    design: Design, frame: pd.DataFrame, values: Sequence[Any], settings: Sequence[Mapping[str | None, Any]]
) -> Array:
    """Return a design on `frame` in every setting and at every point, in one call.

    A setting gives the exposure's value and, under the key None, the mediator's. The shape is
    (setting, point, row, term).
    """
    points = [{**value, **{k: v for k, v in s.items() if k is not None}} for s in settings for value in values]
    each = len(values) * len(frame)
    mediator = np.repeat([s[None] for s in settings], each) if None in settings[0] else None
    try:
        rows = design.rows(repeated(frame, points), mediator)
    except FormulaError as error:
        raise ArgumentError(f"at: a formula cannot be evaluated at the values asked: {error}") from None
    return rows.reshape(len(settings), len(values), len(frame), -1)
