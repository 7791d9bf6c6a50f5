"""One compiled model for every study that the default model fits, whatever its data and its number of terms.

Compiling is most of what a fit costs, and the smaller a model, the sooner it is compiled. The model of
:func:`~bayesmed.fit.model.build_model` without a belief is quadratic in the coefficients: with both coefficient vectors
in whitened coordinates z, side by side, its log density is

    -½ Σ_k w_k (target - matrix z)_k² - Σ_e n_e log σ_e - ½ Σ_e ((log σ_e - log s_e) / 2)²

where w is 1 in the rows of the default prior and 1/σ_e² in the rows of the data of equation e. Target, matrix, n and
log s are data of the compiled model. Vectors are filled up to a multiple of eight with terms that touch no row and have
a standard normal density of their own, so that a study of another shape takes the compiled model as it is.
"""

from functools import lru_cache
from typing import Any

import numpy as np
import xarray as xr
from scipy.linalg import block_diag

from bayesmed.core.mapping import Array
from bayesmed.fit.coefficients import SIGMA_LOG_SD, CoefficientPrior, coefficient_prior
from bayesmed.fit.result import Settings
from bayesmed.fit.sample import compile_model, sample_nuts
from bayesmed.fit.statistics import Statistics
from bayesmed.priors.coefficient_set import Coefficients

MULTIPLE = 8


def shares_a_model(coefficients: Coefficients) -> bool:
    """True if a study with these coefficient priors is one of those that share a compiled model."""
    return coefficients == Coefficients()


def sample_shared(
    statistics: Statistics,
    mediator_terms: tuple[str, ...],
    outcome_terms: tuple[str, ...],
    settings: Settings,
    progressbar: bool,
) -> xr.DataTree:
    """Sample the default model of a study, and return the tree as its own model would name it."""
    size = padded(max(len(mediator_terms), len(outcome_terms)))
    priors = default_priors(statistics, mediator_terms, outcome_terms)
    tree = sample_nuts(_compiled(size).with_data(**model_data(statistics, priors, size)), settings, progressbar)
    tree["posterior"] = xr.DataTree(_named(tree, priors, mediator_terms, outcome_terms))
    for warmup in [name for name in tree.children if name.startswith("warmup")]:
        # In coordinates that mean nothing to a reader.
        del tree[warmup]
    return tree


def padded(terms: int) -> int:
    """Return the number of terms, real and inert, of the shared model that takes `terms` of them."""
    return -(-terms // MULTIPLE) * MULTIPLE


def default_priors(
    statistics: Statistics, mediator_terms: tuple[str, ...], outcome_terms: tuple[str, ...]
) -> tuple[CoefficientPrior, CoefficientPrior]:
    """Return the default coefficient priors of both equations."""
    return (
        coefficient_prior(statistics.mediator, mediator_terms, {}),
        coefficient_prior(statistics.outcome, outcome_terms, {}),
    )


def model_data(
    statistics: Statistics, priors: tuple[CoefficientPrior, CoefficientPrior], size: int
) -> dict[str, Array]:
    """Return a study as the data of the shared model of `size` terms an equation."""
    equations = (statistics.mediator, statistics.outcome)
    prior_rows, data_rows, prior_targets, data_targets = [], [], [], []
    for regression, prior in zip(equations, priors, strict=True):
        p = regression.terms
        from_prior, from_data = np.eye(size), np.zeros((size + 1, size))
        from_prior[:p, :p] = 0.0
        from_prior[: len(prior.root), :p] = prior.root @ prior.unwhiten
        from_data[: p + 1, :p] = regression.factor[:, :-1] @ prior.unwhiten
        prior_rows.append(from_prior)
        data_rows.append(from_data)
        prior_targets.append(_filled(-prior.root @ prior.centre, size))
        data_targets.append(_filled(regression.factor[:, -1] - regression.factor[:, :-1] @ prior.centre, size + 1))
    return {
        "matrix": np.vstack([block_diag(*prior_rows), block_diag(*data_rows)]),
        "target": np.concatenate([*prior_targets, *data_targets]),
        "rows": np.array([float(one.rows) for one in equations]),
        "log_sd": np.array([np.log(one.response_sd) for one in equations]),
    }


def shared_model(data: dict[str, Array], size: int) -> Any:
    """Return the shared model with a study in it; free variables ``z`` and ``log_sigma``."""
    import pymc as pm
    import pytensor.tensor as pt

    of_prior = np.repeat([1.0, 0.0], [2 * size, 2 * (size + 1)])
    of_data = np.vstack([np.zeros((2 * size, 2)), np.repeat(np.eye(2), size + 1, axis=0)])
    with pm.Model() as model:
        held = {name: pm.Data(name, value) for name, value in data.items()}
        z = pm.Flat("z", shape=2 * size, initval=np.zeros(2 * size))
        log_sigma = pm.Flat("log_sigma", shape=2, initval=np.zeros(2))
        residual = held["target"] - pt.dot(held["matrix"], z)
        weight = of_prior + pt.dot(of_data, pt.exp(-2 * log_sigma))
        spread = ((log_sigma - held["log_sd"]) / SIGMA_LOG_SD) ** 2
        density = pt.sum(weight * residual**2) / 2 + pt.sum(held["rows"] * log_sigma + spread / 2)
        pm.Potential("density", -density)
    return model


@lru_cache(maxsize=8)
def _compiled(size: int) -> Any:
    """Return the shared model compiled, with data of no study in it."""
    count = 2 * size + 2 * (size + 1)
    blank = {
        "matrix": np.eye(count, 2 * size),
        "target": np.ones(count),
        "rows": np.ones(2),
        "log_sd": np.zeros(2),
    }
    return compile_model(shared_model(blank, size))


def _named(
    tree: xr.DataTree,
    priors: tuple[CoefficientPrior, CoefficientPrior],
    mediator_terms: tuple[str, ...],
    outcome_terms: tuple[str, ...],
) -> xr.Dataset:
    """Return the posterior in the study's own terms."""
    posterior = tree["posterior"].to_dataset()
    z, sigma = posterior["z"].to_numpy(), np.exp(posterior["log_sigma"].to_numpy())
    halves = np.split(z, 2, axis=-1)
    named = xr.Dataset(coords={dim: posterior[dim] for dim in ("chain", "draw")}, attrs=posterior.attrs)
    for place, (name, dim, terms, spread) in enumerate(
        (("alpha", "mediator_term", mediator_terms, "sigma_m"), ("gamma", "outcome_term", outcome_terms, "tau"))
    ):
        prior = priors[place]
        values = prior.centre + halves[place][..., : len(terms)] @ prior.unwhiten.T
        named = named.assign_coords({dim: list(terms)})
        named[name] = (("chain", "draw", dim), values)
        named[spread] = (("chain", "draw"), sigma[..., place])
    return named


def _filled(values: Array, size: int) -> Array:
    return np.append(values, np.zeros(size - len(values)))
