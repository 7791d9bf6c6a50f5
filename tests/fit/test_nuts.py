"""Sampling by NUTS: agreement with exact draws, beliefs that stay as they are, and beliefs that data inform."""

import numpy as np
import pytest
from scipy import stats

import bayesmed as bm
from bayesmed.conclusions.accuracy import effective_draws
from bayesmed.fit import diagnose

SILENT = {"exposure": "x", "mediator": "m ~ x * z + c", "outcome": "y ~ m * z + x * z + c"}
QUIET = {"progressbar": False}


@pytest.fixture(scope="module")
def study(simulated):
    return bm.Study(simulated(400, 0.3, seed=11), **SILENT)


def test_nuts_and_exact_agree_where_the_prior_is_weak(study):
    nuts = study.fit(random_seed=1, **QUIET)
    exact = study.fit(method="exact", draws=20_000, random_seed=1, **QUIET)
    for name in ("alpha", "gamma", "sigma_m", "tau"):
        a = nuts.result.flat(name).reshape(4000, -1).T
        b = exact.result.flat(name).reshape(80_000, -1).T
        error = np.sqrt(a.var(axis=1) / effective_draws(a, nuts.result) + b.var(axis=1) / 80_000)
        assert np.all(np.abs(a.mean(axis=1) - b.mean(axis=1)) < 4 * error)
        ratio = a.std(axis=1) / b.std(axis=1)
        assert np.all(np.abs(ratio - 1) < 4 / np.sqrt(2 * 2000))


@pytest.mark.parametrize(
    "belief",
    [
        bm.Uniform(-0.3, 0.6),
        bm.TruncatedNormal(0.3, 0.2),
        bm.StretchedBeta(3, 2),
        bm.FisherNormal(0.2, 0.4),
        bm.LKJ(2),
    ],
    ids=repr,
)
def test_the_posterior_of_rho_is_its_prior(study, belief):
    fit = study.fit(rho=belief, random_seed=3, **QUIET)
    thinned = fit.posterior["rho"].to_numpy()[:, ::4].ravel()
    assert stats.kstest(thinned, belief.cdf).pvalue > 1e-3
    # And it is independent of what the data do tell.
    slope = fit.posterior["gamma"].sel(outcome_term="m").to_numpy()[:, ::4].ravel()
    assert abs(np.corrcoef(thinned, slope)[0, 1]) < 4 / np.sqrt(1000)
    assert fit.posterior["beta"].sel(outcome_term="m").std() > slope.std()


def test_a_fixed_rho_is_a_belief_too(study):
    fit = study.fit(rho=0.25, random_seed=3, **QUIET)
    assert np.all(fit.posterior["rho"] == 0.25)


def test_a_strong_exclusion_finds_the_truth():
    random = np.random.default_rng(3)
    n, rho = 3000, 0.5
    x, z = random.integers(0, 2, n), random.normal(size=n)
    e_m = random.normal(size=n)
    e_y = rho * e_m + np.sqrt(1 - rho**2) * random.normal(size=n)
    m = 0.5 * x + 1.5 * x * z + e_m
    data = {"x": x, "z": z, "m": m, "y": 0.4 * m + 0.2 * x + 0.3 * z + e_y}
    study = bm.Study(data, exposure="x", mediator="m ~ x * z", outcome="y ~ m + x + z")
    with pytest.warns(bm.errors.InformedWarning, match="'x:z'"):
        fit = study.fit(rho=bm.Uniform(-0.95, 0.95), random_seed=2, **QUIET)
    draws = fit.posterior["rho"]
    assert draws.std() < 0.05
    assert abs(draws.mean() - rho) < 4 * draws.std()
    assert abs(fit.posterior["beta"].sel(outcome_term="m").mean() - 0.4) < 0.1
    grid = fit.rho_grid(rho=[0.0, 0.5], at={}).query("effect == 'indirect'")
    assert grid["mean"].iloc[0] > grid["mean"].iloc[1] + 0.1
    with pytest.raises(bm.errors.FitError, match="does not exist"):
        fit.tipping()
    with pytest.raises(bm.errors.ArgumentError, match="'x:z'"):
        study.fit(rho=0.0, method="exact", **QUIET)
    with pytest.raises(bm.errors.BeliefNeededError, match="'x:z'"):
        study.fit(**QUIET)


def test_units_and_coding_leave_the_default_posterior_of_effects_unmoved(simulated):
    data = simulated(150, 0.3, seed=5)
    plain = bm.Study(data, **SILENT).fit(random_seed=1, **QUIET).summary(rho=0.2, at={"z": [0.0]})
    moved = data.assign(m=(data["m"] + 1000) * 60, z=data["z"] - 500, y=data["y"] / 10)
    other = bm.Study(moved, **SILENT).fit(random_seed=1, **QUIET).summary(rho=0.2, at={"z": [-500.0]})
    error = np.hypot(plain["sd"], 10 * other["sd"]) / np.sqrt(2000)
    assert np.all(np.abs(plain["mean"] - 10 * other["mean"]) < 4 * error)


def test_an_extended_model_is_adopted(study):
    import pymc as pm

    with study.model(rho=bm.Uniform(-0.5, 0.5)) as model:
        pm.Potential("experiment", pm.logp(pm.Normal.dist(0.3, 0.05), model["beta"][1]))
        tree = pm.sample(300, tune=500, chains=2, random_seed=1, progressbar=False, quiet=True)
    fit = study.adopt(tree)
    assert fit.result.joint
    assert set(fit.effects(at={}).data_vars) >= {"indirect", "direct", "total"}
    with pytest.raises(bm.errors.FitError, match="adopted"):
        fit.summary(rho=0.0)


def test_a_warning_points_at_the_users_line(simulated, monkeypatch):
    monkeypatch.setattr(diagnose, "LARGEST_RHAT", 0.5)
    study = bm.Study(simulated(40, rho=0.3, seed=2), exposure="x", mediator="m ~ x + z", outcome="y ~ m + x + z")
    with pytest.warns(bm.errors.SamplingWarning) as caught:
        study.fit(draws=150, tune=150, chains=3, random_seed=1, progressbar=False)
    assert caught[0].filename == __file__


def test_a_sampler_needs_draws_to_adapt(simulated):
    study = bm.Study(simulated(40, rho=0.3, seed=2), exposure="x", mediator="m ~ x + z", outcome="y ~ m + x + z")
    with pytest.raises(bm.errors.ArgumentError, match="tune=0 must be a whole number of at least 1"):
        study.fit(tune=0, random_seed=1, progressbar=False)
