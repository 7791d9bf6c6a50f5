"""One compiled model for every study that the default model fits, whatever its data and its number of terms.

Compiling is most of what a fit costs, and the smaller a model, the sooner it is compiled. Given the residual SD, the
coefficients of a regression with the default prior are normal, so they need no sampler: the compiled model holds the
two residual SDs alone, coefficients integrated out, and each draw of an SD gets its draw of coefficients after.

Take the posterior mode of an equation's p coefficients at the estimated residual SD s as the origin, and directions z
in which the posterior at s is standard normal. The default prior is a multiple of the data's centred cross product, so
in r of the directions its share of that precision is one number b, and in the others (the mean fitted value) it is
none. With g the slope of the prior at the origin, S the sum of squared residuals there over s², w = (s / σ)² and
d = w (1 - b) + b,

    log p(σ | data) = -n log σ - ½ w S + ½ (w - 1)² |g|² / d - ½ r log d - ½ (p - r) log w - ½ ((log σ - log s_y) / 2)²
    z_k | σ, data  ~  Normal((w - 1) g_k / d, 1 / d),  or Normal(0, 1 / w) where the prior is flat,

up to a constant, with n the number of rows and s_y the SD of the response.
"""

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
import xarray as xr
from scipy.linalg import solve_triangular

from bayesmed.core.mapping import Array
from bayesmed.core.regression import Regression
from bayesmed.fit.coefficients import SIGMA_LOG_SD, coefficient_prior
from bayesmed.fit.result import Settings
from bayesmed.fit.sample import compile_model, sample_nuts
from bayesmed.fit.statistics import Statistics
from bayesmed.priors.coefficient_set import Coefficients


@dataclass(frozen=True, eq=False)
class Collapsed:
    """One regression under the default prior, its coefficients integrated out.

    Attributes
    ----------
    centre, turn : array, shape (term,) and (term, term)
        Coefficients are ``centre + turn z``.
    touched : int
        r, how many of z, the first ones, the prior has a say in.
    share : float
        b, the prior's share of their posterior precision at s.
    pull : array, shape (term,)
        g, zero beyond the first r.
    rows, squares, log_sd, log_response_sd : float
        n, S, log s and log s_y.
    unit : float
        About the posterior SD of log σ.
    """

    centre: Array
    turn: Array
    touched: int
    share: float
    pull: Array
    rows: float
    squares: float
    log_sd: float
    log_response_sd: float
    unit: float

    def conditional(self, sigma: Array) -> tuple[Array, Array]:
        """Return mean and precision of each z given residual SDs of shape (draw,), both of shape (draw, term)."""
        w = np.exp(2 * (self.log_sd - np.log(sigma)))[..., None]
        share = np.where(np.arange(len(self.centre)) < self.touched, self.share, 0.0)
        precision = w * (1 - share) + share
        return (w - 1) * self.pull / precision, precision

    def coefficients(self, sigma: Array, random: np.random.Generator) -> Array:
        """Return a draw of the coefficients for each residual SD, shape (draw, term)."""
        mean, precision = self.conditional(sigma)
        z = mean + random.standard_normal(mean.shape) / np.sqrt(precision)
        return np.asarray(self.centre + z @ self.turn.T)

    @property
    def numbers(self) -> tuple[float, ...]:
        """What the compiled model is given of the equation: its slope in -log(σ / s), S, |g|², r, b and the unit."""
        beyond = self.log_sd - self.log_response_sd
        slope = self.rows - (len(self.centre) - self.touched) + beyond / SIGMA_LOG_SD**2
        return slope, self.squares, float(self.pull @ self.pull), self.touched, self.share, self.unit


def collapsed(regression: Regression, terms: tuple[str, ...]) -> Collapsed:
    """Return a regression under the default prior with its coefficients integrated out."""
    prior = coefficient_prior(regression, terms, {})
    unwhiten = prior.unwhiten
    _, values, turned = np.linalg.svd(prior.root @ unwhiten)
    # Each is the root of b or zero, and b is far from zero next to rounding.
    touched = int(np.sum(values > values.max(initial=0.0) / 2))
    turn = unwhiten @ turned.T
    pull = turn.T @ (prior.root.T @ (prior.root @ prior.centre))
    pull[touched:] = 0.0
    s = regression.residual_sd
    residuals = regression.factor[:, -1] - regression.factor[:, :-1] @ prior.centre
    return Collapsed(
        centre=prior.centre,
        turn=turn,
        touched=touched,
        share=float(np.mean(values[:touched] ** 2)) if touched else 0.0,
        pull=pull,
        rows=float(regression.rows),
        squares=float(residuals @ residuals) / s**2,
        log_sd=float(np.log(s)),
        log_response_sd=float(np.log(regression.response_sd)),
        unit=float(1 / np.sqrt(2 * regression.degrees_of_freedom)),
    )


def shares_a_model(statistics: Statistics, coefficients: Coefficients) -> bool:
    """True if a study is one of those that share a compiled model: default priors, and a constant in both equations.

    Without a constant the default prior, whose fitted values are centred, is no multiple of what the data say.
    """
    if coefficients != Coefficients():
        return False
    return all(_has_constant(each) for each in (statistics.mediator, statistics.outcome))


def sample_shared(
    statistics: Statistics,
    mediator_terms: tuple[str, ...],
    outcome_terms: tuple[str, ...],
    settings: Settings,
    progressbar: bool,
) -> xr.DataTree:
    """Sample the default model of a study, and return the tree as its own model would name it."""
    equations = collapsed(statistics.mediator, mediator_terms), collapsed(statistics.outcome, outcome_terms)
    tree = sample_nuts(_compiled().with_data(**model_data(equations)), settings, progressbar)
    posterior = tree["posterior"].to_dataset()
    random = np.random.default_rng([settings.random_seed, 1])
    named = xr.Dataset(coords={dim: posterior[dim] for dim in ("chain", "draw")}, attrs=posterior.attrs)
    names = (("alpha", "mediator_term", mediator_terms, "sigma_m"), ("gamma", "outcome_term", outcome_terms, "tau"))
    for place, (equation, (name, dim, terms, spread)) in enumerate(zip(equations, names, strict=True)):
        x = posterior["x"].to_numpy()[..., place]
        sigma = np.exp(equation.log_sd + equation.unit * x)
        values = equation.coefficients(sigma.ravel(), random).reshape(*sigma.shape, len(terms))
        named = named.assign_coords({dim: list(terms)})
        named[name] = (("chain", "draw", dim), values)
        named[spread] = (("chain", "draw"), sigma)
    tree["posterior"] = xr.DataTree(named)
    return tree


def model_data(equations: tuple[Collapsed, Collapsed]) -> dict[str, Array]:
    """Return a study as the data of the shared model, shape (number, equation)."""
    return {"equations": np.array([one.numbers for one in equations]).T}


def shared_model(data: dict[str, Array]) -> Any:
    """Return the shared model with a study in it; the free variable ``x`` is ``(log σ - log s) / unit``."""
    import pymc as pm
    import pytensor.tensor as pt

    with pm.Model() as model:
        # One block, as every piece of data by itself takes time to compile.
        held = pm.Data("equations", data["equations"])
        slope, squares, pull, touched, share, unit = (held[k] for k in range(6))
        x = pm.Flat("x", shape=2, initval=np.zeros(2))
        log_ratio = unit * x
        w = pt.exp(-2 * log_ratio)
        precision = w * (1 - share) + share
        of_terms = (w - 1) ** 2 * pull / precision - touched * pt.log(precision)
        spread = (log_ratio / SIGMA_LOG_SD) ** 2
        pm.Potential("density", pt.sum((of_terms - w * squares - spread) / 2 - slope * log_ratio))
    return model


def _has_constant(regression: Regression) -> bool:
    """True if some combination of the columns is the same in all rows, so that centring takes away one direction."""
    factor, centred = regression.factor[:-1, :-1], regression.centred_factor
    values = np.linalg.svd(solve_triangular(factor, centred.T, trans="T"), compute_uv=False)
    return bool(values[-1] < 1e-6)


@lru_cache(maxsize=1)
def _compiled() -> Any:
    """Return the shared model compiled, with data of no study in it."""
    return compile_model(shared_model({"equations": np.ones((6, 2))}))
