"""A belief's distribution function as a table, read between its places: many lookups for the price of few."""

from collections.abc import Hashable
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np

from bayesmed.core.mapping import Array

if TYPE_CHECKING:
    from bayesmed.core.tipping import Belief

CELLS = 65_536
"""Cells of a support between whose ends a distribution function is interpolated."""


@dataclass(frozen=True, eq=False)
class BeliefTable:
    """P(rho < x) of a belief without atoms, interpolated between many places.

    Places are equally far apart in the arc tangent of the odds r, the arc sine of rho, where densities infinite
    at ±1 are not, and lie between the ends of the support, where distribution functions may have kinks. A smooth one
    is off by under 1e-9 between neighbours, one whose density has a width w in rho by some 1e-10 / w².

    Attributes
    ----------
    values, steps : array, shape (cells + 2,)
        Where each cell starts and how much it adds; the first and the last are those outside the support.
    lower, width : float
        Where the support starts in the arc sine of rho, and how wide a cell is.
    """

    values: Array
    steps: Array
    lower: float
    width: float

    def below(self, r: Array) -> Array:
        """Return P(odds < r), of the shape of `r`, whose memory is used."""
        return self._below(r)[0]

    def below_and_density(self, r: Array) -> tuple[Array, Array]:
        """Return P(odds < r) and its derivative with respect to r; the memory of `r` is used."""
        # Of the arc tangent, whose derivative is 1 / (1 + r²).
        per_angle = r * r
        per_angle += 1
        per_angle *= self.width
        found, step = self._below(r)
        step /= per_angle
        return found, step

    def odds(self, probabilities: Array) -> Array:
        """Return quantiles of the odds, of the shape of `probabilities`, about as near as to a cell in every 64."""
        ends = self.lower + self.width * np.arange(0, CELLS + 1, 64)
        return np.asarray(np.tan(np.interp(probabilities, self.values[1::64], ends)))

    def _below(self, r: Array) -> tuple[Array, Array]:
        place = np.arctan(r, out=r)
        place *= 1 / self.width
        place += 1 - self.lower / self.width
        cell = place.astype(np.intp)
        step = self.steps.take(cell, mode="clip")
        place -= np.floor(place)
        place *= step
        place += self.values.take(cell, mode="clip")
        return place, step


def belief_table(belief: "Belief") -> BeliefTable:
    """Return the table of a belief, kept for the next call where the belief can be hashed."""
    return _made(belief) if isinstance(belief, Hashable) else _made.__wrapped__(belief)


@lru_cache(maxsize=64)
def _made(belief: Any) -> BeliefTable:
    lower, upper = np.arcsin(belief.support())
    ends = np.asarray(belief.below(np.sin(np.linspace(lower, upper, CELLS + 1))))
    values = np.concatenate([[0.0], ends])
    steps = np.concatenate([[0.0], np.diff(ends), [0.0]])
    return BeliefTable(values, steps, float(lower), float((upper - lower) / CELLS))
