"""Published means, SDs and correlations, or covariances, as a study."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array
from bayesmed.study.figures import Figure, figure
from bayesmed.study.published import Moments, Published

SYMMETRIC = 1e-9


def from_moments(
    *, mean: Any, cov: Any = None, corr: Any = None, sd: Any = None, n: Any, decimals: int | None = None
) -> Published:
    """Return what a table of moments tells.

    Parameters
    ----------
    mean : mapping of name → mean, or None
        Of every column; None where the table has none and no product is in a formula.
    cov, corr : DataFrame, nested mapping, or square array in the order of `mean`
        Covariances (divisor n - 1), or correlations with `sd`; of a mapping or frame the lower triangle is enough.
    sd : mapping of name → standard deviation
        With `corr`.
    n : int
        Number of rows.
    decimals : int, optional
        Decimals printed, for all figures; else as many as each figure shows. Text keeps its last zeros.

    Raises
    ------
    ArgumentError
        Naming the argument and the place in it.
    """
    rows = whole("n", n, 5)
    if (cov is None) == (corr is None):
        raise ArgumentError("cov, corr: give one of both: covariances, or correlations together with sd=")
    if (corr is None) != (sd is None):
        raise ArgumentError("sd: standard deviations go with corr=, and corr= needs them")
    names = _names(mean, sd, cov if corr is None else corr)
    means = [] if mean is None else _listed("mean", mean, names, decimals)
    spread = [] if sd is None else _listed("sd", sd, names, decimals)
    for one in spread:
        if one.value <= 0:
            raise ArgumentError(f"{one.name}={one.value:g} must be above zero")
    argument = "cov" if corr is None else "corr"
    matrix = _triangle(argument, cov if corr is None else corr, names, decimals)
    figures = [*means, *spread, *matrix]
    k = len(names)
    places = np.tril_indices(k) if corr is None else np.tril_indices(k, -1)

    def moments_at(theta: Array) -> Moments:
        middle, scale, entries = np.split(theta, [len(means), len(means) + len(spread)])
        square = np.zeros((k, k)) if corr is None else np.eye(k)
        square[places] = entries
        square = square + np.tril(square, -1).T
        if corr is not None:
            square = square * np.outer(scale, scale)
        return Moments(names, middle if means else np.zeros(k), square, rows)

    theta = np.array([one.value for one in figures])
    half = np.array([one.half for one in figures])
    source = {
        "mean": None if mean is None else {name: one.printed for name, one in zip(names, means, strict=True)},
        "sd": None if sd is None else {name: one.printed for name, one in zip(names, spread, strict=True)},
        argument: _nested(names, places, matrix),
        "n": rows,
        "decimals": decimals,
    }
    notes = () if mean is not None else ("The table has no means; they were taken as zero, which effects do not feel.",)
    return Published(source, moments_at(theta), theta, theta, half, lambda t: t, moments_at, (), notes)


def whole(argument: str, value: Any, least: int) -> int:
    """Return a whole number of at least `least`."""
    if isinstance(value, bool) or not isinstance(value, int | np.integer) or value < least:
        raise ArgumentError(f"{argument}={value!r} must be a whole number of at least {least}")
    return int(value)


def _names(mean: Any, sd: Any, matrix: Any) -> tuple[str, ...]:
    """Return the columns, as the first argument that names them does."""
    for argument, given in (("mean", mean), ("sd", sd), ("cov, corr", matrix)):
        if isinstance(given, Mapping | pd.Series):
            names = list(given.keys())
        elif isinstance(given, pd.DataFrame):
            names = list(given.columns)
        else:
            continue
        if len(names) < 3 or not all(isinstance(name, str) for name in names) or len(set(names)) < len(names):
            raise ArgumentError(
                f"{argument}: three columns or more are needed, each with a name of its own, got {names!r}"
            )
        return tuple(names)
    raise ArgumentError("mean: name the columns, as in mean={'treatment': '0.50', 'contacts': '12.3', …}")


def _listed(argument: str, given: Any, names: Sequence[str], decimals: int | None) -> list[Figure]:
    if not isinstance(given, Mapping | pd.Series):
        raise ArgumentError(f"{argument}: expected a dict of name → figure, got {type(given).__name__}")
    _same_names(argument, given.keys(), names)
    return [figure(f"{argument}[{name!r}]", given[name], decimals) for name in names]


def _same_names(argument: str, given: Any, names: Sequence[str]) -> None:
    lacking = [name for name in names if name not in given]
    unknown = [name for name in given if name not in names]
    if lacking or unknown:
        raise ArgumentError(f"{argument}: lacks {lacking!r} and has {unknown!r} beyond the columns {list(names)!r}")


def _triangle(argument: str, given: Any, names: Sequence[str], decimals: int | None) -> list[Figure]:
    """Return the lower triangle row by row, with its diagonal for covariances."""
    diagonal = argument == "cov"
    entry = _entries(argument, given, names)
    found = []
    for i, row in enumerate(names):
        for j, column in enumerate(names[: i + 1]):
            if i == j and not diagonal:
                continue
            below, above = entry(i, j), entry(j, i)
            if below is None and above is None:
                raise ArgumentError(f"{argument}: there is no entry for {row!r} and {column!r}")
            one = figure(f"{argument}[{row!r}][{column!r}]", above if below is None else below, decimals)
            if below is not None and above is not None:
                other = figure(f"{argument}[{column!r}][{row!r}]", above, decimals)
                if abs(one.value - other.value) > SYMMETRIC * max(abs(one.value), abs(other.value), 1e-300):
                    raise ArgumentError(
                        f"{argument} is not symmetric: {row!r} with {column!r} is {one.value:g} and {other.value:g}"
                    )
            if not diagonal and abs(one.value) >= 1:
                raise ArgumentError(f"{one.name}={one.value:g} must lie between -1 and 1, both excluded")
            found.append(one)
    return found


def _entries(argument: str, given: Any, names: Sequence[str]) -> Callable[[int, int], Any]:
    """Return a reader of the entry of two columns, None where there is none."""
    if isinstance(given, pd.DataFrame):
        given = {row: given.loc[row].dropna().to_dict() for row in given.index}
    if isinstance(given, Mapping):
        _same_names(argument, [*given, *(name for name in names if name not in given)], names)
        return lambda i, j: given.get(names[i], {}).get(names[j])
    square = np.asarray(given, dtype=object)
    if square.shape != (len(names), len(names)):
        raise ArgumentError(
            f"{argument}: expected {len(names)} rows and columns in the order {list(names)!r}, got shape {square.shape}"
        )
    return lambda i, j: square[i, j]


def _nested(names: Sequence[str], places: Any, figures: Sequence[Figure]) -> dict[str, dict[str, Any]]:
    nested: dict[str, dict[str, Any]] = {name: {} for name in names}
    for i, j, one in zip(*places, figures, strict=True):
        nested[names[i]][names[j]] = one.printed
    return nested
