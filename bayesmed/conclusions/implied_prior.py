"""What the priors imply for the indirect effect before any outcome is seen."""

from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.claim import Claim, as_claim
from bayesmed.core.contrasts import linear_contrasts
from bayesmed.core.errors import ArgumentError
from bayesmed.fit.grouped import refuse_grouped
from bayesmed.fit.prior_draws import prior_draws
from bayesmed.fit.result import FitResult
from bayesmed.study.counterfactual import linear_in_mediator, linear_moments
from bayesmed.study.points import points

QUANTILES = {"lower": 0.025, "lower_half": 0.25, "median": 0.5, "upper_half": 0.75, "upper": 0.975}


def implied_prior(result: FitResult, at: Any = None, claim: Claim | None = None, draws: int = 20_000) -> pd.DataFrame:
    """Return quantiles of the indirect effect under the prior alone; see ``Fit.implied_prior``."""
    refuse_grouped(result, "implied_prior")
    stated = as_claim(claim)
    if "indirect" not in stated.effect:
        raise ArgumentError(
            f"claim: the prior of the {stated.effect} effect may involve the level of the mediator, which has a flat "
            "prior; claim an indirect effect"
        )
    if not linear_in_mediator(result.observed):
        raise ArgumentError(
            "the outcome is not linear in the mediator: its effects involve the level of the mediator, whose prior is "
            "flat, so the prior of the effect does not exist"
        )
    chosen = points(result.observed, at)
    p = prior_draws(result, draws, result.settings.random_seed)
    moments = linear_moments(result.observed, chosen)
    values = linear_contrasts(moments, p["alpha"], p["gamma"], p["sigma_m"], p["tau"]).effect(stated.effect, p["rho"])
    found = np.quantile(values, list(QUANTILES.values()), axis=1)
    beyond = values > stated.limit if stated.direction == "above" else values < stated.limit
    probability = beyond.mean(axis=1)
    columns: dict[str, Any] = dict(chosen.columns)
    columns.update(zip(QUANTILES, found, strict=True))
    columns.update(probability=probability, mcse=np.sqrt(probability * (1 - probability) / draws))
    return pd.DataFrame({"effect": stated.effect, **columns})
