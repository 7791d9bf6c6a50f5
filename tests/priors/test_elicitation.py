"""From stated quantiles, or the draws of another study, to a belief."""

import re

import numpy as np
import pytest
import scipy.stats
from hypothesis import given

import bayesmed.priors as priors
from bayesmed.core.errors import PriorError
from bayesmed.priors import (
    LKJ,
    FisherNormal,
    StretchedBeta,
    Tabulated,
    TruncatedNormal,
    Uniform,
    from_draws,
    from_quantiles,
    quantile_gaps,
)

from .references import by_quadrature
from .strategies import numbers, quick


@pytest.mark.parametrize("family", ["StretchedBeta", "TruncatedNormal", "FisherNormal", "Uniform"])
@pytest.mark.parametrize("ends", [(-0.1, 0.4), (-0.45, 0.45), (0.7, 0.85), (0.2, 0.21)])
def test_two_quantiles_are_met(family, ends):
    stated = dict(zip((0.05, 0.95), ends, strict=True))
    prior = from_quantiles(stated, family)
    assert type(prior).__name__ == family
    assert prior.ppf([0.05, 0.95]) == pytest.approx(ends, abs=1e-6)
    assert quantile_gaps(prior, stated) == {
        0.05: (ends[0], pytest.approx(ends[0], abs=1e-6)),
        0.95: (ends[1], pytest.approx(ends[1], abs=1e-6)),
    }


@quick
@given(numbers(1.1, 40), numbers(1.1, 40))
def test_a_known_beta_is_found_again(alpha, beta):
    known = StretchedBeta(alpha, beta)
    stated = {q: float(known.ppf(q)) for q in (0.1, 0.5, 0.9)}
    found = from_quantiles(stated)
    assert (found.alpha, found.beta) == pytest.approx((alpha, beta), rel=1e-4)


@pytest.mark.parametrize(
    "known", [FisherNormal(0.4, 0.3), TruncatedNormal(-0.2, 0.25), Uniform(-0.3, 0.6), LKJ(4)], ids=repr
)
def test_other_families_are_found_again(known):
    stated = {q: float(known.ppf(q)) for q in (0.05, 0.3, 0.8)}
    found = from_quantiles(stated, type(known).__name__)
    assert vars(found) == pytest.approx(vars(known), rel=1e-5, abs=1e-7)


def test_u_shapes_need_leave():
    stated = {0.25: -0.8, 0.75: 0.8}
    with pytest.raises(PriorError, match=r"rises without bound towards -1 and 1, .* allow_u_shape=True"):
        from_quantiles(stated)
    allowed = from_quantiles(stated, allow_u_shape=True)
    assert max(allowed.alpha, allowed.beta) < 1
    assert allowed.ppf([0.25, 0.75]) == pytest.approx([-0.8, 0.8], abs=1e-6)


def test_quantiles_no_member_has_are_refused_with_what_the_nearest_has():
    stated = {0.1: -0.1, 0.5: 0.35, 0.9: 0.4}
    with pytest.raises(PriorError, match=r"no FisherNormal has these quantiles within 0.02; the nearest") as caught:
        from_quantiles(stated, "FisherNormal")
    assert "(stated 0.35)" in str(caught.value)
    near = from_quantiles(stated, "FisherNormal", tolerance=0.3)
    assert repr(near) in str(caught.value)
    gaps = quantile_gaps(near, stated)
    assert 0.02 < max(abs(a - b) for a, b in gaps.values()) < 0.3
    # least squares: no member nearby does better
    misses = sum((a - b) ** 2 for a, b in gaps.values())
    for mean, sd in ((1e-3, 0), (-1e-3, 0), (0, 1e-3), (0, -1e-3)):
        other = FisherNormal(near.mean + mean, near.sd + sd)
        assert sum((a - b) ** 2 for a, b in quantile_gaps(other, stated).values()) > misses


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: from_quantiles({}), "quantiles is {}; a dict of probability to value is needed"),
        (lambda: from_quantiles([0.1]), "quantiles is [0.1]; a dict of probability to value is needed"),
        (lambda: from_quantiles({0.5: 0.1}), "StretchedBeta needs two quantiles or more, and there is 1"),
        (lambda: from_quantiles({5: 0.1, 95: 0.2}), "a probability is 5.0; it must lie strictly between 0 and 1"),
        (lambda: from_quantiles({0.1: -1, 0.9: 0.2}), "the quantile at 0.1 is -1.0; it must lie strictly between"),
        (lambda: from_quantiles({0.1: 0.3, 0.9: 0.2}), "the quantile at 0.9 is 0.2; it must exceed that at 0.1, which"),
        (lambda: from_quantiles({"low": 0.3}), "a probability is 'low'; a finite number is needed"),
        (lambda: from_quantiles({0.1: 0, 0.9: 0.2}, "Cauchy"), "family is 'Cauchy'; it is one of StretchedBeta, "),
        (lambda: from_quantiles({0.2: -0.9, 0.8: 0.9}, "Uniform"), "would reach from -1.5 to 1.5"),
    ],
)
def test_refused(call, message):
    with pytest.raises(PriorError, match=re.escape(message)):
        call()


def test_draws_give_back_the_distribution_they_came_from():
    known = FisherNormal(0.4, 0.25)
    draws = known.draw((4, 1000), random_seed=8)
    smoothed = from_draws(draws)
    x = np.linspace(-0.3, 0.9, 200)
    # the empirical cdf of n draws is within 1.63/√n with 99 % probability (Kolmogorov); smoothing adds little to that
    assert np.abs(smoothed.cdf(x) - known.cdf(x)).max() < 1.63 / np.sqrt(4000) + 0.005
    assert np.abs(smoothed.pdf(x) - known.pdf(x)).max() < 0.1 * known.pdf(x).max()
    z = np.arctanh(draws)
    assert np.tanh(z.mean()) == pytest.approx(smoothed.ppf(0.5), abs=0.02)
    # mean and SD on Fisher's scale are kept
    fine = np.arctanh(smoothed.ppf((np.arange(20_000) + 0.5) / 20_000))
    assert fine.mean() == pytest.approx(z.mean(), abs=2e-3)
    assert fine.std() == pytest.approx(z.std(), rel=0.01)
    odds = draws / np.sqrt(1 - draws**2)
    assert smoothed.odds_moments() == pytest.approx((odds.mean(), (odds**2).mean()), rel=0.02)
    assert from_draws(draws.ravel()[::-1]) == smoothed
    assert eval(repr(smoothed), vars(priors)) == smoothed


def test_many_draws_are_reduced_and_few_refused():
    draws = LKJ(3).draw(300_000, random_seed=2)
    assert np.abs(from_draws(draws).cdf(draws[:500]) - LKJ(3).cdf(draws[:500])).max() < 0.01
    with pytest.raises(PriorError, match="there are 7 draws; at least 100 are needed"):
        from_draws(draws[:7])
    with pytest.raises(PriorError, match=r"draw 3 is 1.0; it must be between -1 and 1"):
        from_draws(np.insert(draws[:200], 3, 1.0))
    with pytest.raises(PriorError, match=r"draw 0 is nan"):
        from_draws(np.full(200, np.nan))
    with pytest.raises(PriorError, match=r"all draws are 0.3; PointMass\(0.3\) says so"):
        from_draws(np.full(200, 0.3))


def test_table_passes_through_its_points():
    table = Tabulated([-0.4, -0.1, 0.2, 0.6], [0, 0.3, 0.8, 1])
    assert table.cdf([-0.4, -0.1, 0.2, 0.6]) == pytest.approx([0, 0.3, 0.8, 1])
    assert table.ppf([0.3, 0.8]) == pytest.approx([-0.1, 0.2])
    x = np.linspace(-0.4, 0.6, 101)
    assert np.all(np.diff(table.cdf(x)) > 0)
    assert table.support() == (-0.4, 0.6)
    assert table.logpdf([-0.5, 0.7]).tolist() == [-np.inf, -np.inf]
    area = scipy.integrate.quad(lambda value: float(table.pdf(value)), -0.1, 0.2)[0]
    assert area == pytest.approx(0.5, abs=1e-7)
    first, second = table.odds_moments()
    assert first == pytest.approx(by_quadrature(table, 1), rel=1e-5)
    assert second == pytest.approx(by_quadrature(table, 2), rel=1e-5)


@pytest.mark.parametrize(
    ("values", "probabilities", "message"),
    [
        ([0, 0.1], [0, 0.5, 1], "there are 2 values and 3 probabilities"),
        ([0], [1], "two or more of each are needed"),
        ([-1, 0.1], [0, 1], "values[0] is -1.0; it must lie strictly between -1 and 1"),
        ([0.2, 0.1], [0, 1], "values[1] is 0.1; it must exceed the one before, 0.2"),
        ([0, 0.1, 0.2], [0, 0.7, 0.6], "probabilities[2] is 0.6; it is less than the one before, 0.7"),
        ([0, 0.1], [0.1, 1], "probabilities[0] is 0.1; it must be 0"),
        ([0, 0.1], [0, 0.9], "probabilities[1] is 0.9; it must be 1"),
    ],
)
def test_tables_refused(values, probabilities, message):
    with pytest.raises(PriorError, match=re.escape(message)):
        Tabulated(values, probabilities)
