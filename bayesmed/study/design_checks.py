"""What a design must be: not too wide, finite, each column with a name of its own."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.core.errors import DesignError, FormulaError
from bayesmed.core.mapping import Array
from bayesmed.study.expressions import Expression
from bayesmed.study.formulas import Formula

WIDEST = 2_000
"""Most columns of a design."""


def check_labels(labels: tuple[str, ...], argument: str) -> None:
    """Refuse two columns of one name."""
    repeated = sorted({label for label in labels if labels.count(label) > 1})
    if repeated:
        raise FormulaError(
            f"{argument}: {repeated[0]} is the name of two columns of the design; rename a level or a column."
        )


def check_width(formula: Formula, argument: str, frame: pd.DataFrame) -> None:
    """Refuse a design too wide for the rows or the memory before it is made."""
    total = 0
    for term in formula.terms:
        width = math.prod(_factor_width(factor, argument, frame) for factor in term)
        total += width
        if total > WIDEST:
            label = ":".join(factor.label for factor in term)
            raise DesignError(
                f"{argument}: with the term {label}, of up to {width} columns, the design gets {total} "
                f"columns in {len(frame)} rows; at most {WIDEST} columns are allowed."
            )


def _factor_width(factor: Expression, argument: str, frame: pd.DataFrame) -> int:
    width = len(frame) if factor.width is None else factor.width
    for name in factor.columns:
        if isinstance(frame[name].dtype, pd.CategoricalDtype):
            levels = len(frame[name].cat.categories)
        elif name in factor.coded:
            levels = frame[name].nunique()
        else:
            continue
        if levels >= len(frame):
            raise DesignError(
                f"{argument}: column '{name}' has {levels} levels in {len(frame)} complete rows; is it an "
                "identifier? It cannot be a term."
            )
        width *= levels
    return width


def check_finite(values: Array, index: pd.Index[Any], labels: tuple[str, ...], argument: str) -> None:
    """Refuse values that are not finite, naming the term and the first row."""
    if np.isfinite(values).all():
        return
    row, column = np.argwhere(~np.isfinite(values))[0]
    count = int((~np.isfinite(values[:, column])).sum())
    label = index[row].item() if isinstance(index[row], np.generic) else index[row]
    raise FormulaError(
        f"{argument}: the term {labels[column]} is not finite in {count} row(s), first in row {label!r}; "
        "such as the logarithm of zero or a division by zero."
    )
