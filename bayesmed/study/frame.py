"""Any frame of the user's becomes a checked pandas frame of complete rows, with only the columns needed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.core.errors import DataError


@dataclass(frozen=True, eq=False)
class Given:
    """The data as given, of which single columns can be taken.

    Attributes
    ----------
    names : tuple of str
        The columns whose names are strings.
    rows : int
        How many rows there are.
    """

    names: tuple[str, ...]
    rows: int
    _source: Any

    def column(self, name: str) -> pd.Series[Any]:
        """Return a column, which may share its values with the data given."""
        if isinstance(self._source, pd.DataFrame):
            return self._source[name]
        column: pd.Series[Any] = self._source.select([name]).to_pandas()[name]
        return column


@dataclass(frozen=True)
class RowsUsed:
    """How many rows there were, and why some were left out.

    Attributes
    ----------
    given, used, dropped : int
        Rows of the data, rows complete in every column used, and the rest.
    missing : dict of str to int
        Missing values by column, the columns at fault only.
    """

    given: int
    used: int
    dropped: int
    missing: Mapping[str, int]


@dataclass(frozen=True, eq=False)
class Complete:
    """The complete rows.

    Attributes
    ----------
    frame : DataFrame
        Columns are float64, int64, bool or categorical; the index is that of the data.
    positions : array of int
        Where the rows stood in the data.
    rows : RowsUsed
    text : frozenset of str
        The columns that held text, whose levels have no order but the alphabet's.
    unused_levels : dict of str to tuple
        Levels that no complete row has; they are taken away.
    """

    frame: pd.DataFrame
    positions: np.ndarray[Any, np.dtype[np.intp]]
    rows: RowsUsed
    text: frozenset[str]
    unused_levels: Mapping[str, tuple[Any, ...]]


def given(data: Any) -> Given:
    """Return access to the data.

    Parameters
    ----------
    data : pandas.DataFrame, a dict of columns, or any eager frame that narwhals knows
        Polars, pyarrow and others.

    Raises
    ------
    DataError
        If it is no frame, has no rows, or has two columns of one name.
    """
    if isinstance(data, Mapping):
        try:
            data = pd.DataFrame(dict(data))
        except (ValueError, TypeError) as error:
            raise DataError(f"data: the dict is no table of columns of one length: {error}") from None
    if isinstance(data, pd.DataFrame):
        if isinstance(data.columns, pd.MultiIndex):
            raise DataError("data: the columns have several levels; flatten them to plain names first.")
        names = [name for name in data.columns if isinstance(name, str)]
        source, rows = data, len(data)
    else:
        source = _converted(data)
        names, rows = list(source.columns), len(source)
    repeated = sorted({name for name in names if names.count(name) > 1})
    if repeated:
        raise DataError(f"data: several columns are called {_quoted(repeated)}; give each its own name.")
    if rows == 0:
        raise DataError("data: there are no rows.")
    return Given(tuple(names), rows, source)


def complete(source: Given, names: Sequence[str]) -> Complete:
    """Return the rows complete in every one of the columns `names`, in plain types.

    Raises
    ------
    DataError
        If a column has a type or value that cannot be used, or no row is complete.
    """
    # Column by column, so that no more than one copy of the rows is ever held.
    given = {name: source.column(name) for name in names}
    text = frozenset(name for name, column in given.items() if text_column(column))
    typed = {name: typed_column(name, column) for name, column in given.items()}
    missing = {name: int(column.isna().sum()) for name, column in typed.items()}
    missing = {name: count for name, count in missing.items() if count}
    whole = ~np.logical_or.reduce([np.asarray(column.isna()) for column in typed.values()])
    positions = np.flatnonzero(whole)
    if not len(positions):
        raise DataError(_none_complete(missing, source.rows))
    kept = {name: plain_column(column.iloc[positions]) for name, column in typed.items()}
    unused = {
        name: tuple(set(column.cat.categories) - set(kept[name].cat.categories))
        for name, column in typed.items()
        if isinstance(column.dtype, pd.CategoricalDtype)
    }
    used, index = len(positions), next(iter(given.values())).index[positions]
    return Complete(
        pd.DataFrame({name: column.array for name, column in kept.items()}, index=index, copy=False),
        positions,
        RowsUsed(source.rows, used, source.rows - used, missing),
        text,
        {name: tuple(sorted(levels, key=str)) for name, levels in unused.items() if levels},
    )


def _converted(data: Any) -> Any:
    import narwhals as nw

    if isinstance(nw.from_native(data, pass_through=True), nw.LazyFrame):
        raise DataError(f"data: a lazy frame ({type(data).__name__}) has no rows yet; collect it first.")
    try:
        return nw.from_native(data, eager_only=True)
    except TypeError:
        raise DataError(
            "data: expected a data frame (pandas, polars, pyarrow, …) or a dict of columns, got "
            f"{type(data).__module__}.{type(data).__qualname__}."
        ) from None


def text_column(column: pd.Series[Any]) -> bool:
    """Return whether a column holds text."""
    if isinstance(column.dtype, pd.CategoricalDtype):
        return False
    return pd.api.types.is_string_dtype(column.dtype) and (
        not pd.api.types.is_object_dtype(column.dtype) or pd.api.types.infer_dtype(column, skipna=True) == "string"
    )


def typed_column(name: str, column: pd.Series[Any]) -> pd.Series[Any]:
    """Return the column as a number, truth value or categorical, missing values still in it."""
    if isinstance(column.dtype, pd.SparseDtype):
        column = pd.Series(np.asarray(column), index=column.index, name=column.name)
    dtype = column.dtype
    if isinstance(dtype, pd.CategoricalDtype):
        return _plain_levels(column)
    if text_column(column):
        return column.astype(object).where(column.notna(), None).astype("category")
    if pd.api.types.is_object_dtype(dtype):
        column = _objects(name, column)
        dtype = column.dtype
    if pd.api.types.is_bool_dtype(dtype):
        return column
    if pd.api.types.is_complex_dtype(dtype) or not pd.api.types.is_numeric_dtype(dtype):
        raise DataError(
            f"data: column '{name}' is of type {dtype}, which is neither number, truth value nor category; "
            "turn it into a number (such as days since a start) or a categorical first."
        )
    if not pd.api.types.is_integer_dtype(dtype):
        values = column.to_numpy(dtype=float, na_value=np.nan)
        infinite = np.flatnonzero(np.isinf(values))
        if len(infinite):
            raise DataError(
                f"data: column '{name}' is infinite in {len(infinite)} row(s), first in row "
                f"{_label(column.index[infinite[0]])}; make such values missing or correct them."
            )
    return column


def _objects(name: str, column: pd.Series[Any]) -> pd.Series[Any]:
    match pd.api.types.infer_dtype(column, skipna=True):
        case "boolean":
            return column.astype("boolean")
        case "integer" | "floating" | "mixed-integer-float" | "decimal" | "empty":
            return column.map(float, na_action="ignore").astype(float)
    kinds = sorted({type(value).__name__ for value in column[column.notna()]})
    raise DataError(
        f"data: column '{name}' holds objects of type {', '.join(kinds)}; make it all numbers, all text or "
        "a categorical."
    )


def _plain_levels(column: pd.Series[Any]) -> pd.Series[Any]:
    levels = column.cat.categories
    if all(isinstance(level, str | int | float | np.integer | np.floating | np.bool_) for level in levels):
        return column
    # Intervals and dates have no plain value by which a level can be asked for.
    return column.cat.rename_categories([str(level) for level in levels])


def plain_column(column: pd.Series[Any]) -> pd.Series[Any]:
    """Return a column without missing values as a plain numpy type, or with the levels that occur."""
    if isinstance(column.dtype, pd.CategoricalDtype):
        return column.cat.remove_unused_categories()
    if pd.api.types.is_bool_dtype(column.dtype):
        return column.astype(bool)
    if pd.api.types.is_integer_dtype(column.dtype):
        values = column.to_numpy()
        fits = column.min() >= np.iinfo(np.int64).min and column.max() <= np.iinfo(np.int64).max
        return pd.Series(values.astype(np.int64 if fits else float), index=column.index)
    return pd.Series(column.to_numpy(dtype=float), index=column.index)


def _none_complete(missing: Mapping[str, int], rows: int) -> str:
    empty = [name for name, count in missing.items() if count == rows]
    if empty:
        return f"data: no row is complete, since {_quoted(empty)} has no value at all."
    counts = ", ".join(f"'{name}' lacks {count}" for name, count in missing.items())
    return f"data: no row of {rows} is complete in every column used: {counts}."


def _quoted(names: Sequence[str]) -> str:
    return ", ".join(f"'{name}'" for name in names)


def _label(label: Any) -> str:
    return repr(label.item() if isinstance(label, np.generic) else label)
