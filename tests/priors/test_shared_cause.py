"""The belief that one unmeasured cause is behind ρ: against simulation, quadrature and series."""

import math
import pickle
import re

import numpy as np
import pytest
import scipy.stats

import bayesmed.priors as priors
from bayesmed.core.errors import PriorError
from bayesmed.priors import BetaShare, PointMass, SharedCause

from .references import by_quadrature

PAIRS = [
    ((1, 9), (1, 9)),
    ((2, 5), (3, 3)),
    ((0.5, 0.5), (0.5, 0.5)),
    ((0.1, 0.1), (0.3, 4)),
    ((0.06, 0.2), (0.06, 0.2)),
    ((3, 0.26), (2, 0.26)),
    ((500, 500), (20, 80)),
    ((0.05, 300), (1, 1)),
]
each_pair = pytest.mark.parametrize(("first", "second"), PAIRS, ids=str)
Q = np.array([1e-3, 0.01, 0.1, 0.5, 0.9, 0.99, 0.999])


@pytest.mark.parametrize(("share_m", "share_y", "sign"), [(0.3, 0.2, 1), (0.5, 0.1, -1)])
def test_residual_correlation_that_an_actual_cause_leaves(share_m, share_y, sign):
    """A cause U moves mediator and outcome; regressions that know the structure but not U leave"
    " correlation ρ."""
    rng = np.random.default_rng(11)
    n = 400_000
    exposure, cause = rng.integers(0, 2, n), rng.normal(size=n)
    error_m = np.sqrt(share_m) * cause + np.sqrt(1 - share_m) * rng.normal(size=n)
    error_y = sign * np.sqrt(share_y) * cause + np.sqrt(1 - share_y) * rng.normal(size=n)
    mediator = 1 + 0.5 * exposure + 2 * error_m
    outcome = 0.7 * mediator - 0.2 * exposure + 3 * error_y
    left_m = mediator - (1 + 0.5 * exposure)
    left_y = outcome - (0.7 * mediator - 0.2 * exposure)
    seen = np.corrcoef(left_m, left_y)[0, 1]
    prior = SharedCause(share_m, share_y, positive=float(sign > 0))
    assert prior.atoms() == ((pytest.approx(seen, abs=5 / math.sqrt(n)), 1.0),)
    # the shares are what U explains of each
    assert np.corrcoef(cause, left_m)[0, 1] ** 2 == pytest.approx(share_m, abs=0.005)


def test_many_worlds_each_with_its_own_cause():
    """Shares and sign drawn anew in each world, ρ then taken from the covariance that the two paths imply."""
    rng = np.random.default_rng(12)
    worlds = 50_000
    path_m = np.sqrt(rng.beta(1.5, 4, worlds))
    path_y = np.sqrt(rng.beta(2, 6, worlds)) * np.where(rng.random(worlds) < 0.7, 1, -1)
    noise_m, noise_y = 1 - path_m**2, 1 - path_y**2
    rho = path_m * path_y / np.sqrt((path_m**2 + noise_m) * (path_y**2 + noise_y))
    prior = SharedCause(BetaShare(1.5, 4), BetaShare(2, 6), positive=0.7)
    assert scipy.stats.kstest(rho, prior.cdf).statistic < scipy.stats.kstwo.ppf(1 - 1e-6, worlds)
    odds = rho / np.sqrt(1 - rho**2)
    for stated, values in zip(prior.odds_moments(), (odds, odds**2), strict=True):
        assert abs(values.mean() - stated) < 5 * values.std() / math.sqrt(worlds)
    assert prior.rho_mean() == pytest.approx(rho.mean(), abs=5 * rho.std() / math.sqrt(worlds))
    assert prior.rho_sd() == pytest.approx(rho.std(), rel=0.02)


@each_pair
def test_cdf_against_quadrature_over_the_first_share(first, second):
    """P(B₁B₂ ≤ v) = E[F₂(v/B₁)], over quantiles of B₁ at normal scores, with a break where v/B₁ passes 1."""
    prior = SharedCause(BetaShare(*first), BetaShare(*second), positive=1)
    s = prior.ppf(Q)
    assert prior.cdf(s) == pytest.approx(Q, abs=1e-12)
    if sum(first) < sum(second):  # integrate over the narrower share, on which the other's cdf is gentle
        first, second = second, first
    one, other = scipy.stats.beta(*first), scipy.stats.beta(*second)
    nodes, rule = np.polynomial.legendre.leggauss(200)
    for size, stated in zip(s, Q, strict=True):
        edge = np.clip(scipy.stats.norm.ppf(one.cdf(size**2)), -9, 9)
        # score = edge + (9 − edge) u⁴ flattens the corner that the other's cdf may have at the break
        u = (nodes + 1) / 2
        scores = edge + (9 - edge) * u**4
        jacobian = (9 - edge) * 4 * u**3 / 2
        ratio = np.minimum(size**2 / one.ppf(scipy.stats.norm.cdf(scores)), 1.0)
        above_break = np.sum(rule * jacobian * scipy.stats.norm.pdf(scores) * other.cdf(ratio))
        assert scipy.stats.norm.cdf(edge) + above_break == pytest.approx(stated, abs=2e-7)


@each_pair
def test_density_is_the_slope_of_the_cdf(first, second):
    prior = SharedCause(BetaShare(*first), BetaShare(*second), positive=0.3)
    x = prior.ppf(np.linspace(0.021, 0.979, 25))
    x = x[(np.abs(x) > 1e-5) & (np.abs(x) < 1 - 1e-5)]
    step = 1e-5 * np.minimum(np.abs(x), 1 - np.abs(x))
    slope = (prior.cdf(x + step) - prior.cdf(x - step)) / (2 * step)
    assert prior.pdf(x) == pytest.approx(slope, rel=1e-3)


def test_product_of_uniform_shares_in_closed_form():
    """With B₁, B₂ uniform, P(B₁B₂ ≤ v) = v(1 − log v), and E[r²] = Σ 1/(k+1)² = π²/6 − 1."""
    prior = SharedCause(BetaShare(1, 1), BetaShare(1, 1), positive=1)
    s = np.array([1e-4, 0.01, 0.2, 0.7, 0.999])
    v = s**2
    assert prior.cdf(s) == pytest.approx(v * (1 - np.log(v)), abs=1e-8)
    assert prior.pdf(s) == pytest.approx(-np.log(v) * 2 * s, rel=1e-7)
    assert prior.odds_moments()[1] == pytest.approx(math.pi**2 / 6 - 1, abs=1e-8)


@pytest.mark.parametrize("pair", [((1, 9), (1, 9)), ((0.7, 1.6), (5, 2.4)), ((40, 60), (30, 30))], ids=str)
def test_odds_moments_against_a_series(pair):
    """E[r²] = Σ_{k≥1} E[B₁ᵏ]E[B₂ᵏ], as r² = V/(1 − V)."""
    shares = [BetaShare(*shapes) for shapes in pair]
    k = np.arange(1, 400_000)
    log_terms = sum(
        scipy.special.betaln(share.alpha + k, share.beta) - scipy.special.betaln(share.alpha, share.beta)
        for share in shares
    )
    series = np.exp(log_terms).sum()
    prior = SharedCause(*shares, positive=0.9)
    first, second = prior.odds_moments()
    assert second == pytest.approx(series, rel=1e-6)
    assert first == pytest.approx(by_quadrature(prior, 1), rel=1e-6)


@pytest.mark.parametrize(("fixed", "shapes"), [(0.3, (1, 4)), (0.97, (0.4, 0.3)), (0.01, (30, 5))])
def test_one_fixed_share(fixed, shapes):
    prior = SharedCause(fixed, BetaShare(*shapes), positive=0.25)
    assert prior == SharedCause(fixed, BetaShare(*shapes), 0.25)
    assert prior.support() == (-math.sqrt(fixed), math.sqrt(fixed))
    rng = np.random.default_rng(3)
    rho = np.sqrt(fixed * rng.beta(*shapes, 20_000)) * np.where(rng.random(20_000) < 0.25, 1, -1)
    assert scipy.stats.kstest(rho, prior.cdf).statistic < scipy.stats.kstwo.ppf(1 - 1e-6, 20_000)
    first, second = prior.odds_moments()
    nodes, rule = scipy.special.roots_sh_jacobi(200, sum(shapes) - 1, shapes[0])  # weight x^(a−1) (1−x)^(b−1)
    squares = fixed * nodes / (1 - fixed * nodes)
    assert second == pytest.approx(rule @ squares / rule.sum(), rel=1e-7)
    assert first == pytest.approx(-0.5 * rule @ np.sqrt(squares) / rule.sum(), rel=1e-5)
    mirrored = SharedCause(BetaShare(*shapes), fixed, positive=0.25)
    assert mirrored.cdf(0.1) == prior.cdf(0.1)
    assert prior.cdf(prior.ppf(Q)) == pytest.approx(Q, abs=1e-9)


def test_two_fixed_shares_are_two_atoms():
    prior = SharedCause(0.16, 0.25, positive=0.75)
    assert prior.atoms() == ((-0.2, 0.25), (0.2, 0.75))
    assert prior.below([-0.2, 0, 0.2]).tolist() == [0, 0.25, 0.25]
    assert prior.above([-0.2, 0, 0.2]).tolist() == [0.75, 0.75, 0]
    assert prior.cdf([-0.3, -0.2, 0.2]).tolist() == [0, 0.25, 1]
    assert prior.ppf([0.2, 0.25, 0.3]).tolist() == [-0.2, -0.2, 0.2]
    assert prior.logpdf([-0.2, 0.1]).tolist() == [np.inf, -np.inf]
    assert prior.odds_moments() == pytest.approx((0.5 * 0.2 / math.sqrt(0.96), 0.04 / 0.96))
    assert (prior.rho_mean(), prior.rho_sd()) == pytest.approx((0.1, math.sqrt(0.03)))
    nothing = SharedCause(0, BetaShare(1, 1))
    assert nothing.atoms() == PointMass(0).atoms()
    assert nothing.ppf([0.1, 0.9]).tolist() == [0, 0]
    assert nothing.odds_moments() == (0, 0)


@pytest.mark.parametrize("positive", [0, 0.3, 1])
def test_sign(positive):
    prior = SharedCause(BetaShare(1, 3), BetaShare(2, 3), positive=positive)
    assert prior.above(0) == pytest.approx(positive)
    assert prior.below(0) == pytest.approx(1 - positive)
    assert prior.support() == (-1.0 if positive < 1 else 0.0, 1.0 if positive > 0 else 0.0)
    mirror = SharedCause(BetaShare(1, 3), BetaShare(2, 3), positive=1 - positive)
    x = np.linspace(-0.9, 0.9, 20)
    assert prior.logpdf(x) == pytest.approx(mirror.logpdf(-x))
    assert prior.cdf(x) == pytest.approx(mirror.above(-x), abs=1e-12)
    q = np.linspace(0.01, 0.99, 21)
    assert prior.cdf(prior.ppf(q)) == pytest.approx(q, abs=1e-12)
    assert np.all(np.isfinite(prior.draw(1000, random_seed=1)))


def test_infinite_mean_takes_the_sign_or_is_undefined():
    shares = BetaShare(2, 0.2), BetaShare(2, 0.2)
    assert SharedCause(*shares, positive=1).odds_moments() == (math.inf, math.inf)
    assert SharedCause(*shares, positive=0).odds_moments() == (-math.inf, math.inf)
    assert math.isnan(SharedCause(*shares, positive=0.9).odds_moments()[0])


def test_value_semantics():
    for prior in (SharedCause(0.2, 0.1), SharedCause(BetaShare(1, 9), 0.3, positive=0.8)):
        assert eval(repr(prior), vars(priors)) == prior
        assert pickle.loads(pickle.dumps(prior)) == prior
        assert hash(pickle.loads(pickle.dumps(prior))) == hash(prior)


@pytest.mark.parametrize(
    ("build", "message"),
    [
        (lambda: SharedCause(1, 0.2), "SharedCause: r2_mediator is 1; a share of variance from 0 up to but not"),
        (lambda: SharedCause(0.1, -0.2), "SharedCause: r2_outcome is -0.2; a share of variance"),
        (lambda: SharedCause(0.1, "all"), "SharedCause: r2_outcome is 'all'; a share of variance"),
        (lambda: SharedCause(0.1, 0.1, 1.5), "SharedCause: positive is 1.5; it is the probability of a positive"),
        (lambda: SharedCause(0.1, 0.1, math.nan), "SharedCause: positive is nan; it is the probability"),
        (lambda: BetaShare(0, 1), "BetaShare: alpha is 0; it must be above 0"),
        (lambda: SharedCause(BetaShare(1e5, 1e5), BetaShare(1, 1)), "is as good as certain; give the number 0.5"),
    ],
)
def test_refused(build, message):
    with pytest.raises(PriorError, match=re.escape(message)):
        build()
