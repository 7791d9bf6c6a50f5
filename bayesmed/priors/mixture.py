"""A belief that weighs several beliefs."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from bayesmed.core.errors import PriorError
from bayesmed.priors.arguments import doubles, real, refusal
from bayesmed.priors.inversion import invert
from bayesmed.priors.prior import Floats, Prior

__all__ = ["Mixture"]


@dataclass(frozen=True)
class Mixture(Prior):
    """One of `priors` holds, which one with probabilities `weights`.

    Components may be certain (`PointMass`): ``Mixture([PointMass(0), LKJ(2)], [0.5, 0.5])`` gives "nothing
    was left out" an even chance. An effect has a mean or an SD under it if it has under every component.

    Parameters
    ----------
    priors : sequence of Prior or float
        Components; a number is certainty in it.
    weights : sequence of float
        One to a component, none negative; they are divided by their sum. Components of weight 0 are dropped.

    Notes
    -----
    In a PyMC model, components that all have a density on one common support are marginalised, and ρ is a
    free variable. With an atom, or with supports that differ, ρ is the quantile of a standard normal variable
    instead: an atom then is a stretch over which ρ stands still, a gap a step, neither of which stops the
    sampler.

    Examples
    --------
    >>> from bayesmed.priors import LKJ
    >>> float(Mixture([0, LKJ(2)], [1, 1]).below(0))
    0.25
    """

    priors: tuple[Prior, ...]
    weights: tuple[float, ...]

    def __init__(self, priors: Iterable[Any], weights: Iterable[Any]) -> None:
        components, shares = _checked(priors, weights)
        object.__setattr__(self, "priors", components)
        object.__setattr__(self, "weights", shares)

    def support(self) -> tuple[float, float]:
        """Return the smallest and the largest value that any component allows."""
        supports = [prior.support() for prior in self.priors]
        return min(lower for lower, _ in supports), max(upper for _, upper in supports)

    def atoms(self) -> tuple[tuple[float, float], ...]:
        """Return the atoms of all components, each with its weight, in increasing order."""
        weights: dict[float, float] = {}
        for prior, share in zip(self.priors, self.weights, strict=True):
            for value, probability in prior.atoms():
                weights[value] = weights.get(value, 0.0) + share * probability
        return tuple(sorted(weights.items()))

    def odds_moments(self) -> tuple[float, float]:
        """Return the weighted E[r] and E[r²], no more finite than those of the worst component."""
        moments = [prior.odds_moments() for prior in self.priors]
        return self._average([first for first, _ in moments]), self._average([second for _, second in moments])

    def rho_mean(self) -> float:
        """Return the weighted mean."""
        return self._average([prior.rho_mean() for prior in self.priors])

    def rho_sd(self) -> float:
        """Return the standard deviation within and between components."""
        centre = self.rho_mean()
        return math.sqrt(
            self._average([prior.rho_sd() ** 2 + (prior.rho_mean() - centre) ** 2 for prior in self.priors])
        )

    def below(self, x: ArrayLike) -> Floats:
        """Return P(ρ < x), which leaves out an atom at `x` itself."""
        return self._sum([prior.below(x) for prior in self.priors])

    def above(self, x: ArrayLike) -> Floats:
        """Return P(ρ > x), which leaves out an atom at `x` itself."""
        return self._sum([prior.above(x) for prior in self.priors])

    def _average(self, values: list[float]) -> float:
        return sum(share * value for share, value in zip(self.weights, values, strict=True))

    def _sum(self, values: list[Floats]) -> Floats:
        total = sum(share * value for share, value in zip(self.weights, values, strict=True))
        return np.asarray(total)[()]

    def _logpdf(self, x: Floats) -> Floats:
        terms = [np.log(share) + prior.logpdf(x) for share, prior in zip(self.weights, self.priors, strict=True)]
        log_density: Floats = np.logaddexp.reduce(terms, axis=0)
        return log_density

    def _cdf(self, x: Floats) -> Floats:
        return self._sum([prior.cdf(x) for prior in self.priors])

    def _ppf(self, q: Floats) -> Floats:
        ends = np.stack([prior.ppf(q) for prior in self.priors])
        lower, upper = ends.min(axis=0), ends.max(axis=0)
        # below its lower end the cdf is less than q, so that end itself answers where it already reaches q
        result = np.where(self._cdf(lower) >= q, lower, np.nan)
        for value, _ in self.atoms():
            result[(self.below(value) < q) & (q <= self._cdf(np.array(value)))] = value
        open_ = np.isnan(result)
        result[open_] = invert(self._cdf, self.pdf, q[open_], lower[open_], upper[open_])
        for bend in self._bends():  # in a gap any value reaches q; the gap's lower end is the smallest
            result[(result > bend) & (self._cdf(np.array(bend)) >= q)] = bend
        return result

    def _bends(self) -> tuple[float, ...]:
        return tuple(bend for prior in self.priors for bend in prior._bends())

    def _pymc_dist(self) -> Any | None:
        if self.atoms() or len({prior.support() for prior in self.priors}) > 1:
            return None
        components = [prior._pymc_dist() for prior in self.priors]
        if any(component is None for component in components):
            return None
        if len(components) == 1:
            return components[0]
        import pymc as pm

        return pm.Mixture.dist(w=np.array(doubles(*self.weights)), comp_dists=components)


def _checked(priors: Any, weights: Any) -> tuple[tuple[Prior, ...], tuple[float, ...]]:
    from bayesmed.priors.accept import coerce

    if isinstance(priors, Prior) or not isinstance(priors, Iterable):
        raise refusal("Mixture", "priors", priors, "a list of priors is needed")
    if isinstance(weights, str) or not isinstance(weights, Iterable):
        raise refusal("Mixture", "weights", weights, "a list of numbers is needed, one to a prior")
    components = [coerce(prior) for prior in priors]
    shares = [real("Mixture", f"weights[{i}]", weight) for i, weight in enumerate(weights)]
    if not components:
        raise PriorError("Mixture: priors is empty; at least one prior is needed")
    if len(components) != len(shares):
        raise PriorError(
            f"Mixture: there are {len(components)} priors and {len(shares)} weights; each prior needs one weight"
        )
    for i, share in enumerate(shares):
        if share < 0:
            raise refusal("Mixture", f"weights[{i}]", share, "no weight may be negative")
    total = math.fsum(shares)
    if abs(total - 1) < 1e-12:  # already divided: the same prior must come of its own weights
        total = 1.0
    if not 0 < total < math.inf:
        raise refusal("Mixture", "weights", shares, "their sum must be finite and above 0")
    kept = [(prior, share / total) for prior, share in zip(components, shares, strict=True) if share > 0]
    return tuple(prior for prior, _ in kept), tuple(share for _, share in kept)
