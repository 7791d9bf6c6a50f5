"""Where a claim holds along a moderator, against dense grids and draws of rho by brute force."""

import numpy as np
import pytest

import bayesmed as bm
from bayesmed.conclusions import regions as module
from bayesmed.conclusions.regions import COLUMNS, regions
from bayesmed.core.errors import ArgumentError, FitError
from bayesmed.core.simultaneous import joint_probability
from bayesmed.core.tipping import claim_probability
from bayesmed.study.points import points

BELIEF = bm.TruncatedNormal(0.1, 0.15)


@pytest.fixture(scope="module")
def fit(simulated):
    study = bm.Study(
        simulated(300, 0.2, seed=3), exposure="x", mediator="m ~ x * z + site", outcome="y ~ m * z + x * z + site"
    )
    return study.fit(method="exact", draws=250, random_seed=1, progressbar=False)


@pytest.fixture(scope="module")
def crossing(simulated):
    """A study in which the exposure's shift of the mediator changes sign within the range of z."""
    data = simulated(300, 0.0, seed=8, interact=False)
    data["m"] += 1.2 * data["x"] * (data["z"] - 1.5)
    data["y"] += 0.6 * 1.2 * data["x"] * (data["z"] - 1.5)
    study = bm.Study(data, exposure="x", mediator="m ~ x * z", outcome="y ~ m * z + x * z")
    return study.fit(method="exact", draws=250, random_seed=2, progressbar=False)


def lines(fit, values, effect="indirect"):
    return fit.result.contrasts(points(fit.result.observed, {"z": list(values)})).line(effect)


CLAIMS = [
    bm.Claim(required=0.8),
    bm.Claim("indirect", below=0.4, required=0.7),
    bm.Claim("direct", above=-1.0, required=0.6),
    bm.Claim("total", above=0.3, required=0.7),
]


@pytest.mark.parametrize("claim", CLAIMS, ids=str)
@pytest.mark.parametrize("which", ["fit", "crossing"])
def test_edges_are_where_a_dense_grid_changes_its_mind(request, which, claim):
    fit = request.getfixturevalue(which)
    z = fit.result.observed.frame["z"]
    grid = np.linspace(z.min(), z.max(), 641)
    by_draw = claim_probability(*lines(fit, grid, claim.effect), claim.limit, claim.direction, BELIEF)
    holds = by_draw.mean(axis=1) >= claim.required
    changes = np.flatnonzero(np.diff(np.concatenate([[0], holds.astype(int), [0]])))
    found = regions(fit.result, BELIEF, "z", claim)
    assert list(found.columns) == list(COLUMNS)
    assert len(found) == len(changes) // 2
    step = grid[1] - grid[0]
    np.testing.assert_allclose(found["from"], grid[changes[::2]], atol=1.01 * step)
    np.testing.assert_allclose(found["to"], grid[changes[1::2] - 1], atol=1.01 * step)
    for _, row in found.iterrows():
        assert row["share"] == np.mean((z >= row["from"]) & (z <= row["to"]))
        for end, error in ((row["from"], row["from_mcse"]), (row["to"], row["to_mcse"])):
            assert np.isnan(error) == (end in (z.min(), z.max()))


def test_the_claims_tested_make_two_regions_somewhere(crossing):
    assert len(regions(crossing.result, 0.0, "z", bm.Claim("indirect", above=-10.0))) == 1
    assert len(regions(crossing.result, bm.Uniform(-0.9, 0.9), "z", bm.Claim(below=0.4, required=0.85))) >= 1
    # Near the value at which B is zero the effect is near zero whatever rho is.
    two = regions(crossing.result, bm.Uniform(0.6, 0.9), "z", bm.Claim(below=-0.2, required=0.8))
    one = regions(crossing.result, bm.Uniform(-0.9, -0.6), "z", bm.Claim(below=-0.2, required=0.8))
    assert len(two) == 1
    assert len(one) == 1
    assert two["from"][0] > one["to"][0]


@pytest.mark.parametrize("claim", CLAIMS, ids=str)
@pytest.mark.parametrize("belief", [BELIEF, bm.LKJ(2), bm.PointMass(0.2)], ids=repr)
@pytest.mark.parametrize("which", ["fit", "crossing"])
def test_joint_probability_against_draws_of_rho(request, which, belief, claim):
    fit = request.getfixturevalue(which)
    constant, slope = lines(fit, np.linspace(0.5, 2.0, 16), claim.effect)
    exact = joint_probability(constant, slope, claim.limit, claim.direction, belief).mean()
    true = np.zeros(60)
    for k in range(60):
        rho = belief.draw(constant.shape[1], random_seed=k)
        effect = constant - slope * rho / np.sqrt(1 - rho**2)
        beyond = effect > claim.limit if claim.direction == "above" else effect < claim.limit
        true[k] = beyond.all(axis=0).mean()
    assert exact == pytest.approx(true.mean(), abs=5 * true.std() / np.sqrt(60) + 1e-12)


def test_the_formula_as_published_for_an_indirect_effect_above_zero(crossing):
    # Per draw max(0, F(min over B > 0 of rho*) − F(max over B < 0 of rho*)), written out by hand.
    c = crossing.result.contrasts(points(crossing.result.observed, {"z": [0.5, 1.0, 1.6, 2.2]}))
    r = c.a / (c.kappa * c.b)
    rho = r / np.sqrt(1 + r**2)
    top = np.where(c.b > 0, rho, 1.0).min(axis=0)
    bottom = np.where(c.b < 0, rho, -1.0).max(axis=0)
    assert np.any(bottom > -1)
    assert np.any(top < 1)
    expected = np.maximum(0.0, BELIEF.cdf(top) - BELIEF.cdf(bottom))
    np.testing.assert_allclose(joint_probability(*c.line("indirect"), 0.0, "above", BELIEF), expected, atol=1e-12)


def test_an_atom_on_the_edge_counts_on_neither_side():
    # The first effect is 1 − r·1, zero at r = 1 and positive below; the second is positive above the same r.
    edge = float(np.sqrt(0.5))
    both = np.array([[1.0], [-1.0]]), np.array([[1.0], [-1.0]])
    for rho in (edge, 0.2, 0.9):
        assert joint_probability(*both, 0.0, "above", bm.PointMass(rho))[0] == 0
    half = bm.Mixture([bm.PointMass(0.2), bm.PointMass(0.9)], [0.5, 0.5])
    assert joint_probability(both[0][:1], both[1][:1], 0.0, "above", half)[0] == pytest.approx(0.5)
    flat = np.array([[2.0]]), np.array([[0.0]])
    assert joint_probability(*flat, 1.0, "above", half)[0] == 1
    assert joint_probability(*flat, 2.0, "above", half)[0] == 0


@pytest.mark.parametrize("claim", [CLAIMS[0], CLAIMS[1]], ids=str)
def test_simultaneous_regions_lie_within_pointwise_ones_and_cannot_grow(fit, claim):
    pointwise = regions(fit.result, BELIEF, "z", claim)
    joint = regions(fit.result, BELIEF, "z", claim, reading="simultaneous")
    assert len(joint) == len(pointwise) > 0
    for (_, inner), (_, outer) in zip(joint.iterrows(), pointwise.iterrows(), strict=True):
        assert outer["from"] <= inner["from"] <= inner["to"] <= outer["to"]
        assert inner["joint"] >= claim.required - 1e-6
        assert outer["joint"] <= inner["joint"]
        # By brute force over all pairs of ends: none is longer, holds the best value and is true at once.
        grid = np.linspace(outer["from"], outer["to"], 61)
        constant, slope = lines(fit, grid)
        single = [joint_probability(constant[[k]], slope[[k]], claim.limit, claim.direction, BELIEF) for k in range(61)]
        best = int(np.argmax(np.mean(single, axis=1)))
        longest = max(
            grid[j] - grid[i]
            for i in range(best + 1)
            for j in range(best, 61)
            if joint_probability(
                constant[i : j + 1], slope[i : j + 1], claim.limit, claim.direction, BELIEF
            ).mean() >= claim.required
        )  # fmt: skip
        assert inner["to"] - inner["from"] == pytest.approx(longest, abs=grid[1] - grid[0])


def test_the_error_of_an_edge_is_the_spread_of_edges_between_fits(fit):
    again = [fit.study.fit(method="exact", random_seed=seed, draws=100) for seed in range(8)]
    found = [regions(one.result, BELIEF, "z", CLAIMS[0]) for one in again]
    edges, errors = np.array([(f["from"][0], f["from_mcse"][0]) for f in found]).T
    # A SD from 8 values lies within 0.29 and 1.87 of the truth 99.8 times in 100 (chi-squared, 7 df).
    assert 0.29 < edges.std(ddof=1) / errors.mean() < 1.87


def test_levels_one_row_each(fit):
    claim = bm.Claim(required=0.6)
    found = regions(fit.result, BELIEF, "site", claim, at={"z": 1.0})
    table = fit.summary(at={"site": ["east", "north", "west"], "z": 1.0}, rho=BELIEF, claim=claim)
    held = table.query("effect == 'indirect' and probability >= 0.6")["site"].tolist()
    assert found["from"].tolist() == found["to"].tolist() == held
    assert found["from_mcse"].isna().all()
    assert found["share"].sum() == pytest.approx(fit.result.observed.frame["site"].isin(held).mean())


def test_rho_by_group_is_judged_in_each_group(simulated):
    data = simulated(240, 0.2, seed=5)
    study = bm.Study(data, exposure="x", mediator="m ~ x * site", outcome="y ~ (m + x) * site")
    belief = bm.ByGroup({"east": 0.0, "north": bm.Uniform(0.0, 0.3), "west": 0.1}, correlation=0.5)
    fit = study.fit(method="exact", rho=belief, random_seed=1, progressbar=False)
    claim = bm.Claim(above=-0.5, required=0.6)
    found = regions(fit.result, belief, "site", claim)
    draws = fit.effects(at={"site": found["from"].tolist()})["indirect"]
    assert len(found) > 1
    assert found["joint"][0] == pytest.approx(float((draws > -0.5).all("site").mean()))


def test_an_outcome_curved_in_the_mediator(simulated, monkeypatch):
    monkeypatch.setattr(module, "CURVED_GRID", 6)  # each value costs a third of a second
    study = bm.Study(
        simulated(60, 0.2, seed=3), exposure="x", mediator="m ~ x * z", outcome="y ~ (m + I(m ** 2)) * z + x * z"
    )
    fit = study.fit(method="exact", draws=20, random_seed=1, progressbar=False)
    claim = bm.Claim("direct", below=-0.5, required=0.93)
    found = regions(fit.result, BELIEF, "z", claim)
    z = fit.result.observed.frame["z"]
    inner = [(e, s) for e, s in zip(found[["from", "to"]].to_numpy().ravel(), [1, -1] * len(found), strict=True)
             if e not in (z.min(), z.max())]  # fmt: skip
    assert len(inner) > 0
    for edge, inward in inner:
        constant, slope = lines(fit, [edge - 0.05 * inward, edge + 0.05 * inward], "direct")
        outside, inside = claim_probability(constant, slope, -0.5, "below", BELIEF).mean(axis=1)
        assert outside < 0.93 < inside


def test_no_region_is_an_empty_frame_and_the_whole_range_has_no_error(fit):
    nothing = regions(fit.result, BELIEF, "z", bm.Claim(above=100.0))
    assert list(nothing.columns) == list(COLUMNS)
    assert len(nothing) == 0
    all_of_it = regions(fit.result, BELIEF, "z", bm.Claim(above=-100.0))
    assert all_of_it["share"].tolist() == [1.0]
    assert all_of_it[["from_mcse", "to_mcse"]].isna().all(axis=None)


def test_bad_arguments_give_one_clear_error(fit, simulated):
    with pytest.raises(ArgumentError, match="reading='both'"):
        regions(fit.result, BELIEF, "z", reading="both")
    with pytest.raises(ArgumentError, match="'nowhere'"):
        regions(fit.result, BELIEF, "nowhere")
    with pytest.raises(ArgumentError, match="one value for each other"):
        regions(fit.result, BELIEF, "z", at={"site": ["east", "west"]})
    with pytest.raises(ArgumentError, match="ByGroup"):
        regions(fit.result, bm.ByGroup({"east": 0.0, "west": 0.1}, correlation=0.5), "z")
    with pytest.raises(FitError, match="inform rho"):
        regions(fit.result.replaced(joint=True), BELIEF, "z")
