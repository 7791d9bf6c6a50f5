"""The invented tutoring programme: shipped as made, true values as its script says, and the story it tells."""

import importlib.util
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest
import statsmodels.formula.api as smf

import bayesmed as bm
from bayesmed.examples import example_study_file
from bayesmed.report.study_file import read_study_file


@pytest.fixture(scope="module")
def make() -> ModuleType:
    spec = importlib.util.spec_from_file_location("make", example_study_file("tutoring").with_name("make.py"))
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def fit() -> bm.Fit:
    asked = read_study_file(example_study_file("tutoring"))
    study = bm.Study(
        asked.frame(), exposure=asked.exposure, contrast=asked.contrast, mediator=asked.mediator, outcome=asked.outcome
    )
    return study.fit(method="exact", random_seed=1, progressbar=False)


def test_making_it_again_gives_the_file_byte_for_byte(make: ModuleType, tmp_path: Path) -> None:
    made = make.write(tmp_path).read_bytes()
    assert made == example_study_file("tutoring").with_name("tutoring.csv").read_bytes()


def test_load_example_is_the_programme() -> None:
    data = bm.load_example("tutoring")
    assert data.shape == (450, 6)
    assert data["pupil"].is_unique
    assert data["hours"].between(0, 30).all()
    assert set(data["school"].value_counts()) == {150}
    missing = data.isna().sum()
    assert dict(missing[missing > 0]) == {"reading": 6, "score": 5, "earlier_score": 3}


def test_the_script_says_the_truth(make: ModuleType) -> None:
    """With many pupils, least squares (statsmodels), corrected at the true rho, finds the true natural effects.

    The bias of the mediator's coefficient is rho tau / (sigma_m sqrt(1 - rho²)), by omitted-variable algebra.
    """
    data = make.simulate(seed=1, pupils=450_000).dropna()
    data = data.astype({"reading": float, "score": float, "earlier_score": float})
    first = smf.ols("reading ~ hours * C(school, Treatment('town')) + earlier_score", data).fit()
    second = smf.ols(
        "score ~ (reading + hours) * C(school, Treatment('town')) + reading:hours + earlier_score", data
    ).fit()
    bias = make.TRUE_RHO * np.sqrt(second.scale / first.scale) / np.sqrt(1 - make.TRUE_RHO**2)
    for school in make.SCHOOLS:
        label = "" if school == "town" else f":C(school, Treatment('town'))[T.{school}]"
        shift = 20 * (first.params["hours"] + (first.params[f"hours{label}"] if label else 0.0))
        slope = second.params["reading"] + (second.params[f"reading{label}"] if label else 0.0)
        for held in (0.0, 20.0):
            found = shift * (slope + held * second.params["reading:hours"] - bias)
            # 0.06 allows for what is clipped at no reading, and for sampling.
            assert found == pytest.approx(make.true_indirect(school, 20.0, held), abs=0.06)


def test_the_interaction_of_exposure_and_mediator_gives_five_effects(fit: bm.Fit, make: ModuleType) -> None:
    table = fit.summary(at={"school": ["village"]}, rho=make.TRUE_RHO).set_index("effect")
    assert list(table.index) == ["indirect", "direct", "total", "pure_indirect", "total_direct"]
    for effect, held in (("indirect", 20.0), ("pure_indirect", 0.0)):
        truth = make.true_indirect("village", 20.0, held)
        assert table.loc[effect, "lower"] < truth < table.loc[effect, "upper"]


def test_the_story_it_was_made_for(fit: bm.Fit) -> None:
    """In villages and towns the claim stands under every belief; in cities only while homes are thought not to help."""
    asked = read_study_file(example_study_file("tutoring"))
    table = fit.compare(asked.beliefs, at=asked.at, claim=asked.claim).table
    claimed = table[table["effect"] == "indirect"].set_index(["school", "prior"])["verdict"]
    assert list(claimed.loc["village"]) == ["holds"] * 4
    assert list(claimed.loc["town"]) == ["holds"] * 4
    assert list(claimed.loc["city"]) == ["holds", "holds", "fails", "fails"]
