"""Draws of all parameters from the prior alone, to see what it implies for effects."""

import numpy as np

from bayesmed.core.errors import ArgumentError, BeliefNeededError
from bayesmed.core.mapping import Array, confounded_slope, residual_outcome
from bayesmed.core.regression import Regression
from bayesmed.fit.coefficients import SIGMA_LOG_SD, coefficient_prior
from bayesmed.fit.result import FitResult
from bayesmed.priors.coefficient_set import Coefficients


def prior_draws(result: FitResult, draws: int, random_seed: int) -> dict[str, Array]:
    """Return draws of alpha, gamma, sigma_m, tau and rho from the prior, data unseen but for their scale.

    The flat direction of each regression, the mean fitted value, is held at zero: no indirect effect involves it.

    Parameters
    ----------
    result : FitResult
    draws : int
    random_seed : int

    Returns
    -------
    dict of str to array
        First dimension draw.
    """
    if result.settings.method == "exact":
        raise ArgumentError("the reference prior of method='exact' is improper: there is nothing to draw from it")
    if result.belief is None:
        raise BeliefNeededError("the prior of the effect needs a belief about rho; use fit.under(prior)")
    random = np.random.default_rng([random_seed, 3])
    chosen, s = result.coefficients, result.statistics
    terms = result.observed.mediator_terms, result.observed.outcome_terms
    rho = np.asarray(result.belief.draw(draws, random_seed=random))
    sigma_m = _scale(s.mediator, chosen.sigma_mediator, draws, random)
    alpha = _coefficients(s.mediator, terms[0], chosen.mediator, (), draws, random)
    if chosen.scale != "structural":
        tau = _scale(s.outcome, chosen.sigma_outcome, draws, random)
        gamma = _coefficients(s.outcome, terms[1], chosen.outcome, (), draws, random)
        return {"alpha": alpha, "gamma": gamma, "sigma_m": sigma_m, "tau": tau, "rho": rho}
    outer = _scale(s.outcome, chosen.sigma_outcome, draws, random)
    tau = outer if chosen.sigma_outcome is None else np.asarray(residual_outcome(rho, outer))
    gamma = _coefficients(s.outcome, terms[1], {}, tuple(chosen.outcome), draws, random)
    _place_structural(gamma, alpha, sigma_m, tau, rho, result, chosen, random)
    return {"alpha": alpha, "gamma": gamma, "sigma_m": sigma_m, "tau": tau, "rho": rho}


def _place_structural(
    gamma: Array,
    alpha: Array,
    sigma_m: Array,
    tau: Array,
    rho: Array,
    result: FitResult,
    chosen: Coefficients,
    random: np.random.Generator,
) -> None:
    """Fill in gamma where its structural counterpart has the prior."""
    place = result.statistics.alignment
    slope = confounded_slope(rho, sigma_m, tau)
    for name, prior in chosen.outcome.items():
        k = result.observed.outcome_terms.index(name)
        beta = np.asarray(prior.draw(len(rho), random_seed=random))
        gamma[:, k] = beta + slope * (place.mediator[k] - alpha @ place.terms[k])


def _scale(regression: Regression, prior: object, draws: int, random: np.random.Generator) -> Array:
    if prior is None:
        return np.asarray(regression.response_sd * np.exp(SIGMA_LOG_SD * random.standard_normal(draws)))
    return np.asarray(prior.draw(draws, random_seed=random))  # type: ignore[attr-defined]


def _coefficients(
    regression: Regression,
    terms: tuple[str, ...],
    explicit: object,
    elsewhere: tuple[str, ...],
    draws: int,
    random: np.random.Generator,
) -> Array:
    prior = coefficient_prior(regression, terms, explicit, elsewhere)  # type: ignore[arg-type]
    # The pseudo-inverse of the root leaves the flat direction at zero.
    inverse = np.linalg.pinv(prior.root, rcond=1e-12)
    theta = random.standard_normal((draws, len(prior.root))) @ inverse.T
    for position, own in prior.explicit:
        theta[:, position] = own.draw(draws, random_seed=random)
    return theta
