"""Contrasts where the outcome equation is not linear in the mediator (squares, splines, logarithms).

Then ``E_e[w_i(x, m + e)]`` is no longer the design at the mean. As a function of row and mediator each column of the
design is a sum of a few products ``g_i f(m)`` (one product, for a term of a formula). The functions f are found from
some rows tabulated on a grid of mediator values, averaged over the normal error by the trapezoidal rule (whose error
falls exponentially for a smooth function times a Gaussian), and read at each draw's mean by a cubic spline; the
g_i come from a few mediator values at all rows, and the factorisation is tested at others.
"""

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from scipy.interpolate import BarycentricInterpolator, CubicSpline
from scipy.linalg import qr

from bayesmed.core.contrasts import Contrasts, chunks
from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array

STEPS_PER_SD = 12
REACH = 6.5
"""Half-width of the error's range, in SDs; the mass left out is below 1e-10."""
SIGMA_NODES = 5
FIRST_SAMPLE = 40
RANK = 1e-11
AGREEMENT = 1e-8
MOST_MEANS = 400_000
"""Row-by-draw means held in memory at once."""


class CurvedRows(Protocol):
    """Rows with moderators set to one point, as the study provides them."""

    @property
    def mediator_low(self) -> Array:
        """Mediator design at the first exposure value, shape (row, mediator_term)."""
        ...

    @property
    def mediator_high(self) -> Array:
        """Mediator design at the second exposure value."""
        ...

    def outcome_rows(self, which: int, mediator: Array, rows: slice = ...) -> Array:
        """Return the outcome design at each mediator value, shape (row, value, outcome_term)."""
        ...


def curved_contrasts(rows: CurvedRows, alpha: Array, gamma: Array, sigma_m: Array, tau: Array) -> Contrasts:
    """Return contrasts at one moderator point, arrays of shape (1, draw).

    Parameters
    ----------
    rows : CurvedRows
    alpha : array, shape (draw, mediator_term)
    gamma : array, shape (draw, outcome_term)
    sigma_m, tau : array, shape (draw,)

    Raises
    ------
    ArgumentError
        If the outcome's terms are not finite somewhere in the mediator's normal range.
    """
    designs = (rows.mediator_low, rows.mediator_high)
    limits = [_range(design, alpha) for design in designs]
    first, last = min(low for low, _ in limits), max(high for _, high in limits)
    reach = REACH * sigma_m.max()
    steps = int(np.ceil((last - first + 2 * reach) / (sigma_m.min() / STEPS_PER_SD)))
    grid = np.linspace(first - reach, last + reach, steps + 1)
    factors = _factors(rows, grid)
    smooth = _Smooth(grid, (first, last), factors.functions, sigma_m)
    expected = [_expected(factors, smooth, design, alpha) for design in designs]

    def outcome(exposure: int, mediator: int) -> Array:
        return np.asarray(np.einsum("sq,sq->s", expected[mediator][exposure], gamma))

    return Contrasts(
        a=(outcome(1, 1) - outcome(1, 0))[None],
        a_pure=(outcome(0, 1) - outcome(0, 0))[None],
        b=((designs[1] - designs[0]).mean(axis=0) @ alpha.T)[None],
        t=(outcome(1, 1) - outcome(0, 0))[None],
        kappa=tau / sigma_m,
    )


@dataclass(frozen=True, eq=False)
class _Factors:
    """Each column of the outcome design as a sum of products of a row's weight and a function of the mediator.

    functions: shape (grid, function); column: the design's column that each function belongs to;
    weights: shape (exposure, row, function).
    """

    functions: Array
    column: np.ndarray
    weights: Array
    columns: int


def _factors(rows: CurvedRows, grid: Array) -> _Factors:
    """Find the factors from a sample of rows, larger until the others agree."""
    count = len(rows.mediator_low)
    size = FIRST_SAMPLE
    while True:
        step = max(1, count // size)
        found = _try_factors(rows, grid, slice(None, None, step))
        if found is not None:
            return found
        if step == 1:
            raise ArgumentError(
                "the outcome formula ties the mediator to other columns in a way that cannot be averaged; write its "
                "terms as products of a function of the mediator and functions of other columns"
            )
        size *= 4


def _try_factors(rows: CurvedRows, grid: Array, sample: slice) -> _Factors | None:
    table = np.concatenate([_finite(rows.outcome_rows(which, grid, sample), grid) for which in (0, 1)])
    functions, column, pivots = [], [], []
    for k in range(table.shape[2]):
        values = table[:, :, k]
        scale = np.abs(values).max()
        if scale == 0:
            continue
        _, singular, basis = np.linalg.svd(values / scale, full_matrices=False)
        rank = int(np.sum(singular > RANK * singular[0]))
        functions.append(basis[:rank].T * scale)
        column += [k] * rank
        pivots.append(qr(basis[:rank], pivoting=True, mode="economic")[2][:rank])
    known = np.unique(np.concatenate(pivots))
    tested = np.unique(np.linspace(0, len(grid) - 1, 5).astype(int))
    used = np.unique(np.concatenate([known, tested]))
    place = {int(g): i for i, g in enumerate(used)}
    all_functions, columns = np.column_stack(functions), np.array(column)
    weights = []
    for which in (0, 1):
        at_used = _finite(rows.outcome_rows(which, grid[used]), grid[used])
        per_column: list[Array] = []
        for basis, pivot in zip(functions, pivots, strict=True):
            k = column[sum(w.shape[1] for w in per_column)]
            values = at_used[:, :, k]
            weight = np.linalg.solve(basis[pivot].T, values[:, [place[int(p)] for p in pivot]].T).T
            if not np.allclose(weight @ basis[used].T, values, rtol=0, atol=AGREEMENT * np.abs(values).max()):
                return None
            per_column.append(weight)
        weights.append(np.column_stack(per_column))
    return _Factors(all_functions, columns, np.stack(weights), table.shape[2])


def _finite(table: Array, grid: Array) -> Array:
    bad = ~np.isfinite(table).all(axis=(0, 2))
    if bad.any():
        raise ArgumentError(
            f"a term of the outcome equation is not finite at a mediator value of {grid[bad][0]:.4g}, which the "
            "mediator's normal model reaches; transform the mediator itself, for example `log(m) ~ …`, and use the "
            "same expression in the outcome formula"
        )
    return table


class _Smooth:
    """Functions of the mediator averaged over its normal error, at any mean and for every draw's SD."""

    def __init__(self, grid: Array, means: tuple[float, float], functions: Array, sigma_m: Array) -> None:
        low, high = sigma_m.min(), sigma_m.max()
        angles = (2 * np.arange(SIGMA_NODES) + 1) * np.pi / (2 * SIGMA_NODES)
        nodes = (low + high) / 2 + (high - low) / 2 * np.cos(angles) if high > low else np.array([low])
        self.across = (
            BarycentricInterpolator(nodes, np.eye(len(nodes)))(sigma_m) if high > low else np.ones((len(sigma_m), 1))
        )
        spacing = grid[1] - grid[0]
        centres = np.linspace(*means, max(8, int(np.ceil((means[1] - means[0]) / spacing)) + 1))
        if means[1] - means[0] < spacing:
            centres = np.linspace(means[0] - 4 * spacing, means[1] + 4 * spacing, 9)
        smoothed = []
        for sigma in nodes:
            weights = np.exp(-0.5 * ((grid - centres[:, None]) / sigma) ** 2)
            smoothed.append((weights / weights.sum(axis=1, keepdims=True)) @ functions)
        self.spline = CubicSpline(centres, np.stack(smoothed, axis=1))

    def __call__(self, means: Array) -> Array:
        """Return expectations at means of shape (row, draw): shape (row, draw, function)."""
        return np.asarray(np.einsum("isnf,sn->isf", self.spline(means), self.across))


def _expected(factors: _Factors, smooth: _Smooth, design: Array, alpha: Array) -> Array:
    """Return ``mean_i E_e[w_i(x, m_i + e)]`` for both exposure values, shape (exposure, draw, outcome_term)."""
    count, draws = len(design), len(alpha)
    total = np.zeros((2, draws, len(factors.column)))
    for piece in chunks(count, max(1, MOST_MEANS // draws)):
        values = smooth(design[piece] @ alpha.T)
        total += np.einsum("xif,isf->xsf", factors.weights[:, piece], values, optimize=True)
    # Functions of the same column are added up.
    return np.asarray(total / count @ (factors.column[:, None] == np.arange(factors.columns)))


def _range(design: Array, alpha: Array) -> tuple[float, float]:
    """Return the smallest and largest mean of the mediator over rows and draws."""
    low, high = np.inf, -np.inf
    for piece in chunks(len(design), max(1, MOST_MEANS // len(alpha))):
        means = design[piece] @ alpha.T
        low, high = min(low, means.min()), max(high, means.max())
    return float(low), float(high)
