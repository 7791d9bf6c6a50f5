"""A belief multiplied by a step function of ρ."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike

from bayesmed.priors import numeric_moments
from bayesmed.priors.prior import Floats, Prior

__all__ = ["Reweighted"]


@dataclass(frozen=True, eq=False)
class Reweighted(Prior):
    """The belief whose density is that of `base` times a factor that is constant between given places.

    It is what a set of beliefs near a base answers with (see `Nearby`). Compared by identity. Its repr leaves out the
    places and factors, which may be thousands; ``Tabulated(values, prior.cdf(values))`` can stand for it
    where a belief must be written down.

    Parameters
    ----------
    base : Prior
    places : array, shape (step,)
        Where the factor changes, increasing, strictly inside (−1, 1).
    between : array, shape (step + 1,)
        Factors before the first place, between places and after the last, none negative, such that the
        probabilities add up to 1.
    at : array, shape (step,)
        Factors at the places themselves, which only matter if the base has an atom there.

    Examples
    --------
    >>> from bayesmed.priors import Uniform
    >>> Reweighted(Uniform(-0.5, 0.5), np.array([0.0]), np.array([0.5, 1.5]), np.array([1.0])).cdf(0.0)
    np.float64(0.25)
    """

    base: Prior
    places: Floats = field(repr=False)
    between: Floats = field(repr=False)
    at: Floats = field(repr=False)

    def support(self) -> tuple[float, float]:
        """Return the ends of the base."""
        return self.base.support()

    def atoms(self) -> tuple[tuple[float, float], ...]:
        """Return the atoms of the base with their new probabilities, those of no probability left out."""
        found = ((value, weight * self._factor(np.array(value)).item()) for value, weight in self.base.atoms())
        return tuple((value, weight) for value, weight in found if weight > 0)

    def odds_moments(self) -> tuple[float, float]:
        """Return E[r] and E[r²] by quadrature, infinite where those of the base are."""
        continuous = numeric_moments.odds_moments(self)
        moments = []
        for power, known, number in zip((1, 2), self.base.odds_moments(), continuous, strict=True):
            at_atoms = sum(weight * (value / math.sqrt(1 - value**2)) ** power for value, weight in self.atoms())
            moments.append(number + at_atoms if math.isfinite(known) else known)
        return moments[0], moments[1]

    def rho_mean(self) -> float:
        """Return the mean of ρ, by quadrature."""
        return numeric_moments.rho_mean(self) + sum(weight * value for value, weight in self.atoms())

    def rho_sd(self) -> float:
        """Return the standard deviation of ρ, by quadrature."""
        # Quadrature sees the part that has a density; its sd is about that part's own integral of ρ.
        atoms = np.array(self.atoms()).reshape(-1, 2)
        values, weights = atoms[:, 0], atoms[:, 1]
        first = numeric_moments.rho_mean(self)
        second = numeric_moments.rho_sd(self) ** 2 + first**2 * (1 + weights.sum())
        variance = second + weights @ values**2 - (first + weights @ values) ** 2
        return math.sqrt(max(float(variance), 0.0))

    def below(self, x: ArrayLike) -> Floats:
        """Return P(ρ < x), which leaves out an atom at `x` itself."""
        x = np.asarray(x, dtype=float)
        index = np.searchsorted(self.places, x, side="left")
        within = np.asarray(self.base.below(x)) - self._base_start[index]
        return np.clip(self._start[index] + self.between[index] * within, 0.0, 1.0)[()]

    @cached_property
    def _masses(self) -> tuple[Floats, Floats]:
        """P_base(ρ < place) and P_base(ρ ≤ place)."""
        return np.asarray(self.base.below(self.places)), 1 - np.asarray(self.base.above(self.places))

    @cached_property
    def _base_start(self) -> Floats:
        """P_base(ρ ≤ start of each piece)."""
        return np.insert(self._masses[1], 0, 0.0)

    @cached_property
    def _start(self) -> Floats:
        """P(ρ ≤ start of each piece)."""
        before, up_to = self._masses
        pieces = self.between[:-1] * (before - self._base_start[:-1])
        return np.insert(np.cumsum(pieces + self.at * (up_to - before)), 0, 0.0)

    def _factor(self, x: Floats) -> Floats:
        index = np.searchsorted(self.places, x, side="left")
        last = np.minimum(index, max(self.places.size - 1, 0))
        if self.places.size == 0:
            return self.between[index]
        return np.where((index < self.places.size) & (self.places[last] == x), self.at[last], self.between[index])

    def _logpdf(self, x: Floats) -> Floats:
        with np.errstate(divide="ignore"):
            log_density: Floats = self.base.logpdf(x) + np.log(self._factor(x))
        return log_density

    def _cdf(self, x: Floats) -> Floats:
        index = np.searchsorted(self.places, x, side="right")
        return self._start[index] + self.between[index] * (np.asarray(self.base.cdf(x)) - self._base_start[index])

    def _ppf(self, q: Floats) -> Floats:
        # A place with an atom answers for the probabilities from just before it to just after it.
        index = np.searchsorted(self._start[1:], q, side="left")
        start, factor = self._start[index], self.between[index]
        with np.errstate(divide="ignore", invalid="ignore"):
            in_base = self._base_start[index] + np.where(factor > 0, (q - start) / factor, 1.0)
        edges = np.concatenate([[-1.0], self.places, [1.0]])
        return np.clip(self.base.ppf(np.clip(in_base, 0.0, 1.0)), edges[index], edges[index + 1])

    def _bends(self) -> tuple[float, ...]:
        return self.base._bends()
