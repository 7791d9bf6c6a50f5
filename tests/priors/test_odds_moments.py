"""The moments of r = ρ/√(1−ρ²) that decide whether an effect has a mean and an SD, and what they are."""

import math

import numpy as np
import pytest
from hypothesis import given

from bayesmed.priors import (
    LKJ,
    BetaShare,
    FisherNormal,
    Mixture,
    PointMass,
    SharedCause,
    StretchedBeta,
    TruncatedNormal,
    Uniform,
)

from .references import by_quadrature
from .strategies import bounds, fisher_normals, numbers, quick, truncated_normals

# (prior, the mean of an effect is finite, its SD is finite)
TAILS = [
    (Uniform(-0.9, 0.9), True, True),
    (Uniform(-1, 0.5), True, False),
    (Uniform(0, 1), True, False),
    (Uniform(-1, 1), True, False),
    (FisherNormal(0.4, 1.2), True, True),
    (LKJ(0.5), False, False),
    (LKJ(0.51), True, False),
    (LKJ(1), True, False),
    (LKJ(1.01), True, True),
    (StretchedBeta(0.5, 3), False, False),
    (StretchedBeta(3, 0.5), False, False),
    (StretchedBeta(0.4, 0.3), False, False),
    (StretchedBeta(3, 0.6), True, False),
    (StretchedBeta(1, 3), True, False),
    (StretchedBeta(1.1, 3), True, True),
    (TruncatedNormal(0.3, 0.15), True, True),
    (TruncatedNormal(0, 0.1, -1, 1), True, False),
    (TruncatedNormal(0, 0.1, lower=-1), True, False),
    (SharedCause(0.9, BetaShare(1, 0.1)), True, True),
    (SharedCause(BetaShare(2, 0.2), BetaShare(2, 0.2)), False, False),
    (SharedCause(BetaShare(2, 0.2), BetaShare(2, 0.32)), True, False),
    (SharedCause(BetaShare(0.5, 0.5), BetaShare(1, 0.5)), True, False),
    (SharedCause(BetaShare(0.5, 0.6), BetaShare(1, 0.5)), True, True),
    (Mixture([LKJ(3), Uniform(-0.5, 0.5)], [1, 1]), True, True),
    (Mixture([LKJ(3), Uniform(-1, 0)], [99, 1]), True, False),
    (Mixture([LKJ(3), LKJ(0.4)], [999, 1]), False, False),
    (Mixture([0, LKJ(1.01)], [1, 1]), True, True),
    (PointMass(0.7), True, True),
]


@pytest.mark.parametrize(("prior", "finite_mean", "finite_sd"), TAILS, ids=repr)
def test_tails_decide_what_is_finite(prior, finite_mean, finite_sd):
    first, second = prior.odds_moments()
    assert math.isfinite(first) == finite_mean
    assert math.isfinite(second) == finite_sd
    assert not math.isnan(second)


@pytest.mark.parametrize(
    ("prior", "finite_mean", "finite_sd"),
    [row for row in TAILS if not isinstance(row[0], PointMass)],
    ids=repr,
)
def test_the_tail_integral_grows_or_settles_as_declared(prior, finite_mean, finite_sd):
    """Between 1 − 10⁻ᵏ and 1 − 10⁻ᵏ⁻², a convergent integral adds less and less, a divergent one does not."""

    def added(power, k):
        t = np.linspace(np.arctanh(1 - 10.0**-k), np.arctanh(1 - 10.0 ** -(k + 2)), 400)
        density = prior.pdf(np.tanh(t)) + prior.pdf(-np.tanh(t))
        return np.trapezoid(np.sinh(t) ** power * density / np.cosh(t) ** 2, t)

    for power, finite in ((1, finite_mean), (2, finite_sd)):
        early, late = added(power, 4), added(power, 8)
        assert (late < 0.98 * early or late == 0) == finite


def test_direction_of_an_infinite_mean():
    assert StretchedBeta(3, 0.5).odds_moments()[0] == math.inf
    assert StretchedBeta(0.5, 3).odds_moments()[0] == -math.inf
    assert math.isnan(StretchedBeta(0.5, 0.5).odds_moments()[0])


@quick
@given(numbers(1.2, 40), numbers(1.2, 40))
def test_beta_forms(a, b):
    prior = StretchedBeta(a, b)
    first, second = prior.odds_moments()
    assert first == pytest.approx(by_quadrature(prior, 1), rel=1e-6, abs=1e-8)
    # the formula as usually written, before it is rearranged
    assert second == pytest.approx((a + b - 1) * (a + b - 2) / (4 * (a - 1) * (b - 1)) - 1, rel=1e-9, abs=1e-12)
    if min(a, b) > 1.8:
        assert second == pytest.approx(by_quadrature(prior, 2), rel=1e-6)


@quick
@given(bounds(limit=0.999))
def test_uniform_forms(pair):
    prior = Uniform(*pair)
    lower, upper = pair
    first, second = prior.odds_moments()
    assert first == pytest.approx(by_quadrature(prior, 1), rel=1e-7, abs=1e-9)
    assert second == pytest.approx(by_quadrature(prior, 2), rel=1e-7, abs=1e-9)
    width = upper - lower
    assert second == pytest.approx((math.atanh(upper) - math.atanh(lower)) / width - 1, abs=1e-9)


def test_narrow_uniform_keeps_its_digits():
    first, second = Uniform(0.3, 0.3 + 1e-9).odds_moments()
    assert first == pytest.approx(0.3 / math.sqrt(0.91), rel=1e-8)
    assert second == pytest.approx(0.09 / 0.91, rel=1e-8)


@quick
@given(fisher_normals)
def test_fisher_normal_forms(prior):
    z, w = np.polynomial.hermite_e.hermegauss(120)
    w = w / w.sum()
    odds = np.sinh(prior.mean + prior.sd * z)
    first, second = prior.odds_moments()
    assert first == pytest.approx(w @ odds, rel=1e-9, abs=1e-12)
    assert second == pytest.approx(w @ odds**2, rel=1e-7)
    rho = np.tanh(prior.mean + prior.sd * z)
    assert prior.rho_mean() == pytest.approx(w @ rho, abs=2e-4)  # Hermite's rule is rough for tanh
    assert prior.rho_sd() == pytest.approx(np.sqrt(w @ rho**2 - (w @ rho) ** 2), abs=2e-3)


@quick
@given(truncated_normals())
def test_truncated_normal_by_quadrature(prior):
    first, second = prior.odds_moments()
    assert first == pytest.approx(by_quadrature(prior, 1), rel=1e-6, abs=1e-7)
    if math.isfinite(second) and max(abs(np.array(prior.support()))) < 0.9999:
        assert second == pytest.approx(by_quadrature(prior, 2), rel=1e-6, abs=1e-8)


@pytest.mark.parametrize(
    "prior",
    [Uniform(-0.2, 0.9), LKJ(3), StretchedBeta(6, 4), TruncatedNormal(0.4, 0.3), FisherNormal(-0.3, 0.5)],
    ids=repr,
)
def test_moments_against_draws(prior):
    rho = prior.draw(200_000, random_seed=5)
    odds = rho / np.sqrt(1 - rho**2)
    for stated, values in zip(prior.odds_moments(), (odds, odds**2), strict=True):
        assert abs(values.mean() - stated) < 5 * values.std() / math.sqrt(values.size)
    assert abs(rho.mean() - prior.rho_mean()) < 5 * rho.std() / math.sqrt(rho.size)
    assert rho.std() == pytest.approx(prior.rho_sd(), rel=0.01)
