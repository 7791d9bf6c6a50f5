"""The index of moderated mediation: when it needs no belief, and draws of rho by brute force when it does."""

import warnings

import numpy as np
import pandas as pd
import pytest

import bayesmed as bm
from bayesmed.conclusions.moderation_index import moderation_index
from bayesmed.core.errors import ArgumentError, BeliefNeededError, DataWarning
from bayesmed.study.points import points

BELIEF = bm.Uniform(-0.2, 0.5)


def fitted(data, mediator, outcome, **options):
    study = bm.Study(data, exposure="x", mediator=mediator, outcome=outcome)
    return study.fit(method="exact", draws=500, random_seed=1, progressbar=False, **options)


@pytest.fixture(scope="module")
def data(simulated):
    return simulated(300, 0.3, seed=4)


@pytest.fixture(scope="module")
def second(data):
    return fitted(data, "m ~ x + z + site", "y ~ m * z + x + site")


@pytest.fixture(scope="module")
def first(data):
    return fitted(data, "m ~ x * z + site", "y ~ m + x * z + site")


@pytest.fixture(scope="module")
def both(data):
    return fitted(data, "m ~ x * z + site", "y ~ m * z + x * z + site")


def test_moderation_of_the_second_path_alone_is_free_of_rho(second):
    found = moderation_index(second.result, "z", [0.0, 1.0, 3.0])
    assert found["contrast"].tolist() == ["z 1 − 0", "z 3 − 1", "slope per unit of z"]
    assert list(found.columns) == [
        "contrast", "mean", "sd", "lower", "upper", "probability", "mcse", "free_of_rho",
    ]  # fmt: skip
    assert found["free_of_rho"].all()
    assert found.attrs["linear"] is True
    assert "no belief is used" in found.attrs["note"]
    for rho in (-0.8, 0.6, bm.LKJ(2)):
        pd.testing.assert_frame_equal(found, moderation_index(second.result, "z", [0.0, 1.0, 3.0], rho=rho))
    # The same difference at any fixed rho, from the effects themselves.
    draws = second.effects(at={"z": [0.0, 1.0]}, rho=0.7)["indirect"]
    index = (draws.sel(z=1.0) - draws.sel(z=0.0)).to_numpy().ravel()
    row = found.iloc[0]
    assert row["mean"] == pytest.approx(index.mean(), abs=1e-10)
    assert row["sd"] == pytest.approx(index.std(), abs=1e-10)
    assert row["probability"] == pytest.approx(np.mean(index > 0), abs=1e-12)
    np.testing.assert_allclose(row[["lower", "upper"]].astype(float), np.quantile(index, [0.025, 0.975]), atol=1e-10)


def test_the_slope_is_the_product_of_coefficients(second):
    # With m ~ x + z, y ~ m·z the index is alpha_x · gamma_{m:z}
    # (Hayes 2015, doi:10.1080/00273171.2014.962683, from memory).
    posterior = second.posterior
    product = posterior["alpha"].sel(mediator_term="x") * posterior["gamma"].sel(outcome_term="m:z")
    found = moderation_index(second.result, "z").iloc[-1]
    assert found["mean"] == pytest.approx(float(product.mean()), abs=1e-10)
    assert found["sd"] == pytest.approx(float(product.std()), abs=1e-10)


@pytest.mark.parametrize("which", ["first", "both"])
def test_moderation_of_the_first_path_needs_a_belief(request, which):
    fit = request.getfixturevalue(which)
    with pytest.raises(BeliefNeededError, match="rho="):
        moderation_index(fit.result, "z", [0.0, 1.0])
    found = moderation_index(fit.result, "z", [0.0, 1.0], rho=BELIEF)
    assert not found["free_of_rho"].any()
    assert "a belief is used" in found.attrs["note"]
    assert found.attrs["linear"] is (which == "first")
    assert ("only contrasts" in found.attrs["note"]) == (which == "both")
    assert len(found) == (2 if which == "first" else 1)
    constant, slope = fit.result.contrasts(points(fit.result.observed, {"z": [0.0, 1.0]})).line("indirect")
    rho = BELIEF.draw((200, constant.shape[1]), random_seed=5)
    effect = (constant[1] - constant[0]) - (slope[1] - slope[0]) * rho / np.sqrt(1 - rho**2)
    row = found.iloc[0]
    assert row["mean"] == pytest.approx(effect.mean(), abs=0.01)
    assert row["sd"] == pytest.approx(effect.std(), rel=0.01)
    assert row["probability"] == pytest.approx(np.mean(effect > 0), abs=0.005)
    np.testing.assert_allclose(row[["lower", "upper"]].astype(float), np.quantile(effect, [0.025, 0.975]), atol=0.02)


def test_a_fixed_rho_is_the_difference_of_effects(first):
    draws = first.effects(at={"z": [0.0, 2.0]}, rho=0.3)["indirect"]
    index = (draws.sel(z=2.0) - draws.sel(z=0.0)).to_numpy().ravel()
    found = moderation_index(first.result, "z", [0.0, 2.0], rho=0.3)
    np.testing.assert_allclose(found["mean"], [index.mean(), index.mean() / 2], atol=1e-10)
    np.testing.assert_allclose(found["upper"], np.quantile(index, 0.975) * np.array([1, 0.5]), atol=1e-6)


def test_levels_are_compared_with_the_first(data):
    fit = fitted(data, "m ~ x + site", "y ~ m * site + x")
    found = moderation_index(fit.result, "site")
    assert found["contrast"].tolist() == ["site north − east", "site west − east"]
    assert found["free_of_rho"].all()
    assert found.attrs["linear"] is None


def test_a_contrast_within_levels_can_be_free_beside_one_that_is_not(data):
    data = data.assign(far=np.arange(len(data)) % 2)
    fit = fitted(data, "m ~ x * far + C(site)", "y ~ m * C(site) + x * far")
    found = moderation_index(fit.result, "site", ["east", "west", "north"], at={"far": 1}, rho=0.2)
    assert found["free_of_rho"].all()
    quadratic = fitted(data, "m ~ x * I((z - 1) ** 2)", "y ~ m * z + x * I((z - 1) ** 2)")
    found = moderation_index(quadratic.result, "z", [0.0, 2.0, 3.0], rho=BELIEF)
    assert found["free_of_rho"].tolist() == [True, False]
    assert found.attrs["linear"] is False
    free_alone = moderation_index(quadratic.result, "z", [0.0, 2.0])
    np.testing.assert_allclose(free_alone["mean"][0], found["mean"][0], atol=1e-10)


def test_groups_with_a_rho_each(data):
    belief = bm.ByGroup({"east": 0.0, "north": bm.Uniform(0.0, 0.3), "west": 0.1}, correlation=0.5)
    fit = fitted(data, "m ~ x * site", "y ~ (m + x) * site", rho=belief)
    found = moderation_index(fit.result, "site")
    draws = fit.effects(at={"site": ["east", "north"]})["indirect"]
    index = (draws.sel(site="north") - draws.sel(site="east")).to_numpy().ravel()
    assert not found["free_of_rho"].any()
    assert found["mean"][0] == pytest.approx(index.mean(), abs=1e-10)
    assert found["probability"][0] == pytest.approx(np.mean(index > 0), abs=1e-12)


def test_a_warning_where_the_residual_spread_differs(data):
    random = np.random.default_rng(2)
    spread = data.assign(m=data["m"] + random.normal(0, 3, len(data)) * np.clip(data["z"], 0, None))
    fit = fitted(spread, "m ~ x + z", "y ~ m * z + x")
    with pytest.warns(DataWarning, match="residual spread differs along 'z'"):
        moderation_index(fit.result, "z")
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        moderation_index(fitted(data, "m ~ x + z", "y ~ m * z + x").result, "z")


def test_confounding_leaves_the_index_alone_in_large_samples(simulated):
    # True slopes of the simulation: 0.8 · 0.25 in z, with errors that correlate 0.6 or not at all.
    found = []
    for rho in (0.0, 0.6):
        rows = simulated(40_000, rho, seed=9, interact=False)
        rows["y"] += 0.25 * rows["m"] * rows["z"]
        fit = fitted(rows, "m ~ x + z + c + site", "y ~ m * z + x + c + site")
        found.append(moderation_index(fit.result, "z").iloc[-1])
    for row in found:
        assert row["mean"] == pytest.approx(0.8 * 0.25, abs=4 * row["sd"])
        assert row["sd"] < 0.01


@pytest.mark.parametrize(
    ("arguments", "match"),
    [
        ({"moderator": "nowhere"}, "'nowhere'"),
        ({"moderator": "z", "values": [1.0]}, "two values"),
        ({"moderator": "z", "at": {"z": 1.0}}, "itself in values"),
        ({"moderator": "x"}, "exposure"),
    ],
)
def test_bad_arguments_give_one_clear_error(second, arguments, match):
    with pytest.raises(ArgumentError, match=match):
        moderation_index(second.result, **arguments)
