"""Rows of the study with columns set to other values, each in the type it had."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd


def with_values(frame: pd.DataFrame, point: Mapping[str, Any]) -> pd.DataFrame:
    """Return `frame` with each column named in `point` set to one value in every row."""
    return frame.assign(**{name: in_type_of(frame[name], [v], len(frame)) for name, v in point.items()})


def repeated(frame: pd.DataFrame, points: Sequence[Mapping[str, Any]]) -> pd.DataFrame:
    """Return all rows of `frame` once for each point, with the columns that it names set to its values.

    Parameters
    ----------
    frame : DataFrame, n rows
    points : sequence of dict
        All with the same names.

    Returns
    -------
    DataFrame, n rows for the first point, then n for the second, and so on
    """
    rows = len(frame)
    columns = {name: in_type_of(frame[name], [point[name] for point in points], rows) for name in points[0]}
    return frame.take(np.tile(np.arange(rows), len(points))).assign(**columns)


def in_type_of(column: pd.Series[Any], values: Sequence[Any], each: int) -> Any:
    """Return every one of `values` `each` times as an array of the column's type.

    Whole numbers become floats where a value is no whole number.
    """
    array = column.array
    if isinstance(array, pd.Categorical):
        codes = array.categories.get_indexer(pd.Index(values))
        return pd.Categorical.from_codes(np.repeat(codes, each), dtype=array.dtype)
    if column.dtype == bool:
        return np.repeat(np.array(values, dtype=bool), each)
    whole = array.dtype.kind == "i" and all(float(value).is_integer() for value in values)
    return np.repeat(np.array(values, dtype=np.int64 if whole else float), each)
