"""Sufficient statistics of a normal regression, and exact draws under the reference prior.

With ``R`` the triangular factor of ``[D y]``, the residual sum of squares at any coefficients is
``|R[:, -1] - R[:, :-1] theta|²``: a likelihood whose cost does not depend on the number of rows.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.linalg import solve_triangular

from bayesmed.core.mapping import Array
from bayesmed.core.row_summary import RowSummary, summarised


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
    centred_solution : array, shape (term,), or None
        Least-squares coefficients found on centred columns, where D holds a constant; they keep more digits.
    """

    factor: Array
    centred_factor: Array
    response_sd: float
    rows: int
    centred_solution: Array | None = None

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
        if self.centred_solution is not None:
            return self.centred_solution
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
    summary = summarised(np.column_stack([design, response]))
    terms = design.shape[1]
    return regression_from(summary, range(terms), terms)


def regression_from(summary: RowSummary, terms: Sequence[int], response: int) -> Regression:
    """Return the regression of one column of summarised rows on others.

    Parameters
    ----------
    summary : RowSummary
    terms : sequence of int
        The design's columns.
    response : int
        The response's column.
    """
    chosen = list(terms)
    factor = _triangle(summary.columns([*chosen, response]), len(chosen) + 1)
    centred = summary.centred(chosen)
    own = summary.centred([response])[:, 0]
    sd = float(np.linalg.norm(own) / np.sqrt(max(summary.rows - 1, 1)))
    solution = _centred_solution(summary, chosen, response)
    return Regression(factor, _triangle(centred, len(chosen)), sd, summary.rows, solution)


def _centred_solution(summary: RowSummary, chosen: list[int], response: int) -> Array | None:
    """Return the coefficients found on centred, scaled columns, if one column is constant and the others are not."""
    means, centred = summary.means(chosen), summary.centred(chosen)
    size = np.linalg.norm(centred, axis=0)
    constant = np.flatnonzero(size <= 1e-14 * np.abs(means) * np.sqrt(summary.rows))
    if len(constant) != 1 or summary.rows <= len(chosen):
        return None
    others = np.setdiff1d(np.arange(len(chosen)), constant)
    triangle = np.linalg.qr(
        np.column_stack([centred[:, others] / size[others], summary.centred([response])[:, 0]]), mode="r"
    )
    p = len(others)
    if p and np.abs(np.diag(triangle)[:p]).min() == 0:
        return None
    solution = np.zeros(len(chosen))
    solution[others] = solve_triangular(triangle[:p, :p], triangle[:p, p]) / size[others] if p else 0.0
    level = summary.means([response])[0] - means[others] @ solution[others]
    solution[constant] = level / means[constant]
    return solution


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
