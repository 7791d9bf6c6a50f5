"""The compiled model that all studies share has the density of each study's own model."""

import numpy as np
import pytest

import bayesmed as bm
from bayesmed.fit import shared
from bayesmed.fit.statistics import reduce_study

FORMULAS = [
    ("m ~ x", "y ~ m + x"),
    ("m ~ x*z + c", "y ~ m*z + m:x + x*z + c"),
    ("m ~ x*z + c + site", "y ~ m*z + m:x + m:c + x*z + c + site"),
]


@pytest.fixture(scope="module")
def data(simulated):
    return simulated(60, rho=0.3, seed=2)


@pytest.mark.parametrize("formulas", FORMULAS, ids=["3 terms", "8 terms", "11 terms"])
def test_density_and_gradient_are_those_of_the_studys_own_model(data, formulas, random):
    """Both compiled without a sampler; densities differ by one constant, gradients by nothing."""
    mediator, outcome = formulas
    study = bm.Study(data, exposure="x", mediator=mediator, outcome=outcome)
    o, statistics = study.observed, reduce_study(study.observed)
    terms = o.mediator_terms, o.outcome_terms
    size = shared.padded(max(map(len, terms)))
    priors = shared.default_priors(statistics, *terms)
    common = shared.shared_model(shared.model_data(statistics, priors, size), size)
    own = study.model()
    names = {"alpha": "z_m", "gamma": "z_y"}
    places = {own.rvs_to_values[own[name]].name: half for name, half in names.items()}
    spreads = [own.rvs_to_values[own[name]].name for name in ("sigma_m", "tau")]
    densities = common.compile_logp(), own.compile_logp()
    slopes = (
        common.compile_dlogp([common[name] for name in ("z", "log_sigma")]),
        own.compile_dlogp([own[name] for name in ("alpha", "gamma", "sigma_m", "tau")]),
    )
    apart = []
    for _ in range(6):
        p, q = map(len, terms)
        z_m, z_y = random.normal(size=p), random.normal(size=q)
        log_sigma = np.log([statistics.mediator.residual_sd, statistics.outcome.residual_sd]) + random.normal(0, 0.3, 2)
        inert = random.normal(size=(2, size))
        z = np.concatenate([z_m, inert[0, p:], z_y, inert[1, q:]])
        halves = {"z_m": z_m, "z_y": z_y}
        point = {name: halves[half] for name, half in places.items()} | dict(zip(spreads, log_sigma, strict=True))
        together = {"z": z, "log_sigma": log_sigma}
        without = -0.5 * (np.sum(inert[0, p:] ** 2) + np.sum(inert[1, q:] ** 2))
        apart.append(float(densities[0](together)) - without - float(densities[1](point)))
        found, expected = slopes[0](together), slopes[1](point)
        kept = np.concatenate([found[:p], found[size : size + q], found[2 * size :]])
        np.testing.assert_allclose(kept, expected, rtol=1e-8, atol=1e-8)
        np.testing.assert_allclose(np.concatenate([found[p:size], found[size + q : 2 * size]]),
                                   -np.concatenate([inert[0, p:], inert[1, q:]]), rtol=1e-12)  # fmt: skip
    np.testing.assert_allclose(apart, apart[0], rtol=1e-9, atol=1e-7)


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
