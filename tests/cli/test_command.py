"""The command: what it prints and writes, its exit codes, and that nothing ends in a traceback."""

import re
import signal
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest

from bayesmed.cli import fitted as fitted_room
from bayesmed.cli import main
from bayesmed.cli import report as room
from bayesmed.core.errors import StudyFileError
from bayesmed.report import folder as folder_room

Write = Callable[..., Path]
Captured = pytest.CaptureFixture[str]


def test_report_prints_the_comparison_and_writes_the_folder(quick: Write, tmp_path: Path, capsys: Captured) -> None:
    assert main(["report", str(quick()), "--out", str(tmp_path / "out")]) == 0
    out, err = capsys.readouterr()
    assert max(map(len, out.splitlines())) <= 80
    flat = re.sub(r"\s+", "", out)
    table = pd.read_csv(tmp_path / "out" / "comparison.csv")
    for label in table["prior"].str.removeprefix("'").unique():
        # Long labels go over several lines of their column, and no character of them is lost.
        words = label.split()
        assert all(word in out for word in words if len(word) < 15), label
    assert "Atconfidence=4theclaimholdsunder“nothingleftout”" in flat
    for verdict in table["verdict"].dropna().unique():
        assert verdict in out
    assert "…" not in out
    assert "report.md" in out
    assert [line[:7] for line in err.splitlines()] == ["Reading", "Drawing", "Compari", "Looking", "Drawing"]


def test_a_long_label_is_printed_whole(quick: Write, tmp_path: Path, capsys: Captured) -> None:
    assert main(["report", str(quick()), "--out", str(tmp_path / "out")]) == 0
    lines = capsys.readouterr().out.splitlines()
    start = next(k for k, line in enumerate(lines) if line.startswith("<b>"))
    end = next(k for k, line in enumerate(lines) if k > start and line.startswith("=HYPER"))
    # The first line holds the numbers too, two spaces further right; the others hold label alone.
    pieces = [re.split(r" {2,}", lines[start])[0], *(line.strip() for line in lines[start + 1 : end])]
    label = '<b>"drive"</b>, [red]helps[/red] | both of them in ways that nobody measured and few would deny'
    assert "".join("".join(pieces).split()) == "".join(label.split())


def test_quiet_prints_nothing(quick: Write, tmp_path: Path, capsys: Captured) -> None:
    assert main(["report", str(quick()), "--out", str(tmp_path / "out"), "--quiet"]) == 0
    assert capsys.readouterr() == ("", "")
    assert (tmp_path / "out" / "report.md").is_file()


def test_check_prints_the_audit_and_writes_nothing(quick: Write, tmp_path: Path, capsys: Captured) -> None:
    path = quick()
    before = {each.name for each in tmp_path.iterdir()}
    assert main(["check", str(path)]) == 0
    out, err = capsys.readouterr()
    assert out.startswith("Coaching, exercise and the knee\n")
    assert "  rows: 232 of 240 rows used; 8 are incomplete" in out
    assert "silent on rho" in out
    assert max(map(len, out.splitlines())) <= 80
    assert err == ""
    assert {each.name for each in tmp_path.iterdir()} == before


def test_check_of_a_design_that_cannot_be_fitted(quick: Write, tmp_path: Path, capsys: Captured) -> None:
    path = quick()
    data = pd.read_csv(tmp_path / "data.csv")
    data["age"] = 2 * data["confidence"]
    data.to_csv(tmp_path / "data.csv", index=False)
    assert main(["check", str(path)]) == 1
    assert re.search(r"^✗ rank: ", capsys.readouterr().out, flags=re.MULTILINE)


def test_an_example_can_be_named(capsys: Captured, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    assert main(["check", "knee_rehab"]) == 0
    assert "230 of 240 rows used" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("replaced", "message"),
    [
        ({"eta = 2": "etta = 2"}, "beliefs.=HYPERLINK(1).etta is 2"),
        ({"draws = 100": "drawz = 100"}, "study.toml: fit.drawz is not known"),
        ({"data.csv": "other.csv"}, "study.toml: data is 'other.csv', but there is no file"),
        ({'exposure = "coaching"': 'exposure = "coach"'}, "'coach'"),
        ({"exercise * confidence": "exercise * (confidence"}, "outcome"),
        ({"confidence = [4, 8]": "confidnce = [4, 8]"}, "confidnce"),
    ],
)
def test_what_is_wrong_is_one_message_and_code_1(
    quick: Write, tmp_path: Path, capsys: Captured, replaced: dict[str, str], message: str
) -> None:
    assert main(["report", str(quick(**replaced)), "--out", str(tmp_path / "out"), "--quiet"]) == 1
    out, err = capsys.readouterr()
    assert out == ""
    assert err.startswith("bayesmed: ")
    assert message in err
    assert "Traceback" not in err
    assert not (tmp_path / "out").exists()


def test_a_folder_that_is_refused_is_refused_before_the_fit(
    quick: Write, tmp_path: Path, capsys: Captured, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(room, "fitted", lambda *_: pytest.fail("fitted"))
    assert main(["report", str(quick()), "--out", str(tmp_path)]) == 1
    assert "was not written by bayesmed" in capsys.readouterr().err


def test_no_such_study(tmp_path: Path, capsys: Captured) -> None:
    assert main(["check", str(tmp_path / "none.toml")]) == 1
    assert "there is no study file" in capsys.readouterr().err
    (tmp_path / "study.toml").write_text("")
    assert main(["check", str(tmp_path)]) == 1
    assert "is a folder; name the file" in capsys.readouterr().err


@pytest.mark.parametrize("arguments", [[], ["report"], ["report", "study.toml"], ["chek", "x"], ["check", "x", "--no"]])
def test_usage_errors_are_code_2(arguments: list[str], capsys: Captured) -> None:
    assert main(arguments) == 2
    assert "usage: bayesmed" in capsys.readouterr().err


@pytest.mark.parametrize(
    "arguments", [["--help"], *([name, "--help"] for name in ("report", "compare", "check", "example"))]
)
def test_help_has_examples_and_exit_codes(arguments: list[str], capsys: Captured) -> None:
    assert main(arguments) == 0
    out = capsys.readouterr().out
    for words in ("example", "exit codes:", "  0 ", "  1 ", "  2 ", "  130 "):
        assert words in out
    assert max(map(len, out.splitlines())) <= 100


def test_version(capsys: Captured) -> None:
    assert main(["--version"]) == 0
    assert re.fullmatch(r"bayesmed \d+\.\d+\.\d+\n", capsys.readouterr().out)


@pytest.mark.parametrize("where", ["_fit", "answer", "completed", "write_findings"])
def test_an_interrupt_leaves_nothing_and_is_code_130(
    quick: Write, tmp_path: Path, capsys: Captured, monkeypatch: pytest.MonkeyPatch, where: str
) -> None:
    # Started in the background, a process ignores the signal and so would Python.
    before_us = signal.signal(signal.SIGINT, signal.default_int_handler)
    at = {"completed": room, "write_findings": folder_room}.get(where, fitted_room)
    monkeypatch.setattr(at, where, lambda *_, **__: signal.raise_signal(signal.SIGINT))
    path = quick()
    before = {each.name for each in tmp_path.iterdir()}
    code = main(["report", str(path), "--out", str(tmp_path / "out"), "--quiet"])
    signal.signal(signal.SIGINT, before_us)
    assert code == 130
    assert capsys.readouterr().err == "bayesmed: interrupted; nothing was written\n"
    assert {each.name for each in tmp_path.iterdir()} == before


def test_draws_of_an_interrupted_sampler_are_not_taken_for_whole(
    quick: Write, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """nutpie answers an interrupt with what it has, shorter chains filled up with nan."""
    import nutpie

    sample = nutpie.sample

    def cut_short(*arguments: object, **options: object) -> object:
        tree = sample(*arguments, **options)
        tree["posterior"]["x"][:, 50:] = float("nan")
        return tree

    monkeypatch.setattr(nutpie, "sample", cut_short)
    path = quick(**{'method = "exact"': 'method = "nuts"\ntune = 50'})
    assert main(["report", str(path), "--out", str(tmp_path / "out"), "--quiet"]) == 130
    assert not (tmp_path / "out").exists()


def test_a_warning_is_one_line_said_once(quick: Write, tmp_path: Path, capsys: Captured) -> None:
    path = quick(**{"confidence = [4, 8]": "confidence = [4, 12]"})
    assert main(["report", str(path), "--out", str(tmp_path / "out"), "--quiet"]) == 0
    (line,) = capsys.readouterr().err.splitlines()
    assert line.startswith("bayesmed: warning: ")
    assert "12 lies outside the values observed" in line


def test_exact_prints_its_table_without_sampler_or_plotting_library(quick: Write, tmp_path: Path) -> None:
    code = """
import sys
from bayesmed.cli import main, report
def looked(first):
    heavy = {"pymc", "pytensor", "nutpie", "arviz_stats", "arviz_base", "arviz_plots", "matplotlib", "numba"}
    print("imported:", sorted(heavy & set(sys.modules)))
    raise SystemExit(0)
import bayesmed.cli.report
bayesmed.cli.report.completed = looked
main(sys.argv[1:])
"""
    ran = subprocess.run(
        [sys.executable, "-c", code, "report", str(quick()), "--out", str(tmp_path / "out")],
        capture_output=True, text=True, check=True, timeout=120,
    )  # fmt: skip
    assert "At confidence = 4 the claim" in ran.stdout
    assert ran.stdout.endswith("imported: []\n")


def test_the_module_is_the_command(tmp_path: Path) -> None:
    ran = subprocess.run(
        [sys.executable, "-m", "bayesmed", "check", str(tmp_path / "none")], capture_output=True, text=True, timeout=120
    )
    assert ran.returncode == 1
    assert ran.stderr.startswith("bayesmed: there is no study file")


def test_an_error_keeps_its_type_below_the_command(tmp_path: Path) -> None:
    with pytest.raises(StudyFileError):
        room.report(tmp_path / "none.toml", str(tmp_path / "out"), quiet=True)


def test_with_nuts(quick: Write, tmp_path: Path, capsys: Captured) -> None:
    """The one run of the sampler here: few draws, the page says how they were made."""
    path = quick(**{'method = "exact"': 'method = "nuts"\ntune = 200', "chains = 4": "chains = 2"})
    assert main(["report", str(path), "--out", str(tmp_path / "out")]) == 0
    assert "Sampling" in capsys.readouterr().err
    page = (tmp_path / "out" / "report.md").read_text(encoding="utf-8")
    assert "2 chains of 100 draws, after 200 to adapt, were made with the No-U-Turn sampler" in page
    assert "pymc 6." in page


def test_a_label_of_a_strangers_file_cannot_command_the_terminal(quick: Write, capsys: Captured) -> None:
    path = quick(**{'"nothing left out"': '"\\u001b[31mred\\u001b[0m"'})
    assert main(["compare", str(path)]) == 0
    printed = capsys.readouterr().out
    assert "\x1b" not in printed
    assert "\\x1b[31mred" in printed
