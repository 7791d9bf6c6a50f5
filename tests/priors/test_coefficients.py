"""Priors of coefficients and scales: against scipy and PyMC, and the set that names them by term."""

import pickle

import numpy as np
import pytest
import scipy.stats

import bayesmed.priors as priors
from bayesmed.core.errors import ArgumentError, PriorError
from bayesmed.priors import Coefficients, Exponential, HalfNormal, HalfStudentT, LogNormal, Normal, StudentT

SPECS = [
    (Normal(0.5, 2), scipy.stats.norm(0.5, 2)),
    (StudentT(4, -1, 2.5), scipy.stats.t(4, -1, 2.5)),
    (StudentT(1, 0, 2.5), scipy.stats.cauchy(0, 2.5)),
    (HalfNormal(3), scipy.stats.halfnorm(scale=3)),
    (HalfStudentT(1, 3), scipy.stats.halfcauchy(scale=3)),
    (LogNormal(0.3, 0.7), scipy.stats.lognorm(0.7, scale=np.exp(0.3))),
    (Exponential(2.5), scipy.stats.expon(scale=2.5)),
]
each_spec = pytest.mark.parametrize(("spec", "reference"), SPECS, ids=[repr(spec) for spec, _ in SPECS])


@each_spec
def test_density_draws_and_precision(spec, reference):
    x = np.array([[-2.5, -0.1], [0.2, 7.0]])
    assert spec.logpdf(x) == pytest.approx(reference.logpdf(x), rel=1e-12)
    assert np.isnan(spec.logpdf(np.nan))
    assert spec.logpdf(np.inf) == -np.inf
    draws = spec.draw(4000, random_seed=2)
    assert scipy.stats.kstest(draws, reference.cdf).statistic < scipy.stats.kstwo.ppf(1 - 1e-6, 4000)
    variance = reference.var()
    if np.isfinite(variance):
        assert spec.precision() == pytest.approx(1 / variance)
    else:
        assert spec.precision() == pytest.approx(1 / spec.scale**2)


@each_spec
def test_in_pymc(spec, reference):
    import pymc as pm
    import pytensor

    x = np.array([0.2, 1.0, 7.0])
    mode = pytensor.compile.Mode(linker="py", optimizer="fast_compile")
    in_model = pm.logp(spec.to_pymc_dist(), x).eval(mode=mode)
    assert in_model == pytest.approx(reference.logpdf(x), abs=1e-7)


@each_spec
def test_values(spec, reference):
    assert eval(repr(spec), vars(priors)) == spec
    assert pickle.loads(pickle.dumps(spec)) == spec
    assert hash(spec) == hash(pickle.loads(pickle.dumps(spec)))
    converted = Coefficients(**({"outcome": {"x": reference}} if spec.on_whole_line else {"sigma_outcome": reference}))
    again = converted.outcome["x"] if spec.on_whole_line else converted.sigma_outcome
    grid = np.linspace(0.1, 5, 5)
    assert again.logpdf(grid) == pytest.approx(spec.logpdf(grid))


@pytest.mark.parametrize(
    ("build", "message"),
    [
        (lambda: Normal(0, 0), "Normal: sd is 0; it must be above 0"),
        (lambda: Normal(np.nan, 1), "Normal: mean is nan; a finite number is needed"),
        (lambda: StudentT(-3, 0, 1), "StudentT: df is -3; it must be above 0"),
        (lambda: HalfNormal("2"), "HalfNormal: scale is '2'; a finite number above 0 is needed"),
        (lambda: LogNormal(0, np.inf), "LogNormal: log_sd is inf; a finite number above 0 is needed"),
        (lambda: Exponential(0), "Exponential: mean is 0; it must be above 0"),
    ],
)
def test_refused_values(build, message):
    with pytest.raises(PriorError, match=message):
        build()


def test_set_is_a_frozen_value():
    coefficients = Coefficients(
        mediator={"x": Normal(0, 1)}, outcome={"m": StudentT(4, 0, 1), "x": Normal(0, 2)}, scale="structural"
    )
    again = eval(repr(coefficients), vars(priors))
    assert again == coefficients
    assert hash(again) == hash(coefficients)
    assert pickle.loads(pickle.dumps(coefficients)) == coefficients
    assert coefficients != Coefficients()
    with pytest.raises(TypeError):
        coefficients.mediator["x"] = Normal(0, 5)
    terms = {"x": Normal(0, 1)}
    kept = Coefficients(mediator=terms)
    terms["z"] = Normal(0, 1)
    assert list(kept.mediator) == ["x"]


def test_check_names_the_unknown_term_and_the_nearest():
    coefficients = Coefficients(outcome={"exercize": Normal(0, 1)})
    with pytest.raises(ArgumentError) as caught:
        coefficients.check(["Intercept", "coaching"], ["exercise", "coaching", "Intercept"])
    assert str(caught.value) == (
        "Coefficients: outcome has a prior for 'exercize', which is not a term of the outcome equation; its"
        " terms are 'Intercept', 'coaching', 'exercise'; did you mean 'exercise'?"
    )
    Coefficients(mediator={"coaching": Normal(0, 1)}).check(["coaching"], [])
    with pytest.raises(ArgumentError, match="mediator has a prior for 'coaching'"):
        Coefficients(mediator={"coaching": Normal(0, 1)}).check(["age"], ["coaching"])


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"scale": "raw"}, "scale is 'raw'; it must be 'identified' or 'structural'"),
        ({"mediator": {"x": 3}}, r"mediator\['x'\] is 3; a prior such as Normal"),
        ({"mediator": [1]}, r"mediator is \[1\]; a dict of term name to prior is needed"),
        ({"mediator": {3: Normal(0, 1)}}, "mediator has the key 3; a term's name is needed"),
        (
            {"outcome": {"x": HalfNormal(1)}},
            "allows positive values only; a coefficient needs Normal",
        ),
        ({"sigma_outcome": Normal(0, 1)}, "sigma_outcome is .*which allows negative values"),
        (
            {"outcome": {"x": scipy.stats.gamma(2)}},
            r"outcome\['x'\]: a frozen scipy distribution gamma\(2,\) cannot",
        ),
        ({"sigma_mediator": scipy.stats.expon(1, 2)}, "sigma_mediator: a frozen scipy distribution expon"),
    ],
)
def test_refused_sets(arguments, message):
    with pytest.raises(ArgumentError, match=message):
        Coefficients(**arguments)
