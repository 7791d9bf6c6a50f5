"""Draws: by NUTS from a compiled model, or exact and independent under the reference prior."""

from typing import Any

import numpy as np
import xarray as xr

from bayesmed.core.errors import FitError
from bayesmed.core.regression import exact_draws
from bayesmed.fit.result import Settings
from bayesmed.fit.statistics import Statistics


def compile_model(model: Any) -> Any:
    """Compile a PyMC model for nutpie."""
    import nutpie

    return nutpie.compile_pymc_model(model)


def sample_nuts(compiled: Any, settings: Settings, progressbar: bool) -> xr.DataTree:
    """Sample a compiled model, as many chains as asked, and return the tree."""
    import nutpie

    tree: xr.DataTree = nutpie.sample(
        compiled,
        draws=settings.draws,
        tune=settings.tune,
        chains=settings.chains,
        seed=settings.random_seed,
        progress_bar=progressbar,
        # Nothing looks at them, and building their tables takes as long as those of the draws.
        save_warmup=False,
    )
    posterior = tree["posterior"].to_dataset()
    if "rho" in posterior and posterior["rho"].dims != ("chain", "draw"):
        raise FitError("rho was not sampled as one number per draw; a prior's to_pymc must return a scalar variable")
    if posterior.sizes["draw"] != settings.draws or any(bool(v.isnull().any()) for v in posterior.values()):
        # An interrupted sampler hands over what it has as if nothing had happened.
        raise KeyboardInterrupt
    # What rho was made of is no parameter of the study.
    hidden = [name for name in posterior if str(name).startswith("rho_")]
    if hidden:
        tree["posterior"] = xr.DataTree(posterior.drop_vars(hidden))
    return tree


def sample_exact(
    mediator_terms: tuple[str, ...], outcome_terms: tuple[str, ...], statistics: Statistics, settings: Settings
) -> xr.DataTree:
    """Draw both regressions independently under the reference prior ``∝ 1/sigma²`` of each."""
    random = np.random.default_rng([settings.random_seed, 0])
    chains, draws = settings.chains, settings.draws
    alpha, sigma_m = exact_draws(statistics.mediator, chains * draws, random)
    gamma, tau = exact_draws(statistics.outcome, chains * draws, random)
    posterior = xr.Dataset(
        {
            "alpha": (("chain", "draw", "mediator_term"), alpha.reshape(chains, draws, -1)),
            "gamma": (("chain", "draw", "outcome_term"), gamma.reshape(chains, draws, -1)),
            "sigma_m": (("chain", "draw"), sigma_m.reshape(chains, draws)),
            "tau": (("chain", "draw"), tau.reshape(chains, draws)),
        },
        coords={
            "chain": np.arange(chains),
            "draw": np.arange(draws),
            "mediator_term": list(mediator_terms),
            "outcome_term": list(outcome_terms),
        },
    )
    return xr.DataTree.from_dict({"posterior": posterior})
