"""Draws of the effects at moderator points under a belief, as a labelled Dataset."""

from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from bayesmed.conclusions.view import beliefs_along_rho, effect_names, view_by_draw
from bayesmed.fit.result import FitResult
from bayesmed.study.points import Points, points

DESCRIPTIONS = {
    "indirect": "total natural indirect effect: through the mediator, exposure held at its second value",
    "direct": "pure natural direct effect: total less indirect",
    "total": "total effect of the contrast",
    "pure_indirect": "pure natural indirect effect: through the mediator, exposure held at its first value",
    "total_direct": "total natural direct effect: total less pure indirect",
}


def effects(result: FitResult, at: Any = None, rho: Any = None) -> xr.Dataset:
    """Return posterior draws of each effect; see ``Fit.effects``."""
    chosen = points(result.observed, at)
    fixed = beliefs_along_rho(rho)
    if fixed is None:
        dataset = _one(result, chosen, rho)
    else:
        parts = [_one(result, chosen, value) for value in fixed]
        dataset = xr.concat(parts, pd.Index(fixed, name="rho")).transpose("chain", "draw", "rho", ...)
    for name, variable in dataset.data_vars.items():
        variable.attrs.update(long_name=DESCRIPTIONS[str(name)], units=f"units of {result.observed.outcome_name}")
    exposure, (low, high) = result.observed.exposure, result.observed.contrast
    dataset.attrs["contrast"] = f"{exposure}: {low} → {high}"
    return dataset


def _one(result: FitResult, chosen: Points, rho: Any) -> xr.Dataset:
    seen = view_by_draw(result, chosen, rho)
    chains, draws = result.shape
    dims = ("chain", "draw", *chosen.dims)
    coords: dict[str, Any] = {"chain": np.arange(chains), "draw": np.arange(draws)}
    coords.update({name: list(values) for name, values in chosen.dims.items()})
    coords.update(chosen.scalars)
    shape = (*chosen.shape, chains, draws)
    variables = {}
    for name in effect_names(seen.contrasts):
        values = seen.draws(name).reshape(shape)
        variables[name] = (dims, np.moveaxis(values, (-2, -1), (0, 1)))
    return xr.Dataset(variables, coords=coords)
