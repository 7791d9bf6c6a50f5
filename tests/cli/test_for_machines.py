"""JSON for machines, and examples to start from."""

import json
import math
from pathlib import Path

import pandas as pd
import pytest

from bayesmed.cli import main
from bayesmed.cli.json_text import plain

Captured = pytest.CaptureFixture[str]


def document(capsys: Captured) -> dict:
    out, err = capsys.readouterr()
    assert [line for line in err.splitlines() if not line.startswith("bayesmed: warning")] == []

    def refuse(name: str) -> None:
        raise AssertionError(f"{name} is no JSON")

    return json.loads(out, parse_constant=refuse)


def test_compare_prints_one_document_and_writes_nothing(quick, tmp_path: Path, capsys: Captured) -> None:
    path = quick()
    before = {each.name for each in tmp_path.iterdir()}
    assert main(["compare", str(path), "--json"]) == 0
    found = document(capsys)
    assert {each.name for each in tmp_path.iterdir()} == before
    assert found["layout"] == 1
    assert found["claim"]["effect"] == "indirect"
    rows = pd.DataFrame(found["rows"])
    assert set(rows["verdict"]) >= {"holds"}
    assert rows["probability"].between(0, 1).all()
    # The report's table, in eight digits, has the same numbers.
    assert main(["report", str(path), "--out", str(tmp_path / "out"), "--json"]) == 0
    again = document(capsys)
    assert again["rows"] == found["rows"]
    assert "report.md" in again["files"]
    table = pd.read_csv(tmp_path / "out" / "comparison.csv")
    assert table["probability"].to_numpy() == pytest.approx(rows["probability"].to_numpy(), abs=1e-7)


def test_hostile_labels_stand_whole_in_json(quick, capsys: Captured) -> None:
    assert main(["compare", str(quick()), "--json"]) == 0
    found = document(capsys)
    label = '<b>"drive"</b>, [red]helps[/red] | both of them in ways that nobody measured and few would deny'
    assert label in found["beliefs"]
    assert any(row["prior"].startswith("=HYPER") for row in found["rows"])


def test_compare_prints_what_report_prints(quick, tmp_path: Path, capsys: Captured) -> None:
    path = quick()
    assert main(["compare", str(path)]) == 0
    alone = capsys.readouterr().out
    assert main(["report", str(path), "--out", str(tmp_path / "out")]) == 0
    assert capsys.readouterr().out.startswith(alone)


def test_check_in_json_says_the_findings(quick, capsys: Captured) -> None:
    assert main(["check", str(quick()), "--json"]) == 0
    found = document(capsys)
    assert found["stops"] is False
    assert {"level", "about", "text"} == set(found["findings"][0])


def test_numbers_that_json_lacks() -> None:
    assert plain({"a": math.inf, "b": -math.inf, "c": math.nan, 1: (1, True, None)}) == {
        "a": "inf",
        "b": "-inf",
        "c": None,
        "1": [1, True, None],
    }


def test_an_example_is_written_and_can_be_checked(tmp_path: Path, capsys: Captured) -> None:
    assert main(["example"]) == 0
    assert "knee_rehab" in capsys.readouterr().out.split()
    folder = tmp_path / "start"
    assert main(["example", "knee_rehab", "--out", str(folder)]) == 0
    assert "invented" in capsys.readouterr().out
    assert {each.name for each in folder.iterdir()} == {"study.toml", "knee_rehab.csv"}
    assert main(["check", str(folder / "study.toml")]) == 0


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["knee"], "there is no example 'knee'"),
        (["knee_rehab"], "--out: name the folder"),
        (["knee_rehab", "--out", "{full}"], "not new or empty"),
        (["knee_rehab", "--out", "{full}/file"], "not new or empty"),
        (["knee_rehab", "--out", "{full}/a/b"], "does not exist"),
    ],
)
def test_an_example_never_overwrites(arguments, words, tmp_path: Path, capsys: Captured) -> None:
    (tmp_path / "full").mkdir()
    (tmp_path / "full" / "file").write_text("mine")
    filled = [argument.format(full=tmp_path / "full") for argument in arguments]
    assert main(["example", *filled]) == 1
    assert words in capsys.readouterr().err
    assert (tmp_path / "full" / "file").read_text() == "mine"
