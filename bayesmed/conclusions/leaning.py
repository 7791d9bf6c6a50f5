"""Whether a conclusion leans on the coefficient priors: power-scaling of prior and likelihood.

Source: Kallioinen, Paananen, Bürkner & Vehtari 2024, Statistics and Computing 34, 57,
doi:10.1007/s11222-023-10366-5, as arviz_stats has it. It says nothing of rho: a flat belief cannot be scaled, and rho
may be wholly prior-driven without it showing here.
"""

from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from bayesmed.conclusions.effects import effects
from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array
from bayesmed.core.regression import Regression
from bayesmed.fit.coefficients import SIGMA_LOG_SD, coefficient_prior
from bayesmed.fit.grouped import refuse_grouped
from bayesmed.fit.result import FitResult

THRESHOLD = 0.05
"""Sensitivity from which a prior is said to matter, of the source."""


def leaning(result: FitResult, at: Any = None, rho: Any = None) -> pd.DataFrame:
    """Return how much each effect moves with the coefficient priors and the likelihood; see ``Fit.leaning``."""
    from arviz_stats import psense_summary

    refuse_grouped(result, "leaning")
    if result.settings.method == "exact" or result.settings.method == "adopted":
        raise ArgumentError(
            f"leaning: a fit by method={result.settings.method!r} has no coefficient prior of this package to scale"
        )
    found = effects(result, at, rho)
    tree = xr.DataTree.from_dict(
        {
            "posterior": found,
            "log_prior": xr.Dataset({"coefficients": (("chain", "draw"), _log_prior(result).reshape(result.shape))}),
            "log_likelihood": xr.Dataset({"rows": (("chain", "draw"), _log_likelihood(result).reshape(result.shape))}),
        }
    )
    sensitivity: pd.DataFrame = psense_summary(tree, threshold=THRESHOLD, round_to=12)
    table = sensitivity.reset_index(names="effect")
    table = table.rename(columns={"prior": "coefficient_priors", "likelihood": "rows"})
    leans = table["coefficient_priors"].astype(float) >= THRESHOLD
    table["leans_on_prior"] = leans
    return table.loc[:, ["effect", "coefficient_priors", "rows", "leans_on_prior"]]


def _log_prior(result: FitResult) -> Array:
    chosen, s, observed = result.coefficients, result.statistics, result.observed
    structural = chosen.scale == "structural"
    total = _coefficients_density(s.mediator, observed.mediator_terms, chosen.mediator, result.flat("alpha"))
    total += _scale_density(chosen.sigma_mediator, s.mediator, result.flat("sigma_m"))
    own, elsewhere = ({}, tuple(chosen.outcome)) if structural else (chosen.outcome, ())
    total += _coefficients_density(s.outcome, observed.outcome_terms, own, result.flat("gamma"), elsewhere)
    if structural and chosen.sigma_outcome is not None:
        rho = result.flat("rho")
        total += chosen.sigma_outcome.logpdf(result.flat("sigma_y")) - 0.5 * np.log1p(-(rho**2))
    else:
        total += _scale_density(chosen.sigma_outcome, s.outcome, result.flat("tau"))
    if structural:
        for name, prior in chosen.outcome.items():
            total += prior.logpdf(result.flat("beta")[:, observed.outcome_terms.index(name)])
    return total


def _coefficients_density(
    regression: Regression, terms: tuple[str, ...], explicit: Any, draws: Array, elsewhere: tuple[str, ...] = ()
) -> Array:
    prior = coefficient_prior(regression, terms, explicit, elsewhere)
    density = -0.5 * np.sum((draws @ prior.root.T) ** 2, axis=1)
    for position, own in prior.explicit:
        density += own.logpdf(draws[:, position])
    return np.asarray(density)


def _scale_density(prior: Any, regression: Regression, draws: Array) -> Array:
    if prior is not None:
        return np.asarray(prior.logpdf(draws))
    log = np.log(draws)
    return np.asarray(-0.5 * ((log - np.log(regression.response_sd)) / SIGMA_LOG_SD) ** 2 - log)


def _log_likelihood(result: FitResult) -> Array:
    from bayesmed.core.mapping import confounded_slope
    from bayesmed.fit.statistics import residual_coefficients

    s = result.statistics
    alpha, gamma, sigma_m, tau = (result.flat(name) for name in ("alpha", "gamma", "sigma_m", "tau"))
    total = _rows_density(s.mediator, alpha, sigma_m)
    if s.informed:
        slope = confounded_slope(result.flat("rho"), sigma_m, tau)
        extra = [np.concatenate(residual_coefficients(s, k, a)) for k, a in zip(slope, alpha, strict=True)]
        gamma = np.column_stack([gamma, np.stack(extra)])
    return total + _rows_density(s.informed_outcome, gamma, tau)


def _rows_density(regression: Regression, coefficients: Array, sigma: Array) -> Array:
    residual = regression.factor[:, -1] - coefficients @ regression.factor[:, :-1].T
    return np.asarray(-regression.rows * np.log(sigma) - 0.5 * np.sum(residual**2, axis=1) / sigma**2)
