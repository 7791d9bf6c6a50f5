"""Rounding of published figures carried to an answer."""

from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from bayesmed.core import rounding as core
from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array
from bayesmed.fit.make import fit_study
from bayesmed.study.published import Published, observe_published

if TYPE_CHECKING:
    from bayesmed.front.fit import Fit
    from bayesmed.front.study import Study


def rounding(study: "Study", ask: Callable[["Fit"], Any], *, draws: int, chains: int, random_seed: int) -> pd.DataFrame:
    """Return an answer with the interval that rounding leaves it; see ``Study.rounding``."""
    from bayesmed.front.fit import Fit

    observed = study.observed
    published = observed.published
    if published is None:
        raise ArgumentError("rounding: this study has rows of its own; only published figures are rounded")
    roles: dict[str, Any] = {
        "exposure": observed.exposure,
        "contrast": observed.contrast,
        "mediator": observed.mediator_formula,
        "outcome": observed.outcome_formula,
        "moderators": observed.default_moderators,
    }

    def table(known: Published) -> pd.DataFrame:
        result = fit_study(
            observe_published(known, **roles),
            rho=None,
            method="exact",
            draws=draws,
            tune=0,
            chains=chains,
            random_seed=random_seed,
            coefficients=None,
            learn=True,
            progressbar=False,
        )
        return _table(ask(Fit(result)))

    first = table(published)
    numbers = [name for name in first.columns if pd.api.types.is_numeric_dtype(first[name])]

    def answers(theta: Array) -> Array:
        found = table(published.at(theta))
        if len(found) != len(first):
            raise ArgumentError("ask: its table must keep its rows while the figures move; ask at given values, at={…}")
        return found[numbers].to_numpy(dtype=float).ravel(order="F")

    step, moves = core.steps(published.implied, published.theta, published.half)
    off = (published.implied(published.theta) - published.printed) / published.half
    with np.errstate(invalid="ignore"):
        slopes = core.gradient(answers, published.theta, step)
    finite = np.isfinite(slopes).all(axis=1)
    low, high = core.reach(moves, off, np.where(finite[:, None], slopes, 0.0))
    return _beside(first, numbers, slopes, low, high, observed.covariates)


def _table(answer: Any) -> pd.DataFrame:
    found = getattr(answer, "table", answer)
    if isinstance(found, pd.DataFrame):
        return found.reset_index(drop=True)
    if isinstance(found, int | float | np.number) and not isinstance(found, bool):
        return pd.DataFrame({"answer": [float(found)]})
    raise ArgumentError(f"ask: expected a number, a table, or what has one, got {type(answer).__name__}")


def _beside(
    first: pd.DataFrame, numbers: list[str], slopes: Array, low: Array, high: Array, covariates: tuple[str, ...]
) -> pd.DataFrame:
    """Return the table with two columns beside each that moves."""
    rows = len(first)
    columns: dict[str, Any] = {}
    for name in first.columns:
        columns[name] = first[name]
        if name not in numbers:
            continue
        part = slice(numbers.index(name) * rows, (numbers.index(name) + 1) * rows)
        if not np.any(np.nan_to_num(slopes[part])):
            continue
        if name in covariates:
            raise ArgumentError(
                f"ask: the values of {name!r} are its mean and SDs, which move with the figures; ask at given values"
            )
        columns[f"{name}_from"] = first[name] + low[part]
        columns[f"{name}_to"] = first[name] + high[part]
    return pd.DataFrame(columns)
