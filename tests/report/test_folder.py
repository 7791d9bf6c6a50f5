"""The folder of a report: whole or not at all, and never over files that are someone's."""

import hashlib
import json
import xml.etree.ElementTree as ElementTree
from collections.abc import Callable
from pathlib import Path

import pytest
from matplotlib.figure import Figure
from PIL import Image

import bayesmed as bm
from bayesmed.core.errors import ArgumentError
from bayesmed.fit.result import FitResult
from bayesmed.plots.picture import Picture
from bayesmed.report import folder as room
from bayesmed.report import keeping, place
from bayesmed.report.findings import Findings, find
from bayesmed.report.folder import write_findings, write_report
from bayesmed.report.place import MARKER, check_folder

Write = Callable[..., Path]
AT = {"confidence": [4, 8]}
BELIEFS = {"none": 0.0, "half": bm.Uniform(0, 0.5)}
FILES = {
    "report.md", "report.html", "fit.nc", "study.toml", "rows.csv", "causes.svg",
    *(f"{name}.{end}" for name in ("comparison", "rho_grid", "beliefs") for end in ("csv", "tex")),
    *(f"effect_by_rho.{end}" for end in ("png", "svg", "txt")), MARKER,
}  # fmt: skip
WITH_TIPPING = {f"{n}.{e}" for n in ("tipping", "yardsticks", "overturning", "any_belief") for e in ("csv", "tex")}
FILES |= WITH_TIPPING


@pytest.fixture(scope="module")
def found(knee: FitResult) -> dict[str, Findings]:
    return {effect: find(knee, BELIEFS, AT, bm.Claim(effect)) for effect in ("indirect", "total")}


@pytest.fixture
def write(found: dict[str, Findings], monkeypatch: pytest.MonkeyPatch) -> Callable[..., Path]:
    """Write a report whose picture, fit and study file are small stand-ins, for tests of the folder alone."""
    stand_in = Picture(Figure(figsize=(0.1, 0.1)), "title", "text")
    monkeypatch.setattr(keeping, "save", lambda _, path, **__: path.write_text("fit"))
    monkeypatch.setattr(keeping, "study_request", lambda _: ("study", "rows", ""))
    monkeypatch.setattr(room, "drawn", lambda _: {"effect_by_rho": stand_in})
    return lambda folder, effect="indirect": write_findings(found[effect], folder)


def names(folder: Path) -> set[str]:
    return {path.name for path in folder.iterdir()}


def test_a_new_folder_holds_everything_and_nothing_is_left_beside_it(write: Write, tmp_path: Path) -> None:
    assert write(tmp_path / "out") == tmp_path / "out"
    assert names(tmp_path / "out") == FILES
    assert names(tmp_path) == {"out"}
    marker = json.loads((tmp_path / "out" / MARKER).read_text(encoding="utf-8"))
    assert set(marker["files"]) == FILES - {MARKER}
    for name, checksum in marker["files"].items():
        assert hashlib.sha256((tmp_path / "out" / name).read_bytes()).hexdigest() == checksum


def test_the_same_fit_makes_the_same_bytes_with_their_text_alternative(knee: FitResult, tmp_path: Path) -> None:
    first = write_report(knee, tmp_path / "a", beliefs=BELIEFS, at=AT)
    second = write_report(knee, tmp_path / "b", beliefs=BELIEFS, at=AT)
    for name in names(first):
        assert (first / name).read_bytes() == (second / name).read_bytes(), name
    text = (first / "effect_by_rho.txt").read_text(encoding="utf-8")
    with Image.open(first / "effect_by_rho.png") as image:
        words = image.info["Description"]
    assert "ρ = 0: " in words
    assert words in text
    root = ElementTree.parse(first / "effect_by_rho.svg").getroot()
    assert [e.text for e in root.iter("{http://purl.org/dc/elements/1.1/}description")] == [words]


def test_an_empty_folder_is_used(write: Write, tmp_path: Path) -> None:
    (tmp_path / "out").mkdir()
    assert names(write(tmp_path / "out")) == FILES


def test_an_earlier_report_is_replaced_and_other_files_are_kept(write: Write, tmp_path: Path) -> None:
    folder = write(tmp_path / "out")
    (folder / "notes.txt").write_text("mine")
    (folder / "drafts").mkdir()
    (folder / "drafts" / "a.txt").write_text("mine too")
    write(folder, "total")
    assert names(folder) == (FILES - WITH_TIPPING) | {"notes.txt", "drafts"}
    assert (folder / "notes.txt").read_text() == "mine"
    assert (folder / "drafts" / "a.txt").read_text() == "mine too"
    assert "total effect" in (folder / "report.md").read_text(encoding="utf-8")
    assert names(tmp_path) == {"out"}


def test_a_folder_of_someone_elses_is_refused(write: Write, tmp_path: Path) -> None:
    (tmp_path / "report.md").write_text("mine")
    with pytest.raises(ArgumentError, match="is not empty and was not written by bayesmed; choose a new"):
        write(tmp_path)
    assert names(tmp_path) == {"report.md"}
    assert (tmp_path / "report.md").read_text() == "mine"


def test_a_file_changed_since_is_not_lost(write: Write, tmp_path: Path) -> None:
    folder = write(tmp_path / "out")
    (folder / "report.md").write_text("my own words")
    with pytest.raises(ArgumentError, match=r"'report.md' was changed after bayesmed wrote it and would be lost"):
        write(folder)
    assert (folder / "report.md").read_text() == "my own words"


def test_a_file_taken_away_is_written_again(write: Write, tmp_path: Path) -> None:
    folder = write(tmp_path / "out")
    (folder / "report.md").unlink()
    assert names(write(folder)) == FILES


def test_a_file_of_anothers_with_a_name_we_need_now_is_kept(write: Write, tmp_path: Path) -> None:
    folder = write(tmp_path / "out", "total")
    (folder / "tipping.csv").write_text("mine")
    with pytest.raises(ArgumentError, match=r"'tipping.csv' is not bayesmed's"):
        write(folder)
    assert (folder / "tipping.csv").read_text() == "mine"
    assert names(tmp_path) == {"out"}
    assert names(folder) == (FILES - WITH_TIPPING) | {"tipping.csv"}


@pytest.mark.parametrize(
    "content",
    ["", "[]", "{}", '{"written_by": "bayesmed", "files": {"../../precious": "0"}}', '{"files": {"a": "0"}}'],
)
def test_a_marker_that_is_none_is_refused(tmp_path: Path, content: str) -> None:
    (tmp_path / MARKER).write_text(content)
    with pytest.raises(ArgumentError, match="cannot be read, so what bayesmed wrote there is not known"):
        check_folder(tmp_path)


def test_places_where_no_folder_can_be(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(ArgumentError, match="is a file; choose another name"):
        check_folder(tmp_path / "file")
    with pytest.raises(ArgumentError, match="does not exist; create it first"):
        check_folder(tmp_path / "none" / "out")


def test_a_link_to_a_folder_stays_a_link(write: Write, tmp_path: Path) -> None:
    (tmp_path / "real").mkdir()
    (tmp_path / "link").symlink_to(tmp_path / "real")
    write(tmp_path / "link")
    assert (tmp_path / "link").is_symlink()
    assert names(tmp_path / "real") == FILES


@pytest.mark.parametrize("step", ["csv_tables", "as_markdown", "_mark", "_move_into_place"])
@pytest.mark.parametrize("there", [False, True])
def test_an_interrupted_run_leaves_what_was_there(
    write: Write, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, step: str, there: bool
) -> None:
    folder = tmp_path / "out"
    before = {}
    if there:
        write(folder)
        before = {path.name: path.read_bytes() for path in folder.iterdir()}

    def interrupt(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(place if hasattr(place, step) else room, step, interrupt)
    with pytest.raises(KeyboardInterrupt):
        write(folder, "total")
    assert names(tmp_path) == ({"out"} if there else set())
    if there:
        assert {path.name: path.read_bytes() for path in folder.iterdir()} == before


def test_an_interruption_between_the_two_renames_puts_the_old_one_back(
    write: Write, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    folder = write(tmp_path / "out")
    before = (folder / "report.md").read_bytes()
    rename = Path.rename

    def stopped(self: Path, target: Path) -> Path:
        if self.name.endswith(".part"):
            raise KeyboardInterrupt
        return rename(self, target)

    monkeypatch.setattr(Path, "rename", stopped)
    with pytest.raises(KeyboardInterrupt):
        write(folder, "total")
    assert names(tmp_path) == {"out"}
    assert (folder / "report.md").read_bytes() == before


def test_an_interruption_while_keeping_files_loses_none(
    write: Write, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    folder = write(tmp_path / "out")
    for name in ("a.txt", "b.txt", "c.txt"):
        (folder / name).write_text(name)
    rename, calls = Path.rename, []

    def stopped_once(self: Path, target: Path) -> Path:
        calls.append(self.name)
        if self.name == "b.txt" and calls.count("b.txt") == 1:
            raise KeyboardInterrupt
        return rename(self, target)

    monkeypatch.setattr(Path, "rename", stopped_once)
    with pytest.raises(KeyboardInterrupt):
        write(folder)
    assert names(tmp_path) == {"out"}
    assert names(folder) == FILES | {"a.txt", "b.txt", "c.txt"}


def test_the_folder_is_as_readable_as_others(write: Write, tmp_path: Path) -> None:
    (tmp_path / "usual").mkdir()
    assert write(tmp_path / "out").stat().st_mode == (tmp_path / "usual").stat().st_mode
