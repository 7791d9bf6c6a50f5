"""A belief in one sentence, and the probability that confounding inflates the effect under it."""

from __future__ import annotations

import math

import numpy as np

from bayesmed.core.errors import PriorError
from bayesmed.priors.prior import Prior
from bayesmed.priors.protocol import HasDirection

__all__ = ["describe", "inflation_probability"]


def describe(prior: Prior, fit: HasDirection | None = None) -> str:
    """Return what `prior` says, in one sentence; see `Prior.describe`."""
    parts = [_extent(prior), _existence(prior)]
    if fit is not None:
        probability = _shown(inflation_probability(prior, fit))
        parts.append(f"confounding inflates the indirect effect with probability {probability}")
    return "; ".join(parts) + "."


def inflation_probability(prior: Prior, fit: HasDirection) -> float:
    """Return the probability that confounding makes the indirect effect look larger than it is.

    It does where ρ has the sign of the exposure's effect on the mediator, so this is the mean over posterior
    draws of P(ρ > 0) where that effect is positive and of P(ρ < 0) where it is negative.

    Examples
    --------
    >>> from types import SimpleNamespace
    >>> from bayesmed.priors import Uniform
    >>> draws = SimpleNamespace(direction=lambda: [1, 1, 1, -1])
    >>> inflation_probability(Uniform(-0.1, 0.3), draws)
    0.625
    """
    direction = np.asarray(fit.direction(), dtype=float)
    if direction.size == 0 or np.isnan(direction).any():
        raise PriorError("describe: the fit's direction() is empty or has NaN; one number to a draw is needed")
    above, below = float(prior.above(0.0)), float(prior.below(0.0))
    return float(np.mean(np.where(direction > 0, above, np.where(direction < 0, below, 0.0))))


def _extent(prior: Prior) -> str:
    lower, upper = (float(value) for value in prior.ppf([0.05, 0.95]))
    alike = "of the residual variance of mediator and outcome alike"
    if lower == upper:
        known = f"{prior!r}: rho is {_figure(lower)} with 90 % probability or more"
        if lower == 0:
            return f"{known}, as if nothing was left out"
        return f"{known}, as from one unmeasured cause that explains {_share(lower)} {alike}"
    return (
        f"{prior!r}: rho is between {_figure(lower)} and {_figure(upper)} with 90 % probability, ends that"
        f" one unmeasured cause would give by explaining {_share(lower)} and {_share(upper)} {alike}"
    )


def _figure(rho: float) -> str:
    """Two decimals, without a minus sign on a zero or a correlation of 1."""
    if abs(rho) > 0.99:
        return f"{math.copysign(0.99, rho):.2f} or beyond"
    return f"{round(rho, 2) + 0.0:.2f}"


def _share(rho: float) -> str:
    """The share R²_M = R²_Y = |ρ| of a cause of equal strength, and the sign of its work."""
    share = 100 * abs(rho)
    text = "over 99 %" if share > 99 else f"{share:.1f} %" if share < 1 else f"{share:.0f} %"
    return f"{text} ({'moving them opposite ways' if rho < 0 else 'moving them the same way'})"


def _existence(prior: Prior) -> str:
    first, second = prior.odds_moments()
    if math.isfinite(second) and math.isfinite(first):
        return "an effect has a mean and an SD under it"
    if math.isfinite(first):
        return "an effect has a mean but no finite SD under it"
    return "an effect has neither a finite mean nor an SD under it, only quantiles"


def _shown(probability: float) -> str:
    if probability > 0.999:
        return ">0.999"
    if 0 < probability < 0.001:
        return "<0.001"
    return f"{probability:.3f}"
