"""What a report keeps so that it can be made again: the fit, the study file, and the participants' rows or not."""

import hashlib
import json
from dataclasses import dataclass
from pathlib import Path

from bayesmed.core.errors import BayesmedError
from bayesmed.fit.store import save
from bayesmed.report.findings import Findings
from bayesmed.report.request import ROWS, STUDY, study_request

FIT = "fit.nc"


@dataclass(frozen=True)
class Keeping:
    """What was kept of a fit and its rows.

    Attributes
    ----------
    checksum : str
        SHA-256 of the rows used as CSV, or of the published figures; "" where the rows cannot be written so.
    missing : dict of str to str
        Files that are not in the folder, each with the reason.
    sentences : tuple of str
        The same in words, for the report.
    """

    checksum: str
    missing: dict[str, str]
    sentences: tuple[str, ...]


def keep_fit_and_study(findings: Findings, folder: Path, rows: bool) -> Keeping:
    """Write the fit, the study file and, if `rows`, the rows into a folder, as far as that can be done."""
    missing: dict[str, str] = {}
    study, text, why = study_request(findings)
    if study is None:
        missing[STUDY] = why
    else:
        (folder / STUDY).write_bytes(study.encode("utf-8"))
    if text is None:
        missing[ROWS] = why
    elif rows:
        (folder / ROWS).write_bytes(text.encode("utf-8"))
    else:
        missing[ROWS] = "the rows were to be left out"
    try:
        save(findings.result, folder / FIT, rows=rows)
    except BayesmedError as error:
        missing[FIT] = str(error).removeprefix("save: ")
    checksum = _checksum(findings, text)
    return Keeping(checksum, missing, tuple(_sentences(findings, rows, missing, checksum)))


def _checksum(findings: Findings, rows: str | None) -> str:
    published = findings.result.observed.published
    text = json.dumps(published.source, sort_keys=True, default=str) if published is not None else rows
    return "" if text is None else hashlib.sha256(text.encode("utf-8")).hexdigest()


def _sentences(findings: Findings, rows: bool, missing: dict[str, str], checksum: str) -> list[str]:
    observed = findings.result.observed
    holding = [name for name in (FIT, ROWS) if name not in missing]
    said = []
    if observed.published is not None:
        said.append("No row of a participant was seen, so none is kept.")
    elif rows and holding:
        said.append(
            f"{' and '.join(holding)} {'hold' if len(holding) > 1 else 'holds'} the {observed.rows.used} rows "
            f"used, with "
            "the columns of the equations only. Treat them as you treat the data. Nothing else in the folder "
            "holds a row "
            "of a participant; a report can be written without rows."
        )
    else:
        said.append("Nothing in the folder holds a row of a participant.")
    if STUDY not in missing:
        beside = "" if ROWS not in missing else f", once the rows stand beside it as {ROWS}"
        said.append(f"{STUDY} makes the same numbers again{beside}: bayesmed report {STUDY} --out FOLDER.")
    said += [f"{name} is not there: {why}." for name, why in missing.items()]
    if checksum:
        what = "published figures" if observed.published is not None else f"rows used, written as {ROWS},"
        said.append(f"The {what} have the SHA-256 checksum {checksum}.")
    return said
