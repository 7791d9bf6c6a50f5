"""Formulas become designs, which can be evaluated again on any rows and must then reproduce themselves."""

from __future__ import annotations

import copy
import re
import warnings
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from formulaic import ModelSpec
from formulaic.errors import DataMismatchWarning
from formulaic.formula import SimpleFormula
from formulaic.parser.types import Factor, Term

from bayesmed.core.errors import DesignError, FormulaError
from bayesmed.core.mapping import Array
from bayesmed.study.design_checks import check_finite, check_labels, check_width
from bayesmed.study.expressions import GIVEN, Expression
from bayesmed.study.formulas import Formula
from bayesmed.study.transforms import CONTRASTS, TRANSFORMS, as_number, both, either, opposite
from bayesmed.study.vocabulary import Vocabulary

CHUNK = 50_000
"""Rows of a design that are made at a time, to bound memory."""

REPRODUCED = 1e-8
"""Largest difference, relative to a column's size, when a design is evaluated again on its own rows."""

Rows = Callable[[frozenset[str], bool], tuple[pd.DataFrame, Array | None]]
"""Returns columns of all rows, and the mediator in all rows if asked."""


@dataclass(frozen=True, eq=False)
class Design:
    """The right side of one formula, fixed on the rows of a study.

    Attributes
    ----------
    argument : str
        "mediator" or "outcome", for errors.
    labels : tuple of str
        The columns as the user would write them.
    columns : tuple of frozenset of str
        The columns of the data in each column of the design, without the mediator's own.
    with_mediator : array of bool, shape (term,)
        Which columns of the design hold the mediator.
    """

    argument: str
    labels: tuple[str, ...]
    columns: tuple[frozenset[str], ...]
    with_mediator: np.ndarray[Any, np.dtype[np.bool_]]
    _types: Mapping[str, Any]
    _formula: Formula
    _spec: ModelSpec
    _words: Vocabulary

    def rows(self, frame: pd.DataFrame, mediator: Array | None = None) -> Array:
        """Return the design on other rows.

        Parameters
        ----------
        frame : DataFrame
            With the columns and types of the study's own.
        mediator : array, shape (row,), optional
            Needed where the formula holds the mediator.

        Returns
        -------
        array, shape (row, term)

        Raises
        ------
        FormulaError
            If a factor cannot be evaluated on these rows, or is not finite.
        """
        for name, dtype in self._types.items():
            if frame[name].dtype != dtype:
                # Levels are matched by type as well as value; another type would match none, without a word.
                raise FormulaError(f"{self.argument}: '{name}' stands in C() and cannot take a value of another type.")
        encoded = _encoded(frame, mediator, _factors(self._formula), self._words)
        values = _evaluated(self._spec, encoded, self.argument, self._words)[0]
        check_finite(values, frame.index, self.labels, self.argument)
        return values

    def holding(self, column: str) -> np.ndarray[Any, np.dtype[np.bool_]]:
        """Return which columns of the design hold `column` of the data, shape (term,)."""
        return np.array([column in columns for columns in self.columns], dtype=bool)


def design(
    formula: Formula,
    argument: str,
    words: Vocabulary,
    frame: pd.DataFrame,
    mediator: Array | None,
    whole: Rows | None = None,
) -> tuple[Design, Array]:
    """Return the design of a formula, fixed on the rows given, and its values on the first of them.

    Where the rows given are only some of the study's, `whole` returns columns of all, and the mediator if asked.

    Raises
    ------
    FormulaError
        If a factor cannot be evaluated, is not finite, or does not reproduce itself.
    DesignError
        If there are fewer rows than columns.
    """
    check_width(formula, argument, frame)
    first = frame.iloc[:CHUNK]
    m_first = None if mediator is None else mediator[:CHUNK]
    if whole is None and len(first) < len(frame):

        def whole(names: frozenset[str], with_mediator: bool) -> tuple[pd.DataFrame, Array | None]:
            return frame, mediator

    state = {} if whole is None else _remembered(formula, argument, words, whole)
    spec = ModelSpec(formula=_formulaic(formula), output="numpy", na_action="ignore", **state)
    encoded = _encoded(first, m_first, _factors(formula), words)
    values, spec = _evaluated(spec, encoded, argument, words)
    labels, columns, with_mediator = _described(formula, spec, words)
    check_labels(labels, argument)
    types = {name: frame[name].dtype for factor in _factors(formula) for name in factor.coded}
    made = Design(argument, labels, columns, with_mediator, types, formula, spec, words)
    check_finite(values, first.index, labels, argument)
    if len(frame) <= values.shape[1]:
        raise DesignError(
            f"{argument}: {len(frame)} complete rows cannot determine {values.shape[1]} terms and the "
            "spread around them; use fewer terms or more rows."
        )
    _check_reproduced(made, values, first, m_first)
    return made, values


def _remembered(formula: Formula, argument: str, words: Vocabulary, whole: Rows) -> dict[str, dict[str, Any]]:
    """Return what transforms and codings keep of all rows, such as means and knots: one factor at a time."""
    transforms: dict[str, Any] = {}
    codings: dict[str, Any] = {}
    for factor in {f.code: f for f in _factors(formula) if not f.is_plain}.values():
        alone = SimpleFormula([Term([Factor("1", eval_method="literal")]), Term([_factor(factor)])], _ordering="none")
        spec = ModelSpec(formula=alone, output="numpy", na_action="ignore")
        encoded = _encoded(*whole(factor.columns, factor.has_mediator), [factor], words)
        spec = _evaluated(spec, encoded, argument, words)[1]
        transforms |= spec.transform_state
        codings |= spec.encoder_state
    return {"transform_state": transforms, "encoder_state": codings}


def left_values(expression: Expression, argument: str, words: Vocabulary, frame: pd.DataFrame) -> Array:
    """Return what stands left of ``~``, shape (row,).

    Raises
    ------
    FormulaError
        If it cannot be evaluated, has several columns or is not finite.
    """
    formula = SimpleFormula([Term([_factor(expression)])], _ordering="none")
    spec = ModelSpec(formula=formula, output="numpy", na_action="ignore", ensure_full_rank=False)
    values = _evaluated(spec, _encoded(frame, None, [expression], words), argument, words)[0]
    if values.shape[1] != 1:
        raise FormulaError(f"{argument}: {expression.label} left of '~' has {values.shape[1]} columns, not one.")
    check_finite(values, frame.index, (expression.label,), argument)
    return values[:, 0]


def _formulaic(formula: Formula) -> SimpleFormula:
    intercept = Factor("1", eval_method="literal")
    terms = [Term([_factor(factor) for factor in term] or [intercept]) for term in formula.terms]
    return SimpleFormula(terms, _ordering="none")


def _factor(expression: Expression) -> Factor:
    # A column alone is looked up, which is quicker than evaluating its name.
    return Factor(expression.code, eval_method="lookup" if expression.is_plain else "python")


def _factors(formula: Formula) -> list[Expression]:
    return [factor for term in formula.terms for factor in term]


def _encoded(
    frame: pd.DataFrame, mediator: Array | None, factors: Sequence[Expression], words: Vocabulary
) -> pd.DataFrame:
    """Return the columns under their placeholders: numbers as floats, and beside them as given for C()."""
    columns: dict[str, Any] = {}
    needed = frozenset().union(*(factor.columns for factor in factors))
    coded = frozenset().union(*(factor.coded for factor in factors))
    for placeholder, name in words.columns.items():
        if name not in needed:
            continue
        values = frame[name].array
        if name in coded:
            columns[placeholder + GIVEN] = values
        categorical = isinstance(values, pd.Categorical)
        columns[placeholder] = values if categorical else np.asarray(values, dtype=float)
    if mediator is not None:
        columns[words.mediator] = np.asarray(mediator, dtype=float)
    made = pd.DataFrame(dict(enumerate(columns.values())), index=pd.RangeIndex(len(frame)), copy=False)
    made.columns = pd.Index(list(columns), dtype=object)
    return made


def _evaluated(spec: ModelSpec, encoded: pd.DataFrame, argument: str, words: Vocabulary) -> tuple[Array, ModelSpec]:
    """Return the values of a design and its specification. Missing values are looked for by the caller."""
    try:
        matrix = _matrix(spec, encoded, words)
    except DataMismatchWarning:
        raise FormulaError(
            f"{argument}: a categorical has a level that its term does not know; name every level in "
            "levels=[…], or ask only for levels that occur."
        ) from None
    except Exception as error:
        # Whatever a function makes of unfit values is about the formula, and is said in its words.
        raise FormulaError(f"{argument}: {_reason(error, spec, encoded, words)}") from None
    return np.array(matrix, dtype=float, order="C"), matrix.model_spec


def _matrix(spec: ModelSpec, encoded: pd.DataFrame, words: Vocabulary) -> Any:
    context: Mapping[str, Any] = {
        **{name: transform.function for name, transform in TRANSFORMS.items()},
        **{placeholder: CONTRASTS[name].function for placeholder, name in words.codings.items()},
        **words.strings,
        "as_number": as_number,
        "both": both,
        "either": either,
        "opposite": opposite,
    }
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")
        warnings.simplefilter("error", DataMismatchWarning)
        return spec.get_model_matrix(encoded, context=context)


def _reason(error: Exception, spec: ModelSpec, encoded: pd.DataFrame, words: Vocabulary) -> str:
    """Return what went wrong in which factor, by trying each of them alone beside an intercept."""
    cause: BaseException = error
    while cause.__cause__ is not None:
        cause = cause.__cause__
    text = " ".join(words.restore(str(cause).replace(GIVEN, "")).split())
    for factor in {f.expr: f for term in spec.formula for f in term.factors}.values():
        terms = [Term([Factor("1", eval_method="literal")]), Term([factor])]
        alone = ModelSpec(
            formula=SimpleFormula(terms, _ordering="none"),
            output="numpy",
            na_action="ignore",
            # What the transforms remember is part of what fails on new rows.
            transform_state=copy.deepcopy(spec.transform_state),
        )
        try:
            _matrix(alone, encoded, words)
        except Exception:
            return f"{words.restore(factor.expr.replace(GIVEN, ''))} cannot be evaluated on these rows: {text}"
    return f"the right side cannot be evaluated on these rows: {text}"


def _described(
    formula: Formula, spec: ModelSpec, words: Vocabulary
) -> tuple[tuple[str, ...], tuple[frozenset[str], ...], np.ndarray[Any, np.dtype[np.bool_]]]:
    factors = {factor.code: factor.label for term in formula.terms for factor in term}
    longest_first = sorted(factors, key=len, reverse=True)
    pattern = re.compile("|".join(re.escape(code) for code in longest_first)) if factors else None
    labels: list[str] = []
    columns: list[frozenset[str]] = []
    with_mediator: list[bool] = []
    for term, (_, _, names) in zip(formula.terms, spec.structure, strict=True):
        for name in names:
            labels.append(pattern.sub(lambda match: factors[match.group()], name) if pattern else name)
            columns.append(frozenset().union(*(factor.columns for factor in term)))
            with_mediator.append(any(factor.has_mediator for factor in term))
    return tuple(labels), tuple(columns), np.array(with_mediator, dtype=bool)


def _check_reproduced(made: Design, values: Array, frame: pd.DataFrame, mediator: Array | None) -> None:
    """Refuse a design whose value in a row depends on which other rows stand beside it."""
    few = np.unique(np.linspace(0, len(frame) - 1, 7).astype(int))
    again = made.rows(frame.iloc[few], None if mediator is None else mediator[few])
    size = np.abs(values).max(axis=0)
    wrong = np.abs(again - values[few]).max(axis=0) > REPRODUCED * np.where(size > 0, size, 1.0)
    if wrong.any():
        label = made.labels[int(np.argmax(wrong))]
        raise FormulaError(
            f"{made.argument}: the term {label} has other values when it is evaluated on some of the rows "
            "alone, so it cannot be evaluated on changed rows. For centring write center(z), for scaling "
            "scale(z)."
        )
