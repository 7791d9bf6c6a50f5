"""The index of moderated mediation: how the indirect effect differs between values of a moderator.

The indirect effect at z is ``A(z) - kappa r B(z)``, so that its difference between two values is
``[A(z1) - A(z0)] - kappa r [B(z1) - B(z0)]``. Where the exposure shifts the mediator equally at both, B drops out
and no belief about rho is needed.
"""

import dataclasses
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.claim import Claim
from bayesmed.conclusions.view import View, view_by_draw
from bayesmed.conclusions.words import value_text
from bayesmed.core.contrasts import Contrasts
from bayesmed.core.errors import ArgumentError, DataWarning, warn
from bayesmed.core.mapping import Array
from bayesmed.fit.grouped import GroupedResult
from bayesmed.fit.result import FitResult
from bayesmed.priors.accept import coerce
from bayesmed.priors.by_group import ByGroup
from bayesmed.priors.point import PointMass
from bayesmed.study.moderators import coded_columns, kind_of
from bayesmed.study.observe import Observed
from bayesmed.study.points import Points, points
from bayesmed.study.spread import residual_spread

PROBES = 5
"""Values of the moderator at which a straight line is tested for, draw by draw."""
ROUNDING = 1e-9
TAIL = 0.025

FREE = (
    "Free of rho: the exposure shifts the mediator equally at both values, so confounding moves both indirect "
    "effects by the same amount; no belief is used."
)
NOT_FREE = (
    "Not free of rho: the exposure shifts the mediator differently at the values, so confounding moves the indirect "
    "effects by different amounts; a belief is used."
)
CURVED = "The indirect effect is not a straight line in {0}: there is no one slope, only contrasts between values."


def moderation_index(
    result: FitResult,
    moderator: str,
    values: Sequence[Any] | None = None,
    rho: Any = None,
    at: Mapping[str, Any] | None = None,
) -> pd.DataFrame:
    """Return contrasts of the indirect effect between moderator values, and its slope where there is one.

    Parameters
    ----------
    result : FitResult
    moderator : str
    values : list, optional
        Two values or more; the moderator's default points if left out. Numbers are compared with the one before,
        levels of a categorical moderator with the first.
    rho : prior or number, optional
        Used only where a contrast is not free of rho; None is the fit's belief.
    at : dict, optional
        Other moderators held at one value each; averaged over if left out.

    Returns
    -------
    pandas.DataFrame
        contrast; mean, sd, lower, upper (95 %); probability of being above 0 and its mcse; free_of_rho. In units of
        the outcome, the slope's per unit of the moderator. ``attrs["note"]`` says why a belief was needed or not,
        ``attrs["linear"]`` whether the indirect effect is a straight line in the moderator (None if categorical).

    Raises
    ------
    BeliefNeededError
        If a contrast is not free of rho and there is no belief.

    Warns
    -----
    DataWarning
        If a residual spread differs along the moderator: one rho then moves the effects unequally all the same.
    """
    observed = result.observed
    held = _held(observed, moderator, at)
    wanted = _default_values(observed, moderator) if values is None else values
    chosen = points(observed, {moderator: list(wanted), **held})
    if len(chosen.values) < 2:
        raise ArgumentError(f"values={values!r}: a contrast needs at least two values of {moderator!r}")
    if observed.published is None:
        _warn_of_spread(result, moderator)
    numeric = kind_of(observed.frame[moderator], coded=moderator in coded_columns(observed.formulas)) == "numeric"
    linear = _is_linear(result, moderator, held) if numeric else None
    levels = list(chosen.dims[moderator])
    names, weights = _weights(moderator, levels, numeric, bool(linear))
    constant, slope = (weights @ line for line in result.contrasts(chosen).line("indirect"))
    free = _are_free(result, chosen, weights, slope)
    rows = [_row(View(result, _contrast(constant[free], None), PointMass(0.0), None))] if free.any() else []
    if not free.all():
        rows.append(_row(_believed(result, chosen, weights, constant, slope, ~free, rho)))
    order = np.argsort(np.concatenate([np.flatnonzero(free), np.flatnonzero(~free)]))
    found = pd.concat(rows, ignore_index=True).iloc[order].reset_index(drop=True)
    found.insert(0, "contrast", names)
    found["free_of_rho"] = free
    found.attrs["note"] = _note(result, moderator, free, linear)
    found.attrs["linear"] = linear
    return found


def _held(observed: Observed, moderator: str, at: Any) -> dict[str, Any]:
    held = points(observed, {} if at is None else at)
    if held.dims or moderator in held.names:
        raise ArgumentError(f"at={at!r}: give one value for each other moderator, and {moderator!r} itself in values")
    return dict(held.scalars)


def _default_values(observed: Observed, moderator: str) -> tuple[Any, ...]:
    if moderator not in observed.covariates:
        points(observed, {moderator: [0]})  # says which columns may be named
    return points(dataclasses.replace(observed, default_moderators=(moderator,))).dims[moderator]


def _is_linear(result: FitResult, moderator: str, held: Mapping[str, Any]) -> bool:
    """True if both parts of every draw's indirect effect lie on straight lines along the observed range."""
    along = np.linspace(*result.observed.span(moderator), PROBES)
    probed = points(result.observed, {moderator: along.tolist(), **held})
    share = ((along - along[0]) / (along[-1] - along[0]))[:, None]
    for values in result.replaced().contrasts(probed).line("indirect"):
        straight = values[0] + share * (values[-1] - values[0])
        if np.abs(values - straight).max() > ROUNDING * np.abs(values).max():
            return False
    return True


def _weights(moderator: str, levels: list[Any], numeric: bool, linear: bool) -> tuple[list[str], Array]:
    """Return what each row is called, and its weights of the points, shape (row, point)."""
    names, rows = [], []
    identity = np.eye(len(levels))
    for k in range(1, len(levels)):
        base = k - 1 if numeric else 0
        names.append(f"{moderator} {value_text(levels[k])} − {value_text(levels[base])}")
        rows.append(identity[k] - identity[base])
    if linear:
        low, high = int(np.argmin(levels)), int(np.argmax(levels))
        names.append(f"slope per unit of {moderator}")
        rows.append((identity[high] - identity[low]) / (levels[high] - levels[low]))
    return names, np.array(rows)


def _are_free(result: FitResult, chosen: Points, weights: Array, slope: Array) -> Any:
    """Return which contrasts do not contain rho: those for which kappa B is equal in every draw."""
    if result.joint or (isinstance(result, GroupedResult) and result.moderator in chosen.dims):
        # Draws informed by rho move with the belief; groups with a rho each differ in it.
        return np.zeros(len(weights), dtype=bool)
    size = np.abs(weights) @ np.abs(result.contrasts(chosen).line("indirect")[1]).max(axis=1)
    return np.abs(slope).max(axis=1) <= ROUNDING * size


def _believed(
    result: FitResult, chosen: Points, weights: Array, constant: Array, slope: Array, rows: Any, rho: Any
) -> View:
    """Return the contrasts that contain rho, seen under a belief."""
    belief = rho if rho is None or isinstance(rho, ByGroup) else coerce(rho)
    seen = view_by_draw(result, chosen, belief)
    if seen.rho is None and not isinstance(seen.belief, ByGroup):
        return View(result, _contrast(constant[rows], slope[rows]), seen.belief, None)
    # rho goes with each draw, or differs between points: the contrast is one of draws.
    drawn = weights[rows] @ seen.draws("indirect")
    return View(seen.result, _contrast(drawn, None), PointMass(0.0), None)


def _contrast(constant: Array, slope: Array | None) -> Contrasts:
    """Return a line in r as contrasts whose indirect effect it is."""
    zero = np.zeros_like(constant)
    return Contrasts(a=constant, a_pure=constant, b=zero if slope is None else slope, t=zero, kappa=np.ones(1))


def _row(seen: View) -> pd.DataFrame:
    mean, sd = seen.moments("indirect")
    lower, upper = seen.quantiles("indirect", np.array([TAIL, 1 - TAIL])).T
    probability, mcse = seen.probability("indirect", Claim("indirect", above=0.0))
    return pd.DataFrame(
        {"mean": mean, "sd": sd, "lower": lower, "upper": upper, "probability": probability, "mcse": mcse}
    )


def _note(result: FitResult, moderator: str, free: Any, linear: bool | None) -> str:
    sentences = [FREE] if free.all() else [NOT_FREE] if not free.any() else [f"{FREE} {NOT_FREE}"]
    if result.joint:
        sentences = ["The data or the priors inform rho in this fit, so its draws go with its belief."]
    elif isinstance(result, GroupedResult) and not free.any():
        sentences = ["Not free of rho: each group has a rho and residual spreads of its own; a belief is used."]
    if linear is False:
        sentences.append(CURVED.format(moderator))
    return " ".join(sentences)


def _warn_of_spread(result: FitResult, moderator: str) -> None:
    if isinstance(result, GroupedResult) and result.moderator == moderator:
        return  # each group has residual SDs of its own
    notable = [one for one in residual_spread(result.observed) if one.along == moderator and one.notable]
    if notable:
        message = (
            f"moderation_index: the residual spread differs along {moderator!r} ({'; '.join(map(str, notable))}). One "
            "rho then moves indirect effects unequally, so a contrast shown as free of rho may still hold confounding; "
            "for a categorical moderator fit with rho=ByGroup(…), which gives each group its own spreads"
        )
        warn(DataWarning(message))
