"""A fit as a frozen value: the study, its draws, the belief they were drawn under, and contrasts of them."""

import dataclasses
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import xarray as xr

from bayesmed.core.contrasts import Contrasts, joined, linear_contrasts
from bayesmed.core.curved import curved_contrasts
from bayesmed.core.mapping import Array
from bayesmed.fit.model import structural_draws
from bayesmed.fit.statistics import Statistics
from bayesmed.priors.coefficient_set import Coefficients
from bayesmed.study.counterfactual import curved_rows, linear_in_mediator, linear_moments
from bayesmed.study.observe import Observed
from bayesmed.study.points import Points


@dataclass(frozen=True)
class Settings:
    """How a fit was made, enough to make it again.

    Attributes
    ----------
    method : str
        "nuts", "exact" or "adopted".
    draws, tune, chains : int
    random_seed : int
    learn : bool
        False where rho was held at its prior although the model informs it.
    """

    method: str
    draws: int
    tune: int
    chains: int
    random_seed: int
    learn: bool = True


@dataclass(frozen=True, eq=False)
class FitResult:
    """Draws of a fit with all that conclusions need.

    Attributes
    ----------
    observed : Observed
    statistics : Statistics
    tree : xarray.DataTree
        Group ``posterior`` holds alpha, gamma, sigma_m, tau, and with a belief rho, beta, sigma_y.
    belief : prior or None
        The belief about rho under which ``posterior`` stands.
    joint : bool
        True where rho was sampled jointly with the rest because the data (or the user's extension) inform it;
        then a new belief needs new draws.
    coefficients : Coefficients
    settings : Settings
    """

    observed: Observed
    statistics: Statistics
    tree: xr.DataTree
    belief: Any
    joint: bool
    coefficients: Coefficients
    settings: Settings
    memory: dict[Any, Any] = field(default_factory=dict, repr=False)

    def replaced(self, **changes: Any) -> "FitResult":
        """Return a copy with some attributes changed, that shares compiled models and nothing else in memory."""
        shared = {"movable": self.memory["movable"]} if "movable" in self.memory else {}
        return dataclasses.replace(self, memory=shared, **changes)

    @property
    def posterior(self) -> xr.Dataset:
        """The posterior group as a Dataset with dims chain, draw, mediator_term, outcome_term."""
        return self.tree["posterior"].to_dataset()

    @property
    def shape(self) -> tuple[int, int]:
        """Chains and draws per chain."""
        sizes = self.tree["posterior"].sizes
        return sizes["chain"], sizes["draw"]

    @property
    def independent(self) -> bool:
        """True if draws are independent, so that Monte Carlo errors need no effective sample size."""
        return self.settings.method == "exact"

    def flat(self, name: str) -> Array:
        """Return draws of a variable with chains joined, shape (draw, ...)."""
        values = self.tree["posterior"][name].to_numpy()
        return np.asarray(values.reshape(-1, *values.shape[2:]))

    @property
    def uniforms(self) -> Array:
        """One number in (0, 1) per draw, shared by every belief so that beliefs differ by nothing else.

        Where the fit has a continuous belief they are the sampled correlations on the belief's own scale, so that
        effects under that belief are the fit's own draws.
        """
        if "uniforms" not in self.memory:
            self.memory["uniforms"] = self._make_uniforms()
        return np.asarray(self.memory["uniforms"])

    def _make_uniforms(self) -> Array:
        if self.belief is not None and not self.joint and not self.belief.atoms():
            own = np.asarray(self.belief.cdf(self.flat("rho")))
            if np.all((own > 0) & (own < 1)):
                return own
        chains, draws = self.shape
        return stratified_uniforms(chains * draws, self.settings.random_seed)

    def contrasts(self, points: Points) -> Contrasts:
        """Return the contrasts (A, B, kappa, T) of every draw at each moderator point; kept for the next call."""
        key = ("contrasts", repr(points.values))
        if key not in self.memory:
            self.memory[key] = self._contrasts(points)
        found: Contrasts = self.memory[key]
        return found

    def _contrasts(self, points: Points) -> Contrasts:
        draws = [self.flat(name) for name in ("alpha", "gamma", "sigma_m", "tau")]
        if linear_in_mediator(self.observed):
            return linear_contrasts(linear_moments(self.observed, points), *draws)
        return joined([curved_contrasts(curved_rows(self.observed, p), *draws) for p in points.values])

    def with_belief(self, belief: Any) -> "FitResult":
        """Return the same draws under another belief; only for fits whose likelihood is silent on rho."""
        base = dataclasses.replace(self, memory={"uniforms": self.uniforms})
        base.memory.update({k: v for k, v in self.memory.items() if k[0] == "contrasts"})
        rho = np.asarray(belief.ppf(base.uniforms)).reshape(self.shape)
        posterior = self.posterior.drop_vars(["rho", "beta", "sigma_y"], errors="ignore")
        tree = self.tree.copy()
        attributes = dict(tree["posterior"].attrs)
        tree["posterior"] = xr.DataTree(with_structural(posterior, self.statistics, rho))
        tree["posterior"].attrs.update(attributes)
        tree.attrs["rho_prior"] = repr(belief)
        return dataclasses.replace(base, tree=tree, belief=belief)


def with_structural(
    posterior: xr.Dataset, statistics: Statistics, rho: Array, dims: tuple[str, ...] = ("chain", "draw")
) -> xr.Dataset:
    """Return the posterior with rho, beta and sigma_y added by the map.

    Parameters
    ----------
    posterior : xarray.Dataset
        Holds alpha, gamma, sigma_m, tau.
    statistics : Statistics
    rho : array
    dims : tuple of str
        Dims of `rho`: chain, draw, and group where each group has its own.
    """
    values = [posterior[name].to_numpy() for name in ("gamma", "alpha", "sigma_m", "tau")]
    beta, sigma_y = structural_draws(statistics, values[0], values[1], values[2], values[3], rho)
    return posterior.assign(
        rho=(dims, rho),
        beta=((*dims, "outcome_term"), beta),
        sigma_y=(dims, sigma_y),
    )


def stratified_uniforms(count: int, random_seed: int) -> Array:
    """Return `count` numbers, one in each of as many equal slices of (0, 1), in random order."""
    random = np.random.default_rng([random_seed, 1])
    return np.asarray((random.permutation(count) + random.random(count)) / count)
