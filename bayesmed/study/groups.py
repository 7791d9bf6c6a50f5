"""Rows that respond alike to exposure and mediator, of which one can stand for all."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.core.mapping import Array
from bayesmed.study.observe import Observed

MOST_ROWS = 250_000
"""Most rows of a design that are held in memory at once."""


@dataclass(frozen=True, eq=False)
class Groups:
    """Groups of rows that respond alike.

    Attributes
    ----------
    rows : array of int, shape (group,)
        One row of the study for each group.
    weights : array, shape (group,)
        The share of the rows that each group holds.
    member : array of int, shape (row,)
        The group of every row.
    base : bool
        True if the mediator design itself must be averaged within groups.
    keyed : bool
        True if some column tells groups apart.
    """

    rows: np.ndarray[Any, np.dtype[np.intp]]
    weights: Array
    member: np.ndarray[Any, np.dtype[np.intp]]
    base: bool
    keyed: bool


def groups_of(observed: Observed, named: Sequence[str]) -> Groups:
    """Return the groups within which rows differ only in columns that exposure and mediator do not meet.

    Parameters
    ----------
    observed : Observed
    named : sequence of str
        Columns that are set to one value in every row.
    """
    m_design, y_design, exposure = observed.mediator_equation, observed.outcome_equation, observed.exposure
    responding: set[str] = set()
    for design in (m_design, y_design):
        moves = design.holding(exposure) | design.with_mediator
        responding |= {name for columns, move in zip(design.columns, moves, strict=True) if move for name in columns}
    key = sorted(responding - {exposure, *named})
    if key:
        codes = np.column_stack([pd.factorize(observed.frame[name])[0] for name in key])
        _, rows, member = np.unique(codes, axis=0, return_index=True, return_inverse=True)
        member = member.ravel()
    else:
        rows, member = np.zeros(1, dtype=np.intp), np.zeros(len(observed.frame), dtype=np.intp)
    weights = np.bincount(member, minlength=len(rows)) / len(member)
    # Only where the exposure changes the mediator's slope does the mediator's level enter.
    base = bool(np.any(y_design.holding(exposure) & y_design.with_mediator))
    return Groups(rows, weights, member, base, bool(key))
