"""Whether the residual spread of each regression changes with the exposure or a moderator.

The map between what the data show and what is structural needs ``rho sigma_y / sigma_m`` to be the same for
everyone. Where a spread differs, confounding alone makes interactions, and one rho no longer undoes it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd
from scipy import stats

from bayesmed.core.mapping import Array

if TYPE_CHECKING:
    from bayesmed.study.observe import Observed

SMALL_P = 0.01
NOTABLE_RATIO = 1.1
"""A ratio of SDs nearer to 1 is not pointed out, however small its p. Both: common practice, no source."""

MOST_GROUPS = 10
"""A numeric variable with at most so many values is compared value by value."""


@dataclass(frozen=True)
class Spread:
    """One comparison of residual spread.

    Attributes
    ----------
    equation : str
        "mediator" or "outcome".
    along : str
        The exposure or a moderator.
    test : str
        "Brown–Forsythe" between groups, or "score" along a number.
    ratio : float
        Largest residual SD over the smallest: between groups, or between the upper and lower third.
    p : float
    sds : dict of str to float
        Residual SD by group or third.

    Notes
    -----
    Brown & Forsythe 1974 (doi:10.1080/01621459.1974.10482955): analysis of variance of absolute deviations
    from group medians. Along a number the score test of Breusch & Pagan 1979 (doi:10.2307/1911963) in the
    form of Koenker 1981 (doi:10.1016/0304-4076(81)90062-2), which does not lean on normality.
    """

    equation: str
    along: str
    test: str
    ratio: float
    p: float
    sds: dict[str, float]

    @property
    def notable(self) -> bool:
        """True if the difference is neither small nor easily chance."""
        return self.p < SMALL_P and self.ratio > NOTABLE_RATIO

    def __str__(self) -> str:
        listed = ", ".join(f"{group}: {sd:.3g}" for group, sd in self.sds.items())
        p = "p < 0.001" if self.p < 0.001 else f"p = {self.p:.3f}"
        figures = f"ratio {self.ratio:.2f}; {self.test}, {p}"
        return f"{self.equation} along {self.along}: residual SD {listed} ({figures})"


def residual_spread(observed: Observed) -> tuple[Spread, ...]:
    """Return the comparisons for both regressions along the exposure and every moderator.

    The outcome's residual is that given the mediator. What cannot be compared, such as groups of a single
    row, is left out.
    """
    found = []
    for equation, residual in zip(("mediator", "outcome"), _row_residuals(observed), strict=True):
        for along in (observed.exposure, *(moderator.name for moderator in observed.moderators)):
            spread = compared(equation, residual, observed.frame[along])
            if spread is not None:
                found.append(spread)
    return tuple(found)


def _row_residuals(observed: Observed) -> tuple[Array, Array]:
    """Return the least-squares residuals of both regressions, shape (row,), chunk by chunk."""
    compressed = observed.compressed
    alpha = _least_squares(compressed.mediator_design, compressed.mediator)
    gamma = _least_squares(compressed.outcome_design, compressed.outcome)
    fitted = [(v @ alpha, w @ gamma) for v, w in observed.designs()]
    m, y = (np.concatenate(parts) for parts in zip(*fitted, strict=True))
    return observed.mediator - m, observed.outcome - y


def compared(equation: str, residual: Array, along: pd.Series[Any]) -> Spread | None:
    """Return how the spread of `residual` compares along one variable, or None if it cannot be compared."""
    numeric = not isinstance(along.dtype, pd.CategoricalDtype) and along.dtype != bool
    if numeric and along.nunique() > MOST_GROUPS:
        return _along_number(equation, residual, along)
    grouped = pd.Series(residual).groupby(along.to_numpy(), observed=True)
    groups = {str(level): values.to_numpy() for level, values in grouped if len(values) >= 3}
    sds = {level: float(values.std(ddof=1)) for level, values in groups.items()}
    if len(groups) < 2 or min(sds.values()) == 0:
        return None
    p = float(stats.levene(*groups.values(), center="median").pvalue)
    return _finite(Spread(equation, str(along.name), "Brown–Forsythe", max(sds.values()) / min(sds.values()), p, sds))


def residuals(design: Array, values: Array) -> Array:
    """Return least-squares residuals, whatever the rank of the design."""
    return np.asarray(values - design @ _least_squares(design, values))


def _least_squares(design: Array, values: Array) -> Array:
    size = np.linalg.norm(design, axis=0)
    size[size == 0] = 1.0
    return np.asarray(np.linalg.lstsq(design / size, values, rcond=1e-13)[0] / size)


def _along_number(equation: str, residual: Array, along: pd.Series[Any]) -> Spread | None:
    number = along.to_numpy(dtype=float)
    squares = residual**2
    if np.ptp(squares) == 0:
        return None
    # n R² of the regression of squared residuals on the number.
    statistic = len(number) * np.corrcoef(squares, number)[0, 1] ** 2
    lower, upper = np.quantile(number, (1 / 3, 2 / 3))
    thirds = {"lower third": residual[number <= lower], "upper third": residual[number >= upper]}
    sds = {name: float(np.sqrt(np.mean(values**2))) for name, values in thirds.items()}
    if min(sds.values()) == 0:
        return None
    ratio = max(sds.values()) / min(sds.values())
    return _finite(Spread(equation, str(along.name), "score", ratio, float(stats.chi2.sf(statistic, 1)), sds))


def _finite(spread: Spread) -> Spread | None:
    return spread if np.isfinite([spread.ratio, spread.p]).all() else None
