"""Probabilities over sets of beliefs against brute force over members, fixed correlations and closed forms."""

import dataclasses

import numpy as np
import pandas as pd
import pytest
from scipy.optimize import brentq

import bayesmed as bm
from bayesmed.conclusions.breaking_point import breaking_point
from bayesmed.conclusions.envelope import envelope, worst_case
from bayesmed.core.errors import ArgumentError, FitError, PriorError
from bayesmed.core.mapping import odds
from bayesmed.priors.sets import AnyOn, Contaminated, UnimodalAt
from bayesmed.priors.sets_nearby import Nearby
from bayesmed.priors.sets_statements import Mean, Probability, Quantile, Statements

CLAIMS = [
    bm.Claim("indirect", above=0),
    bm.Claim("indirect", below=0.4),
    bm.Claim("direct", above=-0.3),
    bm.Claim("direct", below=0.2),
    bm.Claim("pure_indirect", above=0.1),
]
SETS = [
    AnyOn(-0.3, 0.4),
    Contaminated(bm.TruncatedNormal(0.1, 0.2), 0.1, -0.7, 0.7),
    UnimodalAt(0.1, -0.5, 0.8),
    Nearby(bm.TruncatedNormal(0.1, 0.2, -0.9, 0.9), 0.1),
    Statements(Probability(above=0.3, at_most=0.1), Mean(0, 0.2), Quantile(0.1, -0.4, -0.1), lower=-0.8, upper=0.9),
]
AT = {"z": [-1.0, 0.5, 2.0]}


@pytest.fixture(scope="module")
def fit(simulated):
    """The exposure moves the mediator weakly at small z, so that B has either sign there."""
    study = bm.Study(
        simulated(150, 0.3, seed=4),
        exposure="x",
        mediator="m ~ x * z + x * c + site",
        outcome="y ~ m * x * z + m * c + x * c + site",
    )
    return study.fit(method="exact", draws=500, random_seed=1, progressbar=False)


def by_rho(fit, claim, at, grid):
    """Draws of the claim's truth at fixed correlations, shape (rho, draw, point)."""
    at_zero = fit.effects(at=at, rho=0.0)[claim.effect].to_numpy().reshape(2000, -1)
    slope = at_zero - fit.effects(at=at, rho=float(np.sqrt(0.5)))[claim.effect].to_numpy().reshape(2000, -1)
    effect = at_zero - slope * odds(np.asarray(grid))[:, None, None]
    return effect > claim.limit if claim.direction == "above" else effect < claim.limit


def test_the_sign_of_b_is_uncertain_here(fit):
    table = fit.tipping(at=AT).table
    assert 0.02 < table["toward_plus_one"][0] < 0.98


@pytest.mark.parametrize("claim", CLAIMS, ids=repr)
def test_any_prior_on_a_range_equals_a_grid_of_correlations(fit, claim):
    table = envelope(fit.result, AnyOn(-0.3, 0.4), at=AT, claim=claim)
    held = by_rho(fit, claim, AT, np.linspace(-0.3, 0.4, 1401))
    probability = held.mean(axis=1)
    assert np.all(table["lower"] <= probability.min(axis=0) + 1e-12)
    assert np.all(table["upper"] >= probability.max(axis=0) - 1e-12)
    # A grid of 0.0005 can miss a step by a draw or two.
    np.testing.assert_allclose(table["lower"], probability.min(axis=0), atol=1e-3)
    np.testing.assert_allclose(table["upper"], probability.max(axis=0), atol=1e-3)
    np.testing.assert_allclose(table["all_rho"], held.all(axis=0).mean(axis=0), atol=1e-12)
    assert np.all(table["all_rho"] <= table["lower"])


def test_extremes_inside_the_range_are_found(fit):
    """Where the sign of B is uncertain the probability is not monotone in rho."""
    table = envelope(fit.result, AnyOn(-0.999, 0.999), at={"z": [-1.0]})
    ends = by_rho(fit, bm.Claim(), {"z": [-1.0]}, [-0.999, 0.999]).mean(axis=1)
    assert table["upper"][0] > ends.max() + 0.02 or table["lower"][0] < ends.min() - 0.02


@pytest.mark.parametrize("members", SETS, ids=lambda s: type(s).__name__)
@pytest.mark.parametrize("claim", CLAIMS, ids=repr)
def test_bounds_are_probabilities_under_members(fit, members, claim):
    """By the route of every other probability, with its Monte Carlo error; random members stay inside."""
    table = envelope(fit.result, members, at=AT, claim=claim)
    worst = worst_case(fit.result, members, at=AT, claim=claim)
    for k, z in enumerate(AT["z"]):
        row = fit.tipping(at={"z": z}, claim=claim).probability(worst["prior"][k]).iloc[0]
        assert row["probability"] == pytest.approx(table["lower"][k], abs=1e-12)
        assert row["probability"] == pytest.approx(worst["probability"][k], abs=1e-12)
        assert row["mcse"] == pytest.approx(table["lower_mcse"][k], abs=1e-12)
    seen = fit.summary(at={"z": 2.0}, rho=worst["prior"][2], claim=claim).set_index("effect").loc[claim.effect]
    assert seen["probability"] == pytest.approx(table["lower"][2], abs=1e-12)
    assert table["mean_lower"][2] - 1e-9 <= seen["mean"] <= table["mean_upper"][2] + 1e-9
    assert np.all(table["lower"] <= table["upper"])
    assert np.all(table["all_rho"] <= table["lower"] + 1e-12)
    assert np.all(np.isfinite(table[["mean_lower", "mean_upper"]]))


@pytest.mark.parametrize("members", SETS, ids=lambda s: type(s).__name__)
def test_a_claim_and_its_opposite_share_the_set(fit, members):
    """The worst case of a claim is the best of its opposite, to the draws that tip exactly there."""
    above = envelope(fit.result, members, at=AT, claim=bm.Claim("indirect", above=0.2))
    below = envelope(fit.result, members, at=AT, claim=bm.Claim("indirect", below=0.2))
    np.testing.assert_allclose(above["lower"], 1 - below["upper"], atol=1e-3)
    np.testing.assert_allclose(above["upper"], 1 - below["lower"], atol=1e-3)
    np.testing.assert_allclose(above["mean_lower"], below["mean_lower"])


def test_contamination_is_the_base_and_a_share_of_the_range(fit):
    base = bm.LKJ(2)
    under = fit.summary(at=AT, rho=base).query("effect == 'indirect'")["probability"].to_numpy()
    ranged = envelope(fit.result, AnyOn(-0.6, 0.7), at=AT)
    table = envelope(fit.result, Contaminated(base, 0.2, -0.6, 0.7), at=AT)
    np.testing.assert_allclose(table["lower"], 0.8 * under + 0.2 * ranged["lower"], atol=1e-12)
    np.testing.assert_allclose(table["upper"], 0.8 * under + 0.2 * ranged["upper"], atol=1e-12)


def test_sets_that_hold_others_go_further(fit):
    at = {"z": [0.5]}
    narrow, wide = (envelope(fit.result, AnyOn(-w, w), at=at).iloc[0] for w in (0.2, 0.5))
    unimodal = envelope(fit.result, UnimodalAt(0.0, -0.5, 0.5), at=at).iloc[0]
    stated = envelope(fit.result, Statements(Mean(0.0), lower=-0.5, upper=0.5), at=at).iloc[0]
    assert wide["lower"] < narrow["lower"]
    for inner in (unimodal, stated):
        assert wide["lower"] <= inner["lower"] <= inner["upper"] <= wide["upper"]
        assert wide["mean_lower"] < inner["mean_lower"]
    near, far = (envelope(fit.result, Nearby(bm.LKJ(5), d), at=at).iloc[0] for d in (0.01, 0.2))
    assert far["lower"] < near["lower"] < near["upper"] < far["upper"]


def test_means_over_a_range_are_those_at_its_ends(fit):
    table = envelope(fit.result, AnyOn(-0.3, 0.4), at=AT)
    ends = [fit.summary(at=AT, rho=rho).query("effect == 'indirect'")["mean"].to_numpy() for rho in (-0.3, 0.4)]
    np.testing.assert_allclose(table["mean_lower"], np.min(ends, axis=0), rtol=1e-9)
    np.testing.assert_allclose(table["mean_upper"], np.max(ends, axis=0), rtol=1e-9)


@pytest.mark.parametrize(
    "members",
    [
        AnyOn(-1, 1),
        Contaminated(bm.TruncatedNormal(0, 0.1), 0.01),
        Nearby(bm.LKJ(20), 0.001),
        Statements(Probability(above=0.5, at_most=0.01), Probability(below=-0.5, at_most=0.01)),
    ],
    ids=lambda s: type(s).__name__,
)
def test_means_are_infinite_where_the_set_reaches_one_and_probabilities_are_not(fit, members):
    table = envelope(fit.result, members, at=AT)
    assert np.all(table["mean_lower"] == -np.inf)
    assert np.all(table["mean_upper"] == np.inf)
    assert np.all((table["lower"] >= 0) & (table["upper"] <= 1))
    total = envelope(fit.result, members, at=AT, claim=bm.Claim("total"))
    assert np.all(np.isfinite(total))
    np.testing.assert_array_equal(total["lower"], total["upper"])
    np.testing.assert_array_equal(total["mean_lower"], total["mean_upper"])


def test_one_side_that_reaches_one_makes_one_side_infinite(fit):
    table = envelope(fit.result, AnyOn(0.0, 1), at={"z": [2.0]})
    assert table["mean_lower"][0] == -np.inf
    at_zero = fit.summary(at={"z": [2.0]}, rho=0.0)["mean"][0]
    assert table["mean_upper"][0] == pytest.approx(at_zero)


def test_unimodal_beliefs_that_reach_one_keep_the_mean_finite(fit):
    table = envelope(fit.result, UnimodalAt(0.0, -1, 1), at={"z": [2.0]})
    means = [fit.summary(at={"z": [2.0]}, rho=prior)["mean"][0] for prior in (bm.Uniform(0, 1), bm.Uniform(-1, 0))]
    assert table["mean_lower"][0] == pytest.approx(means[0])
    assert table["mean_upper"][0] == pytest.approx(means[1])


def test_a_base_without_a_mean_is_not_given_one(fit):
    table = envelope(fit.result, Contaminated(bm.LKJ(0.4), 0.1, -0.3, 0.3), at=AT)
    assert np.all(np.isnan(table["mean_lower"]))
    assert np.all(np.isfinite(table[["lower", "upper"]]))


def test_the_table_starts_with_the_moderators(fit):
    table = envelope(fit.result, AnyOn(-0.3, 0.3), at={"z": [0.0, 1.0], "site": "east"})
    assert list(table.columns[:4]) == ["z", "site", "lower", "upper"]
    assert list(table["z"]) == [0.0, 1.0]
    averaged = envelope(fit.result, AnyOn(-0.3, 0.3), at={})
    assert len(averaged) == 1
    assert averaged.columns[0] == "lower"


def test_the_worst_case_can_be_used_as_any_prior(fit):
    members = Nearby(bm.TruncatedNormal(0.1, 0.2), 0.2)
    prior = worst_case(fit.result, members, at={})["prior"][0]
    table = fit.compare({"base": members.base, "worst": prior}, at={}).table.query("effect == 'indirect'")
    assert table["probability"].iloc[1] < table["probability"].iloc[0]
    assert prior.draw(5, random_seed=1).shape == (5,)
    assert "reweighted" in repr(prior).lower()


def test_what_is_not_a_set_and_what_the_data_inform_is_refused(fit):
    with pytest.raises(PriorError, match="single prior"):
        envelope(fit.result, bm.LKJ(2), at={})
    joint = dataclasses.replace(fit.result, joint=True)
    with pytest.raises(FitError, match="envelope: the data inform rho"):
        envelope(joint, AnyOn(-0.3, 0.3))
    with pytest.raises(FitError, match="worst_case: the data inform rho"):
        worst_case(joint, AnyOn(-0.3, 0.3))
    with pytest.raises(FitError, match="breaking_point: the data inform rho"):
        breaking_point(joint, lambda w: AnyOn(-w, w))
    with pytest.raises(ArgumentError, match=r"bm\.Claim"):
        envelope(fit.result, AnyOn(-0.3, 0.3), claim="indirect > 0")


def test_the_share_of_doubt_that_overturns_a_claim(fit):
    base, claim = bm.TruncatedNormal(-0.1, 0.1), bm.Claim("indirect", above=0, required=0.9)
    table = breaking_point(fit.result, lambda e: Contaminated(base, e, -0.5, 0.95), at=AT, claim=claim)
    under = fit.summary(at=AT, rho=base, claim=claim).query("effect == 'indirect'")
    ranged = envelope(fit.result, AnyOn(-0.5, 0.95), at=AT, claim=claim)
    np.testing.assert_allclose(table["probability"], under["probability"], atol=1e-12)
    closed = (under["probability"].to_numpy() - 0.9) / (under["probability"].to_numpy() - ranged["lower"])
    assert table["size"][0] == 0
    assert np.isnan(table["size_mcse"][0])
    assert table["size"][2] == pytest.approx(closed[2], abs=2e-5)
    # At that share the smallest probability is the required one; its error is that of a ratio.
    at_break = envelope(fit.result, Contaminated(base, table["size"][2], -0.5, 0.95), at=AT, claim=claim)
    assert at_break["lower"][2] == pytest.approx(0.9, abs=1e-4)
    gap = table["probability"][2] - ranged["lower"][2]
    assert table["size_mcse"][2] == pytest.approx(at_break["lower_mcse"][2] / gap, rel=0.01, abs=2e-5)


def test_width_tail_and_divergence_that_overturn_a_claim(fit):
    at, claim = {"z": [2.0]}, bm.Claim("indirect", above=0, required=0.9)
    width = breaking_point(fit.result, lambda w: AnyOn(-w, w), 0.99, at=at, claim=claim)["size"][0]
    at_width = fit.summary(at=at, rho=float(width) + 2e-3, claim=claim)["probability"][0]
    before = fit.summary(at=at, rho=float(width) - 2e-3, claim=claim)["probability"][0]
    assert at_width <= 0.9 <= before
    tail = breaking_point(
        fit.result, lambda p: Statements(Probability(above=0.1, at_most=p), lower=-0.9), at=at, claim=claim
    )
    lowest = envelope(fit.result, AnyOn(0.1, 1), at=at, claim=claim)["lower"][0]
    safe = envelope(fit.result, AnyOn(-0.9, 0.1), at=at, claim=claim)["lower"][0]
    assert tail["size"][0] == pytest.approx((safe - 0.9) / (safe - lowest), abs=1e-3)
    base = bm.TruncatedNormal(0.0, 0.1)
    divergence = breaking_point(fit.result, lambda d: Nearby(base, d), 20.0, at=at, claim=claim)["size"][0]
    found = brentq(
        lambda d: envelope(fit.result, Nearby(base, d), at=at, claim=claim)["lower"][0] - 0.9, 0, 20, xtol=1e-4
    )
    assert divergence == pytest.approx(found, abs=1e-3)


def test_a_claim_that_stands_at_the_largest_size_has_no_breaking_point(fit):
    table = breaking_point(fit.result, lambda w: AnyOn(-w, w), 0.01, at={"z": [2.0]})
    assert table["size"][0] == np.inf
    assert np.isnan(table["size_mcse"][0])
    assert isinstance(table, pd.DataFrame)


@pytest.mark.parametrize(
    ("sets", "largest", "message"),
    [
        (AnyOn(-0.3, 0.3), 1.0, "must be a function from a size to a set of priors"),
        (lambda w: AnyOn(-w, w), 0, "largest=0 must be a finite number above 0"),
        (lambda w: AnyOn(-w, w), np.inf, "largest=inf must be a finite number above 0"),
        (lambda w: bm.LKJ(2 + w), 1.0, "single prior"),
    ],
)
def test_breaking_points_that_cannot_be_sought(fit, sets, largest, message):
    with pytest.raises((ArgumentError, PriorError), match=message):
        breaking_point(fit.result, sets, largest, at={})


def test_the_total_effect_has_no_breaking_point(fit):
    with pytest.raises(ArgumentError, match="no belief overturns it"):
        breaking_point(fit.result, lambda w: AnyOn(-w, w), at={}, claim=bm.Claim("total"))
