"""Beliefs in a PyMC model: density, transform and prior draws agree with the frozen value."""

import numpy as np
import pytest
import scipy.stats

from bayesmed.priors import (
    LKJ,
    BetaShare,
    FisherNormal,
    FromScipy,
    Mixture,
    PointMass,
    SharedCause,
    StretchedBeta,
    Tabulated,
    TruncatedNormal,
    Uniform,
)
from bayesmed.priors.in_pymc import normal_score_table

CONTINUOUS = [
    Uniform(-1, 0.4),
    TruncatedNormal(0.3, 0.15),
    StretchedBeta(2, 3.5),
    FisherNormal(0.2, 0.6),
    LKJ(2),
    Mixture([LKJ(2), FisherNormal(0.2, 0.3)], [1, 3]),
]
BY_QUANTILES = [
    Mixture([0, LKJ(2)], [1, 1]),
    Mixture([Uniform(-0.5, -0.2), Uniform(0.3, 0.4)], [1, 2]),
    SharedCause(BetaShare(1, 9), BetaShare(1, 9), positive=0.8),
    SharedCause(0.2, BetaShare(2, 3)),
    SharedCause(0.2, 0.3, positive=0.7),
    Tabulated([-0.5, 0, 0.4], [0, 0.5, 1]),
    FromScipy("triang", [0.3], loc=-0.2, scale=0.5),
]


def quickly_compiled():
    import pytensor

    return pytensor.compile.Mode(linker="py", optimizer="fast_compile")


def log_density(variable, x):
    import pymc as pm

    return pm.logp(variable, np.array(x)).eval(mode=quickly_compiled())


@pytest.mark.parametrize("prior", CONTINUOUS, ids=repr)
def test_density_in_the_model_is_the_priors(prior):
    import pymc as pm

    with pm.Model() as model:
        variable = prior.to_pymc("rho")
    assert variable.name == "rho"
    assert model.free_RVs == [variable]
    x = [-0.999, -0.4, 0.0, 0.35]
    # 1e-8: PyMC keeps a constant of its truncated normal in single precision
    assert log_density(variable, x) == pytest.approx(prior.logpdf(x), abs=1e-8)
    assert log_density(variable, [-1.2, 1.5]).tolist() == [-np.inf, -np.inf]
    assert list(model.initial_point()) == ["rho_interval__"]
    assert np.isfinite(model.point_logps()["rho"])


def test_the_interval_transform_keeps_the_mass():
    """exp(log p + log Jacobian) integrates to 1 over the unconstrained line."""
    import pymc as pm

    with pm.Model() as model:
        StretchedBeta(2, 3.5).to_pymc("rho")
    log_p = model.compile_logp(mode=quickly_compiled())
    line = np.linspace(-25, 25, 1001)
    density = np.exp([log_p({"rho_interval__": point}) for point in line])
    assert np.trapezoid(density, line) == pytest.approx(1, abs=1e-6)


def test_each_model_gets_a_variable_of_its_own():
    import pymc as pm

    prior = LKJ(2)
    with pm.Model():
        first = prior.to_pymc("rho")
    with pm.Model():
        second = prior.to_pymc("rho")
    assert first is not second


def test_prior_draws_in_the_model():
    import pymc as pm

    with pm.Model():
        variables = [prior.to_pymc(f"rho_{i}") for i, prior in enumerate(CONTINUOUS)]
    draws = pm.draw(variables, 500, random_seed=4, mode=quickly_compiled())
    for prior, values in zip(CONTINUOUS, draws, strict=True):
        assert scipy.stats.kstest(values, prior.cdf).statistic < scipy.stats.kstwo.ppf(1 - 1e-6, 500)


def test_point_mass_is_a_constant_of_the_model():
    import pymc as pm

    with pm.Model() as model:
        variable = PointMass(0.3).to_pymc("rho")
    assert model.free_RVs == []
    assert model["rho"] is variable
    assert variable.eval() == 0.3


@pytest.mark.parametrize("prior", BY_QUANTILES, ids=repr)
def test_others_are_quantiles_of_a_normal_score(prior):
    import pymc as pm
    import pytensor

    with pm.Model() as model:
        variable = prior.to_pymc("rho")
    (score,) = model.free_RVs
    assert score.name == "rho_normal_score"
    assert model.deterministics == [variable]
    at = pytensor.function([score], variable, mode=quickly_compiled())
    places = np.linspace(-5, 5, 401)
    values = np.array([at(place) for place in places])
    q = scipy.stats.norm.cdf(places)
    assert np.all(prior.below(values) <= q + 1e-5)
    assert np.all(prior.cdf(values) >= q - 1e-5)
    gradient = pytensor.function([score], pytensor.grad(variable, score), mode=quickly_compiled())
    slopes = np.array([gradient(place) for place in places])
    assert np.all(np.isfinite(slopes))
    assert np.all(slopes >= 0)


def test_table_of_scores_stands_still_at_an_atom_and_steps_over_a_gap():
    scores, values = normal_score_table(Mixture([0, LKJ(2)], [1, 1]))
    assert scipy.stats.norm.cdf(scores[values == 0][[0, -1]]) == pytest.approx([0.25, 0.75])
    scores, values = normal_score_table(SharedCause(0.2, 0.3, positive=0.7))
    step = np.flatnonzero(np.diff(values) > 0)
    assert scipy.stats.norm.cdf(scores[step]) == pytest.approx(0.3)
    assert np.all(np.diff(scores)[step] < 1e-9)


def test_prior_draws_by_quantiles():
    import pymc as pm

    prior = Mixture([0, LKJ(2)], [1, 1])
    with pm.Model():
        draws = pm.draw(prior.to_pymc("rho"), 1000, random_seed=4, mode=quickly_compiled())
    assert (draws == 0).mean() == pytest.approx(0.5, abs=0.08)
    assert scipy.stats.kstest(draws[draws != 0], LKJ(2).cdf).statistic < scipy.stats.kstwo.ppf(1 - 1e-6, 500)
