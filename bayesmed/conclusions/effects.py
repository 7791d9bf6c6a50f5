"""Draws of the effects at moderator points under a belief, as a labelled Dataset."""

from typing import Any

import pandas as pd
import xarray as xr

from bayesmed.conclusions.labelled import labelled
from bayesmed.conclusions.view import beliefs_along_rho, view_by_draw
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
    names = seen.contrasts.effects
    return xr.Dataset({name: labelled(seen.draws(name), chosen, result.shape) for name in names})
