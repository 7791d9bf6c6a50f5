"""Sufficient statistics and exact draws."""

import numpy as np
import pytest
from scipy import stats

from bayesmed.core.regression import exact_draws, reduce_rows


@pytest.fixture
def rows(random):
    design = np.column_stack([np.ones(60), random.normal(50, 2, 60), random.normal(0, 1e4, 60)])
    return design, design @ [1.0, 0.5, 2e-4] + random.normal(0, 1.5, 60)


def test_the_factor_gives_the_residual_sum_of_squares_at_any_coefficients(rows, random):
    design, response = rows
    regression = reduce_rows(design, response)
    theta = random.normal(size=3)
    residual = regression.factor[:, -1] - regression.factor[:, :-1] @ theta
    assert residual @ residual == pytest.approx(np.sum((response - design @ theta) ** 2), rel=1e-12)


def test_the_centred_factor_gives_the_spread_of_fitted_values(rows, random):
    design, response = rows
    theta = random.normal(size=3)
    fitted = design @ theta
    root = reduce_rows(design, response).centred_factor @ theta
    assert root @ root == pytest.approx(np.sum((fitted - fitted.mean()) ** 2), rel=1e-10)


def test_exact_draws_follow_the_student_t_of_theory(rows, random):
    regression = reduce_rows(*rows)
    theta, sigma = exact_draws(regression, 40_000, random)
    df = regression.degrees_of_freedom
    standard = (theta - regression.coefficients) / regression.standard_errors
    for k in range(3):
        assert stats.kstest(standard[:, k], stats.t(df).cdf).pvalue > 0.001
    scaled = regression.residual_sum_of_squares / sigma**2
    assert stats.kstest(scaled, stats.chi2(df).cdf).pvalue > 0.001
    covariance = np.linalg.inv(rows[0].T @ rows[0])
    expected = covariance[0, 1] / np.sqrt(covariance[0, 0] * covariance[1, 1])
    assert np.corrcoef(theta[:, 0], theta[:, 1])[0, 1] == pytest.approx(expected, abs=0.01)
