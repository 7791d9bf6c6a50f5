"""The moderator values at which a conclusion is asked: what `at` means."""

from __future__ import annotations

import itertools
import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.core.errors import ArgumentError, ExtrapolationWarning, warn
from bayesmed.study.moderators import coded_columns, kind_of, reserved
from bayesmed.study.observe import Observed

MOST_DEFAULT_POINTS = 30
FEW_VALUES = 5
"""A numeric moderator with at most so many values is shown at every one of them."""

DEFAULT_PERCENTILES = (20, 50, 80)


@dataclass(frozen=True, eq=False)
class Points:
    """A product grid of moderator values.

    Attributes
    ----------
    dims : dict of str to tuple
        The dimensions in order, each with its values.
    scalars : dict of str to value
        Moderators held at one value.
    values : tuple of dict
        One dict a point, the last dimension changing fastest; dims and scalars together.
    """

    dims: Mapping[str, tuple[Any, ...]]
    scalars: Mapping[str, Any]
    values: tuple[Mapping[str, Any], ...]

    @property
    def shape(self) -> tuple[int, ...]:
        """The length of each dimension."""
        return tuple(len(values) for values in self.dims.values())

    @property
    def names(self) -> tuple[str, ...]:
        """Every column that is set to a value."""
        return (*self.dims, *self.scalars)

    @property
    def columns(self) -> dict[str, list[Any]]:
        """Each column's value at every point: how a table with a row a point begins."""
        return {name: [point[name] for point in self.values] for name in self.names}


def points(observed: Observed, at: Mapping[str, Any] | None = None) -> Points:
    """Return the points that `at` means.

    Parameters
    ----------
    observed : Observed
    at : dict, optional
        A list makes a dimension, a single value a scalar coordinate; several keys make a product grid. ``{}``
        averages over all rows. None takes, for each default moderator, every level or the observed values
        nearest the 20th, 50th and 80th percentiles; of a study known by published figures, the mean and one SD to
        either side.

    Raises
    ------
    ArgumentError
        For an unknown column or level, a value of the wrong type, or more than 30 points by default.

    Warns
    -----
    ExtrapolationWarning
        For a number outside those observed.
    """
    if at is None:
        return _default(observed)
    if not isinstance(at, Mapping):
        raise ArgumentError(
            f"at: expected a dict such as {{'age': [30, 50]}}, {{}} to average over all rows, or None, got {at!r}."
        )
    dims: dict[str, tuple[Any, ...]] = {}
    scalars: dict[str, Any] = {}
    for name, wanted in at.items():
        _check_name(observed, name)
        if _is_list(wanted):
            dims[name] = _listed(observed, name, wanted)
        else:
            scalars[name] = _value(observed, name, wanted)
    _warn_outside(observed, dims, scalars)
    return _grid(dims, scalars)


def _default(observed: Observed) -> Points:
    dims = {name: _default_values(observed, name) for name in observed.default_moderators}
    count = math.prod(len(values) for values in dims.values())
    if count > MOST_DEFAULT_POINTS:
        sizes = ", ".join(f"'{name}' {len(values)}" for name, values in dims.items())
        raise ArgumentError(
            f"at: by default the moderators make {count} points ({sizes}), more than {MOST_DEFAULT_POINTS}. "
            f"Choose values, such as at={{{next(iter(dims))!r}: […]}}, at={{}} to average over all rows, or "
            "fewer default moderators with moderators=[…]."
        )
    return _grid(dims, {})


def _default_values(observed: Observed, name: str) -> tuple[Any, ...]:
    column = observed.column(name)
    levels = _levels(column)
    categorical = kind_of(column, coded=name in coded_columns(observed.formulas)) == "categorical"
    if categorical or len(levels) <= FEW_VALUES:
        return levels
    if observed.published is not None:
        # Only mean and SD are known; a moderator's usual values are then these. Common practice, no source.
        middle, spread = float(column.mean()), float(column.std())
        return middle - spread, middle, middle + spread
    values = np.asarray(column)
    wanted = np.percentile(values, DEFAULT_PERCENTILES)
    nearest = [values[np.abs(values - percentile).argmin()].item() for percentile in wanted]
    return tuple(dict.fromkeys(nearest))


def _grid(dims: Mapping[str, tuple[Any, ...]], scalars: Mapping[str, Any]) -> Points:
    product = itertools.product(*dims.values())
    return Points(dims, scalars, tuple({**dict(zip(dims, p, strict=True)), **scalars} for p in product))


def _check_name(observed: Observed, name: Any) -> None:
    allowed = ", ".join(f"'{c}'" for c in observed.covariates) or "none"
    roles = {observed.exposure: "the exposure, which is contrasted"}
    roles |= dict.fromkeys(observed.formulas.outcome.left.columns, "the outcome")
    roles |= dict.fromkeys(observed.formulas.mediator.left.columns, "the mediator, which the exposure moves")
    roles |= {
        observed.mediator_name: "the mediator, which the exposure moves",
        observed.outcome_name: "the outcome",
    }
    if name in observed.covariates:
        if (problem := reserved(name)) is not None:
            raise ArgumentError(f"at: {problem}")
    elif isinstance(name, str) and name in roles:
        raise ArgumentError(f"at: '{name}' is {roles[name]}; it cannot be set. It may name: {allowed}.")
    else:
        raise ArgumentError(f"at: {name!r} is no variable of the formulas. It may name: {allowed}.")


def _is_list(wanted: Any) -> bool:
    if isinstance(wanted, np.ndarray):
        return wanted.ndim > 0
    return isinstance(wanted, list | tuple | range | pd.Series | pd.Index)


def _listed(observed: Observed, name: str, wanted: Any) -> tuple[Any, ...]:
    if isinstance(wanted, np.ndarray) and wanted.ndim > 1:
        raise ArgumentError(f"at: '{name}' takes a list of values, got an array of shape {wanted.shape}.")
    values = tuple(_value(observed, name, value) for value in wanted)
    if not values:
        raise ArgumentError(f"at: '{name}' has an empty list; leave it out to average over it.")
    if len(set(values)) < len(values):
        raise ArgumentError(f"at: '{name}' holds a value twice: {list(values)!r}.")
    return values


def _value(observed: Observed, name: str, value: Any) -> Any:
    """Return one value as a plain Python value of the column's type."""
    column = observed.frame[name]
    value = value.item() if isinstance(value, np.generic | np.ndarray) else value
    coded = name in coded_columns(observed.formulas)
    is_number = isinstance(value, int | float) and not isinstance(value, bool)
    if column.dtype == bool:
        if not (isinstance(value, bool) or (is_number and value in (0, 1))):
            raise ArgumentError(f"at: '{name}' is False or True, got {value!r}.")
        value = bool(value)
    elif not isinstance(column.dtype, pd.CategoricalDtype):
        if not is_number or not math.isfinite(value):
            raise ArgumentError(f"at: '{name}' is a number, got {value!r}.")
        whole = column.dtype.kind == "i" and float(value).is_integer()
        value = int(value) if whole else float(value)
    if coded or isinstance(column.dtype, pd.CategoricalDtype):
        levels = _levels(column)
        same_kind = [v for v in levels if v == value and isinstance(v, bool) == isinstance(value, bool)]
        if not same_kind:
            shown = ", ".join(repr(level) for level in levels[:20]) + (", …" if len(levels) > 20 else "")
            raise ArgumentError(f"at: {value!r} is not a level of '{name}'. Levels: {shown}.")
        value = same_kind[0]
    return value


def _levels(column: pd.Series[Any]) -> tuple[Any, ...]:
    """Return the different values of a column in order, as plain Python values."""
    if isinstance(column.dtype, pd.CategoricalDtype):
        levels: Any = column.cat.categories
    else:
        levels = np.unique(column)
    return tuple(level.item() if isinstance(level, np.generic) else level for level in levels)


def _warn_outside(observed: Observed, dims: Mapping[str, tuple[Any, ...]], scalars: Mapping[str, Any]) -> None:
    if observed.published is not None:
        return
    for name, values in {**dims, **{n: (v,) for n, v in scalars.items()}}.items():
        column = observed.column(name)
        if isinstance(column.dtype, pd.CategoricalDtype) or column.dtype == bool:
            continue
        low, high = column.min(), column.max()
        outside = [value for value in values if value < low or value > high]
        if outside:
            message = (
                f"at: '{name}' = {', '.join(f'{v:g}' for v in outside)} lies outside the values observed, "
                f"{low:g} to {high:g}; the conclusion there rests on the formula alone."
            )
            warn(ExtrapolationWarning(message))
