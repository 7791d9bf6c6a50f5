"""Sufficient statistics of a normal regression, and exact draws under the reference prior.

With ``R`` the triangular factor of ``[D y]``, the residual sum of squares at any coefficients is
``|R[:, -1] - R[:, :-1] theta|²``: a likelihood whose cost does not depend on the number of rows.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.linalg import solve_triangular

from bayesmed.core.mapping import Array


@dataclass(frozen=True, eq=False)
class Regression:
    """One regression, reduced to what its likelihood and its default prior need.

    Attributes
    ----------
    factor : array, shape (term + 1, term + 1)
        Triangular factor of ``[D y]``.
    centred_factor : array, shape (term, term)
        Triangular factor of D with column means removed.
    response_sd : float
        Standard deviation of y, divisor n - 1.
    rows : int
        Number of rows n.
    """

    factor: Array
    centred_factor: Array
    response_sd: float
    rows: int

    @property
    def terms(self) -> int:
        """Number of coefficients."""
        return int(self.factor.shape[1]) - 1

    @property
    def degrees_of_freedom(self) -> int:
        """Rows less coefficients."""
        return self.rows - self.terms

    @cached_property
    def coefficients(self) -> Array:
        """Least-squares coefficients, shape (term,)."""
        p = self.terms
        return np.asarray(solve_triangular(self.factor[:p, :p], self.factor[:p, p]))

    @property
    def residual_sum_of_squares(self) -> float:
        """Sum of squared least-squares residuals."""
        return float(self.factor[-1, -1] ** 2)

    @property
    def residual_sd(self) -> float:
        """Residual SD with the usual degrees of freedom."""
        return float(np.sqrt(self.residual_sum_of_squares / max(self.degrees_of_freedom, 1)))

    @cached_property
    def standard_errors(self) -> Array:
        """Least-squares standard errors, shape (term,)."""
        p = self.terms
        inverse = solve_triangular(self.factor[:p, :p], np.eye(p))
        return np.asarray(self.residual_sd * np.linalg.norm(inverse, axis=1))


def reduce_rows(design: Array, response: Array) -> Regression:
    """Return the sufficient statistics of regressing `response` on `design`.

    Parameters
    ----------
    design : array, shape (row, term)
    response : array, shape (row,)
    """
    rows, terms = design.shape
    stacked = np.column_stack([design, response])
    factor = _triangle(stacked, terms + 1)
    centred = _triangle(design - design.mean(axis=0), terms)
    return Regression(factor, centred, float(np.std(response, ddof=1)), rows)


def _triangle(matrix: Array, size: int) -> Array:
    """Return the (size, size) triangular factor of `matrix`; columns are scaled first to keep digits."""
    norm = np.linalg.norm(matrix, axis=0)
    norm[norm == 0] = 1.0
    factor = np.linalg.qr(matrix / norm, mode="r") * norm
    if factor.shape[0] < size:
        factor = np.vstack([factor, np.zeros((size - factor.shape[0], factor.shape[1]))])
    return np.asarray(factor)


def exact_draws(regression: Regression, draws: int, random: np.random.Generator) -> tuple[Array, Array]:
    """Draw from the posterior under the reference prior ``p(theta, sigma²) ∝ 1 / sigma²``.

    ``sigma² = SSE / chi²(n - p)`` and ``theta | sigma ~ Normal(theta_hat, sigma² (D'D)⁻¹)``; the marginal of a
    coefficient is Student t with n - p degrees of freedom around least squares.

    Parameters
    ----------
    regression : Regression
    draws : int
    random : numpy.random.Generator

    Returns
    -------
    coefficients : array, shape (draws, term)
    sigma : array, shape (draws,)
    """
    p = regression.terms
    sigma = np.sqrt(regression.residual_sum_of_squares / random.chisquare(regression.degrees_of_freedom, draws))
    noise = solve_triangular(regression.factor[:p, :p], random.standard_normal((p, draws)), overwrite_b=True)
    return regression.coefficients + (noise * sigma).T, sigma
