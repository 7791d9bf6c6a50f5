"""Both designs and both sides of a study, reduced to their inner products in one pass over the rows."""

from __future__ import annotations

from collections.abc import Iterator
from concurrent.futures import Executor
from dataclasses import dataclass

import numpy as np
import pandas as pd

from bayesmed.core.contrasts import chunks
from bayesmed.core.mapping import Array
from bayesmed.core.row_summary import RowSummary, joined_summary, summarised
from bayesmed.study.batches import mapped
from bayesmed.study.designs import CHUNK, Design


@dataclass(frozen=True, eq=False)
class Compressed:
    """What every regression, alignment and rank needs of the rows.

    Attributes
    ----------
    summary : RowSummary
        Of the distinct columns of both designs and of M and Y.
    mediator_terms, outcome_terms : tuple of int
        Where the columns of each design stand in the summary.
    sides : tuple of two ints
        Where M and Y stand.
    """

    summary: RowSummary
    mediator_terms: tuple[int, ...]
    outcome_terms: tuple[int, ...]
    sides: tuple[int, int]

    @property
    def mediator_design(self) -> Array:
        """Columns with the inner products of the mediator design's."""
        return self.summary.columns(self.mediator_terms)

    @property
    def outcome_design(self) -> Array:
        """Columns with the inner products of the outcome design's."""
        return self.summary.columns(self.outcome_terms)

    @property
    def mediator(self) -> Array:
        """A column with the inner products of M."""
        return self.summary.columns(self.sides[:1])[:, 0]

    @property
    def outcome(self) -> Array:
        """A column with the inner products of Y."""
        return self.summary.columns(self.sides[1:])[:, 0]


@dataclass(frozen=True, eq=False)
class Pass:
    """How one batch of rows becomes a summary; it can be sent to another process.

    Attributes
    ----------
    mediator_equation, outcome_equation : Design
    own : array of int
        The columns of the outcome design that are not in the mediator design too, nor M itself.
    shift : array
        Subtracted from the columns before they are summarised.
    """

    mediator_equation: Design
    outcome_equation: Design
    own: np.ndarray
    shift: Array

    def summary(self, frame: pd.DataFrame, mediator: Array, outcome: Array) -> RowSummary:
        """Return the summary of some rows."""
        v, w = self.mediator_equation.rows(frame), self.outcome_equation.rows(frame, mediator)
        return summarised(np.column_stack([v, w[:, self.own], mediator, outcome]), self.shift)


def compress(
    mediator_equation: Design,
    outcome_equation: Design,
    frame: pd.DataFrame,
    mediator: Array,
    outcome: Array,
    first: tuple[Array, Array],
    name: str,
    batches: Iterator[tuple[pd.DataFrame, Array, Array]] | None = None,
    executor: Executor | None = None,
) -> Compressed:
    """Return both designs and sides, compressed.

    Parameters
    ----------
    mediator_equation, outcome_equation : Design
    frame : DataFrame
    mediator, outcome : array, shape (row,)
    first : tuple of arrays
        The two designs on the first chunk.
    name : str
        What the mediator is called among the outcome's terms.
    batches : iterator of (frame, mediator, outcome), optional
        All rows, where those given are only some of them.
    executor : concurrent.futures.Executor, optional
        Summarises batches side by side.
    """
    start, places, head = planned(mediator_equation, outcome_equation, mediator[:CHUNK], outcome[:CHUNK], first, name)

    def parts() -> Iterator[RowSummary]:
        yield head
        for piece in list(chunks(len(frame), CHUNK))[1:]:
            yield start.summary(frame.iloc[piece], mediator[piece], outcome[piece])

    summaries = parts() if batches is None else mapped(start.summary, batches, executor)
    return Compressed(joined_summary(summaries), *places)


def planned(
    mediator_equation: Design,
    outcome_equation: Design,
    mediator: Array,
    outcome: Array,
    first: tuple[Array, Array],
    name: str,
) -> tuple[Pass, tuple[tuple[int, ...], tuple[int, ...], tuple[int, int]], RowSummary]:
    """Return how batches are summarised, where the columns stand, and the summary of the first batch."""
    v, w = first
    width = v.shape[1]
    place: dict[str, int] = {label: k for k, label in enumerate(mediator_equation.labels)}
    same: dict[int, int] = {}
    for j, label in enumerate(outcome_equation.labels):
        k = place.get(label)
        # The same words may be coded otherwise in the other formula, so the values decide.
        if k is not None and np.array_equal(v[:, k], w[:, j]):
            same[j] = k
    alone = [
        j for j, label in enumerate(outcome_equation.labels) if label == name and np.array_equal(w[:, j], mediator)
    ]
    own = np.array([j for j in range(w.shape[1]) if j not in same and j not in alone], dtype=int)
    m = width + len(own)
    where = {int(j): width + k for k, j in enumerate(own)} | same | dict.fromkeys(alone, m)
    rows = np.column_stack([v, w[:, own], mediator, outcome])
    head = summarised(rows)
    places = tuple(range(width)), tuple(where[j] for j in range(w.shape[1])), (m, m + 1)
    return Pass(mediator_equation, outcome_equation, own, head.shift), places, head
