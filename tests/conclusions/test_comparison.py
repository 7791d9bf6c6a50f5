"""Comparison of beliefs: verdicts, sentences, labelled results, and arguments that are refused."""

import numpy as np
import pytest

import bayesmed as bm
from bayesmed.conclusions.words import number_text, probability_text
from bayesmed.core.errors import ArgumentError, BeliefNeededError, PriorError


@pytest.fixture(scope="module")
def fit(simulated):
    study = bm.Study(
        simulated(250, 0.3, seed=4, interact=False),
        exposure="x",
        mediator="m ~ x + z + site",
        outcome="y ~ m * z + x + site",
    )
    return study.fit(method="exact", random_seed=1, progressbar=False)


BELIEFS = {"none": 0.0, "some": bm.TruncatedNormal(0.3, 0.1), "wide": bm.LKJ(2)}


def test_the_table_has_a_row_per_belief_effect_and_point(fit):
    comparison = fit.compare(BELIEFS, at={"z": [0.0, 1.0, 2.0]})
    assert list(comparison.table.columns) == [
        "prior", "effect", "z", "mean", "sd", "lower", "upper", "probability", "mcse", "verdict",
    ]  # fmt: skip
    assert len(comparison.table) == 3 * 3 * 3
    assert set(comparison.table.query("effect == 'indirect'")["verdict"]) <= {"holds", "fails", "too close to call"}
    assert set(comparison.table.query("effect != 'indirect'")["verdict"]) == {""}
    assert len(comparison.shifts) == 3


def test_each_row_is_the_summary_under_that_belief(fit):
    table = fit.compare(BELIEFS, at={"z": 1.0}).table
    for label, belief in BELIEFS.items():
        alone = fit.summary(at={"z": 1.0}, rho=belief)
        part = table[table["prior"] == label].reset_index(drop=True)
        np.testing.assert_array_equal(part[alone.columns[2:]], alone[alone.columns[2:]])


@pytest.mark.parametrize(
    ("probability", "mcse", "verdict"),
    [
        (0.97, 0.001, "holds"),
        (0.9, 0.001, "fails"),
        (0.951, 0.001, "too close to call"),
        (0.95, 0.0, "too close to call"),
    ],
)
def test_a_verdict_allows_for_two_monte_carlo_errors(probability, mcse, verdict):
    assert bm.Claim().verdict(probability, mcse) == verdict


def test_the_sentence_names_the_beliefs_that_change_the_verdict(fit):
    comparison = fit.compare(
        {"none": 0.0, "strong": 0.8, "reversed": -0.5}, at={"z": 1.0}, claim=bm.Claim("indirect", above=0, required=0.9)
    )
    (sentence,) = comparison.shifts
    assert sentence.startswith("At z = 1 the claim holds under “none” (")
    assert "as under “reversed” (" in sentence
    assert sentence.endswith("it fails under “strong” (<0.001).")


def test_a_probability_is_never_printed_as_certain(fit):
    text = repr(fit.compare({"none": -0.9}, at={"z": 1.0}))
    assert ">0.999" in text
    assert " 1.000" not in text
    assert probability_text(1.0) == ">0.999"
    assert probability_text(0.0) == "<0.001"


def test_unanimous_draws_still_carry_an_error(fit):
    row = fit.summary(at={"z": 1.0}, rho=-0.9).iloc[0]
    assert row["probability"] == 1
    assert row["mcse"] == pytest.approx(1 / 4000)


def test_labels_are_escaped_in_a_notebook(fit):
    html = fit.compare({"<script>alert(1)</script>": 0.0}, at={"z": 1.0})._repr_html_()
    assert "<script>" not in html
    assert "&lt;script&gt;" in html


def test_effects_have_a_dim_for_a_list_and_a_coordinate_for_a_scalar(fit):
    found = fit.effects(at={"z": [0.0, 1.0], "site": "north"}, rho=[0.0, 0.2])
    assert found["indirect"].dims == ("chain", "draw", "rho", "z")
    assert found.coords["site"].item() == "north"
    assert found["rho"].to_numpy().tolist() == [0.0, 0.2]
    assert fit.effects(at={}, rho=0.1)["indirect"].dims == ("chain", "draw")


def test_the_default_grid_of_rho(fit):
    grid = fit.rho_grid(at={})
    assert grid["rho"].unique().tolist() == [round(-0.9 + 0.1 * k, 1) for k in range(19)]


@pytest.mark.parametrize(
    ("call", "error", "match"),
    [
        (lambda f: f.summary(), BeliefNeededError, "rho="),
        (lambda f: f.effects(), BeliefNeededError, "rho="),
        (lambda f: f.summary(rho=1.0), PriorError, "1"),
        (lambda f: f.summary(rho="wide"), PriorError, "'wide'"),
        (lambda f: f.summary(rho=[0.0, 1.2]), ArgumentError, "1.2"),
        (lambda f: f.summary(rho=[0.1, 0.1]), ArgumentError, "twice"),
        (lambda f: f.summary(rho=[bm.LKJ(2)]), ArgumentError, "compare"),
        (lambda f: f.summary(rho=0.0, ci_prob=95), ArgumentError, "ci_prob=95"),
        (lambda f: f.summary(rho=0.0, claim="indirect"), ArgumentError, "bm.Claim"),
        (lambda f: f.summary(rho=0.0, at={"m": 1.0}), ArgumentError, "'m'"),
        (lambda f: f.summary(rho=0.0, at={"site": "south"}), ArgumentError, "'south'"),
        (lambda f: f.compare({}), ArgumentError, "label"),
        (lambda f: f.compare([0.1, 0.2]), ArgumentError, "dict"),
        (lambda f: f.compare({"": 0.1}), ArgumentError, "blank"),
        (lambda f: f.compare({"a": 0.1}, claim=bm.Claim("pure_indirect")), ArgumentError, "exposure with mediator"),
        (lambda f: f.tipping(claim=bm.Claim("total")), ArgumentError, "total"),
        (lambda f: f.save("/nonexistent/folder/x.nc"), ArgumentError, "folder"),
        (lambda f: bm.load("/nonexistent.nc"), ArgumentError, "no file"),
        (lambda f: f.study.fit(draws=0), ArgumentError, "draws=0"),
        (lambda f: f.study.fit(chains=True), ArgumentError, "chains=True"),
        (lambda f: f.study.fit(method="laplace"), ArgumentError, "'laplace'"),
        (lambda f: f.study.fit(random_seed=-1), ArgumentError, "random_seed=-1"),
        (lambda f: f.study.fit(coefficients={"m": 1}), ArgumentError, "Coefficients"),
        (lambda f: bm.Claim("mediated"), ArgumentError, "'mediated'"),
        (lambda f: bm.Claim(above=0, below=1), ArgumentError, "one of them"),
        (lambda f: bm.Claim(above=float("nan")), ArgumentError, "finite"),
        (lambda f: bm.Claim(required=95), ArgumentError, "95"),
    ],
)
def test_bad_arguments_give_one_clear_error(fit, call, error, match):
    with pytest.raises(error, match=match):
        call(fit)


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (1234.5, "1230"),
        (-0.012345, "-0.0123"),
        (0.0, "0"),
        (9.996, "10.0"),
        (np.nan, "not defined"),
        (-np.inf, "-infinite"),
    ],
)
def test_numbers_are_shown_in_three_digits(value, text):
    assert number_text(value) == text
