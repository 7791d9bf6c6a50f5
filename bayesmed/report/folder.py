"""The folder a report goes into: written beside its place, moved there whole, never over others' files."""

import hashlib
import json
import os
import shutil
import tempfile
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from bayesmed.conclusions.claim import Claim
from bayesmed.core.errors import ArgumentError
from bayesmed.fit.result import FitResult
from bayesmed.report.blocks import Diagram
from bayesmed.report.diagram import standing_alone
from bayesmed.report.document import document
from bayesmed.report.findings import Findings, find
from bayesmed.report.keeping import keep_fit_and_study
from bayesmed.report.manifest import manifest
from bayesmed.report.markdown import as_markdown
from bayesmed.report.page import as_page
from bayesmed.report.pictures import drawn
from bayesmed.report.tables import csv_tables, latex_tables

MARKER = "bayesmed_report.json"
"""Lists what bayesmed wrote into a folder, with a checksum each, so that it replaces nothing else."""


def write_report(
    result: FitResult,
    folder: str | Path,
    *,
    beliefs: Mapping[str, Any] | None = None,
    at: Any = None,
    claim: Claim | None = None,
    ci_prob: float = 0.95,
    title: str | None = None,
    rows: bool = True,
) -> Path:
    """Write a report on a fit into a folder and return the folder's path.

    It holds ``report.html``, one page that needs no other file and no network; ``report.md``, the same as Markdown;
    every table as CSV and LaTeX; every picture as SVG, PNG and text; the fit, ``fit.nc``; ``study.toml`` with
    ``rows.csv``, from which ``bayesmed report`` makes the same numbers again; and ``bayesmed_report.json``, which names
    versions, seed and checksums, and says why a file is not there.

    Parameters
    ----------
    result : FitResult
    folder : str or Path
        A new or empty folder, or one that a report was written into before and nobody has changed since: its
        files are replaced, and files that bayesmed did not write are kept.
    beliefs : dict of str to prior, optional
        The first one is the reference. If left out: the fit's own belief if it has one, then
        ``bayesmed.priors.panel()``.
    at, claim, ci_prob :
        As in ``Fit.compare``.
    title : str, optional
        Heading of the report.
    rows : bool
        False keeps nothing of the participants' rows but a checksum of them.

    Raises
    ------
    ArgumentError
        If the folder cannot be used, or a belief, point or claim is not allowed.
    """
    check_folder(folder)
    return write_findings(find(result, beliefs, at, claim, ci_prob, title), folder, rows=rows)


def write_findings(findings: Findings, folder: str | Path, *, rows: bool = True) -> Path:
    """Write a report on findings into a folder, whole or not at all; see :func:`write_report`."""
    target = check_folder(folder)
    try:
        with _beside(target) as temporary:
            _mark(temporary, _write_files(findings, temporary, rows))
            _move_into_place(temporary, target)
    except OSError as error:
        raise ArgumentError(f"folder {str(folder)!r} cannot be written: {error.strerror or error}") from error
    return target


def check_folder(folder: str | Path) -> Path:
    """Return the folder's path if a report may be written there.

    Raises
    ------
    ArgumentError
        If its parent does not exist, it is a file, it holds files and bayesmed wrote none of them, or a file
        that bayesmed wrote was changed since.
    """
    target = Path(os.path.realpath(folder))
    if not target.parent.is_dir():
        raise ArgumentError(f"folder {str(folder)!r}: {str(target.parent)!r} does not exist; create it first")
    if target.exists() and not target.is_dir():
        raise ArgumentError(f"folder {str(folder)!r} is a file; choose another name")
    if not target.exists() or not any(target.iterdir()):
        return target
    if not (target / MARKER).is_file():
        raise ArgumentError(
            f"folder {str(folder)!r} is not empty and was not written by bayesmed; choose a new or an empty folder"
        )
    for name, checksum in _written(target).items():
        path = target / name
        if path.is_symlink() or (path.exists() and (not path.is_file() or _checksum(path) != checksum)):
            raise ArgumentError(
                f"folder {str(folder)!r}: {name!r} was changed after bayesmed wrote it and would be lost; "
                "move it away, or choose another folder"
            )
    return target


def _write_files(findings: Findings, folder: Path, rows: bool) -> dict[str, Any]:
    """Write every file but the marker, and return what the marker says of the run."""
    for name, text in {**csv_tables(findings), **latex_tables(findings)}.items():
        _write(folder / name, text)
    pictures = drawn(findings)
    for name, picture in pictures.items():
        picture.savefig(folder / f"{name}.png")
        picture.savefig(folder / f"{name}.svg")
        _write(folder / f"{name}.txt", f"{picture!r}\n")
    keeping = keep_fit_and_study(findings, folder, rows)
    made = document(findings, pictures, keeping.sentences)
    for section in made.sections:
        for block in section.blocks:
            if isinstance(block, Diagram):
                _write(folder / f"{block.name}.svg", standing_alone(block))
    _write(folder / "report.md", as_markdown(made))
    images = {name: (folder / f"{name}.svg").read_bytes() for name in pictures}
    _write(folder / "report.html", as_page(made, images))
    return manifest(findings, keeping)


def _write(path: Path, text: str) -> None:
    path.write_bytes(text.encode("utf-8"))


def _mark(folder: Path, content: dict[str, Any]) -> None:
    files = {path.name: _checksum(path) for path in sorted(folder.iterdir())}
    _write(folder / MARKER, json.dumps({**content, "files": files}, indent=2, ensure_ascii=False) + "\n")


def _written(folder: Path) -> dict[str, str]:
    """Return name → checksum of what bayesmed wrote into a folder, by its marker."""
    try:
        content = json.loads((folder / MARKER).read_bytes())
        files = content["files"]
        safe = all(isinstance(name, str) and Path(name).name == name for name in files)
        if content["written_by"] != "bayesmed" or not safe:
            raise ValueError("not a marker")
        return {name: str(checksum) for name, checksum in files.items()}
    except (OSError, ValueError, KeyError, TypeError, AttributeError) as error:
        raise ArgumentError(
            f"folder {str(folder)!r}: its {MARKER} cannot be read, so what bayesmed wrote there is not "
            "known; choose a new or an empty folder"
        ) from error


def _checksum(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()


@contextmanager
def _beside(target: Path) -> Iterator[Path]:
    """Make a temporary folder beside the target, and take away what is left of it at the end."""
    temporary = Path(tempfile.mkdtemp(prefix=f".{target.name}.", suffix=".part", dir=target.parent))
    try:
        # mkdtemp makes it private; the report should be as readable as any folder made here.
        mask = os.umask(0)
        os.umask(mask)
        temporary.chmod(0o777 & ~mask)
        yield temporary
    finally:
        shutil.rmtree(temporary, ignore_errors=True)


def _move_into_place(temporary: Path, target: Path) -> None:
    """Put the finished folder where the target is, keeping files there that bayesmed did not write."""
    if not target.exists():
        temporary.rename(target)
        return
    others = _not_ours(target)
    for name in others:
        if (temporary / name).exists():
            raise ArgumentError(
                f"folder {str(target)!r}: {name!r} is not bayesmed's, and this report has a file of that "
                "name; move it away, or choose another folder"
            )
    old = temporary.with_suffix(".old")
    target.rename(old)
    try:
        temporary.rename(target)
    except BaseException:
        old.rename(target)
        raise
    try:
        _keep(others, old, target)
    except BaseException:
        # Interrupted between two files: finish first, so that none is left behind.
        _keep(others, old, target)
        raise


def _not_ours(folder: Path) -> list[str]:
    """Return the names in a folder that bayesmed did not write."""
    written = {MARKER, *_written(folder)} if (folder / MARKER).exists() else set()
    return sorted(path.name for path in folder.iterdir() if path.name not in written)


def _keep(names: list[str], old: Path, target: Path) -> None:
    """Move what is named from the old folder to the new one, if not done yet, and take the old one away."""
    for name in names:
        if (old / name).exists() or (old / name).is_symlink():
            (old / name).rename(target / name)
    shutil.rmtree(old, ignore_errors=True)
