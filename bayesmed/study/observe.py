"""What was observed: a data frame and two formulas become a frozen value."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from bayesmed.core.contrasts import chunks
from bayesmed.core.errors import ArgumentError, DataError, FormulaError
from bayesmed.core.mapping import Alignment, Array, align
from bayesmed.study.batches import Batches, CompleteBatches, batched, complete_batches
from bayesmed.study.changed import repeated, with_values
from bayesmed.study.compressed import Compressed, compress
from bayesmed.study.designs import CHUNK, Design, Rows, design, left_values
from bayesmed.study.exposure import contrast_of
from bayesmed.study.formulas import Formula, Formulas, read
from bayesmed.study.frame import Complete, Given, RowsUsed, complete, given
from bayesmed.study.identifiers import Identifier, identifiers
from bayesmed.study.moderators import Moderator, default_moderators, moderators_found

if TYPE_CHECKING:
    from bayesmed.study.published import Published


@dataclass(frozen=True, eq=False)
class Observed:
    """The data, formulas and roles of a study, checked. Two are the same only if they are one object.

    Attributes
    ----------
    frame : DataFrame
        The complete rows, only the columns used, with the index of the data.
    exposure : str
        The exposure's column.
    contrast : tuple of two values
        (x0, x1), plain Python values.
    mediator_name, outcome_name : str
        The expressions left of ``~``.
    mediator_formula, outcome_formula : str
        As given.
    mediator_terms, outcome_terms : tuple of str
        The columns of the two designs.
    mediator, outcome : array, shape (row,)
        The values of the expressions left of ``~``.
    compressed : Compressed
        Both designs and both sides, reduced to their inner products in one pass.
    alignment : Alignment
        Where the mediator and its terms stand in the outcome design.
    moderators : tuple of Moderator
        All that were found.
    default_moderators : tuple of str
        Those that get a default grid.
    rows : RowsUsed
    unused_levels : dict of str to tuple
        Levels of categorical columns that no row used has.
    identifiers : tuple of Identifier
        Unused columns of the data that look like identifiers and repeat.
    formulas : Formulas
        The two formulas in checked pieces.
    mediator_equation, outcome_equation : Design
        The two right sides, to be evaluated on changed rows.
    published : Published or None
        The figures of a study without its rows, whose moments the rows here have.
    batches : CompleteBatches or None
        Where the rows come batch by batch: then `frame`, `mediator` and `outcome` hold some evenly spaced rows only,
        and `compressed` all.
    """

    frame: pd.DataFrame
    exposure: str
    contrast: tuple[Any, Any]
    mediator_name: str
    outcome_name: str
    mediator_formula: str
    outcome_formula: str
    mediator_terms: tuple[str, ...]
    outcome_terms: tuple[str, ...]
    mediator: Array = field(repr=False)
    outcome: Array = field(repr=False)
    compressed: Compressed = field(repr=False)
    alignment: Alignment = field(repr=False)
    moderators: tuple[Moderator, ...]
    default_moderators: tuple[str, ...]
    rows: RowsUsed
    unused_levels: Mapping[str, tuple[Any, ...]]
    identifiers: tuple[Identifier, ...]
    formulas: Formulas = field(repr=False)
    mediator_equation: Design = field(repr=False)
    outcome_equation: Design = field(repr=False)
    published: Published | None = field(default=None, repr=False)
    batches: CompleteBatches | None = field(default=None, repr=False)

    def span(self, name: str) -> tuple[float, float]:
        """Return the range of a numeric column, or two SDs about its mean where there are only published figures."""
        column = self.column(name)
        if self.published is None:
            return float(column.min()), float(column.max())
        return float(column.mean() - 2 * column.std()), float(column.mean() + 2 * column.std())

    @property
    def covariates(self) -> tuple[str, ...]:
        """Every column right of ``~`` but the exposure: those that `at` may name."""
        left = self.formulas.mediator.columns | self.formulas.outcome.columns
        return tuple(name for name in self.formulas.columns if name in left and name != self.exposure)

    @property
    def mediator_design(self) -> Array:
        """The mediator design on all rows, shape (row, mediator_term), made anew at each call."""
        self._require_rows()
        parts = [self.mediator_equation.rows(self.frame.iloc[piece]) for piece in self._pieces()]
        return _frozen(np.concatenate(parts))

    @property
    def outcome_design(self) -> Array:
        """The outcome design on all rows, shape (row, outcome_term), made anew at each call."""
        self._require_rows()
        parts = [self.outcome_equation.rows(self.frame.iloc[p], self.mediator[p]) for p in self._pieces()]
        return _frozen(np.concatenate(parts))

    def designs(self) -> Iterator[tuple[Array, Array]]:
        """Yield the two designs on a chunk of rows after the other."""
        for piece in self._pieces():
            frame = self.frame.iloc[piece]
            yield self.mediator_equation.rows(frame), self.outcome_equation.rows(frame, self.mediator[piece])

    def column(self, name: str) -> pd.Series[Any]:
        """Return a column of the data in all rows used; of batches, in memory at once."""
        column = self.frame[name]
        if self.batches is None or isinstance(column.dtype, pd.CategoricalDtype) or column.dtype == bool:
            return column
        return self.batches.whole([name])[name]

    def _require_rows(self) -> None:
        if self.batches is not None:
            raise DataError("data: this needs every row in memory at once; give the study a frame and not batches.")
        if self.published is not None:
            raise DataError("data: this needs rows, and the study is known by its published figures alone.")

    def _pieces(self) -> Iterator[slice]:
        return chunks(len(self.frame), CHUNK)


def observe(
    data: Any,
    *,
    exposure: str,
    contrast: Sequence[Any] | None = None,
    mediator: str,
    outcome: str,
    moderators: Sequence[str] | None = None,
    executor: Executor | None = None,
) -> Observed:
    """Return what was observed.

    Parameters
    ----------
    data : pandas.DataFrame, dict of columns, or any eager frame that narwhals knows
        Or batches: the path of a Parquet file, a list of frames, a function that returns an iterator of frames.
    exposure : str
        A numeric, boolean or categorical column.
    contrast : two values, optional
        The exposure values (from, to). May be left out for a 0/1, a boolean or a two-level categorical one.
    mediator, outcome : str
        Formulas, such as ``"exercise ~ coaching + age"`` and ``"function ~ exercise * age + coaching"``.
    moderators : list of str, optional
        Which of the moderators found get a default grid; all of them by default.
    executor : concurrent.futures.Executor, optional
        Summarises batches side by side.

    Raises
    ------
    DataError, FormulaError, DesignError, ArgumentError
        Naming the column, formula piece or argument at fault.
    """
    source = batched(data) or given(data)
    if not isinstance(exposure, str):
        raise ArgumentError(f"exposure: expected the name of a column, got {exposure!r}.")
    formulas = read(mediator, outcome, exposure, source.names)
    batches = None
    if isinstance(source, Batches):
        batches = complete_batches(source, formulas.columns)
        used = Complete(batches.kept, np.arange(0), batches.rows, batches.text, batches.unused_levels)
    else:
        used = complete(source, formulas.columns)
    levels = _level_texts(used.frame)
    if any(formulas.words.prefix in level for level in levels):
        # A level that looks like one of our placeholders: take other placeholders.
        formulas = read(mediator, outcome, exposure, source.names, avoid=levels)
    frame = used.frame
    found = moderators_found(formulas, exposure, frame)
    pair = contrast_of(frame[exposure], contrast, was_text=exposure in used.text)
    sides = _sides(formulas, used)
    whole = None if batches is None else _whole_rows(batches, formulas)
    m_design, m_first = design(formulas.mediator, "mediator", formulas.words, frame, None, whole)
    y_design, y_first = design(formulas.outcome, "outcome", formulas.words, frame, sides[0], whole)
    _check_contrast_rows(m_design, y_design, frame, exposure, pair, sides[0])
    reading = None if batches is None else _with_sides(batches, formulas)
    compressed = compress(
        m_design, y_design, frame, *sides, (m_first, y_first), formulas.mediator.left.label, reading, executor
    )
    return Observed(
        frame=frame,
        exposure=exposure,
        contrast=pair,
        mediator_name=formulas.mediator.left.label,
        outcome_name=formulas.outcome.left.label,
        mediator_formula=mediator,
        outcome_formula=outcome,
        mediator_terms=m_design.labels,
        outcome_terms=y_design.labels,
        mediator=_frozen(sides[0]),
        outcome=_frozen(sides[1]),
        compressed=compressed,
        alignment=align(compressed.mediator_design, compressed.outcome_design, compressed.mediator),
        moderators=found,
        default_moderators=default_moderators(found, moderators),
        rows=used.rows,
        unused_levels=used.unused_levels,
        identifiers=identifiers(source, formulas.columns, used.positions) if isinstance(source, Given) else (),
        formulas=formulas,
        mediator_equation=m_design,
        outcome_equation=y_design,
        batches=batches,
    )


def _whole_rows(batches: CompleteBatches, formulas: Formulas) -> Rows:
    def rows(names: frozenset[str], with_mediator: bool) -> tuple[pd.DataFrame, Array | None]:
        left = formulas.mediator.left
        frame = batches.whole(sorted(names | (left.columns if with_mediator else frozenset())))
        return frame, left_values(left, "mediator", formulas.words, frame) if with_mediator else None

    return rows


def _with_sides(batches: CompleteBatches, formulas: Formulas) -> Iterator[tuple[pd.DataFrame, Array, Array]]:
    for frame in batches.frames():
        m, y = (left_values(f.left, a, formulas.words, frame) for f, a in _named_sides(formulas))
        yield frame, m, y


def _named_sides(formulas: Formulas) -> tuple[tuple[Formula, str], ...]:
    return (formulas.mediator, "mediator"), (formulas.outcome, "outcome")


def _sides(formulas: Formulas, used: Complete) -> tuple[Array, Array]:
    """Return the values of the mediator and the outcome."""
    values = []
    for argument, formula in (("mediator", formulas.mediator), ("outcome", formulas.outcome)):
        left = formula.left
        for name in left.columns:
            if isinstance(used.frame[name].dtype, pd.CategoricalDtype) and left.is_plain:
                kind = "text" if name in used.text else "categorical"
                raise DataError(
                    f"{argument}: column '{name}' is {kind}; {argument}s are numbers. Turn it into a number first."
                )
        side = left_values(left, argument, formulas.words, used.frame)
        if np.ptp(side) <= 1e-12 * np.abs(side).max():
            raise DataError(
                f"{argument}: {left.label} is constant ({side[0]:g}) in the {len(side)} complete rows; "
                "nothing can be explained."
            )
        values.append(side)
    return values[0], values[1]


def _check_contrast_rows(
    m_design: Design,
    y_design: Design,
    frame: pd.DataFrame,
    exposure: str,
    contrast: tuple[Any, Any],
    mediator: Array,
) -> None:
    """Refuse a contrast at which a formula cannot be evaluated, such as log(dose) at dose 0."""
    first = frame.iloc[:1]
    try:
        both = repeated(first, [{exposure: value} for value in contrast])
        m_design.rows(both)
        y_design.rows(both, np.repeat(mediator[:1], 2))
    except FormulaError:
        for value in contrast:
            changed = with_values(first, {exposure: value})
            try:
                m_design.rows(changed)
                y_design.rows(changed, mediator[:1])
            except FormulaError as error:
                raise ArgumentError(f"contrast: at {exposure} = {value!r}: {error}") from None
        raise


def _level_texts(frame: pd.DataFrame) -> list[str]:
    categorical = [c for c in frame.columns if isinstance(frame[c].dtype, pd.CategoricalDtype)]
    return [str(level) for name in categorical for level in frame[name].cat.categories]


def _frozen(values: Array) -> Array:
    values = np.array(values, dtype=float)
    values.setflags(write=False)
    return values
