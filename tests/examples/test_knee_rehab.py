"""The invented trial: shipped as made, found without the source tree, true values as its script says."""

import importlib.util
from pathlib import Path
from types import ModuleType

import numpy as np
import pandas as pd
import pytest
import statsmodels.formula.api as smf

import bayesmed as bm
from bayesmed.examples import example_names, example_study_file


@pytest.fixture(scope="module")
def make() -> ModuleType:
    spec = importlib.util.spec_from_file_location("make", example_study_file("knee_rehab").with_name("make.py"))
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_making_it_again_gives_the_file_byte_for_byte(make: ModuleType, tmp_path: Path) -> None:
    made = make.write(tmp_path).read_bytes()
    assert made == example_study_file("knee_rehab").with_name("knee_rehab.csv").read_bytes()


def test_load_example_is_the_trial() -> None:
    data = bm.load_example("knee_rehab")
    assert data.shape == (240, 7)
    assert data["participant"].is_unique
    assert data["coaching"].sum() == 120
    missing = data.isna().sum()
    assert dict(missing[missing > 0]) == {"exercise": 4, "function": 4, "body_mass_index": 2}
    assert data["function"].dropna().between(0, 100).all()
    assert (data["exercise"].dropna() % 5 == 0).all()


def test_an_unknown_name_lists_those_there_are() -> None:
    with pytest.raises(bm.errors.ArgumentError, match=r"'knee' does not exist; there is knee_rehab, tutoring"):
        bm.load_example("knee")
    assert example_names() == ("knee_rehab", "tutoring")


def test_a_name_cannot_leave_the_folder() -> None:
    with pytest.raises(bm.errors.ArgumentError, match="does not exist"):
        bm.load_example("../examples/knee_rehab")


def test_files_say_that_the_trial_is_invented() -> None:
    for name in example_names():
        study = example_study_file(name)
        for path in (study, study.with_name("make.py")):
            assert "INVENTED" in path.read_text(encoding="utf-8")


def test_the_script_says_the_truth(make: ModuleType) -> None:
    """With many patients, least squares (statsmodels) finds the true effect at the true rho and not at 0.

    The bias of the mediator's coefficient is rho tau / (sigma_m sqrt(1 - rho²)), by omitted-variable algebra:
    with e_y = (rho sigma_y / sigma_m) e_m + noise, regression on the mediator adds rho sigma_y / sigma_m to its
    coefficient, and tau = sigma_y sqrt(1 - rho²).
    """
    data = make.simulate(seed=1, patients=400_000).dropna().astype({"exercise": float, "function": float})
    first = smf.ols("exercise ~ coaching + confidence + age + body_mass_index", data).fit()
    second = smf.ols("function ~ exercise * confidence + coaching + age + body_mass_index", data).fit()
    shift = first.params["coaching"]
    tau, sigma_m = np.sqrt(second.scale), np.sqrt(first.scale)
    bias = make.TRUE_RHO * tau / (sigma_m * np.sqrt(1 - make.TRUE_RHO**2))
    for confidence in (4, 6, 8):
        naive = shift * (second.params["exercise"] + second.params["exercise:confidence"] * confidence)
        # 0.1 allows for what is clipped at 0 minutes and at 0 and 100 points, and for sampling.
        assert naive - shift * bias == pytest.approx(make.true_indirect(confidence), abs=0.1)
        assert naive - make.true_indirect(confidence) > 0.9


def test_the_story_it_was_made_for() -> None:
    """At low confidence the claim rests on rho = 0; at high confidence it stands under all but near-ignorance."""
    from bayesmed.report.study_file import read_study_file

    asked = read_study_file(example_study_file("knee_rehab"))
    study = bm.Study(asked.frame(), exposure=asked.exposure, mediator=asked.mediator, outcome=asked.outcome)
    fit = study.fit(method="exact", random_seed=1, progressbar=False)
    table = fit.compare(asked.beliefs, at=asked.at, claim=asked.claim).table
    claimed = table[table["effect"] == "indirect"].set_index(["confidence", "prior"])["verdict"]
    assert list(claimed.loc[4]) == ["holds", "fails", "fails", "fails", "fails"]
    assert list(claimed.loc[8]) == ["holds", "holds", "holds", "holds", "fails"]
    assert isinstance(asked.frame(), pd.DataFrame)
