"""How far the probability of a claim can move over a set of beliefs, and under which members it goes furthest."""

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.accuracy import mean_with_error
from bayesmed.conclusions.claim import Claim, as_claim
from bayesmed.core.errors import FitError
from bayesmed.core.mapping import Array
from bayesmed.core.steps import Steps, claim_steps, holds_throughout
from bayesmed.core.tipping import claim_probability
from bayesmed.fit.result import FitResult
from bayesmed.priors.prior import Prior
from bayesmed.priors.prior_set import PriorSet, as_set
from bayesmed.study.points import Points, points


@dataclass(frozen=True, eq=False)
class ClaimLines:
    """A claim's effect as a line in the odds of rho, per moderator point and draw, judged under any belief.

    Attributes
    ----------
    result : FitResult
    claim : Claim
    points : Points
    constant, slope : array, shape (point, draw)
    """

    result: FitResult
    claim: Claim
    points: Points
    constant: Array
    slope: Array

    @cached_property
    def steps(self) -> tuple[Steps, ...]:
        """The probability of the claim as a function of rho, one to a moderator point."""
        limit, direction = self.claim.limit, self.claim.direction
        return tuple(claim_steps(c, s, limit, direction) for c, s in zip(self.constant, self.slope, strict=True))

    def by_draw(self, point: int, belief: Prior) -> Array:
        """Return the belief's probability of the claim at one moderator point, shape (draw,)."""
        return claim_probability(
            self.constant[point], self.slope[point], self.claim.limit, self.claim.direction, belief
        )


def claim_lines(result: FitResult, at: Any, claim: Claim | None, asker: str) -> ClaimLines:
    """Return the lines of a claim; an error of `asker` where the draws do not serve every rho."""
    if result.joint:
        raise FitError(
            f"{asker}: the data inform rho in this fit, so no single set of draws serves every belief; use "
            "fit.compare() with chosen priors, or fit.rho_grid(), which sample again where they must"
        )
    stated, chosen = as_claim(claim), points(result.observed, at)
    return ClaimLines(result, stated, chosen, *result.contrasts(chosen).line(stated.effect))


def envelope(result: FitResult, set_of_priors: Any, at: Any = None, claim: Claim | None = None) -> pd.DataFrame:
    """Return the smallest and the largest probability of a claim over a set of beliefs about rho.

    Each is the probability under one member of the set (see :func:`worst_case`), found exactly for the draws at
    hand, by the same route as every other probability. Where that member is a choice among many that are nearly as
    extreme, the search leans to the noise of the draws: `lower` is then biased downwards and `upper` upwards, by an
    amount of the order of the Monte Carlo error beside them. More draws lessen both.

    Parameters
    ----------
    result : FitResult
    set_of_priors : PriorSet
        AnyOn, Statements, Contaminated, UnimodalAt or Nearby.
    at : dict, optional
        Moderator values.
    claim : Claim, optional

    Returns
    -------
    pandas.DataFrame
        One row per moderator point. The moderators;

        lower, upper, lower_mcse, upper_mcse
            Smallest and largest probability of the claim, and their Monte Carlo errors under the members that
            attain them.
        mean_lower, mean_upper
            Smallest and largest posterior mean of the effect, in units of the outcome. They are infinite on a
            side on which the set reaches ±1 (but for UnimodalAt, whose members thin out towards ±1, and for
            Statements that keep all mass away), and nan where a base has no mean itself.
        all_rho, all_rho_mcse
            The probability that the effect is beyond the claim's limit for *all* rho at once, from the smallest to
            the largest that the set's bounds (or its base) allow: the probability of the identified set.
            It is not the claim's probability under any belief, and never above `lower`: it counts the draws that
            no rho of the range overturns, where `lower` lets one belief face all draws.

    Raises
    ------
    PriorError
        If `set_of_priors` is not a set of priors.
    FitError
        If the data inform rho in this fit.
    """
    members = as_set(set_of_priors)
    lines = claim_lines(result, at, claim, "envelope")
    columns: dict[str, Any] = dict(lines.points.columns)
    for name, find in (("lower", members.lowest), ("upper", members.highest)):
        found = [lines.by_draw(k, find(steps)) for k, steps in enumerate(lines.steps)]
        columns[name], columns[f"{name}_mcse"] = mean_with_error(np.stack(found), result)
    columns["mean_lower"], columns["mean_upper"] = _means(lines, members)
    throughout = holds_throughout(
        lines.constant, lines.slope, lines.claim.limit, lines.claim.direction, *members.support()
    )
    columns["all_rho"], columns["all_rho_mcse"] = mean_with_error(throughout, result)
    order = ("lower", "upper", "lower_mcse", "upper_mcse", "mean_lower", "mean_upper", "all_rho", "all_rho_mcse")
    return pd.DataFrame(columns)[[*lines.points.columns, *order]]


def worst_case(result: FitResult, set_of_priors: Any, at: Any = None, claim: Claim | None = None) -> pd.DataFrame:
    """Return the member of a set of beliefs under which a claim is least probable, per moderator point.

    Parameters
    ----------
    result, set_of_priors, at, claim
        As for :func:`envelope`.

    Returns
    -------
    pandas.DataFrame
        The moderators; prior, a belief that can be used wherever one is asked for; probability and mcse. The
        member under which a claim is most probable is the worst case of the opposite claim.
    """
    members = as_set(set_of_priors)
    lines = claim_lines(result, at, claim, "worst_case")
    found = [members.lowest(steps) for steps in lines.steps]
    probability, mcse = mean_with_error(np.stack([lines.by_draw(k, p) for k, p in enumerate(found)]), result)
    table = pd.DataFrame(lines.points.columns, index=range(len(found)))
    table["prior"] = pd.Series(found, dtype=object)
    return table.assign(probability=probability, mcse=mcse)


def _means(lines: ClaimLines, members: PriorSet) -> tuple[Array, Array]:
    """Return the smallest and the largest mean of the effect, which is a line in E[r]."""
    constant, slope = lines.constant.mean(axis=1), lines.slope.mean(axis=1)
    if not np.any(lines.slope):
        return constant, constant
    ends = members.odds_range()
    with np.errstate(invalid="ignore"):
        means = np.stack([np.where(slope == 0, constant, constant - slope * end) for end in ends])
    return means.min(axis=0), means.max(axis=0)
