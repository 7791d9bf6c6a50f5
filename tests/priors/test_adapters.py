"""Distributions of other libraries, and makers of PyMC variables, as beliefs."""

import math

import numpy as np
import pytest
import scipy.stats

import bayesmed.priors as priors
from bayesmed.core.errors import PriorError
from bayesmed.priors import FisherNormal, FromScipy, StretchedBeta, TruncatedNormal, Uniform, Wrapped, coerce

X = np.linspace(-0.95, 0.95, 39)


class LikeATriangle:
    """A distribution with the methods of one, of no library: support as an attribute, no logpdf."""

    support = (-0.2, 0.4)

    def __init__(self):
        self._inner = scipy.stats.triang(1 / 3, -0.2, 0.6)

    def cdf(self, x):
        return self._inner.cdf(x)

    def ppf(self, q):
        return self._inner.ppf(q)

    def pdf(self, x):
        return self._inner.pdf(x)


class OneVariable:
    def to_pymc(self, name):
        import pymc as pm

        return pm.TruncatedNormal(name, 0.2, 0.1, lower=-0.9, upper=0.9)


class Reaching:
    """Made by the other method name, on all of (−1, 1), with a pole at −1."""

    def create_variable(self, name):
        return StretchedBeta(0.7, 3).to_pymc(name)


class WithParents:
    def to_pymc(self, name):
        import pymc as pm

        scale = pm.Gamma(f"{name}_scale", 20, 100)
        return pm.Deterministic(name, pm.math.tanh(0.3 + scale * pm.Normal(f"{name}_raw", 0, 1)))


class Unbounded:
    def to_pymc(self, name):
        import pymc as pm

        return pm.Normal(name, 0, 1)


class Several:
    def to_pymc(self, name):
        import pymc as pm

        return pm.Uniform(name, 0, 1, shape=3)


@pytest.mark.parametrize(
    ("frozen", "family"),
    [
        (scipy.stats.beta(2, 3, -1, 2), StretchedBeta(2, 3)),
        (scipy.stats.beta(a=2, b=3, loc=-1, scale=2), StretchedBeta(2, 3)),
        (scipy.stats.uniform(-0.25, 0.5), Uniform(-0.25, 0.25)),
        (scipy.stats.truncnorm(-2, 1, loc=0.5, scale=0.25), TruncatedNormal(0.5, 0.25, 0, 0.75)),
    ],
)
def test_families_under_another_name_are_recognised(frozen, family):
    assert coerce(frozen) == family


@pytest.mark.parametrize(
    "frozen",
    [
        scipy.stats.triang(0.3, -0.2, 0.5),
        scipy.stats.beta(2, 2),
        scipy.stats.truncnorm(1, 3, loc=-0.5, scale=0.25),
        scipy.stats.beta(4, 3, -1, 2.0).dist(4, 3, loc=-0.9, scale=1.8),
    ],
)
def test_any_frozen_scipy_distribution_inside(frozen):
    prior = coerce(frozen)
    assert isinstance(prior, FromScipy)
    assert eval(repr(prior), vars(priors)) == prior
    assert priors.from_spec(priors.to_spec(prior)) == prior
    assert prior.support() == frozen.support()
    assert prior.cdf(X) == pytest.approx(frozen.cdf(X))
    assert prior.logpdf(X) == pytest.approx(frozen.logpdf(X))
    assert prior.ppf(0.3) == pytest.approx(frozen.ppf(0.3))
    assert prior.rho_mean() == pytest.approx(frozen.mean(), abs=1e-9)
    assert prior.rho_sd() == pytest.approx(frozen.std(), rel=1e-7)
    first, second = prior.odds_moments()
    assert first == pytest.approx(frozen.expect(lambda x: x / np.sqrt(1 - x**2)), rel=1e-4)
    if frozen.support()[1] < 1:
        assert second == pytest.approx(frozen.expect(lambda x: x**2 / (1 - x**2)), rel=1e-5)


@pytest.mark.parametrize(("a", "b"), [(0.4, 3), (0.4, 0.3), (0.7, 3), (1, 3), (1.1, 3), (3, 1.3), (8, 4)])
def test_tails_of_a_foreign_density_are_read_as_those_of_our_own(a, b):
    foreign, own = Wrapped(scipy.stats.beta(a, b, -1, 2)), StretchedBeta(a, b)
    assert foreign.odds_moments() == pytest.approx(own.odds_moments(), rel=2e-4, nan_ok=True)
    assert foreign.rho_mean() == pytest.approx(own.rho_mean(), abs=1e-6)


def test_thin_tails_of_a_foreign_density():
    """A density that falls to 0 at ±1 faster than any power, as a normal on Fisher's scale does."""

    class Foreign:
        support = (-1, 1)
        cdf, ppf, logpdf = (staticmethod(getattr(FisherNormal(0.2, 0.6), name)) for name in ("cdf", "ppf", "logpdf"))

    assert coerce(Foreign()).odds_moments() == pytest.approx(FisherNormal(0.2, 0.6).odds_moments(), rel=1e-9)


def test_histogram_and_other_objects_with_the_methods():
    counts = np.histogram(np.random.default_rng(0).uniform(-0.5, 0.5, 1000), 10)
    histogram = scipy.stats.rv_histogram(counts, density=False)
    for source in (histogram, LikeATriangle()):
        prior = coerce(source)
        assert isinstance(prior, Wrapped)
        assert prior.cdf(X) == pytest.approx(source.cdf(X))
        assert prior.cdf(prior.ppf(0.3)) == pytest.approx(0.3)
        assert np.exp(prior.logpdf(0.1)) == pytest.approx(source.pdf(0.1))
        assert hash(prior) == hash(prior)
        with pytest.raises(PriorError, match="cannot be written in a study file"):
            priors.to_spec(prior)
    assert coerce(LikeATriangle()).support() == (-0.2, 0.4)


@pytest.mark.parametrize(
    ("value", "message"),
    [
        (scipy.stats.norm(0, 0.1), r"made from norm: its support is \(-inf, inf\)"),
        (scipy.stats.beta(2, 2, -1, 2.5), r"its support is \(-1, 1.5\), and a residual correlation lies between"),
        (scipy.stats.beta, "beta_gen without its parameters; give them"),
        (scipy.stats.uniform, "uniform_gen without its parameters; give them"),
        (scipy.stats.bernoulli(0.3), "the discrete distribution bernoulli"),
        (LikeATriangle, "the class LikeATriangle; give an instance of it"),
        (Unbounded(), r"it gives \(-1, 1\) the probability 0.6827; all of it must lie there"),
        (Several(), "and one number is needed"),
    ],
)
def test_refused(value, message):
    with pytest.raises(PriorError, match=message):
        coerce(value)


def test_atoms_of_a_foreign_distribution_are_refused():
    class HalfCertain(LikeATriangle):
        def cdf(self, x):
            return 0.5 * self._inner.cdf(x) + 0.5 * (np.asarray(x) >= 0)

        def ppf(self, q):
            return priors.Mixture([0, coerce(LikeATriangle())], [1, 1]).ppf(q)

    with pytest.raises(PriorError, match="so it is not continuous; use Mixture"):
        coerce(HalfCertain())


def test_named_distributions_are_checked():
    with pytest.raises(PriorError, match="FromScipy: name is 'norml'; a continuous distribution"):
        FromScipy("norml")
    with pytest.raises(PriorError, match=r"scipy.stats.triang has no quantiles"):
        FromScipy("triang", [7])


@pytest.mark.parametrize(
    ("maker", "same"),
    [(OneVariable(), TruncatedNormal(0.2, 0.1, -0.9, 0.9)), (Reaching(), StretchedBeta(0.7, 3))],
    ids=["to_pymc", "create_variable"],
)
def test_maker_of_one_free_variable_is_known_by_its_density(maker, same):
    import pymc as pm

    prior = coerce(maker)
    assert prior.basis == "density"
    assert prior.support() == pytest.approx(same.support())
    assert prior.logpdf(X[1:-1]) == pytest.approx(same.logpdf(X[1:-1]), abs=1e-7)
    assert prior.cdf(X) == pytest.approx(same.cdf(X), abs=1e-6)
    q = np.linspace(0.01, 0.99, 9)
    assert prior.ppf(q) == pytest.approx(same.ppf(q), abs=1e-6)
    assert prior.odds_moments() == pytest.approx(same.odds_moments(), rel=1e-5)
    assert (prior.rho_mean(), prior.rho_sd()) == pytest.approx((same.rho_mean(), same.rho_sd()), abs=1e-6)
    with pm.Model() as model:
        variable = prior.to_pymc("rho")
    assert model.free_RVs == [variable]


def test_maker_with_parents_is_known_by_draws():
    prior = coerce(WithParents())
    assert prior.basis == "draws"
    rng = np.random.default_rng(4)
    rho = np.tanh(0.3 + rng.gamma(20, 1 / 100, 20_000) * rng.normal(size=20_000))
    assert scipy.stats.kstest(rho, prior.cdf).statistic < 0.02
    assert np.all(np.isfinite(prior.odds_moments()))
    assert not math.isclose(prior.rho_sd(), 0)
