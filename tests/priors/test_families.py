"""The families of beliefs: their functions agree with one another, with scipy and with published forms."""

import itertools
import pickle
import subprocess
import sys

import numpy as np
import pytest
import scipy.integrate
import scipy.stats
from hypothesis import given

import bayesmed.priors as priors
from bayesmed.core.errors import PriorError
from bayesmed.priors import LKJ, FisherNormal, PointMass, StretchedBeta, TruncatedNormal, Uniform

from .strategies import continuous, numbers, probabilities, quick

X = np.linspace(-0.98, 0.98, 41)


@quick
@given(continuous, probabilities)
def test_quantile_and_cdf_are_inverse(prior, q):
    x = prior.ppf(q)
    lower, upper = prior.support()
    assert lower <= x <= upper
    # where the density is very high, the spacing of doubles in x bounds what the cdf can give back
    slack = 1e-9 + 4 * np.exp(min(float(prior.logpdf(x)), 300.0)) * np.spacing(1.0)
    assert prior.cdf(x) == pytest.approx(q, abs=slack)
    assert prior.below(x) + prior.above(x) == pytest.approx(1.0, abs=1e-15)


@quick
@given(continuous, probabilities, probabilities)
def test_density_integrates_to_the_cdf(prior, first, second):
    # over atanh x, on which a pole of the density at ±1 is gone
    start, stop = np.arctanh(prior.ppf([min(first, second), max(first, second)]))
    edges = np.unique(np.clip(np.arctanh(prior.ppf([0.001, 0.1, 0.5, 0.9, 0.999])), start, stop))
    edges = np.unique([start, *edges, stop])
    area = sum(
        scipy.integrate.quad(lambda t: float(prior.pdf(np.tanh(t))) / np.cosh(t) ** 2, a, b, limit=200)[0]
        for a, b in itertools.pairwise(edges)
    )
    assert area == pytest.approx(float(prior.cdf(np.tanh(stop)) - prior.cdf(np.tanh(start))), abs=1e-7)


@quick
@given(continuous)
def test_value_semantics(prior):
    again = eval(repr(prior), vars(priors))
    assert again == prior
    assert hash(again) == hash(prior)
    assert pickle.loads(pickle.dumps(prior)) == prior
    assert prior.atoms() == ()


@quick
@given(continuous, numbers(-3, 3))
def test_outside_the_support(prior, x):
    lower, upper = prior.support()
    if x < lower or x <= -1:
        assert (prior.cdf(x), prior.logpdf(x)) == (0, -np.inf)
    if x > upper or x >= 1:
        assert (prior.cdf(x), prior.logpdf(x)) == (1, -np.inf)


@quick
@given(continuous)
def test_draws_follow_the_cdf(prior):
    draws = prior.draw(4000, random_seed=1)
    assert np.all(np.abs(draws) < 1)
    # Kolmogorov's statistic against its 1 − 1e-6 point for 4,000 draws from one seed
    assert scipy.stats.kstest(draws, prior.cdf).statistic < scipy.stats.kstwo.ppf(1 - 1e-6, 4000)


EVERY_KIND = [
    PointMass(0.2),
    Uniform(-1, 1),
    TruncatedNormal(0.3, 0.1, -1, 1),
    StretchedBeta(0.4, 3),
    FisherNormal(0.1, 0.5),
    LKJ(2),
    priors.Mixture([0, LKJ(2)], [1, 1]),
    priors.SharedCause(0.1, 0.2),
    priors.SharedCause(priors.BetaShare(1, 2), 0.2, positive=1),
    priors.SharedCause(priors.BetaShare(1, 2), priors.BetaShare(2, 2)),
    priors.Tabulated([-0.5, 0, 0.3], [0, 0.5, 1]),
    priors.FromScipy("triang", [0.3], -1, 2),
]


@pytest.mark.parametrize("prior", EVERY_KIND, ids=repr)
def test_shapes_ends_and_nan(prior):
    assert prior.draw((3, 4), random_seed=0).shape == (3, 4)
    assert isinstance(float(prior.draw(random_seed=0)), float)
    for function in (prior.cdf, prior.logpdf, prior.below, prior.above, prior.pdf):
        assert function(np.zeros((2, 1, 3))).shape == (2, 1, 3)
        assert np.ndim(function(0.1)) == 0
        assert np.isnan(function([np.nan, 0.1])).tolist() == [True, False]
        assert function([]).shape == (0,)
    ends = np.array([-1.5, -1, 1, 1.5])
    assert prior.cdf(ends).tolist() == prior.below(ends).tolist() == [0, 0, 1, 1]
    assert prior.above(ends).tolist() == [1, 1, 0, 0]
    assert prior.logpdf(ends).tolist() == [-np.inf] * 4
    assert tuple(prior.ppf([0, 1])) == prior.support()
    assert np.all(np.abs(prior.ppf([1e-300, 1 - 1e-16])) < 1)
    assert prior.ppf(np.full((2, 2), 0.3)).shape == (2, 2)
    assert prior.ppf([]).shape == (0,)


def test_one_seed_gives_one_set_of_uniforms():
    assert np.array_equal(LKJ(2).draw(5, random_seed=3), LKJ(2).draw(5, random_seed=np.random.default_rng(3)))
    assert LKJ(2).cdf(LKJ(2).draw(5, random_seed=3)) == pytest.approx(
        FisherNormal(0, 1).cdf(FisherNormal(0, 1).draw(5, random_seed=3))
    )


def test_importing_the_room_stays_light():
    heavy = ["pymc", "pytensor", "nutpie", "scipy.stats", "pandas", "xarray", "matplotlib", "arviz_stats"]
    code = f"import sys, bayesmed.priors; print([name for name in {heavy} if name in sys.modules])"
    shown = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert shown.stdout.strip() == "[]"


def test_probabilities_are_checked():
    with pytest.raises(PriorError, match=r"LKJ: a probability is 1.5; probabilities lie between 0 and 1"):
        LKJ(2).ppf([0.5, 1.5])
    with pytest.raises(PriorError, match="nan"):
        Uniform(0, 1).ppf(np.nan)


def test_point_mass_takes_its_atom_apart():
    prior = PointMass(np.float32(0.25))
    assert prior.value == 0.25
    assert type(prior.value) is float
    assert prior.atoms() == ((0.25, 1.0),)
    x = np.array([0.2, 0.25, 0.3])
    assert prior.below(x).tolist() == [0, 0, 1]
    assert prior.cdf(x).tolist() == [0, 1, 1]
    assert prior.above(x).tolist() == [1, 0, 0]
    assert prior.logpdf(x).tolist() == [-np.inf, np.inf, -np.inf]
    assert set(prior.ppf([0, 0.3, 1]).tolist()) == {0.25}
    assert (prior.rho_mean(), prior.rho_sd(), prior.support()) == (0.25, 0, (0.25, 0.25))
    assert repr(PointMass(-0.0)) == "PointMass(value=0.0)"


@quick
@given(numbers(0.3, 50), numbers(0.3, 50))
def test_stretched_beta_is_the_beta_of_scipy(a, b):
    ours, theirs = StretchedBeta(a, b), scipy.stats.beta(a, b, loc=-1, scale=2)
    assert ours.logpdf(X) == pytest.approx(theirs.logpdf(X), abs=1e-8)
    assert ours.cdf(X) == pytest.approx(theirs.cdf(X), abs=1e-12)
    assert ours.rho_mean() == pytest.approx(theirs.mean())
    assert ours.rho_sd() == pytest.approx(theirs.std())


def test_flat_special_cases():
    flat = Uniform(-1, 1)
    for same in (StretchedBeta(1, 1), LKJ(1)):
        assert same.logpdf(X) == pytest.approx(flat.logpdf(X))
        assert same.cdf(X) == pytest.approx(flat.cdf(X))
        assert same.odds_moments() == flat.odds_moments() == (0, np.inf)


@pytest.mark.parametrize("eta", [0.6, 1, 2, 7.5])
def test_lkj_is_a_student_t_of_the_odds(eta):
    """Lewandowski, Kurowicka & Joe (2009), doi:10.1016/j.jmva.2009.04.008 (forms recalled, not looked up).

    A single LKJ correlation is Beta(η, η) stretched over (−1, 1), its density ∝ (1 − ρ²)^(η − 1).
    Then ρ√(2η)/√(1−ρ²) is Student t with 2η degrees of freedom, as for the sample correlation of independent
    normals with n − 2 = 2η (Fisher 1915, from memory). Checked against scipy's t.
    """
    prior = LKJ(eta)
    odds = X / np.sqrt(1 - X**2)
    t = scipy.stats.t(2 * eta)
    assert prior.cdf(X) == pytest.approx(t.cdf(odds * np.sqrt(2 * eta)), abs=1e-12)
    shape = (1 - X**2) ** (eta - 1)
    assert np.ptp(prior.logpdf(X) - np.log(shape)) == pytest.approx(0, abs=1e-12)
    if eta > 1:
        assert prior.odds_moments()[1] == pytest.approx(t.var() / (2 * eta))
        assert prior.odds_moments()[1] == pytest.approx(1 / (2 * (eta - 1)))
    # the variance of ρ itself, 1/(2η + 1), as for a symmetric beta on (−1, 1)
    assert prior.rho_sd() ** 2 == pytest.approx(1 / (2 * eta + 1))


@quick
@given(numbers(-1.5, 1.5), numbers(0.05, 1.5))
def test_fisher_normal_is_a_normal_of_atanh(mean, sd):
    ours, theirs = FisherNormal(mean, sd), scipy.stats.norm(mean, sd)
    assert ours.cdf(X) == pytest.approx(theirs.cdf(np.arctanh(X)), abs=1e-12)
    assert ours.logpdf(X) == pytest.approx(theirs.logpdf(np.arctanh(X)) - np.log(1 - X**2), rel=1e-9)
    q = np.array([1e-6, 0.3, 0.999])
    assert ours.ppf(q) == pytest.approx(np.tanh(theirs.ppf(q)), abs=1e-12)


@pytest.mark.parametrize(
    ("mean", "sd", "lower", "upper"),
    [
        (0.3, 0.15, -0.99, 0.99),
        (0, 0.02, -1, 1),
        (0.9, 0.5, -0.2, 0.9),
        (-0.5, 20, -0.5, 1),
        (0, 3, -1, 0.01),
    ],
)
def test_truncated_normal_is_that_of_scipy(mean, sd, lower, upper):
    ours = TruncatedNormal(mean, sd, lower, upper)
    theirs = scipy.stats.truncnorm((lower - mean) / sd, (upper - mean) / sd, loc=mean, scale=sd)
    inside = X[(lower < X) & (upper > X)]
    assert ours.logpdf(inside) == pytest.approx(theirs.logpdf(inside), rel=1e-10, abs=1e-10)
    assert ours.cdf(X) == pytest.approx(theirs.cdf(X), abs=1e-11)
    q = np.array([1e-12, 1e-3, 0.2, 0.5, 0.8, 0.999, 1 - 1e-9])
    assert ours.ppf(q) == pytest.approx(theirs.ppf(q), abs=1e-9)
    assert ours.rho_mean() == pytest.approx(theirs.mean(), abs=1e-9)
    assert ours.rho_sd() == pytest.approx(theirs.std(), rel=1e-6)
