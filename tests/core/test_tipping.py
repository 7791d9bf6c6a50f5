"""Tipping correlations, probabilities, moments and quantiles against brute-force draws of rho."""

import numpy as np
import pytest

from bayesmed.core.lines import Lines, line_moments
from bayesmed.core.mapping import odds
from bayesmed.core.quantiles import effect_quantiles
from bayesmed.core.tipping import claim_probability, tipping_correlation
from bayesmed.priors import LKJ, FisherNormal, PointMass, StretchedBeta, TruncatedNormal, Uniform

FAMILIES = [
    PointMass(0.2),
    Uniform(-0.3, 0.6),
    Uniform(-1, 1),
    TruncatedNormal(0.3, 0.15),
    StretchedBeta(3, 2),
    StretchedBeta(0.7, 0.7),
    FisherNormal(0.2, 0.3),
    LKJ(2),
]


@pytest.fixture
def lines():
    random = np.random.default_rng(5)
    constant = random.normal([[2.0], [1.0], [-0.5]], 1.0, (3, 2000))
    slope = random.normal([[6.0], [0.4], [-3.0]], 1.0, (3, 2000))
    return constant, slope


@pytest.mark.parametrize("belief", FAMILIES, ids=repr)
@pytest.mark.parametrize("direction", ["above", "below"])
@pytest.mark.parametrize("limit", [0.0, 1.5])
def test_probability_equals_brute_force(lines, belief, direction, limit):
    constant, slope = lines
    repeats = 40
    rho = belief.draw((repeats, *constant.shape), random_seed=3)
    values = constant - slope * odds(rho)
    brute = (values > limit if direction == "above" else values < limit).mean(axis=0)
    exact = claim_probability(constant, slope, limit, direction, belief)
    error = np.sqrt((exact * (1 - exact)).mean(axis=1) / (repeats * constant.shape[1]))
    assert np.all(np.abs(brute.mean(axis=1) - exact.mean(axis=1)) <= 4 * error + 1e-12)


def test_a_zero_slope_asks_nothing_of_rho():
    constant, slope = np.array([1.0, -1.0, 0.0]), np.zeros(3)
    assert np.isnan(tipping_correlation(constant, slope, 0.0)).all()
    np.testing.assert_array_equal(claim_probability(constant, slope, 0.0, "above", LKJ(2)), [1, 0, 0])


def test_an_atom_on_the_tipping_point_belongs_to_neither_side():
    constant, slope = np.array([odds(0.5)]), np.array([1.0])
    crossing = float(tipping_correlation(constant, slope, 0.0)[0])
    assert crossing == pytest.approx(0.5, abs=1e-15)
    atom = PointMass(crossing)
    assert claim_probability(constant, slope, 0.0, "above", atom)[0] == 0
    assert claim_probability(constant, slope, 0.0, "below", atom)[0] == 0


@pytest.mark.parametrize("belief", FAMILIES, ids=repr)
def test_an_interval_and_a_probability_cannot_disagree(lines, belief):
    constant, slope = lines
    uniforms = np.random.default_rng(1).random(constant.shape[1])
    wanted = np.array([0.025, 0.5, 0.9])
    found = effect_quantiles(Lines(constant, slope), belief, wanted, uniforms)
    step = 1 / constant.shape[1]
    for point in range(3):
        for value, probability in zip(found[point], wanted, strict=True):
            below = claim_probability(constant[point], slope[point], value, "below", belief).mean()
            # A belief at one point makes the distribution function a stair of one step a draw.
            assert below == pytest.approx(probability, abs=step if belief.atoms() else 1e-7)


@pytest.mark.parametrize(
    ("belief", "finite_mean", "finite_sd"),
    [
        (Uniform(-0.9, 0.9), True, True),
        (FisherNormal(0.2, 0.5), True, True),
        (TruncatedNormal(0.2, 0.3), True, True),
        (TruncatedNormal(0.2, 0.3, -1, 1), True, False),
        (LKJ(2), True, True),
        (LKJ(1), True, False),
        (LKJ(0.5), False, False),
        (StretchedBeta(1.5, 0.8), True, False),
        (StretchedBeta(0.5, 3), False, False),
    ],
    ids=repr,
)
def test_moments_are_finite_exactly_where_the_tail_allows(lines, belief, finite_mean, finite_sd):
    mean, sd = line_moments(*lines).under(belief)
    assert np.all(np.isfinite(mean)) == finite_mean
    assert np.all(np.isfinite(sd)) == finite_sd
    assert not np.any(np.isnan(sd))


@pytest.mark.parametrize("belief", [Uniform(-0.5, 0.8), LKJ(6), FisherNormal(0.3, 0.2), PointMass(-0.4)], ids=repr)
def test_moments_equal_brute_force(lines, belief):
    constant, slope = lines
    values = constant - slope * odds(belief.draw((100, *constant.shape), random_seed=9))
    mean, sd = line_moments(constant, slope).under(belief)
    joined = values.transpose(1, 0, 2).reshape(3, -1)
    np.testing.assert_allclose(mean, joined.mean(axis=1), atol=5 * sd.max() / np.sqrt(joined.shape[1]))
    np.testing.assert_allclose(sd, joined.std(axis=1), rtol=0.01)


def test_a_fixed_effect_has_finite_moments_under_any_belief():
    mean, sd = line_moments(np.array([[1.0, 3.0]]), np.zeros((1, 2))).under(LKJ(0.5))
    assert mean[0] == 2
    assert sd[0] == 1
