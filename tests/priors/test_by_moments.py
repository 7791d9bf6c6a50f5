"""Members of a family by the mean and SD of rho: there and back, and where there is none."""

import math
import re

import numpy as np
import pytest
from hypothesis import given

from bayesmed.core.errors import PriorError
from bayesmed.priors import FisherNormal, StretchedBeta, TruncatedNormal
from bayesmed.priors.by_moments import FAMILIES, members, with_mean_and_sd

from .strategies import fisher_normals, numbers, quick, stretched_betas


@quick
@given(prior=stretched_betas)
def test_beta_there_and_back(prior):
    found = with_mean_and_sd(prior.rho_mean(), prior.rho_sd())
    assert (found.alpha, found.beta) == pytest.approx((prior.alpha, prior.beta), rel=1e-6)


@quick
@given(prior=fisher_normals)
def test_fisher_normal_there_and_back(prior):
    found = with_mean_and_sd(prior.rho_mean(), prior.rho_sd(), "FisherNormal")
    assert isinstance(found, FisherNormal)
    assert (found.mean, found.sd) == pytest.approx((prior.mean, prior.sd), rel=1e-4, abs=1e-5)


@quick
@given(where=numbers(0.0, 1.0), sd=numbers(0.01, 3.0))
def test_truncated_normal_there_and_back(where, sd):
    prior = TruncatedNormal(-0.7 + 1.6 * where, sd, -0.7, 0.9)
    mean, spread = prior.rho_mean(), prior.rho_sd()
    # A member with its centre on a bound may be missed by rounding; a hair inside it is found.
    found = members("TruncatedNormal", np.array([mean]), np.array([spread * (1 - 1e-7)]), (-0.7, 0.9))
    assert found.exist[0]
    again = found.prior(0)
    assert (again.rho_mean(), again.rho_sd()) == pytest.approx((mean, spread), abs=1e-6)


@pytest.mark.parametrize("family", FAMILIES)
def test_every_member_of_a_plane_has_its_mean_and_sd(family):
    mean, sd = (grid.ravel() for grid in np.meshgrid(np.linspace(-0.93, 0.93, 11), np.linspace(0.01, 0.9, 11)))
    found = members(family, mean, sd)
    for pair in np.flatnonzero(found.exist):
        prior = found.prior(int(pair))
        assert prior.rho_mean() == pytest.approx(mean[pair], abs=1e-5)
        assert prior.rho_sd() == pytest.approx(sd[pair], abs=1e-5)
    # No distribution on (-1, 1) has a larger SD.
    assert not np.any(found.exist & (sd**2 >= 1 - mean**2))
    if family == "StretchedBeta":
        np.testing.assert_array_equal(found.exist, sd**2 < 1 - mean**2)


@pytest.mark.parametrize("sd", [0.05, 0.3, 1.0, 3.0])
@pytest.mark.parametrize("centre", [-0.99, 0.99])
def test_truncated_normals_end_where_the_centre_is_on_a_bound(centre, sd):
    """At the mean of such a member a slightly larger SD belongs to none, a slightly smaller one to another."""
    edge = TruncatedNormal(centre, sd)
    mean, spread = edge.rho_mean(), edge.rho_sd()
    found = members("TruncatedNormal", np.array([mean, mean]), spread * np.array([1.001, 0.999]))
    assert found.exist.tolist() == [False, True]


def test_fisher_normals_end_with_the_largest_sd_allowed():
    widest = FisherNormal(0.5, 8.0)
    mean, spread = widest.rho_mean(), widest.rho_sd()
    found = members("FisherNormal", np.array([mean, mean]), spread + np.array([1e-3, -1e-3]))
    assert found.exist.tolist() == [False, True]


@pytest.mark.parametrize("family", FAMILIES)
def test_curves_are_those_of_the_priors(family):
    mean, sd = np.array([0.1, -0.4, 0.6]), np.array([0.05, 0.2, 0.15])
    found, t = members(family, mean, sd), np.linspace(-1.5, 1.8, 331)
    cdf, density = found.at(np.arange(3), t)
    for pair in range(3):
        prior = found.prior(pair)
        np.testing.assert_allclose(cdf[pair], prior.cdf(np.tanh(t)), atol=1e-9)
        np.testing.assert_allclose(density[pair], prior.pdf(np.tanh(t)) / np.cosh(t) ** 2, rtol=1e-6, atol=1e-12)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ((1.0, 0.1), "with_mean_and_sd: mean is 1.0; it must lie strictly between -1 and 1"),
        ((0.0, -0.1), "with_mean_and_sd: sd is -0.1; it must be above 0"),
        ((0.0, math.nan), "with_mean_and_sd: sd is nan; a finite number above 0 is needed"),
        ((0.9, 0.5), "no StretchedBeta has mean 0.9 and SD 0.5 of rho; a smaller SD is needed"),
        ((0.6, 0.5, "TruncatedNormal"), "no TruncatedNormal with its centre within the bounds has mean 0.6 and SD 0.5"),
        ((0.0, 0.1, "Normal"), "family is 'Normal'; it is one of StretchedBeta, TruncatedNormal, FisherNormal"),
        ((0.0, 0.1, "FisherNormal", (-1, 1)), "bounds is (-1, 1); FisherNormal reaches from -1 to 1 and takes none"),
    ],
)
def test_refusals(arguments, message):
    with pytest.raises(PriorError, match=re.escape(message)):
        with_mean_and_sd(*arguments)


def test_the_uniform_is_a_stretched_beta():
    found = with_mean_and_sd(0.0, 1 / math.sqrt(3))
    assert isinstance(found, StretchedBeta)
    assert (found.alpha, found.beta) == pytest.approx((1.0, 1.0))
