"""A distribution known by its cdf at knots, smooth and increasing between them."""

from __future__ import annotations

from typing import Any

import numpy as np

from bayesmed.priors.inversion import invert
from bayesmed.priors.prior import Floats

__all__ = ["CdfTable"]


class CdfTable:
    """A cdf through given points: cubic between knots, with slopes that keep it increasing.

    Parameters
    ----------
    knots, probabilities : ndarray, shape (n,)
        Increasing places and their cumulative probabilities, from 0 to 1.
    slopes : ndarray, shape (n,), optional
        The density at the knots. Left out, the slopes of the monotone interpolation of Fritsch & Carlson
        (1980), doi:10.1137/0717021, are taken.
    """

    def __init__(self, knots: Floats, probabilities: Floats, slopes: Floats | None = None) -> None:
        from scipy.interpolate import CubicHermiteSpline, PchipInterpolator

        self.knots = knots
        self.probabilities = probabilities
        self._cdf: Any
        if slopes is None:
            self._cdf = PchipInterpolator(knots, probabilities)
        else:
            secants = np.diff(probabilities) / np.diff(knots)
            # a cubic is increasing where neither slope exceeds three times the secant
            ceiling = 3 * np.minimum(np.append(secants, np.inf), np.insert(secants, 0, np.inf))
            self._cdf = CubicHermiteSpline(knots, probabilities, np.minimum(slopes, ceiling))
        self._density: Any = self._cdf.derivative()

    def cdf(self, t: Floats) -> Floats:
        """Return the cumulative probability at `t`: 0 before the knots and 1 after them."""
        cdf: Floats = np.clip(self._cdf(np.clip(t, self.knots[0], self.knots[-1])), 0.0, 1.0)
        return cdf

    def density(self, t: Floats) -> Floats:
        """Return the derivative of the cdf at `t`, 0 outside the knots."""
        outside = (t < self.knots[0]) | (t > self.knots[-1])
        inner = np.clip(t, self.knots[0], self.knots[-1])
        return np.where(outside, 0.0, np.maximum(self._density(inner), 0.0))

    def quantile(self, q: Floats) -> Floats:
        """Return the places at which the cdf reaches `q`, an array of one dimension."""
        right = np.clip(np.searchsorted(self.probabilities, q), 1, self.knots.size - 1)
        return invert(self.cdf, self.density, q, self.knots[right - 1], self.knots[right])
