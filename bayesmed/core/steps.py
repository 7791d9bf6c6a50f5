"""The probability of a claim as a function of the residual correlation: a step function of the posterior draws.

Each draw's effect is a line in the odds of rho, so that the claim holds for a draw on one side of its tipping
correlation and fails at it and beyond. The share of draws for which the claim holds at rho is therefore constant
between neighbouring tipping correlations. It falls where the slope of the draw has one sign and rises where it has
the other, so that with both signs among the draws its extremes may lie anywhere.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from bayesmed.core.mapping import Array

if TYPE_CHECKING:
    from bayesmed.core.tipping import Direction

WITHIN = 1e-9
"""How far inside a piece a correlation is put that stands for a limit from one side."""


@dataclass(frozen=True, eq=False)
class Steps:
    """A step function on (-1, 1).

    Attributes
    ----------
    places : array, shape (step,)
        Where it steps: increasing, strictly inside (-1, 1).
    between : array, shape (step + 1,)
        Values before the first place, between neighbouring places, and after the last.
    at : array, shape (step,)
        Values at the places themselves.
    """

    places: Array
    between: Array
    at: Array

    def value(self, rho: Array | float) -> Array:
        """Return the function at `rho`, of any shape."""
        rho = np.asarray(rho, dtype=float)
        index = np.searchsorted(self.places, rho, side="left")
        if self.places.size == 0:
            return np.asarray(self.between[index])
        last = np.minimum(index, self.places.size - 1)
        on_place = (index < self.places.size) & (self.places[last] == rho)
        return np.where(on_place, self.at[last], self.between[index])

    def negated(self) -> Steps:
        """Return minus the function, so that a search for the smallest value serves for the largest."""
        return Steps(self.places, -self.between, -self.at)

    def inner(self, lower: float, upper: float) -> tuple[Array, Array, Array]:
        """Return places strictly between two bounds, the values at them and the values between them.

        The last are of shape (place + 1,): the first and the last piece are those that the bounds cut short.
        """
        first = int(np.searchsorted(self.places, lower, side="right"))
        stop = max(int(np.searchsorted(self.places, upper, side="left")), first)
        return self.places[first:stop], self.at[first:stop], self.between[first : stop + 1]


def claim_steps(constant: Array, slope: Array, limit: float, direction: Direction) -> Steps:
    """Return the share of draws for which ``constant - slope r`` is above (or below) `limit`, as rho varies.

    Parameters
    ----------
    constant, slope : array, shape (draw,)
    limit : float
    direction : "above" or "below"
    """
    crossing, falls, certain = _sides(constant, slope, limit, direction)
    flat = slope == 0
    # A tipping correlation that rounds to ±1 is never crossed.
    inside = ~flat & (np.abs(crossing) < 1)
    start = np.where(flat, certain, np.where(falls, crossing > -1, crossing <= -1))
    places, index = np.unique(crossing[inside], return_inverse=True)
    down = np.bincount(index, weights=falls[inside], minlength=places.size)
    up = np.bincount(index, weights=~falls[inside], minlength=places.size)
    between = start.sum() + np.concatenate([[0.0], np.cumsum(up - down)])
    return Steps(places, between / constant.size, (between[:-1] - down) / constant.size)


def holds_throughout(
    constant: Array, slope: Array, limit: float, direction: Direction, lower: float, upper: float
) -> Array:
    """Return which draws meet the claim at every rho from `lower` to `upper`, shape of the draws, as 0 and 1.

    The bounds belong to the range, but -1 and 1, which no correlation reaches.
    """
    crossing, falls, certain = _sides(constant, slope, limit, direction)
    beyond = (crossing > upper) | ((upper >= 1) & (crossing >= 1))
    before = (crossing < lower) | ((lower <= -1) & (crossing <= -1))
    return np.where(slope == 0, certain, np.where(falls, beyond, before)).astype(float)


def _sides(
    constant: Array, slope: Array, limit: float, direction: Direction
) -> tuple[Array, NDArray[np.bool_], NDArray[np.bool_]]:
    """Return crossings, which draws meet the claim below theirs, and which without a slope meet it anyway."""
    # Sets of priors import this module, and core.tipping takes a third of a second for scipy.optimize.
    from bayesmed.core.tipping import tipping_correlation

    crossing = tipping_correlation(constant, slope, limit)
    falls = (slope > 0) if direction == "above" else (slope < 0)
    certain = (constant > limit) if direction == "above" else (constant < limit)
    return crossing, falls, certain
