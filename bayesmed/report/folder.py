"""The files of a report: page, Markdown, tables, pictures, the fit and the study file that makes them again."""

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from bayesmed.conclusions.claim import Claim
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
from bayesmed.report.place import check_folder, write_whole
from bayesmed.report.tables import csv_tables, latex_tables


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
    return write_whole(folder, lambda place: _write_files(findings, place, rows))


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
