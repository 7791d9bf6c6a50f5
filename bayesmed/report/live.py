"""What the page needs to answer to a reader's belief: a line of effect against r per draw and moderator point."""

import json
from base64 import b64encode
from typing import Any

import numpy as np

from bayesmed.conclusions.words import point_text
from bayesmed.core.mapping import Array, odds
from bayesmed.fit.grouped import GroupedResult
from bayesmed.priors import TruncatedNormal
from bayesmed.report.findings import Findings

MOST_NUMBERS = 160_000
"""Numbers of four bytes stored at most; a page with more keeps every second, third, … draw of each chain."""
SAME = 1e-9
"""Rows of draws that others give to within this, relative to the largest, are not stored again."""
START = (0.0, 0.2)
"""Mean and SD from which the page starts where no belief of the report is a normal one cut off at the usual bounds."""
WIDE = 0.6
"""The page's scale of the effect holds the intervals at rho = ±0.6 and 0."""


def why_not_live(findings: Findings) -> str:
    """Return why the page cannot answer to a reader's belief, or nothing where it can."""
    if findings.result.joint:
        return (
            "formulas or priors let the data inform rho, so that each belief needs draws of its own and a page has one "
            "set of them. Ask in Python, fit.compare({…}), which samples again where it must."
        )
    if findings.comparison.claim.effect == "total":
        return "the claim is about the total effect, which does not depend on rho, so that no belief about it matters."
    return ""


def stored_draws(findings: Findings) -> dict[str, Any]:
    """Return the draws and all that the page says of them, fit for JSON.

    Per moderator point the effect is ``constant - slope r``. Constants and slopes of all points are mixtures of few
    rows of draws, since moderators enter through a few terms: those rows are stored as 32-bit floats, and the weights
    of each point beside them.
    """
    result, comparison = findings.result, findings.comparison
    claim, observed = comparison.claim, findings.result.observed
    constant, slope = result.contrasts(comparison.points).line(claim.effect)
    chains, per_chain = result.shape
    all_draws = constant.shape[1]
    rows, weights = _rows_and_weights(np.concatenate([constant, slope]))
    step = -(-rows.size // MOST_NUMBERS)
    kept = rows.reshape(len(rows), chains, per_chain)[:, :, ::step]
    count = len(constant)
    points = []
    for k, point in enumerate(comparison.points.values):
        points.append(
            {
                "label": point_text(point) if point else "",
                "python": repr(dict(point)),
                "constant": weights[k].tolist(),
                "slope": weights[count + k].tolist(),
                "range": _range(constant[k], slope[k], comparison.ci_prob),
            }
        )
    return {
        "draws": int(kept[0].size),
        "chains": chains,
        "independent": result.independent,
        "of": all_draws,
        "rows": b64encode(np.ascontiguousarray(kept, dtype="<f4").tobytes()).decode("ascii"),
        "points": points,
        "claim": {
            "effect": claim.effect,
            "effectName": f"{claim.effect.replace('_', ' ')} effect",
            "direction": claim.direction,
            "required": claim.required,
        },
        "intervalProbability": comparison.ci_prob,
        "names": {"mediator": observed.mediator_name, "outcome": observed.outcome_name},
        "grouped": result.moderator if isinstance(result, GroupedResult) else "",
        "start": _start(findings),
    }


def as_script_data(value: dict[str, Any]) -> str:
    """Return JSON that can stand inside a script element, whatever text it holds."""
    text = json.dumps(value, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    for sign in ("<", ">", "&", "\u2028", "\u2029"):
        text = text.replace(sign, f"\\u{ord(sign):04x}")
    return text


def _rows_and_weights(lines: Array) -> tuple[Array, Array]:
    """Return some of the rows, and the weights with which they make up all.

    The rows are chosen by pivoted QR, so that weights stay small.
    """
    from scipy.linalg import qr, solve_triangular

    _, r, order = qr(lines.T, mode="economic", pivoting=True)
    size = np.abs(np.diag(r))
    rank = max(1, int(np.sum(size > SAME * max(size[0], np.finfo(float).tiny))))
    weights = np.zeros((len(lines), rank))
    weights[order[:rank]] = np.eye(rank)
    if size[0] > 0:
        weights[order[rank:]] = solve_triangular(r[:rank, :rank], r[:rank, rank:]).T
    weights[np.abs(weights) < SAME] = 0.0
    return lines[order[:rank]], weights


def _range(constant: Array, slope: Array, ci_prob: float) -> list[float]:
    tail = (1 - ci_prob) / 2
    ends = [np.quantile(constant - slope * odds(rho), [tail, 1 - tail]) for rho in (-WIDE, 0.0, WIDE)]
    return [float(np.min(ends)), float(np.max(ends))]


def _start(findings: Findings) -> dict[str, Any]:
    beliefs = findings.comparison.beliefs.values()
    usual = TruncatedNormal(*START)
    cut = [b for b in beliefs if isinstance(b, TruncatedNormal) and (b.lower, b.upper) == (usual.lower, usual.upper)]
    first = next((b for b in cut if abs(b.mean) <= 0.9 and 0.01 <= b.sd <= 1), usual)
    return {
        "family": "normal",
        "mean": first.mean,
        "sd": first.sd,
        "low": -0.1,
        "high": 0.4,
        "mediator": 0.1,
        "outcome": 0.1,
        "positive": 0.8,
        "point": 0,
        "limit": findings.comparison.claim.limit,
    }
