"""The compiled model that all studies share has the density of each study's own model, coefficients integrated out."""

import numpy as np
import pytest
from scipy.stats import norm

import bayesmed as bm
from bayesmed.fit import make, shared
from bayesmed.fit.coefficients import coefficient_prior
from bayesmed.fit.statistics import reduce_study

FORMULAS = [
    ("m ~ x", "y ~ m + x"),
    ("m ~ x*z + c", "y ~ m*z + m:x + x*z + c"),
    ("m ~ x*z + c", "y ~ m*z + m:x + m:c + x*z + c + site"),
    ("m ~ 0 + site + x", "y ~ 0 + site*m + x"),
]


@pytest.fixture(scope="module")
def data(simulated):
    return simulated(60, rho=0.3, seed=2)


@pytest.mark.parametrize("rows", [14, 60])
@pytest.mark.parametrize("formulas", FORMULAS, ids=["3 terms", "8 terms", "11 terms", "a constant in disguise"])
def test_density_is_the_studys_own_with_coefficients_integrated_out(data, formulas, rows, random):
    """Joint density = marginal of the SDs × conditional of the coefficients, both as `shared` has them.

    With few rows the prior has a say, so that the parts that it touches and those it does not are told apart.
    """
    mediator, outcome = formulas
    study = bm.Study(data.iloc[:rows], exposure="x", mediator=mediator, outcome=outcome)
    o, statistics = study.observed, reduce_study(study.observed)
    regressions, terms = (statistics.mediator, statistics.outcome), (o.mediator_terms, o.outcome_terms)
    assert shared.shares_a_model(statistics, bm.Coefficients())
    equations = [shared.collapsed(*each) for each in zip(regressions, terms, strict=True)]
    common = shared.shared_model(shared.model_data(tuple(equations)))
    own = study.model()
    value = {name: own.rvs_to_values[own[name]].name for name in ("alpha", "gamma", "sigma_m", "tau")}
    marginal, joint = common.compile_logp(), own.compile_logp()
    # The study's own coordinates, which only a linear map parts from z.
    priors = [coefficient_prior(*each, {}) for each in zip(regressions, terms, strict=True)]
    apart = []
    for _ in range(6):
        x = random.normal(size=2)
        sigma = [np.exp(one.log_sd + one.unit * each) for one, each in zip(equations, x, strict=True)]
        point, conditional = {value["sigma_m"]: np.log(sigma[0]), value["tau"]: np.log(sigma[1])}, 0.0
        for name, one, prior, sd in zip(("alpha", "gamma"), equations, priors, sigma, strict=True):
            mean, precision = (each[0] for each in one.conditional(np.array([sd])))
            z = random.normal(size=len(mean))
            point[value[name]] = prior.whiten @ (one.turn @ z)
            conditional += norm.logpdf(z, mean, 1 / np.sqrt(precision)).sum()
        apart.append(float(joint(point)) - conditional - float(marginal({"x": x})))
    np.testing.assert_allclose(apart, apart[0], rtol=1e-9, atol=1e-7)


def test_coefficients_given_the_sds_have_the_moments_of_their_conditional(data):
    study = bm.Study(data.iloc[:14], exposure="x", mediator="m ~ x", outcome="y ~ m*z + x")
    regression = reduce_study(study.observed).outcome
    one = shared.collapsed(regression, study.observed.outcome_terms)
    sigma = 2 * regression.residual_sd
    drawn = one.coefficients(np.full(40_000, sigma), np.random.default_rng(1))
    prior = coefficient_prior(regression, study.observed.outcome_terms, {})
    design, response = regression.factor[:, :-1], regression.factor[:, -1]
    precision = design.T @ design / sigma**2 + prior.root.T @ prior.root
    covariance = np.linalg.inv(precision)
    mean = covariance @ design.T @ response / sigma**2
    root = np.linalg.cholesky(precision)
    standard = (drawn - mean) @ root
    assert np.abs(standard.mean(axis=0)).max() < 4 / np.sqrt(40_000)
    assert np.abs(np.cov(standard.T) - np.eye(len(mean))).max() < 6 / np.sqrt(40_000)


def test_a_study_without_a_constant_takes_its_own_model(data, monkeypatch):
    """Which model is taken, without compiling it; the density is held against that of scipy in test_likelihood.py."""
    study = bm.Study(data, exposure="x", mediator="m ~ 0 + x + z", outcome="y ~ m + x + z")
    assert not shared.shares_a_model(reduce_study(study.observed), bm.Coefficients())
    exact = study.fit(method="exact", draws=50, random_seed=2, progressbar=False)
    taken = []
    monkeypatch.setattr(make, "sample_shared", lambda *_: pytest.fail("the shared model"))
    monkeypatch.setattr(make, "compile_model", lambda model: taken.append(set(model.named_vars)) or model)
    monkeypatch.setattr(make, "sample_nuts", lambda *_: exact.tree)
    study.fit(random_seed=1, progressbar=False)
    assert {"alpha", "gamma", "sigma_m", "tau"} <= taken[0]


def test_a_study_of_another_shape_compiles_nothing(data, monkeypatch):
    quiet = {"random_seed": 1, "progressbar": False}
    study = bm.Study(data, exposure="x", mediator="m ~ x", outcome="y ~ m + x")
    study.fit(**quiet)

    def refuse(model):
        raise AssertionError("compiled again")

    monkeypatch.setattr(shared, "compile_model", refuse)
    other = bm.Study(data.iloc[:40], exposure="x", mediator="m ~ x + z + c", outcome="y ~ m*z + x + c")
    fit = other.fit(**quiet, rho=bm.Uniform(-0.3, 0.3))
    exact = other.fit(method="exact", draws=4000, random_seed=2, progressbar=False)
    assert list(fit.posterior["gamma"]["outcome_term"].to_numpy()) == list(other.observed.outcome_terms)
    for name in ("alpha", "gamma"):
        spread = exact.posterior[name].std(("chain", "draw"))
        gap = fit.posterior[name].mean(("chain", "draw")) - exact.posterior[name].mean(("chain", "draw"))
        # 4,000 draws that are nearly independent: a standard error of .016 SD, and the default prior's pull.
        assert float(np.abs(gap / spread).max()) < 0.1
