"""The tipping correlation in shares of variance against partial-R² formulas of omitted-variable bias.

Cinelli & Hazlett 2020, Journal of the Royal Statistical Society B 82, 39-67 (doi:10.1111/rssb.12348): an omitted U
moves the estimate by ``se sqrt(df) sqrt(R²_{Y~U|D,X} R²_{D~U|X} / (1 - R²_{D~U|X}))``, and a cause with equal shares
brings it to zero at the robustness value ``(sqrt(f⁴ + 4 f²) - f²) / 2``, ``f = |t| / sqrt(df)``. D is the mediator.
"""

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm

import bayesmed as bm
from bayesmed.core.errors import ArgumentError
from bayesmed.core.shares import share_given_mediator, share_needed


@pytest.fixture(scope="module")
def data(simulated):
    return simulated(500, rho=0.3, seed=12, interact=False)


@pytest.fixture(scope="module")
def ols(data):
    design = sm.add_constant(data[["m", "x", "c"]].astype(float))
    return sm.OLS(data["y"], design).fit()


@pytest.fixture(scope="module")
def rho_star(ols):
    t = ols.tvalues["m"]
    return t / np.sqrt(t**2 + ols.df_resid)


def test_the_contour_of_shares_is_that_of_the_published_formula(ols, rho_star):
    r2_mediator = np.linspace(rho_star**2, 0.99, 40)
    given = share_given_mediator(share_needed(rho_star, r2_mediator), r2_mediator)
    bias = ols.bse["m"] * np.sqrt(ols.df_resid * given * r2_mediator / (1 - r2_mediator))
    np.testing.assert_allclose(bias, abs(ols.params["m"]), rtol=1e-10)


def test_equal_shares_are_the_robustness_value(ols, rho_star):
    f = abs(ols.tvalues["m"]) / np.sqrt(ols.df_resid)
    value = (np.sqrt(f**4 + 4 * f**2) - f**2) / 2
    structural = share_needed(rho_star, np.asarray(value))
    np.testing.assert_allclose(share_given_mediator(structural, np.asarray(value)), value, rtol=1e-10)


@pytest.mark.parametrize("r2_mediator", [0.5, 0.7, 0.9])
def test_least_squares_with_such_a_cause_finds_nothing_left(data, ols, rho_star, random, r2_mediator):
    """A column with just these partial R² in the sample, added to the regression, takes the slope to zero."""
    given = float(share_given_mediator(share_needed(rho_star, np.asarray(r2_mediator)), np.asarray(r2_mediator)))
    base = sm.add_constant(data[["x", "c"]].astype(float))
    m_left = sm.OLS(data["m"], base).fit().resid
    y_left = ols.resid
    noise = random.normal(size=len(data))
    noise = sm.OLS(noise, np.column_stack([base, m_left, y_left])).fit().resid
    unit = [column / np.linalg.norm(column) for column in (m_left, y_left, noise)]
    weights = [np.sqrt(r2_mediator), np.sqrt((1 - r2_mediator) * given), np.sqrt((1 - r2_mediator) * (1 - given))]
    u = sum(w * column for w, column in zip(weights, unit, strict=True))
    partial = 1 - sm.OLS(data["m"], base.assign(u=u)).fit().ssr / np.sum(m_left**2)
    assert partial == pytest.approx(r2_mediator)
    full = sm.OLS(data["y"], base.assign(m=data["m"], u=np.sign(rho_star) * u)).fit()
    assert full.params["m"] == pytest.approx(0, abs=1e-10)


def test_the_table_says_what_a_cause_must_explain(data, rho_star):
    study = bm.Study(data, exposure="x", mediator="m ~ x + c", outcome="y ~ m + x + c")
    fit = study.fit(method="exact", draws=1000, random_seed=1, progressbar=False)
    table = fit.tipping(at={}).shares([rho_star**2 / 2, 0.5, 1])
    assert table.loc[0, "r2_outcome"] == np.inf
    assert table.loc[0, "given_mediator"] == np.inf
    assert table.loc[2, "r2_outcome"] == pytest.approx(rho_star**2, abs=0.01)
    assert table.loc[1, "lower"] < 2 * rho_star**2 < table.loc[1, "upper"]
    assert (table["sign"] == np.sign(rho_star)).all()
    assert table.loc[2, "given_mediator"] == 0


@pytest.mark.parametrize("share", [0, -0.1, 1.5, np.nan, True, "half"])
def test_a_share_that_is_none_is_refused(data, share):
    study = bm.Study(pd.DataFrame(data), exposure="x", mediator="m ~ x", outcome="y ~ m + x")
    fit = study.fit(method="exact", draws=50, random_seed=1, progressbar=False)
    with pytest.raises(ArgumentError, match=r"r2_mediator holds .*; shares of variance"):
        fit.tipping(at={}).shares([share])
