"""A study file written from findings: what `bayesmed report` needs to make the same numbers again."""

import warnings
from dataclasses import asdict
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np

from bayesmed.core.errors import BayesmedError, BayesmedWarning
from bayesmed.fit.grouped import GroupedResult
from bayesmed.priors import Coefficients, to_spec
from bayesmed.report.findings import Findings
from bayesmed.report.study_file import StudyFile, read_study_file
from bayesmed.report.tables import as_csv, harmless
from bayesmed.study.observe import Observed

STUDY, ROWS = "study.toml", "rows.csv"
HEAD = (
    "# Written by bayesmed with a report. The same versions make the same numbers of it:\n"
    f"#     bayesmed report {STUDY} --out FOLDER\n"
)


def study_request(findings: Findings) -> tuple[str | None, str | None, str]:
    """Return the study file, the rows it needs as CSV, and, where there is no study file, why.

    What is returned was read back: it gives the same designs, beliefs, claim, points and settings.
    """
    rows, why = rows_as_csv(findings.result.observed)
    why = why or _cannot(findings)
    if rows is None or why:
        return None, rows, why
    try:
        text = _written(findings)
        with TemporaryDirectory() as folder, warnings.catch_warnings():
            # What there is to warn of was said when the study was made.
            warnings.simplefilter("ignore", BayesmedWarning)
            path = Path(folder) / STUDY
            path.write_bytes(text.encode("utf-8"))
            path.with_name(ROWS).write_bytes(rows.encode("utf-8"))
            differing = _differing(findings, read_study_file(path))
    except BayesmedError as error:
        return None, rows, f"a study file cannot say it: {error}"
    if differing:
        return None, rows, f"read back from a file, {differing} would not be the same"
    return text, rows, ""


def rows_as_csv(observed: Observed) -> tuple[str | None, str]:
    """Return the rows used as CSV, or None and why they are not written."""
    if observed.published is not None:
        return None, "the study is known by its published figures alone"
    if observed.batches is not None:
        return None, "the rows of this study come in batches and are not stored"
    plain = as_csv(observed.frame)
    if as_csv(harmless(observed.frame)) != plain:
        return None, "the rows hold text that a spreadsheet would take for a formula"
    return plain, ""


def _cannot(findings: Findings) -> str:
    result = findings.result
    if result.settings.method == "adopted":
        return "the draws are of a model of the user's own"
    if isinstance(result, GroupedResult):
        return "the fit has a rho for each group, which a study file cannot ask for"
    beliefs = findings.comparison.beliefs.values()
    if result.joint and result.belief != max(beliefs, key=lambda belief: float(belief.rho_sd())):
        return "rho is informed, and the draws were made under a belief that is not the widest of those compared"
    return ""


def _written(findings: Findings) -> str:
    import tomli_w

    result, comparison = findings.result, findings.comparison
    observed, settings, points = result.observed, result.settings, comparison.points
    claim = comparison.claim
    content: dict[str, Any] = {
        "title": findings.title,
        "data": ROWS,
        "exposure": observed.exposure,
        "contrast": [_plain(value) for value in observed.contrast],
        "mediator": observed.mediator_formula,
        "outcome": observed.outcome_formula,
        "moderators": list(observed.default_moderators),
        "ci_prob": comparison.ci_prob,
        "beliefs": {label: to_spec(belief) for label, belief in comparison.beliefs.items()},
        "claim": {"effect": claim.effect, claim.direction: claim.limit, "required": claim.required},
        "at": {
            **{name: [_plain(value) for value in values] for name, values in points.dims.items()},
            **{name: _plain(value) for name, value in points.scalars.items()},
        },
        "fit": asdict(settings),
    }
    if result.coefficients != Coefficients():
        content["coefficients"] = _coefficients(result.coefficients)
    return HEAD + tomli_w.dumps(content)


def _coefficients(chosen: Coefficients) -> dict[str, Any]:
    spec: dict[str, Any] = {"scale": chosen.scale}
    for equation in ("mediator", "outcome"):
        spec[equation] = {term: to_spec(prior) for term, prior in getattr(chosen, equation).items()}
    for scale in ("sigma_mediator", "sigma_outcome"):
        if getattr(chosen, scale) is not None:
            spec[scale] = to_spec(getattr(chosen, scale))
    return spec


def _differing(findings: Findings, asked: StudyFile) -> str:
    """Return what differs between findings and the study file written for them, in words; "" if nothing does."""
    from bayesmed.study.points import points

    result, comparison, again = findings.result, findings.comparison, asked.observe()
    observed, settings = result.observed, result.settings
    pairs = {
        "the contrast": (observed.contrast, again.contrast),
        "the terms of the equations": (
            (observed.mediator_terms, observed.outcome_terms),
            (again.mediator_terms, again.outcome_terms),
        ),
        "the beliefs": (list(comparison.beliefs.items()), list(asked.beliefs.items())),
        "the claim": (comparison.claim, asked.claim),
        "the moderator points": (comparison.points.values, points(again, asked.at).values),
        "the coefficient priors": (result.coefficients, asked.coefficients or Coefficients()),
        "the settings": (
            (settings.method, settings.draws, settings.tune, settings.chains, settings.random_seed, settings.learn),
            (
                asked.fit.method,
                asked.fit.draws,
                asked.fit.tune,
                asked.fit.chains,
                asked.fit.random_seed,
                asked.fit.learn,
            ),
        ),
    }
    for name, (here, there) in pairs.items():
        if here != there:
            return name
    designs = (
        (observed.mediator_design, again.mediator_design),
        (observed.outcome_design, again.outcome_design),
        (observed.mediator, again.mediator),
        (observed.outcome, again.outcome),
    )
    return "" if all(np.array_equal(here, there) for here, there in designs) else "the rows"


def _plain(value: Any) -> Any:
    return value.item() if isinstance(value, np.generic) else value
