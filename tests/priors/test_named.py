"""Beliefs and coefficient priors as plain tables of a study file, there and back; errors name the place."""

import tomllib

import pytest
from hypothesis import given

from bayesmed.core.errors import PriorError, StudyFileError
from bayesmed.priors import (
    LKJ,
    BetaShare,
    Exponential,
    HalfNormal,
    HalfStudentT,
    LogNormal,
    Mixture,
    Normal,
    PointMass,
    SharedCause,
    StudentT,
    Tabulated,
    TruncatedNormal,
    coefficient_from_spec,
    from_spec,
    to_spec,
)

from .strategies import continuous, quick


@quick
@given(continuous)
def test_there_and_back(prior):
    assert from_spec(to_spec(prior)) == prior


def test_from_a_file():
    table = tomllib.loads('[beliefs]\nsceptic = {family = "TruncatedNormal", mean = 0.3, sd = 0.15}\nnone = 0')
    assert from_spec(table["beliefs"]["sceptic"]) == TruncatedNormal(0.3, 0.15)
    assert from_spec(table["beliefs"]["none"]) == PointMass(0)
    assert to_spec(PointMass(0.2)) == {"family": "PointMass", "value": 0.2}
    assert to_spec(LKJ(2)) == {"family": "LKJ", "eta": 2.0}


@pytest.mark.parametrize(
    ("spec", "message"),
    [
        (
            {"family": "TruncatedNormal", "mean": 0.3, "sdd": 0.15},
            "beliefs.sceptic.sdd is 0.15, but TruncatedNormal has no 'sdd'; its keys are mean, sd, lower,"
            " upper; did you mean 'sd'?",
        ),
        (
            {"family": "TruncatedNormal", "mean": 0.3},
            "beliefs.sceptic lacks 'sd', which TruncatedNormal needs",
        ),
        ({"family": "TruncatedNormal"}, "beliefs.sceptic lacks 'mean', 'sd', which TruncatedNormal needs"),
        ({"family": "LJK", "eta": 1}, "beliefs.sceptic.family is 'LJK'; it is one of "),
        ({"family": "LJK", "eta": 1}, "; did you mean 'LKJ'?"),
        ({"eta": 1}, "beliefs.sceptic has no key 'family'; it is one of "),
        ({"family": 3}, "beliefs.sceptic.family is 3; it is one of "),
        ({"family": "LKJ", "eta": -1}, "beliefs.sceptic.eta is -1; it must be above 0"),
        ({"family": "LKJ", "eta": "two"}, "beliefs.sceptic.eta is 'two'; a finite number above 0 is needed"),
        (
            "LKJ(2)",
            "beliefs.sceptic is 'LKJ(2)'; a number or a table such as {family = ",
        ),
        (True, "beliefs.sceptic is True; a number or a table"),
        (1.5, "beliefs.sceptic is 1.5; a residual correlation lies between -1 and 1"),
    ],
)
def test_errors_name_the_place(spec, message):
    with pytest.raises(StudyFileError) as caught:
        from_spec(spec, "beliefs.sceptic")
    assert message in str(caught.value)


@pytest.mark.parametrize(
    "spec",
    [Normal(0, 1), StudentT(4, 0, 1), HalfNormal(2), HalfStudentT(3, 1), LogNormal(0, 1), Exponential(2)],
    ids=repr,
)
def test_coefficients_there_and_back(spec):
    assert coefficient_from_spec(to_spec(spec)) == spec


def test_coefficient_errors():
    with pytest.raises(StudyFileError, match=r"coefficients.outcome.m.sd is -1; it must be above 0"):
        coefficient_from_spec({"family": "Normal", "mean": 0, "sd": -1}, "coefficients.outcome.m")
    with pytest.raises(StudyFileError, match=r"coefficient.family is 'LKJ'; it is one of Normal"):
        coefficient_from_spec({"family": "LKJ", "eta": 2})
    with pytest.raises(StudyFileError, match="coefficient is 3; a table such as"):
        coefficient_from_spec(3)


def test_what_a_file_cannot_hold():
    with pytest.raises(PriorError, match=r"it is not a family of bayesmed\.priors"):
        to_spec(object())


NESTED = [
    Mixture([0, LKJ(2), Mixture([0.1, TruncatedNormal(0.3, 0.1)], [1, 2])], [1, 1, 2]),
    SharedCause(0.2, 0.1, positive=0.9),
    SharedCause(BetaShare(1, 9), 0.1),
    SharedCause(BetaShare(1, 9), BetaShare(2, 5), positive=0.7),
    Tabulated([-0.2, 0, 0.5], [0, 0.25, 1]),
]


@pytest.mark.parametrize("prior", NESTED, ids=repr)
def test_nested_there_and_back(prior):
    import json

    table = to_spec(prior)
    assert from_spec(json.loads(json.dumps(table))) == prior


def test_nested_from_a_file():
    table = tomllib.loads("""
        [beliefs.sceptic]
        family = "Mixture"
        priors = [0, {family = "LKJ", eta = 2}]
        weights = [0.5, 0.5]
        [beliefs.frail]
        family = "SharedCause"
        r2_mediator = {alpha = 1, beta = 9}
        r2_outcome = 0.1
        positive = 0.9
    """)["beliefs"]
    assert from_spec(table["sceptic"]) == Mixture([0, LKJ(2)], [1, 1])
    assert from_spec(table["frail"]) == SharedCause(BetaShare(1, 9), 0.1, positive=0.9)


@pytest.mark.parametrize(
    ("spec", "message"),
    [
        (
            {"family": "Mixture", "priors": [0, {"family": "FisherNormal", "mean": 0, "sd": -1}], "weights": [1, 1]},
            "beliefs.sceptic.priors[1].sd is -1; it must be above 0",
        ),
        (
            {"family": "Mixture", "priors": [0, {"family": "LKJ", "etaa": 2}], "weights": [1, 1]},
            "beliefs.sceptic.priors[1].etaa is 2, but LKJ has no 'etaa'; its keys are eta; did you mean 'eta'?",
        ),
        (
            {
                "family": "Mixture",
                "priors": [{"family": "Mixture", "priors": [0, 2], "weights": [1, 1]}],
                "weights": [1],
            },
            "beliefs.sceptic.priors[0].priors[1] is 2; a residual correlation lies between -1 and 1",
        ),
        (
            {"family": "Mixture", "priors": [0, 0.1], "weights": [1, -1]},
            "beliefs.sceptic.weights[1] is -1.0; no weight may be negative",
        ),
        (
            {"family": "Mixture", "priors": [0], "weights": [1, 1]},
            "beliefs.sceptic: there are 1 priors and 2 weights",
        ),
        ({"family": "Mixture", "priors": 0, "weights": [1]}, "beliefs.sceptic.priors is 0; a list of priors is needed"),
        (
            {"family": "SharedCause", "r2_mediator": {"alpha": 1, "bta": 9}, "r2_outcome": 0.1},
            "beliefs.sceptic.r2_mediator.bta is 9, but BetaShare has no 'bta'",
        ),
        (
            {"family": "SharedCause", "r2_mediator": 1, "r2_outcome": 0.1},
            "beliefs.sceptic.r2_mediator is 1; a share of variance",
        ),
        (
            {"family": "Tabulated", "values": [0, 2], "probabilities": [0, 1]},
            "beliefs.sceptic.values[1] is 2.0; it must lie strictly between -1 and 1",
        ),
    ],
)
def test_nested_errors_name_the_place(spec, message):
    with pytest.raises(StudyFileError) as caught:
        from_spec(spec, "beliefs.sceptic")
    assert message in str(caught.value)
