"""The study file that a report writes makes the same numbers again, and rows can be left out."""

import csv
import hashlib
import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from markdown_it import MarkdownIt

import bayesmed as bm
from bayesmed.cli import main
from bayesmed.core.errors import FitError
from bayesmed.fit.result import FitResult
from bayesmed.report.findings import find
from bayesmed.report.folder import write_findings
from bayesmed.report.place import MARKER
from bayesmed.report.request import study_request
from tests.report.hostile import HOSTILE, hostile

AT = {"confidence": [4, 8]}
BELIEFS = {
    'a "label" — with\nall = of # it': 0.0,
    "mixed": bm.Mixture([bm.LKJ(2), bm.Uniform(0, 0.5)], [0.3, 0.7]),
    "shares": bm.SharedCause(bm.BetaShare(1, 9), 0.2, positive=0.8),
}


@pytest.fixture(autouse=True)
def _without_pictures(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("bayesmed.report.folder.drawn", lambda _: {})


@pytest.mark.parametrize("method", ["exact", pytest.param("nuts", id="seed_1_nuts", marks=pytest.mark.slow)])
def test_running_the_study_file_makes_the_same_bytes(knee: FitResult, tmp_path: Path, method: str) -> None:
    result = knee
    if method == "nuts":
        study = bm.Study(
            knee.observed.frame,
            exposure="coaching",
            mediator="exercise ~ coaching + confidence + age",
            outcome="function ~ exercise * confidence + coaching + age",
        )
        priors = bm.Coefficients(outcome={"exercise": bm.Normal(0, 1)}, sigma_outcome=bm.HalfNormal(20))
        result = study.fit(draws=60, tune=120, chains=2, random_seed=4, coefficients=priors, progressbar=False).result
    found = find(result, BELIEFS, AT, bm.Claim("indirect", below=2, required=0.9), 0.9, "A “title” = #1")
    first = write_findings(found, tmp_path / "first")
    assert main(["report", str(first / "study.toml"), "--out", str(tmp_path / "second"), "--quiet"]) == 0
    tables = sorted(path.name for path in first.glob("*.csv"))
    assert len(tables) >= 7
    for name in tables:
        assert (first / name).read_bytes() == (tmp_path / "second" / name).read_bytes(), name


def test_the_fit_kept_in_the_folder_is_the_fit(knee: FitResult, tmp_path: Path) -> None:
    folder = write_findings(find(knee, BELIEFS, AT), tmp_path / "out")
    again = bm.load(folder / "fit.nc").result
    assert again.posterior.equals(knee.posterior)


def test_the_manifest_tells_what_made_it(knee: FitResult, tmp_path: Path) -> None:
    folder = write_findings(find(knee, BELIEFS, AT), tmp_path / "out")
    told = json.loads((folder / MARKER).read_text(encoding="utf-8"))
    assert told["fit"] == {
        "method": "exact", "draws": 250, "tune": 0, "chains": 4, "random_seed": 1, "learn": True,
    }  # fmt: skip
    assert told["versions_of_the_fit"]["numpy"] == np.__version__
    assert told["rows_sha256"] == hashlib.sha256((folder / "rows.csv").read_bytes()).hexdigest()
    assert told["rows_used"] == len(pd.read_csv(folder / "rows.csv")) == 230
    assert told["not_in_the_folder"] == {}


def test_without_rows_no_file_holds_a_row(tmp_path: Path) -> None:
    """A number that stands in one row alone, in as many digits as it has, is looked for in every file."""
    random = np.random.default_rng(3)
    data = pd.DataFrame({"x": np.tile([0, 1], 30), "m": random.normal(size=60)})
    data["y"] = data["m"] + random.normal(size=60)
    study = bm.Study(data, exposure="x", mediator="m ~ x", outcome="y ~ m + x")
    fit = study.fit(method="exact", draws=50, random_seed=1, progressbar=False)
    kept = fit.report(tmp_path / "kept", {"none": 0.0})
    bare = fit.report(tmp_path / "bare", {"none": 0.0}, rows=False)
    assert {path.name for path in kept.iterdir()} - {path.name for path in bare.iterdir()} == {"rows.csv"}
    values = data["m"].to_numpy()

    def holding(folder: Path) -> set[str]:
        marks = [repr(float(v)).encode() for v in values] + [v.tobytes() for v in values]
        return {path.name for path in folder.iterdir() if any(mark in path.read_bytes() for mark in marks)}

    assert holding(kept) == {"fit.nc", "rows.csv"}
    assert holding(bare) == set()
    assert "Nothing in the folder holds a row of a participant." in (bare / "report.md").read_text(encoding="utf-8")
    with xr.open_datatree(bare / "fit.nc", engine="h5netcdf") as tree:
        assert set(tree.children) == {"posterior"}
    with pytest.raises(FitError, match=r"saved without the rows.*xarray\.open_datatree"):
        bm.load(bare / "fit.nc")


def test_the_command_leaves_rows_out(knee: FitResult, tmp_path: Path) -> None:
    first = write_findings(find(knee, BELIEFS, AT), tmp_path / "first")
    study, out = str(first / "study.toml"), tmp_path / "second"
    assert main(["report", study, "--out", str(out), "--quiet", "--without-rows"]) == 0
    assert not (out / "rows.csv").exists()
    assert (out / "study.toml").read_bytes() == (first / "study.toml").read_bytes()


def _request(data: pd.DataFrame, **changes: object) -> tuple[str | None, str | None, str]:
    roles = {"exposure": "x", "mediator": "m ~ x + g", "outcome": "y ~ m + x + g", **changes}
    fit = bm.Study(data, **roles).fit(method="exact", draws=20, random_seed=1, progressbar=False)
    return study_request(find(fit.result, {"none": 0.0}, {}))


def test_what_a_file_cannot_say_is_said(tmp_path: Path) -> None:
    random = np.random.default_rng(5)
    data = pd.DataFrame({"x": np.tile([0, 1], 30), "m": random.normal(size=60), "y": random.normal(size=60)})
    levels = pd.Series(np.tile(["b", "a", "c"], 20))
    assert _request(data.assign(g=levels))[2] == ""
    ordered = pd.Series(pd.Categorical(levels, categories=["c", "b", "a"]))
    study, rows, why = _request(data.assign(g=ordered))
    assert study is None
    assert rows is not None
    assert why.startswith("read back from a file, the terms of the equations would not be the same")
    study, rows, why = _request(data.assign(g=levels.replace("a", "=A1")))
    assert (study, rows, why) == (None, None, "the rows hold text that a spreadsheet would take for a formula")


def test_published_figures_and_groups_have_a_report(tmp_path: Path, knee: FitResult) -> None:
    published = bm.Study.from_regressions(
        exposure="x", mediator="m", outcome="y", n=109,
        mediator_on={"Intercept": ("8.063", "1.417"), "x": ("5.502", "2.182")},
        outcome_on={"Intercept": ("9.024", "1.680"), "x": ("3.992", "2.332"), "m": ("0.466", "0.100")},
    )  # fmt: skip
    folder = published.fit(method="exact", draws=50, random_seed=1, progressbar=False).report(tmp_path / "a")
    told = json.loads((folder / MARKER).read_text(encoding="utf-8"))
    assert set(told["not_in_the_folder"]) == {"study.toml", "rows.csv"}
    assert "published figures" in (folder / "report.md").read_text(encoding="utf-8")
    bm.load(folder / "fit.nc")
    frame = knee.observed.frame.assign(side=np.tile(["left", "right"], 115))
    study = bm.Study(
        frame,
        exposure="coaching",
        mediator="exercise ~ coaching * side",
        outcome="function ~ (exercise + coaching) * side",
    )
    own = bm.ByGroup({"left": bm.Uniform(0, 0.3), "right": bm.LKJ(2)}, correlation=0.5)
    fit = study.fit(rho=own, method="exact", draws=50, random_seed=1, progressbar=False)
    folder = fit.report(tmp_path / "b", {"own": own, "none": 0.0})
    told = json.loads((folder / MARKER).read_text(encoding="utf-8"))
    assert told["not_in_the_folder"] == {
        "study.toml": "the fit has a rho for each group, which a study file cannot ask for"
    }


def test_a_hostile_study_fills_a_folder_and_nothing_in_it_acts(tmp_path: Path) -> None:
    folder = write_findings(hostile(), tmp_path / "out")
    told = json.loads((folder / MARKER).read_text(encoding="utf-8"))
    assert told["title"] == HOSTILE
    assert list(told["beliefs"]) == [HOSTILE, "=1"]
    parsed = MarkdownIt("commonmark", {"html": True}).enable("table").parse((folder / "report.md").read_text("utf-8"))
    kinds = {child.type for token in parsed for child in token.children or []} | {token.type for token in parsed}
    assert not {"html_inline", "html_block", "link_open"} & kinds
    for path in folder.glob("*.csv"):
        with path.open(encoding="utf-8", newline="") as lines:
            cells = [cell for row in csv.reader(lines) for cell in row]
        words = [cell for cell in cells if not _number(cell)]
        assert not any(cell.startswith(("=", "+", "-", "@")) for cell in words), path.name
    comparison = pd.read_csv(folder / "comparison.csv")
    assert set(comparison["prior"]) == {HOSTILE, "'=1"}
    assert set(comparison['g"><b>']) == {HOSTILE, "'=1+1"}


def _number(cell: str) -> bool:
    try:
        float(cell)
    except ValueError:
        return False
    return True
