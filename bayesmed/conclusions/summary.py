"""The summary table: mean, SD, interval and probability of the claim, by effect and moderator point."""

from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.claim import Claim, as_claim
from bayesmed.conclusions.view import View, beliefs_along_rho, view
from bayesmed.core.errors import ArgumentError
from bayesmed.fit.result import FitResult
from bayesmed.study.points import Points, points

STATISTICS = ("mean", "sd", "lower", "upper", "probability", "mcse")
RHO_GRID = tuple(round(-0.9 + 0.1 * k, 1) for k in range(19))
"""Fixed correlations from -0.9 to 0.9. Common practice, no source."""


def summary(
    result: FitResult, at: Any = None, rho: Any = None, claim: Claim | None = None, ci_prob: float = 0.95
) -> pd.DataFrame:
    """Return the long table of all effects; see ``Fit.summary``."""
    chosen, stated, width = points(result.observed, at), as_claim(claim), checked_width(ci_prob)
    fixed = beliefs_along_rho(rho)
    if fixed is None:
        return table(view(result, chosen, rho), chosen, stated, width)
    return _by_rho(result, chosen, stated, width, fixed)


def rho_grid(
    result: FitResult, rho: Any = None, at: Any = None, claim: Claim | None = None, ci_prob: float = 0.95
) -> pd.DataFrame:
    """Return the table at each of a grid of fixed correlations; see ``Fit.rho_grid``."""
    fixed = list(RHO_GRID) if rho is None else beliefs_along_rho([rho] if np.isscalar(rho) else rho)
    if fixed is None:
        raise ArgumentError(f"rho={rho!r} must be a number or a list of numbers between -1 and 1")
    return _by_rho(result, points(result.observed, at), as_claim(claim), checked_width(ci_prob), fixed)


def table(seen: View, chosen: Points, claim: Claim, ci_prob: float) -> pd.DataFrame:
    """Return the long table of one view: a row per effect and moderator point."""
    return stacked([seen], chosen, claim, ci_prob)


def stacked(views: list[View], chosen: Points, claim: Claim, ci_prob: float) -> pd.DataFrame:
    """Return the long tables of several views under each other: by view, effect and moderator point."""
    tail = (1 - ci_prob) / 2
    names = [seen.contrasts.effects for seen in views]
    found = []
    settled: dict[tuple[int, str], list[Any]] = {}
    for seen, effects in zip(views, names, strict=True):
        for effect in effects:
            # An effect on which rho has no bearing is the same under every belief.
            key = None if seen.depends_on_rho(effect) else (id(seen.contrasts), effect)
            statistics = settled.get(key) if key else None
            if statistics is None:
                statistics = seen.statistics(effect, claim, np.array([tail, 1 - tail]))
            if key:
                settled[key] = statistics
            found.append(statistics)
    blocks = sum(map(len, names))
    columns: dict[str, Any] = {"effect": np.repeat(np.concatenate(names).astype(object), len(chosen.values))}
    columns.update({name: values * blocks for name, values in chosen.columns.items()})
    columns.update(zip(STATISTICS, np.concatenate(found, axis=1), strict=True))
    return pd.DataFrame(columns)


def checked_width(ci_prob: Any) -> float:
    """Return the interval's probability if it lies strictly between 0 and 1."""
    if isinstance(ci_prob, bool) or not isinstance(ci_prob, int | float | np.number) or not 0 < ci_prob < 1:
        raise ArgumentError(f"ci_prob={ci_prob!r} must be a probability between 0 and 1, for example 0.95")
    return float(ci_prob)


def _by_rho(result: FitResult, chosen: Points, claim: Claim, ci_prob: float, fixed: list[float]) -> pd.DataFrame:
    joined = stacked([view(result, chosen, value) for value in fixed], chosen, claim, ci_prob)
    joined.insert(0, "rho", np.repeat(fixed, len(joined) // len(fixed)))
    return joined
