"""Columns of the data that look like identifiers and repeat: rows that may not be independent."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.study.frame import Given

_NAMES = re.compile(
    r"(?:^|[_.\s-])(?:id|ids|identifier|subject|subj|participant|patient|person|respondent|case|pupil|student|"
    r"household|family|couple|dyad|school|class|classroom|clinic|hospital|ward|practice|village|cluster|team|"
    r"therapist|clinician|teacher)(?:$|[_.\s-]|(?<=[a-z])(?=\d))|(?<=[a-z])I[Dd]s?$",
)
"""Names that mean one unit or one group of units. Common practice, no source."""

FEWEST_ROWS = 30
FEWEST_SHARE = 0.2
MOST_UNEVEN = 0.25
LONGEST_TEXT = 30
"""For columns whose name says nothing. Common practice, no source."""


@dataclass(frozen=True)
class Identifier:
    """A column that looks like an identifier and repeats in the rows used.

    Attributes
    ----------
    name : str
    distinct : int
        How many different values it has.
    most : int
        How many rows share its most frequent value.
    """

    name: str
    distinct: int
    most: int


def identifiers(
    source: Given, used: Sequence[str], positions: np.ndarray[Any, np.dtype[np.intp]]
) -> tuple[Identifier, ...]:
    """Return the columns outside `used` that look like identifiers and repeat in the rows at `positions`.

    A column counts if its name says so. Otherwise it must be text or consecutive whole numbers, repeat, and
    repeat far more evenly than a measured value would, whose counts vary as much as their mean.
    """
    found = []
    for name in source.names:
        if name in used:
            continue
        named = _named(name)
        column = source.column(name)
        if not (named or _could_be(column)):
            continue
        column = column.iloc[positions].dropna()
        try:
            counts = column.value_counts()
        except TypeError:
            continue  # Values without a hash, such as lists, identify nothing.
        counts = counts[counts > 0]
        repeats = 1 < len(counts) < len(column)
        if repeats and (named or _evenly_repeated(column, counts)):
            found.append(Identifier(name, len(counts), int(counts.max())))
    return tuple(found)


def _named(name: str) -> bool:
    return _NAMES.search(name if name.islower() else name[:1].lower() + name[1:]) is not None


def _could_be(column: pd.Series[Any]) -> bool:
    kind = column.dtype
    return pd.api.types.is_integer_dtype(kind) or pd.api.types.is_string_dtype(kind)


def _evenly_repeated(column: pd.Series[Any], counts: pd.Series[Any]) -> bool:
    values = counts.to_numpy(dtype=float)
    if len(column) < FEWEST_ROWS or len(values) < FEWEST_SHARE * len(column):
        return False
    if values.var() > MOST_UNEVEN * values.mean():
        return False
    if pd.api.types.is_integer_dtype(column.dtype):
        return bool(column.max() - column.min() < 1.5 * len(values))
    texts = column.astype(str)
    return bool(texts.str.len().mean() <= LONGEST_TEXT and (texts.str.strip() != "").all())
