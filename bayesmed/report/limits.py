"""From which fixed rho on, on either side of zero, the interval of the claim's effect takes in the limit."""

from dataclasses import dataclass

import numpy as np
import pandas as pd

from bayesmed.conclusions.claim import Claim
from bayesmed.core.mapping import Array, odds
from bayesmed.fit.result import FitResult
from bayesmed.study.points import Points

STEP = 0.01
FARTHEST = 0.95
"""How far rho is followed either way."""


@dataclass(frozen=True)
class Reach:
    """How far the interval of an effect stays clear of the claim's limit as rho moves away from zero.

    Attributes
    ----------
    clear_at_zero : bool
        True if at rho = 0 the interval does not hold the limit.
    down, up : float or None
        The first rho below and above zero, on the grid used, whose interval holds the limit; None where none
        does as far as `farthest`, or where the interval holds it at zero already.
    farthest, step : float
        The last rho looked at, and the distance between those looked at.
    """

    clear_at_zero: bool
    down: float | None
    up: float | None
    farthest: float
    step: float


def reaches(result: FitResult, points: Points, claim: Claim, ci_prob: float, grid: pd.DataFrame) -> tuple[Reach, ...]:
    """Return a :class:`Reach` for each moderator point.

    Where the data inform rho the steps are those of `grid`, a table of ``rho_grid``, since each rho needs
    draws of its own; otherwise they are 0.01 wide.
    """
    count = len(points.values)
    if result.joint:
        claimed = grid[grid["effect"] == claim.effect]
        rho = claimed["rho"].to_numpy()[::count]
        lower = claimed["lower"].to_numpy().reshape(len(rho), count).T
        upper = claimed["upper"].to_numpy().reshape(len(rho), count).T
    else:
        steps = round(FARTHEST / STEP)
        rho = np.asarray(np.arange(-steps, steps + 1) * STEP, dtype=np.float64)
        lower, upper = _intervals(result, points, claim, ci_prob, rho)
    holds = (lower <= claim.limit) & (claim.limit <= upper)
    return tuple(_reach(rho, held) for held in holds)


def _intervals(result: FitResult, points: Points, claim: Claim, ci_prob: float, rho: Array) -> tuple[Array, Array]:
    """Return both ends of the interval at each point and rho, each of shape (point, rho)."""
    constant, slope = result.contrasts(points).line(claim.effect)
    tail = (1 - ci_prob) / 2
    ends = [np.quantile(constant - slope * r, [tail, 1 - tail], axis=1) for r in odds(rho)]
    lower, upper = np.stack(ends, axis=-1)
    return lower, upper


def _reach(rho: Array, held: Array) -> Reach:
    zero = int(np.argmin(np.abs(rho)))
    step, farthest = float(np.round(np.diff(rho).max(), 6)), float(np.round(rho[-1], 6))
    if held[zero]:
        return Reach(False, None, None, farthest, step)
    below, above = np.flatnonzero(held[:zero]), np.flatnonzero(held[zero:])
    return Reach(
        True,
        float(np.round(rho[below[-1]], 6)) if len(below) else None,
        float(np.round(rho[zero + above[0]], 6)) if len(above) else None,
        farthest,
        step,
    )
