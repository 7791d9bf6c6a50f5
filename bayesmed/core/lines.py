"""Draws of an effect as lines in r, and what every belief asks of them, worked out once."""

from dataclasses import dataclass
from functools import cached_property
from typing import Protocol

import numpy as np

from bayesmed.core.mapping import Array


@dataclass(frozen=True, eq=False)
class Lines:
    """An effect ``constant - slope r`` at each moderator point and draw.

    Attributes
    ----------
    constant, slope : array, shape (point, draw)
    """

    constant: Array
    slope: Array

    @cached_property
    def moments(self) -> "LineMoments":
        """Moments of the lines over draws."""
        return line_moments(self.constant, self.slope)

    @cached_property
    def crossing(self) -> bool:
        """True if every line has a slope, so that each crosses every value once."""
        return bool(self.slope.all())

    @cached_property
    def rate(self) -> Array:
        """``1 / slope``, for lines that all have one."""
        return np.asarray(1 / self.slope)

    @cached_property
    def intercept(self) -> Array:
        """The r at which each line crosses zero; it crosses v at ``intercept - rate v``."""
        return np.asarray(self.constant * self.rate)

    @cached_property
    def one_way(self) -> Array:
        """The sign of all slopes of a point, or 0 where they differ, shape (point,)."""
        return np.nan_to_num(self.moments.signs, nan=0.0)


class HasOddsMoments(Protocol):
    """What moments ask of a belief."""

    def odds_moments(self) -> tuple[float, float]:
        """Return E[r] and E[r²], infinite where they are."""
        ...


@dataclass(frozen=True, eq=False)
class LineMoments:
    """What mean and SD of ``constant - slope r`` need of the draws; each of shape (point,).

    Attributes
    ----------
    constant, slope : array
        Means over draws.
    constant_variance, slope_variance, covariance : array
    signs : array
        1 or -1 where all slopes but those of zero have this sign, 0 where all are zero, nan where they differ.
    """

    constant: Array
    slope: Array
    constant_variance: Array
    slope_variance: Array
    covariance: Array
    signs: Array

    def under(self, belief: HasOddsMoments) -> tuple[Array, Array]:
        """Return mean and SD of the effect under a belief.

        Infinite moments of the belief's odds stay infinite; a mean that both tails pull to infinity, or whose slope
        has draws of both signs, does not exist and is nan.
        """
        first, second = belief.odds_moments()
        flat = self.signs == 0
        if np.isfinite(first):
            mean = self.constant - self.slope * first
        else:
            with np.errstate(invalid="ignore"):
                mean = np.where(flat, self.constant, -self.signs * first)
        if np.isfinite(second):
            # Of the mean over r, then the mean of the variance over r.
            between = self.constant_variance - 2 * first * self.covariance + first**2 * self.slope_variance
            within = (self.slope_variance + self.slope**2) * (second - first**2)
            spread = np.sqrt(np.maximum(between, 0.0) + within)
        else:
            spread = np.where(flat, np.sqrt(self.constant_variance), np.inf)
        return mean, spread


def line_moments(constant: Array, slope: Array) -> LineMoments:
    """Return the moments of lines over draws, the last axis; shapes of both are equal."""
    means = constant.mean(axis=-1), slope.mean(axis=-1)
    c, k = constant - means[0][..., None], slope - means[1][..., None]
    draws = constant.shape[-1]
    low, high = np.sign(slope.min(axis=-1)), np.sign(slope.max(axis=-1))
    return LineMoments(
        *means,
        constant_variance=np.einsum("...i,...i->...", c, c) / draws,
        slope_variance=np.einsum("...i,...i->...", k, k) / draws,
        covariance=np.einsum("...i,...i->...", c, k) / draws,
        signs=np.where(low * high < 0, np.nan, np.sign(low + high)),
    )
