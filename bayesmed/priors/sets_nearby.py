"""Sets of beliefs near one belief, in the sense of Kullback and Leibler."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from bayesmed.core.envelope import tilt
from bayesmed.core.mapping import odds
from bayesmed.core.steps import Steps
from bayesmed.priors.accept import coerce
from bayesmed.priors.arguments import real, refusal
from bayesmed.priors.prior import Floats, Prior
from bayesmed.priors.prior_set import PriorSet
from bayesmed.priors.reweighted import Reweighted

__all__ = ["Nearby"]

FARTHEST = 15.0  # on the scale of atanh ρ
CELLS = 4000


@dataclass(frozen=True)
class Nearby(PriorSet):
    """Every belief whose Kullback–Leibler divergence from `base` is at most `divergence`, in nats.

    Members have no mass where the base has none. As a feeling for size: moving a normal belief by d of its
    standard deviations costs d²/2, so 0.02 is a shift of a fifth of a standard deviation, and 0.5 one of a whole.

    Parameters
    ----------
    base : Prior or float
        The belief at the centre.
    divergence : float
        Radius, 0 or more: E_member[log(density of member / density of base)] ≤ divergence.

    Notes
    -----
    The smallest probability is −inf over θ > 0 of θ log E_base[exp(−G/θ)] + θ·divergence, G the probability of
    the claim at ρ (Donsker & Varadhan 1975; Ahmadi-Javid 2012, doi:10.1007/s10957-011-9968-2). The mean of an
    effect over the set is infinite on every side on which the base reaches ±1, unless the divergence is 0: r then
    has no exponential moment, as the density of no family here falls as fast as exp(−1/√(1−ρ)), and a belief
    of your own that does is treated alike.

    Examples
    --------
    >>> from bayesmed.priors import TruncatedNormal
    >>> low, high = Nearby(TruncatedNormal(0, 0.1), 0.02).odds_range()
    >>> round(low, 3), round(high, 3)
    (-0.02, 0.02)
    """

    base: Prior
    divergence: float

    def __post_init__(self) -> None:
        allowed = "a divergence is a finite number, 0 or more"
        divergence = real("Nearby", "divergence", self.divergence, allowed)
        if divergence < 0:
            raise refusal("Nearby", "divergence", divergence, allowed)
        object.__setattr__(self, "base", coerce(self.base))
        object.__setattr__(self, "divergence", divergence)

    def support(self) -> tuple[float, float]:
        """Return the ends of the base."""
        return self.base.support()

    def lowest(self, steps: Steps) -> Prior:
        """Return the base reweighted by exp(−k·function), with k such that the divergence is used up."""
        if self.divergence == 0:
            return self.base
        places = steps.places
        before, up_to = np.asarray(self.base.below(places)), 1 - np.asarray(self.base.above(places))
        between = np.append(before, 1.0) - np.insert(up_to, 0, 0.0)
        masses = np.maximum(np.concatenate([between, up_to - before]), 0.0)
        factors = tilt(masses / masses.sum(), np.concatenate([steps.between, steps.at]), self.divergence)
        return Reweighted(self.base, places, factors[: between.size], factors[between.size :])

    def odds_range(self) -> tuple[float, float]:
        """Return the smallest and the largest E[r], infinite on a side on which the base reaches ±1."""
        if self.divergence == 0:
            first = self.base.odds_moments()[0]
            return first, first
        lower, upper = self.support()
        masses, places = self._cells()
        ends = []
        for sign, reaches in ((1.0, lower <= -1), (-1.0, upper >= 1)):
            r = odds(places)
            ends.append(-sign * math.inf if reaches else float((masses * tilt(masses, sign * r, self.divergence)) @ r))
        return ends[0], ends[1]

    def _cells(self) -> tuple[Floats, Floats]:
        """Cut the base into many small masses, each at one place: its atoms, and stretches at their middle."""
        lower, upper = self.support()
        atoms = np.array(self.base.atoms()).reshape(-1, 2)
        if lower == upper:
            return atoms[:, 1], atoms[:, 0]
        with np.errstate(divide="ignore"):
            first, last = np.clip(np.arctanh([lower, upper]), -FARTHEST, FARTHEST)
        quantiles = np.arctanh(self.base.ppf(np.linspace(0, 1, CELLS // 2 + 1)[1:-1]))
        edges = np.unique(np.concatenate([np.linspace(first, last, CELLS // 2 + 1), quantiles]))
        cut = np.tanh(edges)
        in_cell = np.searchsorted(cut, atoms[:, 0], side="left") - 1
        up_to = np.asarray(self.base.cdf(cut))
        up_to[0], up_to[-1] = 0.0, 1.0
        masses = np.diff(up_to)
        np.subtract.at(masses, np.clip(in_cell, 0, masses.size - 1), atoms[:, 1])
        everything = np.maximum(np.concatenate([masses, atoms[:, 1]]), 0.0)
        places = np.concatenate([np.tanh((edges[:-1] + edges[1:]) / 2), atoms[:, 0]])
        return everything / everything.sum(), places
