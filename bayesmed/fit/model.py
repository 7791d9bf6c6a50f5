"""The PyMC model of a study, in the coordinates that the data identify, the correlation beside them.

What the sampler moves in is an affine change of the coefficients (a PyMC transform), so that the model reads in
the user's terms and still samples as a nearly round normal.
"""

from typing import Any

import numpy as np

from bayesmed.core.mapping import Array, confounded_slope, sigma_outcome, structural_outcome
from bayesmed.core.regression import Regression
from bayesmed.fit.coefficients import SIGMA_LOG_SD, CoefficientPrior, coefficient_prior
from bayesmed.fit.statistics import Statistics, residual_coefficients
from bayesmed.priors.coefficient_set import Coefficients


def build_model(
    statistics: Statistics,
    mediator_terms: tuple[str, ...],
    outcome_terms: tuple[str, ...],
    rho: Any,
    coefficients: Coefficients,
) -> Any:
    """Return the ``pm.Model`` of both regressions from sufficient statistics.

    Priors on the structural scale are densities of ``beta`` and ``sigma_y``; as the free variables are ``gamma`` and
    ``tau``, the Jacobian ``|d sigma_y / d tau| = (1 - rho²)^(-1/2)`` goes with a prior of ``sigma_y``, and that of
    ``beta`` is one.

    Free variables are ``alpha`` (mediator_term), ``sigma_m``, ``gamma`` (outcome_term), ``tau`` and, with a belief,
    ``rho``; then ``beta`` (outcome_term) and ``sigma_y``, the structural parameters, are deterministic. Where the
    likelihood is silent on ``rho`` no likelihood term contains it.

    Parameters
    ----------
    statistics : Statistics
    mediator_terms, outcome_terms : tuple of str
        Names of the coefficients, which become coordinates.
    rho : prior with ``to_pymc``, or None
        None leaves ``rho``, ``beta`` and ``sigma_y`` out.
    coefficients : Coefficients
    """
    import pymc as pm
    import pytensor.tensor as pt

    coords = {"mediator_term": list(mediator_terms), "outcome_term": list(outcome_terms)}
    with pm.Model(coords=coords) as model:
        sigma_m = _scale("sigma_m", statistics.mediator, coefficients.sigma_mediator)
        alpha_prior = coefficient_prior(statistics.mediator, mediator_terms, coefficients.mediator)
        alpha = _coefficients("alpha", alpha_prior, "mediator_term")
        structural = coefficients.scale == "structural"
        if structural and coefficients.sigma_outcome is not None:
            tau = pm.HalfFlat("tau", initval=statistics.outcome.residual_sd)
        else:
            tau = _scale("tau", statistics.outcome, coefficients.sigma_outcome)
        own, elsewhere = ({}, coefficients.outcome) if structural else (coefficients.outcome, {})
        gamma_prior = coefficient_prior(statistics.outcome, outcome_terms, own, elsewhere)
        gamma = _coefficients("gamma", gamma_prior, "outcome_term")
        _rows("mediator_rows", statistics.mediator, alpha, sigma_m)
        if rho is None:
            _rows("outcome_rows", statistics.outcome, gamma, tau)
            return model
        correlation = rho.to_pymc("rho")
        slope = confounded_slope(correlation, sigma_m, tau)
        residual = residual_coefficients(statistics, slope, alpha)
        _rows("outcome_rows", statistics.informed_outcome, pt.concatenate([gamma, *residual]), tau)
        beta = structural_outcome(gamma, alpha, sigma_m, tau, correlation, statistics.alignment)
        pm.Deterministic("beta", beta, dims="outcome_term")
        sigma_y = pm.Deterministic("sigma_y", sigma_outcome(correlation, tau))
        if structural and coefficients.informs_rho:
            density = pt.as_tensor(0.0)
            for name, prior in coefficients.outcome.items():
                density += pm.logp(prior.to_pymc_dist(), beta[outcome_terms.index(name)])
            if coefficients.sigma_outcome is not None:
                density += pm.logp(coefficients.sigma_outcome.to_pymc_dist(), sigma_y)
                density -= 0.5 * pt.log1p(-(correlation**2))
            pm.Potential("structural_prior", density)
    return model


def _scale(name: str, regression: Regression, prior: Any) -> Any:
    """Register a residual SD; by default log-normal around the response's SD, close to the reference prior."""
    import pymc as pm

    if prior is not None:
        return pm.modelcontext(None).register_rv(prior.to_pymc_dist(), name)
    return pm.LogNormal(name, mu=np.log(regression.response_sd), sigma=SIGMA_LOG_SD)


def _coefficients(name: str, prior: CoefficientPrior, dim: str) -> Any:
    """Register a coefficient vector with its prior, sampled in whitened coordinates."""
    import pymc as pm
    import pytensor.tensor as pt

    from bayesmed.fit.whitening import Whitened

    def logp(value: Any, root: Any) -> Any:
        density = -0.5 * pt.sum(pt.dot(root, value) ** 2)
        for position, explicit in prior.explicit:
            density += pm.logp(explicit.to_pymc_dist(), value[position])
        return density

    return pm.CustomDist(
        name,
        prior.root,
        logp=logp,
        signature="(k,p)->(p)",
        transform=Whitened(prior.centre, prior.whiten, prior.unwhiten),
        initval=prior.centre,
        dims=dim,
    )


def _rows(name: str, regression: Regression, coefficients: Any, sigma: Any) -> None:
    """Register the likelihood of a regression's rows through their triangular factor.

    Rotating the rows by the factor's orthogonal part leaves as many numbers as there are coefficients, and one that
    holds the residual sum of squares: their normal density, with n rows in its constant, is that of all rows.
    """
    import pymc as pm
    import pytensor.tensor as pt

    rows = regression.rows

    def logp(value: Any, mean: Any, scale: Any) -> Any:
        constant = -0.5 * rows * np.log(2 * np.pi)
        return constant - rows * pt.log(scale) - 0.5 * pt.sum((value - mean) ** 2) / scale**2

    mean = pt.dot(regression.factor[:, :-1], coefficients)
    pm.CustomDist(name, mean, sigma, logp=logp, signature="(k),()->(k)", observed=regression.factor[:, -1])


def structural_draws(
    statistics: Statistics, gamma: Array, alpha: Array, sigma_m: Array, tau: Array, rho: Array
) -> tuple[Array, Array]:
    """Return draws of ``beta`` and ``sigma_y``, any leading shape."""
    beta = structural_outcome(gamma, alpha, sigma_m, tau, rho, statistics.alignment)
    return beta, np.asarray(sigma_outcome(rho, tau))
