"""Rows reduced batch by batch: the same regressions as in one piece, and the digits of NIST's hard cases."""

import numpy as np
import pytest
from scipy.linalg import solve_triangular

from bayesmed.core.regression import reduce_rows, regression_from
from bayesmed.core.row_summary import joined_summary, summarised
from tests.core.nist import problem

NAMES = ("filip", "wampler1", "wampler2", "wampler3", "wampler4", "wampler5")


def digits(found, certified):
    with np.errstate(divide="ignore"):
        return float(np.min(-np.log10(np.abs(found / certified - 1) + 1e-16)))


def in_batches(design, response, size):
    rows = np.column_stack([design, response])
    shift = rows[:size].mean(axis=0)
    summary = joined_summary(summarised(rows[k : k + size], shift) for k in range(0, len(rows), size))
    return regression_from(summary, range(design.shape[1]), design.shape[1])


def by_lapack(design, response):
    """Least squares by QR of centred and scaled columns: what LAPACK gives."""
    means = design[:, 1:].mean(axis=0)
    centred = design[:, 1:] - means
    size = np.linalg.norm(centred, axis=0)
    q, r = np.linalg.qr(centred / size)
    slopes = solve_triangular(r, q.T @ (response - response.mean())) / size
    return np.array([response.mean() - means @ slopes, *slopes])


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize("how", [reduce_rows, lambda d, y: in_batches(d, y, 9)], ids=["one_piece", "batches"])
def test_as_many_digits_as_lapack_on_centred_and_scaled_columns(name, how):
    design, response, certified, sds = problem(name)
    found = how(design, response)
    # Half a digit is the play of rounding between two orders of the same operations.
    assert digits(found.coefficients, certified) >= digits(by_lapack(design, response), certified) - 0.5
    if sds.any():
        assert digits(found.standard_errors, sds) >= 6


def test_batches_give_the_factor_of_one_piece(random):
    rows = random.normal(size=(5000, 4)) @ random.normal(size=(4, 4)) + [0, 1e4, 5, -3]
    whole = reduce_rows(rows[:, :3], rows[:, 3])
    parts = in_batches(rows[:, :3], rows[:, 3], 700)
    for name in ("factor", "centred_factor"):
        a, b = getattr(whole, name), getattr(parts, name)
        np.testing.assert_allclose(a.T @ a, b.T @ b, rtol=1e-10, atol=1e-10 * np.abs(a.T @ a).max())
    assert parts.response_sd == pytest.approx(np.std(rows[:, 3], ddof=1), rel=1e-12)
    # More rows than fit one block take the stacked way.
    stacked = summarised(rows)
    np.testing.assert_allclose(
        stacked.columns([0, 1, 2, 3]).T @ stacked.columns([0, 1, 2, 3]), rows.T @ rows, rtol=1e-9
    )
