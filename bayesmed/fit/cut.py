"""A fit whose belief about rho stays as it is although the model could teach it: the feedback is cut.

The rest of the parameters are fitted at a grid of fixed rho, the belief's own quantiles, and mixed in the belief's
proportions. Every draw keeps the rho of its place in the belief; the other parameters are those of the nearest
grid point, which they hardly tell apart. Source: Plummer 2015, Statistics and Computing 25, 37-43,
doi:10.1007/s11222-014-9503-z.
"""

from typing import Any

import numpy as np
import xarray as xr

from bayesmed.core.mapping import Array
from bayesmed.fit.result import Settings
from bayesmed.priors.point import PointMass

GRID = 32


def cut_draws(sample_fixed: Any, belief: Any, settings: Settings) -> tuple[xr.Dataset, Array]:
    """Return draws of alpha, gamma, sigma_m, tau mixed over the belief, and the rho of each.

    Parameters
    ----------
    sample_fixed : callable
        Takes a PointMass and settings, and returns the tree of a fit at that rho.
    belief : prior
    settings : Settings

    Returns
    -------
    posterior : xarray.Dataset
    rho : array, shape (chain, draw)
    """
    chains, draws = settings.chains, settings.draws
    random = np.random.default_rng([settings.random_seed, 2])
    order = np.argsort(random.random((chains, draws)), axis=1)
    uniforms = (order + random.random((chains, draws))) / draws
    cells = min(GRID, draws)
    place = np.minimum((uniforms * cells).astype(int), cells - 1)
    kept: dict[str, Array] = {}
    like: xr.Dataset | None = None
    for cell in range(cells):
        fixed = PointMass(float(belief.ppf((cell + 0.5) / cells)))
        most = int((place == cell).sum(axis=1).max())
        part = Settings(settings.method, most, settings.tune, chains, settings.random_seed + cell)
        posterior = sample_fixed(fixed, part)["posterior"].to_dataset()
        like = posterior if like is None else like
        for name in ("alpha", "gamma", "sigma_m", "tau"):
            values = posterior[name].to_numpy()
            target = kept.setdefault(name, np.empty((chains, draws, *values.shape[2:])))
            for chain in range(chains):
                chosen = np.flatnonzero(place[chain] == cell)
                target[chain, chosen] = values[chain, : len(chosen)]
    assert like is not None
    terms = {dim: like[dim].to_numpy() for dim in ("mediator_term", "outcome_term")}
    joined = xr.Dataset(
        {name: (like[name].dims, values) for name, values in kept.items()},
        coords={"chain": np.arange(chains), "draw": np.arange(draws), **terms},
    )
    return joined, np.asarray(belief.ppf(uniforms))
