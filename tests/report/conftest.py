"""Study files made for a test, and an exact fit of the invented trial."""

from collections.abc import Callable
from pathlib import Path

import pytest

import bayesmed as bm
from bayesmed.examples import example_study_file
from bayesmed.fit.result import FitResult
from bayesmed.report.study_file import read_study_file

ROLES = """\
data = "data.csv"
exposure = "coaching"
mediator = "exercise ~ coaching + confidence + age"
outcome = "function ~ exercise * confidence + coaching + age"
"""


@pytest.fixture
def study_file(tmp_path: Path) -> Callable[..., Path]:
    """Write a study file (roles filled in unless told otherwise) beside the trial's data."""

    def write(rest: str = "", roles: str = ROLES) -> Path:
        source = example_study_file("knee_rehab").with_name("knee_rehab.csv")
        (tmp_path / "data.csv").write_bytes(source.read_bytes())
        path = tmp_path / "study.toml"
        path.write_text(roles + rest, encoding="utf-8")
        return path

    return write


@pytest.fixture(scope="session")
def knee() -> FitResult:
    asked = read_study_file(example_study_file("knee_rehab"))
    study = bm.Study(asked.frame(), exposure=asked.exposure, mediator=asked.mediator, outcome=asked.outcome)
    return study.fit(method="exact", draws=250, random_seed=1, progressbar=False).result
