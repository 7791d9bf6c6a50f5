"""The by-hand rival: structural coordinates, compiled once, data and hyperparameters as ``pm.Data``."""

import numpy as np
import nutpie
import pymc as pm
import pytensor.tensor as pt


def compiled_rival(v: np.ndarray, w: np.ndarray, m: np.ndarray, y: np.ndarray):
    """Return the compiled model."""
    return nutpie.compile_pymc_model(rival_model(v, w, m, y))


def rival_model(v: np.ndarray, w: np.ndarray, m: np.ndarray, y: np.ndarray) -> pm.Model:
    """Return the model: rho uniform between two bounds that are data."""
    with pm.Model() as model:
        design_m, design_y = pm.Data("v", v), pm.Data("w", w)
        mediator, outcome = pm.Data("m", m), pm.Data("y", y)
        lower, width = pm.Data("rho_lower", -0.9), pm.Data("rho_width", 1.8)
        alpha = pm.Normal("alpha", 0, 10 * m.std(), shape=v.shape[1])
        beta = pm.Normal("beta", 0, 10 * y.std(), shape=w.shape[1])
        sigma_m, sigma_y = pm.HalfNormal("sigma_m", 5 * m.std()), pm.HalfNormal("sigma_y", 5 * y.std())
        rho = pm.Deterministic("rho", lower + width * pm.Uniform("share", 0, 1))
        mean = pt.dot(design_m, alpha)
        pm.Normal("mediator", mean, sigma_m, observed=mediator)
        shifted = pt.dot(design_y, beta) + rho * sigma_y / sigma_m * (mediator - mean)
        pm.Normal("outcome", shifted, sigma_y * pt.sqrt(1 - rho**2), observed=outcome)
    return model
