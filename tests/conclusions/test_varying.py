"""Effects that vary between people: the covariance as a second number, against simulated people."""

import numpy as np
import pandas as pd
import pytest
from scipy import stats

import bayesmed as bm
from bayesmed.conclusions.varying import Covariance, covariance_tipping, with_covariance
from bayesmed.core.errors import ArgumentError
from bayesmed.study.points import points


@pytest.fixture(scope="module")
def fit(simulated):
    study = bm.Study(
        simulated(250, 0.3, seed=4, interact=False), exposure="x", mediator="m ~ x + z", outcome="y ~ m * z + x"
    )
    return study.fit(method="exact", draws=500, random_seed=1, progressbar=False)


def people(rows, seed, dose):
    """Invented people whose paths correlate .6 (SDs .5 and .5: covariance .15), with no confounder at all."""
    random = np.random.default_rng(seed)
    a = 0.4 + 0.5 * (first := random.normal(size=rows))
    b = 0.5 + 0.5 * (0.6 * first + 0.8 * random.normal(size=rows))
    x = random.choice([0.0, dose], rows)
    m = a * x + random.normal(size=rows)
    y = 0.2 * x + b * m + random.normal(size=rows)
    return pd.DataFrame({"x": x, "m": m, "y": y}), float(np.mean(a * dose * b))


def test_people_whose_paths_correlate_and_no_confounder():
    data, true = people(400_000, seed=1, dose=1.0)
    assert true == pytest.approx(0.35, abs=0.005)
    fit = bm.Study(data, exposure="x", mediator="m ~ x", outcome="y ~ m + x").fit(
        method="exact", draws=100, random_seed=1
    )
    found = fit.summary(at={}, rho=0.0).set_index("effect")["mean"]
    # Derivation: in the arm x the residuals of m and y covary by x·Cov(a, b)·E[m | x], since b multiplies the whole
    # of m. Averaged over the arms this is ½ · .15 · .4 = .03, and the residual variance of m is ½ (1 + 1.25).
    # The slope of m is thus .5 + .03/1.125 = .5267, and the product .4 · .5267 = .2107 for a true .35.
    assert found["indirect"] == pytest.approx(0.2107, abs=0.006)
    # The covariance alone brings most of it back; what it leaves is that residual correlation.
    covariance = Covariance.from_correlation(0.6, 0.5, 0.5)
    alone = with_covariance(fit.result, covariance, at={}, rho=0.0).set_index("effect")["mean"]
    assert alone["indirect"] == pytest.approx(0.2107 + 0.15, abs=0.006)
    # rho stands for it: kappa r = .03/1.125 with kappa = tau/sigma_m, and both numbers together give the truth.
    kappa = float(np.mean(fit.result.contrasts(points(fit.result.observed, {})).kappa))
    r = 0.03 / 1.125 / kappa
    both = with_covariance(fit.result, covariance, at={}, rho=r / np.sqrt(1 + r**2)).set_index("effect")["mean"]
    assert both["indirect"] == pytest.approx(true, abs=0.006)
    assert both["total"] == pytest.approx(found["total"], abs=1e-12)
    assert both["direct"] == pytest.approx(0.2, abs=0.012)


def test_the_unit_is_that_of_the_whole_contrast():
    # Twice the dose doubles a person's shift of the mediator, and so its SD and the covariance.
    data, true = people(400_000, seed=2, dose=2.0)
    data["m"] -= data["m"][data["x"] == 2].mean()
    data["y"] -= 0.0
    fit = bm.Study(data, exposure="x", contrast=(0, 2), mediator="m ~ x", outcome="y ~ m + x").fit(
        method="exact", draws=100, random_seed=1
    )
    arms = [np.cov(data.loc[data["x"] == dose, ["m", "y"]], rowvar=False) for dose in (0.0, 2.0)]
    # The b of all people is known here: what the pooled slope has beyond it, rho stands for.
    pooled = (arms[0][0, 1] + arms[1][0, 1]) / (arms[0][0, 0] + arms[1][0, 0])
    kappa = float(np.mean(fit.result.contrasts(points(fit.result.observed, {})).kappa))
    r = (pooled - 0.5) / kappa
    seen = with_covariance(
        fit.result, Covariance.from_correlation(0.6, 2 * 0.5, 0.5), at={}, rho=r / np.sqrt(1 + r**2)
    ).set_index("effect")["mean"]
    assert seen["indirect"] == pytest.approx(true, abs=0.01)


def test_no_covariance_is_the_summary(fit):
    for rho in (0.2, bm.LKJ(2)):
        pd.testing.assert_frame_equal(
            with_covariance(fit.result, 0.0, at={"z": [0.0, 1.0]}, rho=rho), fit.summary(at={"z": [0.0, 1.0]}, rho=rho)
        )


def test_a_fixed_covariance_moves_from_direct_to_indirect(fit):
    plain = fit.summary(at={"z": 1.0}, rho=bm.Uniform(-0.2, 0.4)).set_index("effect")
    moved = with_covariance(fit.result, -0.3, at={"z": 1.0}, rho=bm.Uniform(-0.2, 0.4)).set_index("effect")
    for statistic in ("mean", "lower", "upper"):
        np.testing.assert_allclose((moved - plain)[statistic], [-0.3, 0.3, 0.0], atol=1e-6)
    np.testing.assert_allclose(moved["sd"], plain["sd"], atol=1e-12)


def test_a_belief_against_brute_force(fit):
    belief, rho_prior = bm.Normal(0.1, 0.4), bm.Uniform(-0.5, 0.5)
    row = with_covariance(fit.result, belief, at={"z": 1.0}, rho=rho_prior).query("effect == 'indirect'").iloc[0]
    constant, slope = fit.result.contrasts(points(fit.result.observed, {"z": 1.0})).line("indirect")
    random = np.random.default_rng(3)
    count = constant.size * 200
    rho = random.uniform(-0.5, 0.5, count)
    effect = np.tile(constant[0], 200) - np.tile(slope[0], 200) * rho / np.sqrt(1 - rho**2)
    effect += random.normal(0.1, 0.4, count)
    # One stratified draw of the covariance goes with each of 2,000 posterior draws: SD/√2000 is about .012.
    assert row["mean"] == pytest.approx(effect.mean(), abs=0.02)
    assert row["sd"] == pytest.approx(effect.std(), rel=0.04)
    assert row["probability"] == pytest.approx(np.mean(effect > 0), abs=4 * row["mcse"])
    np.testing.assert_allclose(row[["lower", "upper"]].astype(float), np.quantile(effect, [0.025, 0.975]), atol=0.08)


def test_draws_are_those_of_the_belief_and_shared_between_beliefs_about_rho(fit):
    made = Covariance(stats.norm(0.2, 0.1)).draws(4000, random_seed=7)
    assert made.mean() == pytest.approx(0.2, abs=1e-4)
    assert made.std() == pytest.approx(0.1, rel=0.01)
    np.testing.assert_array_equal(made, Covariance(stats.norm(0.2, 0.1)).draws(4000, random_seed=7))
    product = Covariance.from_correlation(bm.Uniform(0.2, 0.8), bm.LogNormal(0.0, 0.1), bm.HalfNormal(0.5))
    expected = 0.5 * np.exp(0.005) * 0.5 * np.sqrt(2 / np.pi)
    assert product.draws(40_000, random_seed=1).mean() == pytest.approx(expected, rel=0.02)
    means = [with_covariance(fit.result, bm.Normal(0, 1), at={}, rho=r)["mean"] for r in (-0.3, 0.3)]
    plain = [fit.summary(at={}, rho=r)["mean"] for r in (-0.3, 0.3)]
    np.testing.assert_allclose(means[1] - means[0], plain[1] - plain[0], atol=1e-12)


@pytest.mark.parametrize("claim", [bm.Claim(above=0.1), bm.Claim("direct", below=0.3)], ids=str)
def test_the_tipping_covariance_brings_the_median_effect_to_the_limit(fit, claim):
    found = covariance_tipping(fit.result, [-0.3, 0.0, 0.3], at={"z": [0.0, 2.0]}, claim=claim)
    assert list(found.columns) == ["rho", "z", "median", "lower", "upper"]
    assert (found["lower"] < found["median"]).all()
    assert (found["median"] < found["upper"]).all()
    for _, row in found.iterrows():
        moved = with_covariance(fit.result, row["median"], at={"z": row["z"]}, rho=row["rho"], claim=claim)
        probability = moved.set_index("effect")["probability"][claim.effect]
        assert probability == pytest.approx(0.5, abs=0.001)


def test_each_group_keeps_its_own_rho(simulated):
    study = bm.Study(simulated(240, 0.2, seed=5), exposure="x", mediator="m ~ x * site", outcome="y ~ (m + x) * site")
    belief = bm.ByGroup({"east": 0.0, "north": bm.Uniform(0.0, 0.3), "west": 0.1}, correlation=0.5)
    fit = study.fit(method="exact", rho=belief, draws=250, random_seed=1, progressbar=False)
    plain, moved = fit.summary(), with_covariance(fit.result, 0.25)
    difference = (moved["mean"] - plain["mean"]).groupby(plain["effect"]).mean()
    assert difference.to_dict() == pytest.approx({"indirect": 0.25, "direct": -0.25, "total": 0.0}, abs=1e-9)


@pytest.mark.parametrize(
    ("call", "match"),
    [
        (lambda r: Covariance("large"), "'large'"),
        (lambda r: Covariance(float("inf")), "finite"),
        (lambda r: Covariance.from_correlation(1.2, 1, 1), "correlation=1.2"),
        (lambda r: Covariance.from_correlation(bm.Normal(0, 1), 1, 1), "reaches from -inf"),
        (lambda r: Covariance.from_correlation(0.5, -1, 1), "sd_first=-1"),
        (lambda r: Covariance.from_correlation(0.5, 1, stats.norm(1, 1)), "sd_second"),
        (lambda r: with_covariance(r, 0.1, rho=0.0, claim=bm.Claim("pure_indirect")), "pure_indirect"),
        (lambda r: covariance_tipping(r, 0.0, claim=bm.Claim("total")), "total"),
        (lambda r: covariance_tipping(r, bm.LKJ(2)), "number or a list"),
    ],
)
def test_bad_arguments_give_one_clear_error(fit, call, match):
    with pytest.raises(ArgumentError, match=match):
        call(fit.result)
