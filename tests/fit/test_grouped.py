"""A residual correlation that differs between groups: each group as a study of its own, tied by a copula."""

import numpy as np
import pandas as pd
import pytest
from scipy import stats

import bayesmed as bm
from bayesmed.core.errors import ArgumentError, DesignError, PriorError

QUIET = {"progressbar": False}
BELIEF = bm.ByGroup({"low": bm.LKJ(2), "high": bm.TruncatedNormal(0.3, 0.15)}, correlation=0.8)


def rows(n=600, seed=1):
    random = np.random.default_rng(seed)
    group = random.choice(["high", "low"], n, p=[0.4, 0.6])
    high = group == "high"
    x, c = random.integers(0, 2, n), random.normal(size=n)
    rho = np.where(high, 0.5, -0.2)
    e = random.normal(size=(2, n))
    m = 1 + 0.5 * x + 0.3 * c + np.where(high, 0.8 * x + 0.4 * c, 0) + np.where(high, 1.5, 0.8) * e[0]
    e_y = np.where(high, 1.0, 2.0) * (rho * e[0] + np.sqrt(1 - rho**2) * e[1])
    y = 2 + np.where(high, 0.7, 0.2) * m - 0.3 * x + np.where(high, 0.5, -0.5) * c + e_y
    return pd.DataFrame({"x": x, "c": c, "group": group, "m": m, "y": y})


def grouped(data):
    return bm.Study(data, exposure="x", mediator="m ~ (x + c) * group", outcome="y ~ (m + x + c) * group")


@pytest.fixture(scope="module")
def fit():
    return grouped(rows()).fit(rho=BELIEF, method="exact", draws=5000, random_seed=1, **QUIET)


@pytest.mark.parametrize("level", ["low", "high"])
def test_each_group_is_a_study_of_its_own(fit, level):
    alone = bm.Study(rows().query("group == @level"), exposure="x", mediator="m ~ x + c", outcome="y ~ m + x + c").fit(
        method="exact", draws=5000, random_seed=2, **QUIET
    )
    ours = fit.summary(at={"group": level}).set_index("effect")
    theirs = alone.summary(at={}, rho=BELIEF.of(level)).set_index("effect")
    for effect in ("indirect", "direct", "total"):
        error = np.hypot(ours.loc[effect, "mcse"], theirs.loc[effect, "mcse"])
        assert ours.loc[effect, "probability"] == pytest.approx(theirs.loc[effect, "probability"], abs=4 * error + 1e-9)
        spread = theirs.loc[effect, "sd"] / np.sqrt(20_000)
        assert ours.loc[effect, "mean"] == pytest.approx(theirs.loc[effect, "mean"], abs=6 * spread)


def test_at_the_true_rho_each_group_gives_its_true_effect():
    fit = grouped(rows(60_000)).fit(rho=BELIEF, method="exact", draws=200, random_seed=1, **QUIET)
    found = fit.compare({"truth": bm.ByGroup({"low": -0.2, "high": 0.5}, correlation=0)}, at={"group": ["low", "high"]})
    table = found.table.query("effect == 'indirect'").set_index("group")
    for level, truth in {"low": 0.2 * 0.5, "high": 0.7 * 1.3}.items():
        assert table.loc[level, "mean"] == pytest.approx(truth, abs=4 * table.loc[level, "sd"])


def test_groups_are_tied_as_the_copula_says(fit):
    rho = fit.posterior["rho"].stack(sample=("chain", "draw"))
    low, high = (rho.sel(group=g).to_numpy() for g in ("low", "high"))
    assert stats.kstest(low, BELIEF.of("low").cdf).pvalue > 1e-3
    assert stats.kstest(high, BELIEF.of("high").cdf).pvalue > 1e-3
    # Kendall's tau of a Gaussian copula is 2/pi arcsin(correlation): Embrechts, McNeil & Straumann 2002, theorem 3.1.
    assert stats.kendalltau(low, high).statistic == pytest.approx(2 / np.pi * np.arcsin(0.8), abs=0.02)
    tied = fit.effects(at={"group": ["low", "high"]})["indirect"]
    assert tied.dims == ("chain", "draw", "group")
    contrast = tied.sel(group="high") - tied.sel(group="low")
    untied = fit.under(bm.ByGroup(dict(BELIEF.items), correlation=0)).effects(at={"group": ["low", "high"]})["indirect"]
    apart = untied.sel(group="high") - untied.sel(group="low")
    # Both effects fall as their rho rises, so tied beliefs cancel in the contrast.
    assert float(contrast.std()) < float(apart.std())


def test_one_belief_for_all_groups_is_one_rho(fit):
    same = fit.under(bm.LKJ(3)).posterior["rho"]
    np.testing.assert_array_equal(same.isel(group=0), same.isel(group=1))
    table = fit.rho_grid(rho=[0.0, 0.3], at={"group": ["low"]})
    assert len(table) == 6


def test_nuts_agrees_with_exact(fit):
    nuts = grouped(rows()).fit(rho=BELIEF, random_seed=1, **QUIET)
    ours, theirs = (f.summary(at={"group": ["low", "high"]}) for f in (nuts, fit))
    error = theirs["sd"] / np.sqrt(3000)
    assert np.all(np.abs(ours["mean"] - theirs["mean"]) < 4 * error)


@pytest.mark.parametrize(
    ("call", "error", "match"),
    [
        (lambda f: f.summary(at={}), ArgumentError, "name the group"),
        (lambda f: f.under(bm.ByGroup({"low": 0.1, "mid": 0.2}, correlation=0)), ArgumentError, "mid"),
        (lambda f: f.study.fit(rho=bm.ByGroup({"a": 0.1, "b": 0.2}, correlation=0), **QUIET), ArgumentError, "levels"),
        (lambda f: f.movement(), ArgumentError, "group"),
        (lambda f: f.leaning(), ArgumentError, "group"),
        (lambda f: bm.ByGroup({"a": 0.1}, correlation=0), PriorError, "two levels"),
        (lambda f: bm.ByGroup({"a": 0.1, "b": 0.2, "c": 0}, correlation=-0.9), PriorError, "-0.5"),
    ],
)
def test_bad_arguments_give_one_clear_error(fit, call, error, match):
    with pytest.raises(error, match=match):
        call(fit)


def test_equations_must_be_saturated():
    study = bm.Study(rows(), exposure="x", mediator="m ~ x * group + c", outcome="y ~ m * group + x * group + c")
    with pytest.raises(DesignError, match="saturated in 'group'"):
        study.fit(rho=BELIEF, method="exact", **QUIET)
    plain = study.fit(method="exact", draws=50, random_seed=1, **QUIET)
    with pytest.raises(ArgumentError, match="ByGroup"):
        plain.summary(rho=BELIEF)


def test_saved_and_loaded(fit, tmp_path):
    again = bm.load(fit.save(tmp_path / "fit.nc"))
    assert again.summary(at={"group": "low"}).equals(fit.summary(at={"group": "low"}))
    assert again.rho == fit.rho
