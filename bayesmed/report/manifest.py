"""The manifest: what made a report, so that it can be made again and checked."""

import json
from dataclasses import asdict
from importlib.metadata import version
from typing import Any

from bayesmed.report.findings import Findings
from bayesmed.report.keeping import Keeping

LAYOUT = 1


def manifest(findings: Findings, keeping: Keeping) -> dict[str, Any]:
    """Return what is told of a run: versions, seed, settings, formulas, beliefs, and a checksum of the rows.

    No date is in it, so that the same run makes the same file.
    """
    result, comparison = findings.result, findings.comparison
    observed, settings = result.observed, result.settings
    versions = result.tree.attrs.get("versions")
    return {
        "written_by": "bayesmed",
        "version": version("bayesmed"),
        "layout": LAYOUT,
        "title": findings.title,
        "versions_of_the_fit": json.loads(versions) if isinstance(versions, str) else {},
        "fit": asdict(settings),
        "exposure": observed.exposure,
        "contrast": [str(value) for value in observed.contrast],
        "mediator": observed.mediator_formula,
        "outcome": observed.outcome_formula,
        "claim": repr(comparison.claim),
        "beliefs": {label: repr(belief) for label, belief in comparison.beliefs.items()},
        "ci_prob": comparison.ci_prob,
        "rows_given": observed.rows.given,
        "rows_used": observed.rows.used,
        "rows_sha256": keeping.checksum,
        "not_in_the_folder": keeping.missing,
    }
