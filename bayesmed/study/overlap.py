"""How many rows each exposure value has, and whether both sides of the contrast cover the covariates."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

if TYPE_CHECKING:
    from bayesmed.study.observe import Observed

MOST_ARMS = 10
"""A numeric exposure with more values than this is described by quantiles."""

SMALL_ARM = 10
"""Fewer rows at one side of the contrast are pointed out. Common practice, no source."""

LARGE_DIFFERENCE = 0.25
"""Standardised difference of means above which the arms lean on the formula; the bound in Stuart 2010
(doi:10.1214/09-STS313), quoted from memory."""

SHARE_OUTSIDE = 0.1
"""Share of one arm's rows outside the other's range that is pointed out. Common practice, no source."""

QUANTILES = (0.0, 0.05, 0.25, 0.5, 0.75, 0.95, 1.0)


@dataclass(frozen=True)
class Arms:
    """The exposure in the rows used.

    Attributes
    ----------
    counts : dict of value to int
        Rows at each value; empty for an exposure of many values.
    at_contrast : tuple of two ints
        Rows exactly at x0 and x1.
    quantiles : dict of float to float
        Of an exposure of many values; empty otherwise.
    inside : bool
        True if both contrasted values lie within the values observed.
    """

    counts: dict[Any, int]
    at_contrast: tuple[int, int]
    quantiles: dict[float, float]
    inside: bool

    @property
    def discrete(self) -> bool:
        """True if the exposure has few enough values to be counted one by one."""
        return bool(self.counts)


@dataclass(frozen=True)
class Overlap:
    """One covariate across the two sides of the contrast.

    Attributes
    ----------
    name : str
    missing_levels : dict of side to tuple
        Levels that a side of the contrast lacks and the other has.
    difference : float or None
        Standardised difference of means, x1 less x0, of a numeric covariate.
    outside : dict of side to float
        Share of a side's rows outside the range of the other.
    """

    name: str
    missing_levels: dict[Any, tuple[Any, ...]]
    difference: float | None
    outside: dict[Any, float]

    @property
    def notable(self) -> bool:
        """True if conclusions lean on the formula where one side has no rows."""
        far = self.difference is not None and abs(self.difference) > LARGE_DIFFERENCE
        return bool(self.missing_levels) or far or any(share > SHARE_OUTSIDE for share in self.outside.values())


def arms_of(observed: Observed) -> Arms:
    """Return how the rows used spread over the exposure."""
    column = observed.frame[observed.exposure]
    low, high = observed.contrast
    at = (int((column == low).sum()), int((column == high).sum()))
    numeric = not isinstance(column.dtype, pd.CategoricalDtype) and column.dtype != bool
    inside = not numeric or all(column.min() <= x <= column.max() for x in observed.contrast)
    if numeric and column.nunique() > MOST_ARMS:
        quantiles = np.quantile(column.to_numpy(dtype=float), QUANTILES)
        return Arms({}, at, dict(zip(QUANTILES, quantiles.tolist(), strict=True)), inside)
    counts = column.value_counts(sort=False).sort_index()
    return Arms({_plain(level): int(n) for level, n in counts.items() if n}, at, {}, inside)


def overlap_of(observed: Observed) -> tuple[Overlap, ...]:
    """Return the overlap of every covariate, for an exposure with rows at both sides of the contrast."""
    column = observed.frame[observed.exposure]
    sides = {x: observed.frame[column == x] for x in observed.contrast}
    if min(len(rows) for rows in sides.values()) < 2:
        return ()
    return tuple(_overlap(name, {x: rows[name] for x, rows in sides.items()}) for name in observed.covariates)


def _overlap(name: str, sides: dict[Any, pd.Series[Any]]) -> Overlap:
    (x0, low), (x1, high) = sides.items()
    if isinstance(low.dtype, pd.CategoricalDtype) or low.dtype == bool:
        levels = {x: set(values.unique()) for x, values in sides.items()}
        lacking = {x0: levels[x1] - levels[x0], x1: levels[x0] - levels[x1]}
        missing = {x: tuple(sorted((_plain(v) for v in set_), key=str)) for x, set_ in lacking.items() if set_}
        return Overlap(name, missing, None, {})
    a, b = low.to_numpy(dtype=float), high.to_numpy(dtype=float)
    pooled = np.sqrt((a.var(ddof=1) + b.var(ddof=1)) / 2)
    difference = float((b.mean() - a.mean()) / pooled) if pooled > 0 else None
    outside = {x0: _outside(a, b), x1: _outside(b, a)}
    return Overlap(name, {}, difference, outside)


def _outside(values: np.ndarray[Any, Any], of: np.ndarray[Any, Any]) -> float:
    return float(np.mean((values < of.min()) | (values > of.max())))


def _plain(value: Any) -> Any:
    return value.item() if isinstance(value, np.generic) else value
