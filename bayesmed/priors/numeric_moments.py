"""Moments of a belief that is known only by its functions, and an estimate of how its tails end."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np

from bayesmed.priors.prior import Floats, Prior
from bayesmed.priors.quadrature import integrate

__all__ = ["odds_moments", "rho_mean", "rho_sd"]

FARTHEST = 14.0  # on the scale of atanh ρ: 1 − ρ = 1.4e-12, which a double still holds to four digits
CLEAR_OF_ZERO = 1e-3


def odds_moments(prior: Prior) -> tuple[float, float]:
    """Return E[r] and E[r²] by quadrature, infinite where the tails look so.

    A density that ends at 1 like (1 − ρ)^p leaves E|r| finite if p > −½ and E[r²] if p > 0. The power is read
    off the log density between 1 − 1e-7 and 1 − 1e-9, so it is an estimate; within 0.001 of the limit it
    counts as infinite.
    """
    left, right = _tail_power(prior, -1), _tail_power(prior, 1)
    moments = []
    for power, limit in ((1, -0.5), (2, 0.0)):
        infinite = [side for side, tail in ((-1, left), (1, right)) if tail <= limit + CLEAR_OF_ZERO]
        if infinite:
            moments.append(math.nan if len(infinite) == 2 and power == 1 else math.inf * infinite[0] ** power)
            continue
        inner = _expect(prior, lambda t, power=power: np.sinh(t) ** power)  # type: ignore[misc]
        beyond = sum(side**power * _tail(prior, side, tail, power) for side, tail in ((-1, left), (1, right)))
        moments.append(inner + beyond)
    return moments[0], moments[1]


def rho_mean(prior: Prior) -> float:
    """Return the mean of ρ; what lies beyond the quadrature's reach is as good as at ±1."""
    return _expect(prior, np.tanh) + sum(side * mass for side, mass in _beyond(prior))


def rho_sd(prior: Prior) -> float:
    """Return the standard deviation of ρ."""
    centre = rho_mean(prior)
    variance = _expect(prior, lambda t: (np.tanh(t) - centre) ** 2)
    return math.sqrt(variance + sum(mass * (side - centre) ** 2 for side, mass in _beyond(prior)))


def _beyond(prior: Prior) -> tuple[tuple[int, float], tuple[int, float]]:
    """Sides and their probabilities past `FARTHEST`."""
    end = math.tanh(FARTHEST)
    return (-1, float(prior.below(-end))), (1, float(prior.above(end)))


def _expect(prior: Prior, function: Callable[[Floats], Floats]) -> float:
    """Integrate over t = atanh ρ between quantiles, which lie dense where the density changes fast."""
    tails = 10.0 ** -np.arange(2.0, 15.0)
    q = np.unique(np.concatenate([np.linspace(0.02, 0.98, 49), tails, 1 - tails]))
    lower, upper = prior.support()
    inner = np.concatenate([[lower], prior.ppf(q), [upper]])
    with np.errstate(divide="ignore"):
        breaks = np.clip(np.arctanh(inner), -FARTHEST, FARTHEST)
    return integrate(lambda t: function(t) * prior.pdf(np.tanh(t)) / np.cosh(t) ** 2, breaks, nodes=16)


def _tail_power(prior: Prior, side: int) -> float:
    """Power with which the density ends at ±1; infinite if it is 0 there."""
    if side * prior.support()[side > 0] < 1 - 1e-9:
        return math.inf
    near, nearer = prior.logpdf(side * (1 - np.array([1e-7, 1e-9])))
    if not (math.isfinite(near) and math.isfinite(nearer)):
        return math.inf
    return float((nearer - near) / (math.log(1e-9) - math.log(1e-7)))


def _tail(prior: Prior, side: int, power_of_density: float, power: int) -> float:
    """Integral beyond `FARTHEST`, where the density over t is C·e^{−2(p+1)t} and |r| is e^t/2."""
    if math.isinf(power_of_density):
        return 0.0
    rho = side * math.tanh(FARTHEST)
    density = float(prior.pdf(rho)) / math.cosh(FARTHEST) ** 2
    return density * math.sinh(FARTHEST) ** power / (2 * (power_of_density + 1) - power)
