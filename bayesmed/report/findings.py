"""Everything a report says, worked out once from a fit: audit, comparison, fixed rho, tipping, yardsticks."""

import dataclasses
import warnings
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import pandas as pd

from bayesmed.conclusions.claim import Claim
from bayesmed.conclusions.comparison import ComparisonResult, compare
from bayesmed.conclusions.envelope import envelope
from bayesmed.conclusions.summary import rho_grid
from bayesmed.conclusions.tipping import TippingResult, tipping
from bayesmed.conclusions.yardsticks import YardsticksResult, yardsticks
from bayesmed.core.errors import ArgumentError, BayesmedWarning
from bayesmed.fit.diagnose import complaints_about
from bayesmed.fit.grouped import GroupedResult
from bayesmed.fit.result import FitResult
from bayesmed.priors import AnyOn, panel
from bayesmed.report.limits import Reach, reaches
from bayesmed.study.audit import Audit, audit

ANY_WITHIN = (-0.3, 0.3)
"""The range of rho over which the smallest and largest probability are told, whatever the belief."""


@dataclass(frozen=True, eq=False)
class Findings:
    """What a report says.

    Attributes
    ----------
    title : str
    result : FitResult
    audit : Audit
    comparison : ComparisonResult
        Under every belief; holds claim, moderator points and interval width too.
    own_beliefs : bool
        False where the documented default set of beliefs stands in.
    grid : pandas.DataFrame
        Of ``rho_grid``: every effect at fixed correlations.
    reaches : tuple of Reach
        By moderator point, from which correlation on the interval takes in the limit.
    tipping : TippingResult or None
        None where no correlation tips the claim (the total effect), or the data inform rho.
    yardsticks : YardsticksResult or None
        None where there is no tipping, no covariate to compare with, or a rho for each group.
    envelope : pandas.DataFrame or None
        Smallest and largest probability over all beliefs within ``ANY_WITHIN``; None where there is no tipping.
    complaints : list of str
        Diagnostics outside their bounds.
    warnings : tuple of str
        What was warned of while concluding, each once.
    """

    title: str
    result: FitResult
    audit: Audit
    comparison: ComparisonResult
    own_beliefs: bool
    grid: pd.DataFrame
    reaches: tuple[Reach, ...]
    tipping: TippingResult | None
    yardsticks: YardsticksResult | None
    envelope: pd.DataFrame | None
    complaints: list[str]
    warnings: tuple[str, ...]


def find(
    result: FitResult,
    beliefs: Mapping[str, Any] | None = None,
    at: Any = None,
    claim: Claim | None = None,
    ci_prob: float = 0.95,
    title: str | None = None,
) -> Findings:
    """Work out what a report says.

    Parameters
    ----------
    result : FitResult
    beliefs : dict of str to prior, optional
        The first one is the reference. If left out: the fit's own belief if it has one, then
        ``bayesmed.priors.panel()``.
    at : dict, optional
        Moderator points; their defaults if left out.
    claim : Claim, optional
        ``Claim("indirect", above=0)`` if left out.
    ci_prob : float
    title : str, optional
        Made of the study's columns if left out.

    Raises
    ------
    ArgumentError
        If a belief, point or claim is not allowed.
    """
    observed = result.observed
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        comparison = compare(result, usual_beliefs(result) if beliefs is None else beliefs, at, claim, ci_prob)
        tips = not result.joint and comparison.claim.effect != "total"
        grid = rho_grid(result, None, at, comparison.claim, ci_prob)
        found = Findings(
            title=title or f"{observed.exposure} → {observed.mediator_name} → {observed.outcome_name}",
            result=result,
            audit=audit(observed),
            comparison=comparison,
            own_beliefs=beliefs is not None,
            grid=grid,
            reaches=reaches(result, comparison.points, comparison.claim, ci_prob, grid),
            tipping=tipping(result, at, comparison.claim, ci_prob) if tips else None,
            yardsticks=_yardsticks(result, at, comparison.claim) if tips else None,
            envelope=envelope(result, AnyOn(*ANY_WITHIN), at, comparison.claim) if tips else None,
            complaints=complaints_about(result),
            warnings=(),
        )
    # Each conclusion warns of the same points again: once is enough, on the page and on the screen.
    once = {str(one.message): one.message for one in caught}
    for message in once.values():
        warnings.warn(message, stacklevel=2)
    ours = (words for words, message in once.items() if isinstance(message, BayesmedWarning))
    return dataclasses.replace(found, warnings=tuple(ours))


def usual_beliefs(result: FitResult) -> dict[str, Any]:
    """Return the beliefs of a report that names none: the fit's own, then the documented default set."""
    own = {} if result.belief is None else {"the belief of this fit": result.belief}
    return {**own, **panel()}


def _yardsticks(result: FitResult, at: Any, claim: Claim) -> YardsticksResult | None:
    if isinstance(result, GroupedResult):
        return None
    try:
        return yardsticks(result, at=at, claim=claim)
    except ArgumentError:
        # No covariate stands in terms of its own.
        return None
