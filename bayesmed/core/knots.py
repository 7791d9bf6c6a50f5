"""The average of a smooth distribution function over many tipping draws, from its values at few knots.

Between neighbouring knots a distribution function is replaced by the cubic that has its values and slopes there.
Its average over draws is then a weighted sum of values and slopes at the knots, with weights that depend on the
draws only: one set of weights serves every belief. On the scale of atanh rho the error of the cubic is at most
``h⁴ max |F''''| / 384``, h the distance of the knots.
"""

from dataclasses import dataclass

import numpy as np

from bayesmed.core.mapping import Array
from bayesmed.core.tipping import Direction, tipping_correlation

WIDEST = 0.2  # on the scale of atanh rho
PER_SD = 0.35
FARTHEST = 18.0  # on that scale: beyond, a double does not tell rho from ±1


@dataclass(frozen=True, eq=False)
class Crossings:
    """Tipping draws on the scale of atanh rho.

    Attributes
    ----------
    place : array, shape (point, draw)
        atanh of the tipping correlation; 0 where none matters.
    sign : array, shape (point, draw)
        1 where the claim holds below it, -1 where it holds above, 0 where it is certain either way.
    certain : array, shape (point,)
        The number of draws for which the claim holds whatever rho is.
    """

    place: Array
    sign: Array
    certain: Array

    @property
    def ends(self) -> tuple[float, float]:
        """The smallest and the largest place that matters."""
        places = self.place[self.sign != 0]
        return (float(places.min()), float(places.max())) if places.size else (0.0, 0.0)


@dataclass(frozen=True, eq=False)
class Weights:
    """What turns a distribution function's values and slopes at knots into the probability of a claim.

    Attributes
    ----------
    knots : array, shape (knot,)
        On the scale of atanh rho.
    value, slope : array, shape (point, knot)
        Weights by the sign of the draws.
    value_all, slope_all : array, same shape
        Weights of all draws alike, from which the spread over draws follows.
    offset : array, shape (point,)
        The number of draws for which the claim holds where the distribution function is 0.
    draws : int
    """

    knots: Array
    value: Array
    slope: Array
    value_all: Array
    slope_all: Array
    offset: Array
    draws: int

    def probability(self, cdf: Array, density: Array) -> tuple[Array, Array]:
        """Return the probability of the claim and its variance over draws, each of shape (belief, point).

        Parameters
        ----------
        cdf, density : array, shape (belief, knot)
            Distribution functions at the knots and their derivatives on the scale of atanh rho.
        """
        signed = _product(cdf, self.value) + _product(density, self.slope)
        plain = _product(cdf, self.value_all) + _product(density, self.slope_all)
        square = _product(cdf**2, self.value_all) + _product(2 * cdf * density, self.slope_all)
        mean = (self.offset + signed) / self.draws
        # A draw's probability is F, or 1 - F where the claim holds above: its square is F² - 2F + 1 there.
        second = (square + signed - plain + self.offset) / self.draws
        return np.clip(mean, 0.0, 1.0), np.maximum(second - mean**2, 0.0)


def crossings(constant: Array, slope: Array, limit: float, direction: Direction) -> Crossings:
    """Return where each draw tips, for lines of shape (point, draw)."""
    crossing = tipping_correlation(constant, slope, limit)
    falls = (slope > 0) if direction == "above" else (slope < 0)
    anyway = (constant > limit) if direction == "above" else (constant < limit)
    flat = slope == 0
    # A tipping correlation that rounds to ±1 is never crossed.
    never = flat | (np.abs(crossing) >= 1)
    certain = np.where(flat, anyway, never & (falls == (crossing > 0)))
    place = np.arctanh(np.where(never, 0.0, crossing))
    sign = np.where(never, 0.0, np.where(falls, 1.0, -1.0))
    return Crossings(place, sign, certain.sum(axis=1))


def knots_for(sd: float, lower: float, upper: float) -> Array:
    """Return knots from `lower` to `upper`, on the scale of atanh rho, dense enough for beliefs of an SD of rho.

    They lie 0.35 SDs of rho apart, and nowhere farther than 0.2 on the scale of atanh rho.
    """
    step = PER_SD * sd
    turn = np.arccosh(np.sqrt(WIDEST / step)) if step < WIDEST else 0.0
    middle = np.arctanh(np.linspace(-np.tanh(turn), np.tanh(turn), 2 + int(2 * np.tanh(turn) / step)))
    outside = turn + WIDEST * np.arange(1, int(FARTHEST / WIDEST))
    inner = np.concatenate([-outside[::-1], middle if turn > 0 else [0.0], outside])
    inner = inner[(inner > lower) & (inner < upper)]
    return np.concatenate([[lower], inner, [max(upper, lower + 1e-9)]])


def weights_at(draws: Crossings, knots: Array) -> Weights:
    """Return the weights of knots for tipping draws; draws outside the knots count as on the nearest one."""
    points, count = draws.place.shape
    size = knots.size
    place = np.clip(draws.place.ravel(), knots[0], knots[-1])
    cell = np.clip(np.searchsorted(knots, place, side="right") - 1, 0, size - 2)
    width = np.diff(knots)[cell]
    u = (place - knots[cell]) / width
    v = 1 - u
    left = cell + np.repeat(np.arange(points) * size, count)
    right = left + 1
    parts = {
        "value": ((left, (1 + 2 * u) * v**2), (right, u**2 * (1 + 2 * v))),
        "slope": ((left, width * u * v**2), (right, -width * u**2 * v)),
    }
    sign = draws.sign.ravel()
    built = {}
    for name, pair in parts.items():
        for suffix, share in (("", sign), ("_all", np.abs(sign))):
            summed = sum(np.bincount(where, weights=share * basis, minlength=points * size) for where, basis in pair)
            built[name + suffix] = np.asarray(summed).reshape(points, size)
    rising = (draws.sign < 0).sum(axis=1)
    return Weights(knots, **built, offset=draws.certain + rising, draws=count)


def _product(rows: Array, weights: Array) -> Array:
    """Return ``rows @ weights.T``, small enough that threads of a linear algebra library would cost more than it."""
    return np.asarray(np.einsum("bk,pk->bp", rows, weights))
