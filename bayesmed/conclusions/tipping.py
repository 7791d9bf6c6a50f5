"""The tipping distribution of a claim: at which residual correlation each draw crosses the claim's limit."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from scipy.optimize import brentq

from bayesmed.conclusions.accuracy import mean_with_error
from bayesmed.conclusions.claim import Claim, as_claim
from bayesmed.conclusions.labelled import labelled
from bayesmed.conclusions.summary import checked_width
from bayesmed.core.contrasts import Contrasts
from bayesmed.core.errors import ArgumentError, FitError
from bayesmed.core.mapping import Array, odds
from bayesmed.core.tipping import claim_probability, tipping_correlation
from bayesmed.fit.grouped import GroupedResult
from bayesmed.fit.result import FitResult
from bayesmed.priors.accept import coerce
from bayesmed.priors.by_group import ByGroup
from bayesmed.study.points import Points, points

STEPS = np.linspace(0.02, 0.98, 49)
FARTHEST = float(STEPS[-1])
"""How far from zero a fixed correlation is looked for, either way."""
RANGE = 0.9
"""Correlations beyond this in size are set apart. Common practice, no source."""
CAUTION = (
    "A tipping correlation restates how precisely the path through the mediator is estimated; it does not say how "
    "plausible such a correlation is. Plausibility comes from beliefs and from measured covariates."
)


@dataclass(frozen=True, eq=False)
class TippingResult:
    """Where each posterior draw crosses the claim's limit.

    Attributes
    ----------
    claim : Claim
    points : Points
    """

    result: FitResult
    claim: Claim
    points: Points
    contrasts: Contrasts
    ci_prob: float

    @cached_property
    def lines(self) -> tuple[Array, Array]:
        """Constant and slope of the claim's effect in r, each of shape (point, draw)."""
        return self.contrasts.line(self.claim.effect)

    @cached_property
    def crossings(self) -> Array:
        """Draws of the tipping correlation, shape (point, draw); nan where no correlation matters."""
        return tipping_correlation(*self.lines, self.claim.limit)

    @property
    def draws(self) -> xr.DataArray:
        """Draws of the tipping correlation with dims chain, draw and one per moderator."""
        return labelled(self.crossings, self.points, self.result.shape).rename("tipping_rho")

    @cached_property
    def table(self) -> pd.DataFrame:
        """One row per moderator point.

        Columns: the moderators; median, lower, upper of the tipping correlation; outside, the share of draws that
        do not cross within ±0.9; toward_minus_one and toward_plus_one, the probabilities of the claim as the
        correlation tends to -1 and +1, which no belief can exceed or undercut by being extreme; interval_down and
        interval_up, the fixed correlations nearest zero at which the interval of the effect takes in the limit, going
        down and going up from zero; required_down and required_up, those at which the claim's probability falls under
        what it requires. Zero where that is so at zero already, nan where it is not so as far as ±0.98.
        """
        tail = (1 - self.ci_prob) / 2
        _, slope = self.lines
        crossings = self.crossings
        quantiles = (
            np.nanquantile(crossings, [0.5, tail, 1 - tail], axis=1)
            if np.any(slope)
            else np.full((3, len(crossings)), np.nan)
        )
        holds_high = (slope < 0) if self.claim.direction == "above" else (slope > 0)
        holds_low = (slope > 0) if self.claim.direction == "above" else (slope < 0)
        columns: dict[str, Any] = dict(self.points.columns)
        columns.update(
            median=quantiles[0],
            lower=quantiles[1],
            upper=quantiles[2],
            outside=np.mean(~(np.abs(crossings) <= RANGE), axis=1),
            toward_minus_one=holds_low.mean(axis=1),
            toward_plus_one=holds_high.mean(axis=1),
            **self._fixed_limits(tail),
        )
        return pd.DataFrame(columns)

    def _fixed_limits(self, tail: float) -> dict[str, Array]:
        found = np.empty((4, len(self.lines[0])))
        for place, (constant, slope) in enumerate(zip(*self.lines, strict=True)):

            def outside(rho: float, constant: Array = constant, slope: Array = slope) -> float:
                lower, upper = np.quantile(constant - slope * odds(rho), [tail, 1 - tail])
                return float(max(lower - self.claim.limit, self.claim.limit - upper))

            def spare(rho: float, constant: Array = constant, slope: Array = slope) -> float:
                return float(self.claim.true_of(constant - slope * odds(rho)).mean() - self.claim.required)

            found[:, place] = [_first(f, sign) for f in (outside, spare) for sign in (-1, 1)]
        return dict(zip(("interval_down", "interval_up", "required_down", "required_up"), found, strict=True))

    def probability(self, prior: Any) -> pd.DataFrame:
        """Return the probability of the claim under a belief or its distribution function, per moderator point.

        Columns: the moderators; probability and mcse; unlimited, the probability to which it would go with unlimited
        data, were the tipping correlation at its posterior median. What parts that from 0 and 1 is ignorance of rho;
        what parts the two is imprecision of the study.
        """
        value, mcse, unlimited = (np.empty(len(self.points.values)) for _ in range(3))
        for belief, places in self._believed(prior):
            constant, slope = (line[places] for line in self.lines)
            by_draw = claim_probability(constant, slope, self.claim.limit, self.claim.direction, belief)
            value[places], mcse[places] = mean_with_error(by_draw, self.result)
            middle = np.nanmedian(np.where(slope == 0, 0.0, self.crossings[places]), axis=1)
            above = self.claim.direction == "above"
            falls = np.median(slope, axis=1) > 0 if above else np.median(slope, axis=1) < 0
            unlimited[places] = np.where(falls, belief.below(middle), belief.above(middle))
        return pd.DataFrame({**self.points.columns, "probability": value, "mcse": mcse, "unlimited": unlimited})

    def _believed(self, prior: Any) -> list[tuple[Any, list[int]]]:
        """Return each belief with the places of the points that it is about."""
        if not isinstance(prior, ByGroup):
            belief = _DistributionFunction(prior) if callable(prior) else coerce(prior)
            return [(belief, list(range(len(self.points.values))))]
        if not isinstance(self.result, GroupedResult):
            raise ArgumentError("probability: a ByGroup needs a fit made with rho=ByGroup(…), study.fit(rho=…)")
        groups = self.result.groups_of(self.points)
        if lacking := [level for level in groups if level not in prior.levels]:
            raise ArgumentError(f"probability: the ByGroup has no belief for {', '.join(map(repr, lacking))}")
        return [(prior.of(level), places) for level, places in groups.items()]

    def curve(self, moderator: str, values: Sequence[Any] | None = None) -> pd.DataFrame:
        """Return the tipping correlation along a moderator: its values, median, lower and upper."""
        observed = self.result.observed
        if values is None:
            column = observed.frame.get(moderator)
            if column is None or not np.issubdtype(np.asarray(column).dtype, np.number):
                raise ArgumentError(
                    f"curve: moderator={moderator!r} is not a numeric column of this study; give values=[…]"
                )
            values = np.linspace(*observed.span(moderator), 41).tolist()
        fixed = dict(self.points.scalars)
        along = tipping(self.result, {**fixed, moderator: list(values)}, self.claim, self.ci_prob)
        return along.table


class _DistributionFunction:
    """A plain continuous distribution function as a belief."""

    def __init__(self, cdf: Callable[[Array], Any]) -> None:
        self.cdf = cdf

    def below(self, x: Array) -> Array:
        values = np.asarray(self.cdf(x), dtype=float)
        if values.shape != np.shape(x) or not np.all((values >= 0) & (values <= 1)):
            raise ArgumentError("probability: the distribution function must return a value in [0, 1] for every rho")
        return values

    def above(self, x: Array) -> Array:
        return 1 - self.below(x)


def _first(function: Callable[[float], float], sign: int) -> float:
    """Return where, going from 0 in the direction of `sign`, the function first falls to zero or below."""
    if function(0.0) <= 0:
        return 0.0
    before = 0.0
    for rho in sign * STEPS:
        if function(rho) <= 0:
            return float(brentq(function, before, rho, xtol=1e-6))
        before = rho
    return float("nan")


def tipping(result: FitResult, at: Any = None, claim: Claim | None = None, ci_prob: float = 0.95) -> TippingResult:
    """Return the tipping distribution of a claim; see ``Fit.tipping``."""
    if result.joint:
        raise FitError(
            "the data inform rho in this fit, so no single set of draws serves every rho and the tipping "
            "distribution does not exist; use fit.rho_grid() or fit.compare(), which sample again for each belief"
        )
    stated = as_claim(claim)
    if stated.effect == "total":
        raise ArgumentError("claim: the total effect does not depend on rho, so nothing tips it")
    chosen = points(result.observed, at)
    return TippingResult(result, stated, chosen, result.contrasts(chosen), checked_width(ci_prob))
