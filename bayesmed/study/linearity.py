"""Whether the outcome design is linear in the mediator: tested by evaluation, not read off the formula."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.core.contrasts import chunks
from bayesmed.core.errors import FormulaError
from bayesmed.core.mapping import Array
from bayesmed.study.changed import repeated
from bayesmed.study.groups import MOST_ROWS, groups_of
from bayesmed.study.observe import Observed

LINEAR = 1e-9
"""Largest departure from a straight line, relative to how much a column varies, that counts as rounding."""

ENOUGH = 10_000
"""Rows from which the quartiles of the mediator are taken."""


@dataclass(frozen=True)
class Anchors:
    """The mediator values between which slopes are taken, and those at which linearity is tested."""

    low: float
    high: float
    tests: Array


def anchors_of(observed: Observed) -> Anchors:
    """Return the quartiles of the mediator as anchors, and observed and farther values as tests.

    Any two values that are well apart would do as anchors, so of many rows some evenly spaced ones are enough.
    """
    ends = float(observed.mediator.min()), float(observed.mediator.max())
    m = np.append(observed.mediator[:: -(-len(observed.mediator) // ENOUGH)], ends)
    low, high = (float(q) for q in np.percentile(m, (25, 75)))
    if high - low < 1e-3 * (ends[1] - ends[0]):
        low, high = ends
    sd = float(m.std())
    observed_values = np.percentile(m, np.linspace(0, 100, 24), method="nearest")
    beyond = m.mean() + sd * np.array([-8.0, -4.0, 4.0, 8.0])
    return Anchors(low, high, np.concatenate([observed_values, beyond]))


def tested_linear(observed: Observed) -> bool:
    """Return whether the outcome design lies on straight lines at both exposure values."""
    anchors = anchors_of(observed)
    groups = groups_of(observed, ())
    # Many values where few rows stand for all, fewer where each row is its own.
    tests = anchors.tests[:: max(1, len(groups.rows) * len(anchors.tests) // MOST_ROWS)]
    values = np.concatenate([[anchors.low, anchors.high], tests])
    try:
        for piece in chunks(len(groups.rows), max(1, MOST_ROWS // len(values))):
            frame = observed.frame.take(groups.rows[piece])
            for x in observed.contrast:
                if not _bends_nowhere(observed, frame, x, values, anchors):
                    return False
    except FormulaError:
        # Not defined everywhere, as every straight line is.
        return False
    return True


def _bends_nowhere(observed: Observed, frame: pd.DataFrame, x: Any, values: Array, anchors: Anchors) -> bool:
    rows = len(frame)
    changed = repeated(frame, [{observed.exposure: x}] * len(values))
    design = observed.outcome_equation.rows(changed, np.repeat(values, rows)).reshape(len(values), rows, -1)
    low, high = design[0], design[1]
    slope = (high - low) / (anchors.high - anchors.low)
    return all(straight(low, slope, design[k], float(values[k]), anchors) for k in range(2, len(values)))


def straight(low: Array, slope: Array, value: Array, m: float, anchors: Anchors) -> bool:
    """Return whether `value` at mediator `m` lies on the line through the anchors, up to rounding."""
    rise = slope * (m - anchors.low)
    axes = tuple(range(low.ndim - 1))
    varies = np.abs(slope).max(axis=axes) * max(abs(m - anchors.low), anchors.high - anchors.low)
    # Rounding of the values and of the mediator itself, stretched by how far beyond the anchors m lies.
    stretch = 1 + abs(m - anchors.low) / (anchors.high - anchors.low)
    size = np.maximum(np.abs(value).max(axis=axes), np.abs(low).max(axis=axes))
    size = size + np.abs(slope).max(axis=axes) * max(abs(m), abs(anchors.low), abs(anchors.high))
    bound = LINEAR * varies + 64 * np.finfo(float).eps * stretch * size
    return bool(np.all(np.abs(value - low - rise).max(axis=axes) <= bound))
