"""From which fixed rho on, on either side of zero, the interval of the claim's effect takes in the limit."""

from dataclasses import dataclass

import numpy as np
import pandas as pd

from bayesmed.conclusions.claim import Claim
from bayesmed.conclusions.tipping import FARTHEST, TippingResult
from bayesmed.core.mapping import Array


@dataclass(frozen=True)
class Reach:
    """How far the interval of an effect stays clear of the claim's limit as rho moves away from zero.

    Attributes
    ----------
    clear_at_zero : bool
        True if at rho = 0 the interval does not hold the limit.
    down, up : float or None
        The first rho below and above zero whose interval holds the limit; None where none does as far as
        `farthest`, or where the interval holds it at zero already.
    farthest : float
        The last rho looked at.
    step : float or None
        The distance between those looked at; None where the rho was found and not looked up.
    """

    clear_at_zero: bool
    down: float | None
    up: float | None
    farthest: float
    step: float | None


def reaches(claim: Claim, grid: pd.DataFrame, tipping: TippingResult | None) -> tuple[Reach, ...]:
    """Return a :class:`Reach` for each moderator point: from the tipping draws, or from the grid where there are none.

    Parameters
    ----------
    claim : Claim
    grid : pandas.DataFrame
        Of ``rho_grid``.
    tipping : TippingResult or None
    """
    if tipping is not None:
        ends = tipping.table[["interval_down", "interval_up"]].to_numpy()
        return tuple(_found(float(down), float(up)) for down, up in ends)
    claimed = grid[grid["effect"] == claim.effect]
    rho = np.unique(claimed["rho"])
    lower, upper = (claimed[end].to_numpy().reshape(len(rho), -1).T for end in ("lower", "upper"))
    return tuple(_looked_up(rho, held) for held in (lower <= claim.limit) & (claim.limit <= upper))


def _found(down: float, up: float) -> Reach:
    if down == 0 or up == 0:
        return Reach(False, None, None, FARTHEST, None)
    return Reach(True, None if np.isnan(down) else down, None if np.isnan(up) else up, FARTHEST, None)


def _looked_up(rho: Array, held: Array) -> Reach:
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
