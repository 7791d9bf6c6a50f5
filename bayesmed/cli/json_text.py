"""What the command says to machines: one JSON document on standard output, numbers as they are, not rounded.

Infinite numbers are the strings "inf" and "-inf", numbers that do not exist null. ``layout`` grows by one when a key
goes away or changes its meaning; new keys may come at any time.
"""

import json
import math
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.comparison import ComparisonResult
from bayesmed.study.audit import Audit

LAYOUT = 1


def print_json(command: str, content: dict[str, Any]) -> None:
    """Print one document."""
    document = {"layout": LAYOUT, "command": command, **content}
    print(json.dumps(plain(document), indent=2, ensure_ascii=False, allow_nan=False))


def compared(comparison: ComparisonResult) -> dict[str, Any]:
    """Return a comparison: the claim, a row per belief, effect and moderator point, and the sentences on shifts."""
    claim = comparison.claim
    return {
        "claim": {
            "effect": claim.effect,
            "direction": claim.direction,
            "limit": claim.limit,
            "required": claim.required,
        },
        "ci_prob": comparison.ci_prob,
        "beliefs": {label: repr(belief) for label, belief in comparison.beliefs.items()},
        "rows": comparison.table,
        "rho": comparison.rho,
        "shifts": comparison.shifts,
    }


def audited(audit: Audit) -> dict[str, Any]:
    """Return an audit: whether a finding stops the fit, and each finding."""
    return {"stops": audit.stops, "findings": audit.to_frame()}


def plain(value: Any) -> Any:
    """Return a value as JSON can hold it."""
    if isinstance(value, pd.DataFrame):
        return [plain(row) for row in value.to_dict("records")]
    if isinstance(value, dict):
        return {str(key): plain(one) for key, one in value.items()}
    if isinstance(value, list | tuple):
        return [plain(one) for one in value]
    if isinstance(value, np.generic):
        return plain(value.item())
    if isinstance(value, float) and not math.isfinite(value):
        return None if math.isnan(value) else str(value)
    return value if value is None or isinstance(value, bool | int | float | str) else str(value)
