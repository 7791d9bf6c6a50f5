"""Mixtures of beliefs, with and without atoms."""

import math
import pickle
import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import bayesmed.priors as priors
from bayesmed.core.errors import PriorError
from bayesmed.priors import LKJ, FisherNormal, Mixture, PointMass, Uniform

from .references import by_quadrature
from .strategies import continuous, numbers, probabilities, quick

X = np.linspace(-0.99, 0.99, 67)
weights = numbers(0.01, 10)
components = st.lists(st.tuples(continuous, weights), min_size=1, max_size=3)
with_atoms = st.lists(st.tuples(st.builds(PointMass, numbers(-0.9, 0.9)), weights), min_size=1, max_size=2)


@quick
@given(components)
def test_functions_are_weighted_sums(pairs):
    parts, shares = zip(*pairs, strict=True)
    mixture = Mixture(parts, shares)
    relative = np.array(shares) / sum(shares)
    assert mixture.cdf(X) == pytest.approx(relative @ [part.cdf(X) for part in parts], abs=1e-14)
    assert mixture.pdf(X) == pytest.approx(relative @ [part.pdf(X) for part in parts], rel=1e-9, abs=1e-300)
    assert mixture.rho_mean() == pytest.approx(relative @ [part.rho_mean() for part in parts])
    assert eval(repr(mixture), vars(priors)) == mixture
    assert hash(pickle.loads(pickle.dumps(mixture))) == hash(mixture)


@quick
@given(components, with_atoms, probabilities)
def test_quantile_is_the_smallest_value_that_reaches_the_probability(pairs, atoms, q):
    mixture = Mixture(*zip(*pairs, *atoms, strict=True))
    x = float(mixture.ppf(q))
    slack = 1e-9 + 1e-14 * np.exp(min(float(mixture.logpdf(x)), 30.0))
    assert mixture.cdf(x) >= q - slack
    assert mixture.below(x) <= q + slack
    assert mixture.below(x) + mixture.above(x) == pytest.approx(
        1 - sum(weight for value, weight in mixture.atoms() if value == x), abs=1e-12
    )


def test_an_atom_and_a_spread():
    mixture = Mixture([0, LKJ(2)], [1, 3])
    assert mixture == Mixture((PointMass(0.0), LKJ(2.0)), (0.25, 0.75))
    assert mixture.atoms() == ((0.0, 0.25),)
    assert mixture.below(0) == mixture.above(0) == 0.375
    assert mixture.cdf(0) == 0.625
    assert mixture.ppf([0.4, 0.5, 0.62]).tolist() == [0, 0, 0]
    assert mixture.ppf([0.3, 0.7]) == pytest.approx(LKJ(2).ppf([0.4, 0.6]))
    assert mixture.logpdf([0, 0.5]).tolist() == [np.inf, np.log(0.75) + LKJ(2).logpdf(0.5)]
    assert mixture.odds_moments() == (0.0, 0.375)
    draws = mixture.draw(20_000, random_seed=0)
    assert (draws == 0).mean() == pytest.approx(0.25, abs=0.015)


def test_a_gap_between_components():
    mixture = Mixture([Uniform(-0.5, -0.2), Uniform(0.3, 0.4)], [1, 1])
    assert mixture.support() == (-0.5, 0.4)
    assert mixture.ppf([0.25, 0.75]) == pytest.approx([-0.35, 0.35])
    assert mixture.ppf(0.5) == pytest.approx(-0.2)
    assert mixture.logpdf(0) == -np.inf
    assert mixture.cdf(0) == 0.5


def test_moments():
    mixture = Mixture([FisherNormal(0.3, 0.4), Uniform(-0.5, 0.2)], [2, 1])
    first, second = mixture.odds_moments()
    assert first == pytest.approx(by_quadrature(mixture, 1), rel=1e-7)
    assert second == pytest.approx(by_quadrature(mixture, 2), rel=1e-7)
    draws = mixture.draw(200_000, random_seed=1)
    assert mixture.rho_mean() == pytest.approx(draws.mean(), abs=5 * draws.std() / math.sqrt(200_000))
    assert mixture.rho_sd() == pytest.approx(draws.std(), rel=0.01)


def test_infinite_means_of_opposite_sign_leave_none():
    one_way, other_way = priors.StretchedBeta(3, 0.4), priors.StretchedBeta(0.4, 3)
    assert Mixture([one_way, LKJ(2)], [1, 1]).odds_moments() == (math.inf, math.inf)
    assert math.isnan(Mixture([one_way, other_way], [1, 1]).odds_moments()[0])


def test_components_of_no_weight_are_dropped():
    assert Mixture([LKJ(2), LKJ(0.1)], [1, 0]) == Mixture([LKJ(2)], [5])
    assert Mixture([LKJ(2), LKJ(0.1)], [1, 0]).odds_moments() == LKJ(2).odds_moments()


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (([], []), "Mixture: priors is empty; at least one prior is needed"),
        (([0], [1, 2]), "Mixture: there are 1 priors and 2 weights; each prior needs one weight"),
        (([0, LKJ(2)], [1, -1]), "Mixture: weights[1] is -1.0; no weight may be negative"),
        (([0, LKJ(2)], [1, "a"]), "Mixture: weights[1] is 'a'; a finite number is needed"),
        (([0, LKJ(2)], [0, 0]), "their sum must be finite and above 0"),
        ((LKJ(2), [1]), "Mixture: priors is LKJ(eta=2.0); a list of priors is needed"),
        (([0], 1), "Mixture: weights is 1; a list of numbers is needed, one to a prior"),
        ((["LKJ"], [1]), "a belief about rho cannot be made from 'LKJ'"),
    ],
)
def test_refused(arguments, message):
    with pytest.raises(PriorError, match=re.escape(message)):
        Mixture(*arguments)
