"""Effects that vary between people: the covariance of a person's two paths, as a second sensitivity number.

Let ``a_i`` be what the whole contrast x0 → x1 does to person i's mediator, and ``b_i`` what one unit of the
mediator does to that person's outcome. Then ``E[a_i b_i] = E[a_i] E[b_i] + Cov(a_i, b_i)``. The equations give the
product of the averages; nothing in the data gives the covariance, which is in units of the outcome and moves that
much from the direct to the indirect effect. The total effect does not change.

If people's ``b_i`` goes with their ``a_i``, then the outcome's error ``(b_i - E b_i) M`` goes with the mediator's
error too, wherever the mediator's mean in an arm is not zero on the scale on which ``b_i`` stands for no more than
a slope. That part of the covariance is a residual correlation like any other: rho must stand for it.
"""

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.claim import Claim, as_claim
from bayesmed.conclusions.summary import checked_width, table
from bayesmed.conclusions.view import GroupedView, View, beliefs_along_rho, view, view_by_draw
from bayesmed.core.contrasts import Contrasts
from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array
from bayesmed.fit.result import FitResult
from bayesmed.priors.arguments import plain
from bayesmed.priors.coefficients import CoefficientPrior
from bayesmed.priors.prior import Prior
from bayesmed.study.points import points

STREAM = 5
"""Keeps the covariance's random numbers apart from those of a fit's other uses of its seed."""
TAIL = 0.025


@dataclass(frozen=True, init=False)
class Covariance:
    """What is believed of Cov(a_i, b_i), the covariance between people of the two paths.

    Parameters
    ----------
    value : number, coefficient prior or frozen distribution of ``scipy.stats``
        In units of the outcome, for the study's contrast x0 → x1.

    Examples
    --------
    >>> Covariance(0.15).draws(2, random_seed=1)
    array([0.15, 0.15])
    """

    factors: tuple[Any, ...]

    def __init__(self, value: Any) -> None:
        object.__setattr__(self, "factors", (_factor("value", value, -np.inf, np.inf),))

    @classmethod
    def from_correlation(cls, correlation: Any, sd_first: Any, sd_second: Any) -> "Covariance":
        """Return correlation × sd_first × sd_second, each a number or a belief, the beliefs independent.

        Parameters
        ----------
        correlation : number, prior on (-1, 1) or frozen distribution
            Between people, of ``a_i`` and ``b_i``.
        sd_first : number, positive coefficient prior or frozen distribution
            SD between people of ``a_i``, the shift of the mediator by the whole contrast; units of the mediator.
        sd_second : number, positive coefficient prior or frozen distribution
            SD between people of ``b_i``; units of the outcome per unit of the mediator.
        """
        made = cls(0.0)
        factors = (
            _factor("correlation", correlation, -1.0, 1.0),
            _factor("sd_first", sd_first, 0.0, np.inf),
            _factor("sd_second", sd_second, 0.0, np.inf),
        )
        object.__setattr__(made, "factors", factors)
        return made

    def draws(self, count: int, random_seed: int) -> Array:
        """Return `count` stratified draws in random order; a fixed covariance repeats."""
        product = np.ones(count)
        for place, factor in enumerate(self.factors):
            if isinstance(factor, float):
                product = product * factor
                continue
            random = np.random.default_rng([random_seed, STREAM, place])
            uniforms = (random.permutation(count) + random.uniform(1e-9, 1 - 1e-9, count)) / count
            # Coefficient priors offer their quantiles to the package only.
            quantile = factor._ppf if isinstance(factor, CoefficientPrior) else factor.ppf
            product = product * np.asarray(quantile(uniforms), dtype=float)
        return product


def with_covariance(
    result: FitResult,
    covariance: Any,
    at: Any = None,
    rho: Any = None,
    claim: Claim | None = None,
    ci_prob: float = 0.95,
) -> pd.DataFrame:
    """Return the summary of indirect, direct and total effects when people's paths covary.

    Parameters
    ----------
    result : FitResult
    covariance : Covariance, or what makes one
        The same at every moderator point. With an exposure × mediator term, ``b_i`` is the slope under x1.
    at, rho, claim, ci_prob
        As for the summary. `rho` is a number, a prior or None.

    Returns
    -------
    pandas.DataFrame
        effect, moderators, mean, sd, lower, upper, probability, mcse. One stratified draw of the covariance goes
        with each posterior draw, the same under every belief about rho, which is integrated out exactly.

    Raises
    ------
    ArgumentError
        For a claim of the pure indirect or total direct effect, whose covariance is that of another slope.
    """
    stated, chosen, width = _stated(claim), points(result.observed, at), checked_width(ci_prob)
    believed = covariance if isinstance(covariance, Covariance) else Covariance(covariance)
    seen = view(result, chosen, rho)
    chains, draws = seen.result.shape
    shift = believed.draws(chains * draws, result.settings.random_seed)
    return table(_moved(seen, shift), chosen, stated, width)


def covariance_tipping(result: FitResult, rho: Any, at: Any = None, claim: Claim | None = None) -> pd.DataFrame:
    """Return the covariance between people's paths that overturns a claim, at each given rho.

    Parameters
    ----------
    result : FitResult
    rho : number or list of numbers
    at : dict, optional
    claim : Claim, optional
        Of the indirect or the direct effect.

    Returns
    -------
    pandas.DataFrame
        rho, moderators, and median, lower, upper (95 %) over draws of the covariance, in units of the outcome, at
        which the effect equals the claim's limit: ``limit - indirect(rho)``, or ``direct(rho) - limit``. It says
        how far away the limit is, not how plausible such a covariance is.
    """
    stated, chosen = _stated(claim), points(result.observed, at)
    if stated.effect == "total":
        raise ArgumentError("claim: the total effect does not depend on the covariance, so nothing tips it")
    fixed = beliefs_along_rho([rho] if np.isscalar(rho) else rho)
    if fixed is None:
        raise ArgumentError(f"rho={rho!r} must be a number or a list of numbers between -1 and 1")
    parts = []
    for value in fixed:
        effect = view_by_draw(result, chosen, value).draws(stated.effect)
        needed = stated.limit - effect if stated.effect == "indirect" else effect - stated.limit
        median, lower, upper = np.quantile(needed, [0.5, TAIL, 1 - TAIL], axis=1)
        columns: dict[str, Any] = {"rho": value}
        columns.update(chosen.columns)
        parts.append(pd.DataFrame({**columns, "median": median, "lower": lower, "upper": upper}))
    return pd.concat(parts, ignore_index=True)


def _stated(claim: Any) -> Claim:
    stated = as_claim(claim)
    if stated.effect not in ("indirect", "direct", "total"):
        raise ArgumentError(
            f"claim: effect={stated.effect!r} cannot be claimed here; the covariance is that of the total indirect "
            "effect: claim 'indirect', 'direct' or 'total'"
        )
    return stated


def _moved(seen: View, shift: Array) -> View:
    """Return the view with the covariance added to every draw's indirect effect."""
    if isinstance(seen, GroupedView):
        pieces = tuple((places, _moved(piece, shift)) for places, piece in seen.pieces)
        return replace(seen, contrasts=_shifted(seen.contrasts, shift), pieces=pieces)
    return replace(seen, contrasts=_shifted(seen.contrasts, shift))


def _shifted(contrasts: Contrasts, shift: Array) -> Contrasts:
    # One covariance is of one slope: pure_indirect is made equal, so that tables leave it out.
    moved = contrasts.a + shift
    return replace(contrasts, a=moved, a_pure=moved)


def _factor(name: str, value: Any, least: float, most: float) -> Any:
    """Return a fixed number as float and a belief as it is, if it stays within the bounds."""
    value = plain(value)
    allowed = f"from {least:g} to {most:g}" if np.isfinite(most) else "0 or more" if least == 0 else "finite"
    if isinstance(value, int | float) and not isinstance(value, bool):
        if not np.isfinite(value) or not least <= value <= most:
            raise ArgumentError(f"Covariance: {name}={value!r} must be {allowed}")
        return float(value)
    if isinstance(value, CoefficientPrior):
        support = (-np.inf, np.inf) if value.on_whole_line else (0.0, np.inf)
    elif isinstance(value, Prior) or (callable(getattr(value, "ppf", None)) and hasattr(value, "kwds")):
        lower, upper = value.support()
        support = (float(lower), float(upper))
    else:
        raise ArgumentError(
            f"Covariance: {name}={value!r} must be a number, a coefficient prior such as bm.priors.Normal(0.1, 0.05), "
            "or a frozen distribution of scipy.stats"
        )
    if support[0] < least or support[1] > most:
        raise ArgumentError(
            f"Covariance: {name}={value!r} reaches from {support[0]:g} to {support[1]:g}; it must be {allowed}"
        )
    return value
