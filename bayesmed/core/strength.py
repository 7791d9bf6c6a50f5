"""How strong a measured cause of mediator and outcome is, and the correlation that one k times as strong leaves.

For a block of covariates, with ``f_M`` and ``f_Y`` what it contributes to the mediator equation and to the regression
of the outcome given the mediator, both freed of the other terms of the mediator equation,

    a² = Var(f_M) / sigma_m²,   a g = Cov(f_M, f_Y) / (sigma_m tau),   g² = Var(f_Y) / tau²,

and an unmeasured cause k times as strong leaves ``r_k = k a g / (1 - k a²)``, ``rho_k = r_k / sqrt(1 + r_k²)``,
for ``k a² < 1``: the share of the structural residual variance of the mediator cannot exceed the whole.
"""

from dataclasses import dataclass

import numpy as np

from bayesmed.core.mapping import Array, correlation


@dataclass(frozen=True, eq=False)
class Strength:
    """Strength of a block of covariates in both equations; arrays of shape (draw,)."""

    a_squared: Array
    product: Array
    g_squared: Array

    def rho(self, multiple: float) -> Array:
        """Return the correlation left by a cause `multiple` times as strong.

        Nan where none exists: such a cause would explain more than all of the mediator's residual variance.
        """
        room = 1 - multiple * self.a_squared
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(room > 0, correlation(multiple * self.product / room), np.nan)

    def left_out(self) -> Array:
        """Return the correlation that leaving this block itself out would have left, were rho zero with it."""
        return np.asarray(self.product / np.sqrt((1 + self.a_squared) * (1 + self.g_squared)))

    def multiple(self, r: Array) -> Array:
        """Return how many times as strong a cause must be to leave the odds `r`; infinite where none does."""
        with np.errstate(divide="ignore", invalid="ignore"):
            k = r / (self.product + r * self.a_squared)
        return np.where((np.sign(r) == np.sign(self.product)) & (self.product != 0), k, np.inf)


def strength(
    in_mediator: Array,
    in_outcome: Array,
    others: Array,
    rows: int,
    alpha: Array,
    gamma: Array,
    sigma_m: Array,
    tau: Array,
) -> Strength:
    """Return the strength of a block of covariates, per draw.

    Parameters
    ----------
    in_mediator : array, shape (any, a)
        Columns with the inner products of the block's in the mediator design; there may be none.
    in_outcome : array, shape (any, b)
        The same of its columns in the outcome design.
    others : array, shape (any, c)
        The same of the other columns of the mediator design.
    rows : int
        Number of rows.
    alpha : array, shape (draw, a)
    gamma : array, shape (draw, b)
    sigma_m, tau : array, shape (draw,)
    """
    both = np.column_stack([in_mediator, in_outcome])
    freed = both - others @ np.linalg.lstsq(others, both, rcond=None)[0]
    covariance = freed.T @ freed / rows
    a = in_mediator.shape[1]

    def form(left: Array, matrix: Array, right: Array) -> Array:
        return np.asarray(np.einsum("si,ij,sj->s", left, matrix, right))

    return Strength(
        form(alpha, covariance[:a, :a], alpha) / sigma_m**2,
        form(alpha, covariance[:a, a:], gamma) / (sigma_m * tau),
        form(gamma, covariance[a:, a:], gamma) / tau**2,
    )
