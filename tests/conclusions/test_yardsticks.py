"""Yardsticks against simulations with an actual unmeasured cause of the stated strength."""

import numpy as np
import pandas as pd
import pytest

import bayesmed as bm
from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import correlation, odds
from bayesmed.core.strength import Strength

QUIET = {"progressbar": False}
FORMULAS = {"exposure": "x", "mediator": "m ~ x + c + d + site", "outcome": "y ~ m * z + x + c + d + site + z"}


def world(rows, k, seed):
    """Rows with covariates c and d that correlate, and an unmeasured cause with k times the strength of c.

    What c adds to the mediator freed of d has variance 0.7² (1 - 0.4²); U adds k times that, and to the outcome given
    the mediator likewise, in units of what is left unexplained there without U.
    """
    random = np.random.default_rng(seed)
    d = random.normal(size=rows)
    c = 0.4 * d + np.sqrt(1 - 0.16) * random.normal(size=rows)
    u = np.sqrt(1 - 0.16) * random.normal(size=rows)
    x, z = random.integers(0, 2, rows), random.normal(size=rows)
    site = random.choice(["east", "west"], rows)
    m = 0.5 * x + 0.7 * c + 0.3 * d + 0.2 * (site == "west") + np.sqrt(k) * 0.7 * u + random.normal(0, 1, rows)
    structural = 0.4 * m + 0.3 * m * z + 0.2 * x + 0.3 * d + 0.5 * c + 0.1 * z
    y = structural + np.sqrt(k) * 0.5 * u + random.normal(0, 1, rows)
    return pd.DataFrame({"x": x, "m": m, "y": y, "c": c, "d": d, "z": z, "site": site, "u": u})


@pytest.mark.parametrize("k", [0.5, 1.0, 2.0])
def test_an_actual_cause_of_that_strength_leaves_that_rho(k):
    """The truth is the correlation of the structural residuals with U left out; the yardstick sees c alone."""
    data = world(400_000, k, seed=int(10 * k))
    e_m = np.sqrt(k) * 0.7 * data["u"] + _own_noise(data, "m", k)
    e_y = np.sqrt(k) * 0.5 * data["u"] + _own_noise(data, "y", k)
    truth = np.corrcoef(e_m, e_y)[0, 1]
    fit = bm.Study(data, **FORMULAS).fit(method="exact", draws=100, random_seed=1, **QUIET)
    assert np.median(fit.strength_draws("c", k)) == pytest.approx(truth, abs=0.01)
    # The product of the shares that c explains, which takes no account of what U does to its coefficient, is off.
    strengths = _strength(fit)
    naive = np.median(k * strengths.product / np.sqrt((1 + strengths.a_squared) * (1 + strengths.g_squared)))
    assert abs(naive - truth) > 0.02
    assert np.median(fit.strength_draws("c", k)) == pytest.approx(_expected(data, fit, k), abs=0.01)


def _own_noise(data, name, k):
    if name == "m":
        rest = 0.5 * data["x"] + 0.7 * data["c"] + 0.3 * data["d"] + 0.2 * (data["site"] == "west")
        return data["m"] - rest - np.sqrt(k) * 0.7 * data["u"]
    rest = 0.4 * data["m"] + 0.3 * data["m"] * data["z"] + 0.2 * data["x"] + 0.3 * data["d"] + 0.5 * data["c"]
    return data["y"] - rest - 0.1 * data["z"] - np.sqrt(k) * 0.5 * data["u"]


def _freed(values, design):
    values = np.asarray(values, dtype=float)
    return values - design @ np.linalg.lstsq(design, values, rcond=None)[0]


def _strength(fit):
    from bayesmed.conclusions.yardsticks import block_strength

    return block_strength(fit.result, ("c",))


def _expected(data, fit, k):
    """The definition by hand, at least squares: one covariate, s its residual SD given the other terms."""
    s = fit.result.statistics
    others = np.column_stack([np.ones(len(data)), data[["x", "d"]], data["site"] == "west"])
    spread = _freed(data["c"], others).std()
    terms = fit.study.observed
    alpha = s.mediator.coefficients[terms.mediator_terms.index("c")]
    gamma = s.outcome.coefficients[terms.outcome_terms.index("c")]
    a, g = alpha * spread / s.mediator.residual_sd, gamma * spread / s.outcome.residual_sd
    return correlation(k * a * g / (1 - k * a**2))


@pytest.fixture(scope="module")
def fit():
    return bm.Study(world(800, 0.5, seed=1), **FORMULAS).fit(method="exact", random_seed=1, **QUIET)


def test_the_table_and_the_overturning_strengths(fit):
    found = fit.yardsticks(["c", "d"], at={"z": [0.0, 1.0]})
    assert found.table["covariate"].tolist() == ["c"] * 3 + ["d"] * 3
    assert found.table["strength"].tolist() == [0.5, 1, 2] * 2
    ordered = found.table.query("covariate == 'c'")["rho"]
    assert ordered.iloc[:2].is_monotonic_increasing
    assert len(found.overturning) == 4
    assert len(found.sentences) == 4
    assert "times as strong as c" in found.sentences[0]
    # A cause of exactly the overturning strength leaves exactly the tipping correlation.
    strengths, tipping = _strength(fit), fit.tipping(at={"z": 1.0}).draws.to_numpy().ravel()
    needed = strengths.multiple(odds(tipping))
    finite = np.isfinite(needed)
    back = np.array([
        Strength(strengths.a_squared[[i]], strengths.product[[i]], strengths.g_squared[[i]]).rho(needed[i])[0]
        for i in np.flatnonzero(finite)[:50]
    ])  # fmt: skip
    np.testing.assert_allclose(back, tipping[finite][:50], atol=1e-10)


def test_a_block_is_at_least_as_strong_as_its_members_when_they_agree(fit):
    both = fit.yardsticks({"c and d": ["c", "d"]}, strength=[1]).table["rho"].iloc[0]
    assert both > fit.yardsticks("c", strength=[1]).table["rho"].iloc[0]
    assert fit.yardsticks("site", strength=[1]).table["rho"].notna().all()
    assert set(fit.yardsticks().table["covariate"]) == {"c", "d", "site"}


def test_coding_and_units_do_not_matter(fit):
    data = world(800, 0.5, seed=1)
    moved = data.assign(c=data["c"] * 10 + 3, m=data["m"] / 7, y=-data["y"], d=-data["d"])
    other = bm.Study(moved, **FORMULAS).fit(method="exact", random_seed=1, **QUIET)
    ours, theirs = fit.yardsticks("c").table, other.yardsticks("c").table
    np.testing.assert_allclose(theirs["rho"], -ours["rho"], atol=0.01)


def test_a_prior_like_a_measured_covariate(fit):
    prior = bm.SharedCause.like(fit, ["c", "d"], multiple=1)
    draws = fit.strength_draws(["c", "d"], 1)
    assert prior.rho_mean() == pytest.approx(draws.mean(), abs=0.005)
    assert prior.rho_sd() == pytest.approx(draws.std(), rel=0.05)
    either = bm.SharedCause.like(fit, "c", positive=0.7)
    assert float(either.above(0.0)) == pytest.approx(0.7, abs=1e-6)
    assert 0 < fit.summary(rho=prior, at={"z": 1.0})["probability"].iloc[0] < 1
    assert "inflates" in prior.describe(fit)


@pytest.mark.parametrize(
    ("call", "match"),
    [
        (lambda f: f.yardsticks("z"), "m:z"),
        (lambda f: f.yardsticks("x"), "no covariate"),
        (lambda f: f.yardsticks("nothing"), "'nothing'"),
        (lambda f: f.yardsticks({"empty": []}), "at least one"),
        (lambda f: f.yardsticks(strength=[0]), "above 0"),
        (lambda f: f.strength_draws("c", 50), "more than all"),
    ],
)
def test_bad_arguments_give_one_clear_error(fit, call, match):
    with pytest.raises(ArgumentError, match=match):
        call(fit)


def test_a_cause_that_cannot_exist_is_blank(fit):
    assert fit.yardsticks("c", strength=[50]).table[["rho", "lower", "upper"]].isna().all(axis=None)
