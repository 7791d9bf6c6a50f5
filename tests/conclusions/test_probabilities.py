"""Probabilities, intervals and moments of a fit under a belief, against brute-force draws of rho."""

import numpy as np
import pytest

import bayesmed as bm
from bayesmed.core.mapping import odds

FAMILIES = [
    0.2,
    bm.Uniform(-0.3, 0.6),
    bm.TruncatedNormal(0.3, 0.15),
    bm.StretchedBeta(3, 2),
    bm.FisherNormal(0.2, 0.3),
    bm.LKJ(2),
]
CLAIMS = [
    bm.Claim("indirect", above=0),
    bm.Claim("indirect", below=0.4),
    bm.Claim("direct", above=-0.3),
    bm.Claim("direct", below=0.2),
    bm.Claim("pure_indirect", above=0.5),
    bm.Claim("total_direct", below=0.1),
]


@pytest.fixture(scope="module")
def fit(simulated):
    """Exposure × mediator, and a covariate (c) and a category (site) in both paths."""
    study = bm.Study(
        simulated(200, 0.3, seed=4),
        exposure="x",
        mediator="m ~ x * z + x * c + x * site",
        outcome="y ~ m * x * z + m * c + m * site + x * c + x * site",
    )
    return study.fit(method="exact", random_seed=1, progressbar=False)


@pytest.mark.parametrize("belief", FAMILIES, ids=repr)
@pytest.mark.parametrize("claim", CLAIMS, ids=repr)
@pytest.mark.parametrize("at", [{}, {"z": [0.0, 2.0]}], ids=["averaged", "by z"])
def test_probability_equals_brute_force(fit, belief, claim, at):
    table = fit.summary(at=at, rho=belief, claim=claim)
    found = table[table["effect"] == claim.effect]
    prior = bm.priors.coerce(belief)
    at_zero = fit.effects(at=at, rho=0.0)[claim.effect].to_numpy().reshape(4000, -1)
    # Every effect is a line in r: two fixed correlations give it.
    slope = at_zero - fit.effects(at=at, rho=float(np.sqrt(0.5)))[claim.effect].to_numpy().reshape(4000, -1)
    rho = prior.draw((100, 4000, 1), random_seed=5)
    values = at_zero - slope * odds(rho)
    brute = (values > claim.limit if claim.direction == "above" else values < claim.limit).mean(axis=(0, 1))
    error = np.sqrt(brute * (1 - brute) / 400_000)
    assert np.all(np.abs(found["probability"].to_numpy() - brute) <= 4 * error + 1e-9)
    if claim.effect.endswith("indirect"):
        tipped = fit.tipping(at=at, claim=claim).probability(belief)
        np.testing.assert_array_equal(tipped["probability"], found["probability"])


def test_effects_under_a_belief_follow_the_same_distribution_as_the_table(fit):
    belief = bm.LKJ(3)
    draws = fit.effects(at={}, rho=belief)["indirect"].to_numpy().ravel()
    row = fit.summary(at={}, rho=belief).iloc[0]
    assert draws.mean() == pytest.approx(row["mean"], abs=4 * row["sd"] / np.sqrt(4000))
    assert np.quantile(draws, [0.025, 0.975]) == pytest.approx([row["lower"], row["upper"]], abs=0.15 * row["sd"])
    assert (draws > 0).mean() == pytest.approx(row["probability"], abs=4 * np.sqrt(0.25 / 4000))


def test_beliefs_share_their_randomness(fit):
    narrow = fit.effects(at={}, rho=bm.Uniform(-0.3, 0.3))["indirect"]
    wider = fit.effects(at={}, rho=bm.Uniform(-0.301, 0.301))["indirect"]
    assert float(np.abs(narrow - wider).max()) < 0.02
    assert float(narrow.std()) > 0.1


def test_a_change_of_belief_keeps_the_draws(fit):
    first, second = fit.under(bm.LKJ(2)), fit.under(bm.Uniform(-0.2, 0.4))
    np.testing.assert_array_equal(first.posterior["gamma"], second.posterior["gamma"])
    assert float(second.posterior["rho"].max()) < 0.4
    assert second.rho == bm.Uniform(-0.2, 0.4)
    # The same uniform stands behind both.
    np.testing.assert_allclose(
        bm.LKJ(2).cdf(first.posterior["rho"].to_numpy()),
        bm.Uniform(-0.2, 0.4).cdf(second.posterior["rho"].to_numpy()),
        atol=1e-9,
    )
    np.testing.assert_allclose(first.effects(at={})["direct"], fit.effects(at={}, rho=bm.LKJ(2))["direct"], atol=1e-9)


def test_infinite_moments_are_shown_as_such(fit):
    table = fit.summary(at={}, rho=bm.LKJ(0.4)).set_index("effect")
    assert np.isnan(table.loc["indirect", "mean"])
    assert np.isinf(table.loc["indirect", "sd"])
    assert np.isfinite(table.loc["total", ["mean", "sd"]].to_numpy(dtype=float)).all()
    assert np.isfinite(table[["lower", "upper", "probability"]].to_numpy()).all()
    shown = repr(fit.under(bm.LKJ(0.4)))
    assert "infinite" in shown
    assert "nan" not in shown
