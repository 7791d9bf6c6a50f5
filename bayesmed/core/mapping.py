"""The map between what the data identify and the structural parameters, for a given residual correlation.

The two structural equations are ``M = v'alpha + e_M`` and ``Y = w'beta + e_Y`` with error SDs
``sigma_m``, ``sigma_y`` and residual correlation ``rho``. The data determine ``alpha``, ``sigma_m`` and the
regression of Y given M, ``Y | M, w ~ Normal(w'gamma, tau²)``. With ``r = rho / sqrt(1 - rho²)`` and
``slope = r * tau / sigma_m`` the two are tied by

    beta = gamma - slope * (u - L alpha),      sigma_y = tau / sqrt(1 - rho²),

where ``W u = M`` and ``W L = V``. The formulas stand only here. They use operators alone, so that the same
functions serve numpy arrays of draws and PyTensor variables.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

INFORMING_RESIDUAL = 1e-8
"""A column whose relative residual off the outcome design exceeds this informs the residual correlation."""


def odds(rho: Any) -> Any:
    """Return ``r = rho / sqrt(1 - rho²)``, the scale on which effects are linear in the correlation."""
    return rho / (1.0 - rho**2) ** 0.5


def correlation(r: Any) -> Any:
    """Return the correlation whose odds are `r`; the inverse of :func:`odds`."""
    return r / (1.0 + r**2) ** 0.5


def confounded_slope(rho: Any, sigma_m: Any, tau: Any) -> Any:
    """Return how much of the regression slope of M unmeasured causes account for, ``r tau / sigma_m``."""
    return odds(rho) * tau / sigma_m


def sigma_outcome(rho: Any, tau: Any) -> Any:
    """Return the structural SD of the outcome's error, ``tau / sqrt(1 - rho²)``."""
    return tau / (1.0 - rho**2) ** 0.5


def residual_outcome(rho: Any, sigma_y: Any) -> Any:
    """Return ``tau``, the SD of the outcome given the mediator; the inverse of :func:`sigma_outcome`."""
    return sigma_y * (1.0 - rho**2) ** 0.5


def structural_outcome(gamma: Any, alpha: Any, sigma_m: Any, tau: Any, rho: Any, alignment: "Alignment") -> Any:
    """Return ``beta``, the structural outcome coefficients.

    Parameters
    ----------
    gamma : array, shape (..., outcome_term)
        Coefficients of the regression of Y given M.
    alpha : array, shape (..., mediator_term)
        Coefficients of the mediator equation.
    sigma_m, tau, rho : array, shape (...)
        Residual SDs of the two regressions and the residual correlation.
    alignment : Alignment
        Where the mediator and the mediator's terms stand in the outcome design.

    Returns
    -------
    array, shape (..., outcome_term)
    """
    slope = confounded_slope(rho, sigma_m, tau)
    return gamma - slope[..., None] * (alignment.mediator - alpha @ alignment.terms.T)


def identified_outcome(beta: Any, alpha: Any, sigma_m: Any, tau: Any, rho: Any, alignment: "Alignment") -> Any:
    """Return ``gamma`` from ``beta``; the inverse of :func:`structural_outcome`, same shapes."""
    return structural_outcome(beta, alpha, sigma_m, tau, -rho, alignment)


@dataclass(frozen=True)
class Alignment:
    """Where M and each mediator term stand in the outcome design, by least squares.

    Attributes
    ----------
    mediator : array, shape (outcome_term,)
        ``u`` with ``W u = M`` where M lies in the span of W.
    terms : array, shape (outcome_term, mediator_term)
        ``L`` with ``W L = V`` where V does.
    mediator_residual : float
        Norm of ``M - W u`` relative to the norm of M.
    term_residuals : array, shape (mediator_term,)
        The same for each column of V.
    """

    mediator: Array
    terms: Array
    mediator_residual: float
    term_residuals: Array

    @property
    def informs(self) -> bool:
        """True if the likelihood carries information on the residual correlation."""
        return self.mediator_residual > INFORMING_RESIDUAL or bool(np.any(self.term_residuals > INFORMING_RESIDUAL))


def align(mediator_design: Array, outcome_design: Array, mediator: Array) -> Alignment:
    """Place M and the columns of V in the span of W.

    Matching by least squares, not by names, copes with any coding of the same space. Columns are brought to
    unit norm first, so that the verdict does not depend on units.

    Parameters
    ----------
    mediator_design : array, shape (row, mediator_term)
    outcome_design : array, shape (row, outcome_term)
    mediator : array, shape (row,)
    """
    targets = np.column_stack([mediator, mediator_design])
    target_norm = np.linalg.norm(targets, axis=0)
    target_norm[target_norm == 0] = 1.0
    design_norm = np.linalg.norm(outcome_design, axis=0)
    design_norm[design_norm == 0] = 1.0
    scaled_design, scaled_targets = outcome_design / design_norm, targets / target_norm
    solution = np.linalg.lstsq(scaled_design, scaled_targets, rcond=None)[0]
    residual = np.linalg.norm(scaled_targets - scaled_design @ solution, axis=0)
    placed = solution * target_norm / design_norm[:, None]
    # Exact zeros and ones are what a reader of u and L expects; rounding noise is not.
    placed[np.abs(solution) < 1e-12] = 0.0
    return Alignment(placed[:, 0], placed[:, 1:], float(residual[0]), residual[1:])
