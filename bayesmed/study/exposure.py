"""The exposure's column and the two values of it that are contrasted."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.core.errors import ArgumentError, DataError


def contrast_of(column: pd.Series[Any], contrast: Sequence[Any] | None, *, was_text: bool) -> tuple[Any, Any]:
    """Return the two exposure values (x0, x1) as plain Python values.

    Parameters
    ----------
    column : Series
        The exposure in the rows used.
    contrast : sequence of two values, optional
        May be left out where 0/1, truth values, or a categorical of two levels say it themselves.
    was_text : bool
        True if the column was text, whose order is only the alphabet's.

    Raises
    ------
    DataError
        If the exposure is constant.
    ArgumentError
        If the contrast is needed and missing, or is not two different values that the exposure can take.
    """
    if column.nunique() < 2:
        raise DataError(
            f"exposure: '{column.name}' is {_plain(column.iloc[0])!r} in every one of the {len(column)} "
            "complete rows; nothing can be contrasted."
        )
    if contrast is None:
        return _own_contrast(column, was_text=was_text)
    if isinstance(contrast, str) or not isinstance(contrast, Sequence | np.ndarray) or len(contrast) != 2:
        raise ArgumentError(f"contrast: expected two values (from, to), got {contrast!r}.")
    low, high = (_value(column, value) for value in contrast)
    if low == high:
        raise ArgumentError(f"contrast: the two values are the same, {low!r}.")
    return low, high


def _own_contrast(column: pd.Series[Any], *, was_text: bool) -> tuple[Any, Any]:
    if isinstance(column.dtype, pd.CategoricalDtype):
        levels = [_plain(level) for level in column.cat.categories]
        if len(levels) == 2 and not was_text:
            return levels[0], levels[1]
        why = "is text, whose order is only the alphabet's" if was_text else f"has {len(levels)} levels"
        raise ArgumentError(
            f"contrast: '{column.name}' {why}; name the two levels as contrast=(from, to). Levels: {_listed(levels)}."
        )
    if column.dtype == bool:
        return False, True
    values = np.unique(column)
    if set(values) == {0, 1}:
        return 0, 1
    what = _listed([_plain(v) for v in values]) if len(values) <= 6 else f"{values[0]:g} to {values[-1]:g}"
    raise ArgumentError(
        f"contrast: '{column.name}' is not coded 0/1 (values: {what}); name two values as contrast=(from, to)."
    )


def _value(column: pd.Series[Any], value: Any) -> Any:
    value = _plain(value)
    if isinstance(column.dtype, pd.CategoricalDtype):
        levels = [_plain(level) for level in column.cat.categories]
        if not any(value == level and isinstance(value, bool) == isinstance(level, bool) for level in levels):
            raise ArgumentError(
                f"contrast: {value!r} is not a level of '{column.name}' in the rows used. Levels: {_listed(levels)}."
            )
        return levels[levels.index(value)]
    if column.dtype == bool:
        if value not in (False, True):
            raise ArgumentError(f"contrast: '{column.name}' is False or True, got {value!r}.")
        return bool(value)
    if not isinstance(value, int | float) or not np.isfinite(value):
        raise ArgumentError(f"contrast: '{column.name}' is a number, got {value!r}.")
    value = int(value) if isinstance(value, bool) else value
    seen = np.unique(column)
    if len(seen) == 2 and value not in seen:
        raise ArgumentError(
            f"contrast: '{column.name}' takes only the values {_listed([_plain(v) for v in seen])}, got {value!r}."
        )
    return value


def _plain(value: Any) -> Any:
    return value.item() if isinstance(value, np.generic) else value


def _listed(values: Sequence[Any]) -> str:
    return ", ".join(repr(value) for value in values)
