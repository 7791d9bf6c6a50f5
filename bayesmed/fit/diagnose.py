"""Sampler diagnostics: checked after each fit, told only when something is wrong."""

import numpy as np
import pandas as pd

from bayesmed.core.errors import BayesmedError, SamplingWarning, warn
from bayesmed.core.mapping import Array
from bayesmed.fit.result import FitResult
from bayesmed.study.points import points

LARGEST_RHAT = 1.01
LEAST_ESS = 400
TAILS = (0.05, 0.95)
"""Bounds of Vehtari et al. 2021 (doi:10.1214/20-BA1221): rank-normalised r-hat and 100 effective draws a chain."""


def warn_if_wrong(result: FitResult) -> None:
    """Warn with one message that lists every diagnostic outside its bound; say nothing otherwise."""
    complaints = list(complaints_about(result))
    if complaints:
        advice = "Sample longer (draws=, tune=), or look at the audit for near-collinear terms."
        warn(SamplingWarning("; ".join(complaints) + ". " + advice))


def complaints_about(result: FitResult) -> list[str]:
    """Return in words each diagnostic that is outside its bound."""
    if result.independent:
        return []
    complaints = []
    if "sample_stats" in result.tree and "diverging" in result.tree["sample_stats"]:
        divergences = int(np.asarray(result.tree["sample_stats"]["diverging"]).sum())
        if divergences:
            complaints.append(f"{divergences} divergent transitions")
    chains, draws = result.shape
    if chains * draws < LEAST_ESS:
        # So few draws are the user's choice; a bound on their number would only repeat it.
        return complaints
    found = watched(result)
    for label, rhat, bulk, tail in zip(found, *_rank_diagnostics(np.stack(list(found.values()))), strict=True):
        if chains > 1 and rhat > LARGEST_RHAT:
            complaints.append(f"r-hat of {label} is {rhat:.3f} (should be at most {LARGEST_RHAT})")
        if min(bulk, tail) < LEAST_ESS:
            complaints.append(
                f"effective sample size of {label} is {bulk:.0f} in the bulk and {tail:.0f} in the tails "
                f"(should be at least {LEAST_ESS})"
            )
    return complaints


def rank_diagnostics(result: FitResult) -> pd.DataFrame | None:
    """Return r-hat and effective sample sizes of everything watched; None where there is nothing to diagnose.

    Columns: quantity; rhat; bulk and tail, effective sample sizes.
    """
    if result.independent or result.shape[0] < 2 or result.shape[1] < 4 or "group" in result.posterior.dims:
        return None
    found = watched(result)
    rhat, bulk, tail = _rank_diagnostics(np.stack(list(found.values())))
    return pd.DataFrame({"quantity": list(found), "rhat": rhat, "bulk": bulk, "tail": tail})


def watched(result: FitResult) -> dict[str, Array]:
    """Return label → draws of shape (chain, draw): every free parameter, and the effects at default points."""
    posterior = result.posterior
    found: dict[str, Array] = {}
    for name in ("alpha", "gamma", "sigma_m", "tau", "rho"):
        if name not in posterior:
            continue
        values = posterior[name].to_numpy()
        if values.ndim == 2:
            found[name] = values
            continue
        for k, term in enumerate(posterior[posterior[name].dims[-1]].to_numpy()):
            found[f"{name}[{term}]"] = values[..., k]
    try:
        default = points(result.observed, None)
    except BayesmedError:
        # Too many default points is a question for the conclusion, not for the sampler.
        default = points(result.observed, {})
    contrasts = result.contrasts(default)
    rho = result.flat("rho") if "rho" in posterior else np.zeros(contrasts.kappa.shape)
    for name in ("indirect", "direct"):
        for point, value in zip(default.values, contrasts.effect(name, rho), strict=True):
            where = ", ".join(f"{k} = {v}" for k, v in point.items())
            found[f"the {name} effect" + (f" at {where}" if where else "")] = value.reshape(result.shape)
    # A constant, such as a fixed rho, has nothing to diagnose.
    return {label: values for label, values in found.items() if np.ptp(values) > 0}


def _rank_diagnostics(values: Array) -> tuple[Array, Array, Array]:
    """Return rank-normalised r-hat, bulk and tail effective sample sizes of values (quantity, chain, draw)."""
    from arviz_stats.base import array_stats

    axes = {"chain_axis": 1, "draw_axis": 2}
    rhat = array_stats.rhat(values, method="rank", **axes) if values.shape[1] > 1 else np.ones(len(values))
    bulk = array_stats.ess(values, method="bulk", **axes)
    tail = array_stats.ess(values, method="tail", prob=TAILS, **axes)
    return np.asarray(rhat), np.asarray(bulk), np.asarray(tail)
