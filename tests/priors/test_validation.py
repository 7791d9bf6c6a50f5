"""What cannot be a belief is refused with the argument, the value found and what is allowed."""

import math
import re

import numpy as np
import pytest

from bayesmed.core.errors import ArgumentError, PriorError
from bayesmed.priors import (
    LKJ,
    FisherNormal,
    PointMass,
    Prior,
    StretchedBeta,
    TruncatedNormal,
    Uniform,
    coerce,
    panel,
)

WITHIN = "a residual correlation lies between -1 and 1"

REFUSED = [
    (lambda: PointMass(1), "PointMass: value is 1.0; it must lie strictly between -1 and 1"),
    (lambda: PointMass(-1.5), f"PointMass: value is -1.5; {WITHIN}"),
    (lambda: PointMass(math.nan), f"PointMass: value is nan; {WITHIN}"),
    (lambda: PointMass("0.3"), f"PointMass: value is '0.3'; {WITHIN}"),
    (lambda: PointMass(True), f"PointMass: value is True; {WITHIN}"),
    (lambda: PointMass(None), f"PointMass: value is None; {WITHIN}"),
    (lambda: Uniform(-1.2, 0), f"Uniform: lower is -1.2; {WITHIN}"),
    (lambda: Uniform(0, math.inf), f"Uniform: upper is inf; {WITHIN}"),
    (lambda: Uniform(0.3, -0.3), "Uniform: lower is 0.3; it must be less than upper, which is -0.3"),
    (lambda: Uniform(0.3, 0.3), "Uniform: lower is 0.3; it must be less than upper, which is 0.3"),
    (lambda: TruncatedNormal(0.3, 0), "TruncatedNormal: sd is 0; it must be above 0"),
    (lambda: TruncatedNormal(0.3, -1), "TruncatedNormal: sd is -1; it must be above 0"),
    (lambda: TruncatedNormal(0.3, math.nan), "TruncatedNormal: sd is nan; a finite number above 0 is needed"),
    (lambda: TruncatedNormal(3, 0.1), f"TruncatedNormal: mean is 3; {WITHIN}"),
    (lambda: TruncatedNormal(0.3, 0.1, -2), f"TruncatedNormal: lower is -2; {WITHIN}"),
    (
        lambda: TruncatedNormal(0.3, 0.1, lower=0.5),
        "TruncatedNormal: mean is 0.3; it must lie between the bounds 0.5 and 0.99",
    ),
    (lambda: StretchedBeta(0, 2), "StretchedBeta: alpha is 0; it must be above 0"),
    (lambda: StretchedBeta(2, math.inf), "StretchedBeta: beta is inf; a finite number above 0 is needed"),
    (lambda: LKJ(-2), "LKJ: eta is -2; it must be above 0"),
    (lambda: LKJ([2]), "LKJ: eta is [2]; a finite number above 0 is needed"),
    (lambda: FisherNormal(0, 20), "FisherNormal: sd is 20.0; it is an SD of atanh ρ and must be at most 8"),
    (
        lambda: FisherNormal(9, 1),
        "FisherNormal: mean is 9.0; it is a mean of atanh ρ and must lie between -8 and 8",
    ),
    (lambda: FisherNormal(10**400, 1), "a finite number is needed"),
]


@pytest.mark.parametrize(("build", "message"), REFUSED, ids=[message for _, message in REFUSED])
def test_messages(build, message):
    with pytest.raises(PriorError, match=re.escape(message)) as caught:
        build()
    assert isinstance(caught.value, ArgumentError)


def test_integers_and_numpy_scalars_become_floats():
    prior = TruncatedNormal(np.int64(0), np.float64(0.5), lower=-1, upper=np.array(1))
    assert prior == TruncatedNormal(0.0, 0.5, -1.0, 1.0)
    assert {type(value) for value in (prior.mean, prior.sd, prior.lower, prior.upper)} == {float}


def test_a_prior_cannot_be_changed():
    with pytest.raises(AttributeError):
        LKJ(2).eta = 3


def test_coerce_numbers_and_priors():
    assert coerce(0.25) == coerce(np.float64(0.25)) == coerce(np.array(0.25)) == PointMass(0.25)
    assert coerce(0) == PointMass(0)
    prior = LKJ(2)
    assert coerce(prior) is prior


@pytest.mark.parametrize("value", ["0.3", None, True, [0.1, 0.2], {"mean": 0.3}, LKJ, object()])
def test_coerce_refuses_the_rest(value):
    with pytest.raises(PriorError, match="a belief about rho cannot be made from"):
        coerce(value)


def test_panel_members_leave_every_effect_a_mean_and_an_sd():
    members = panel()
    assert 5 <= len(members) <= 6
    assert all(isinstance(prior, Prior) for prior in members.values())
    assert all(np.isfinite(prior.odds_moments()).all() for prior in members.values())
    assert members["nothing left out"] == PointMass(0)
    # what its docstring says of it
    assert members["slight, either sign"].ppf([0.025, 0.975]) == pytest.approx([-0.19, 0.19], abs=0.005)
    assert members["moderate, positive"].above(0) == pytest.approx(0.95, abs=0.005)
    mirrored = members["moderate, negative"].odds_moments()
    assert members["moderate, positive"].odds_moments() == pytest.approx((-mirrored[0], mirrored[1]))
    members.clear()
    assert panel()
