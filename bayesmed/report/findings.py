"""Everything a report says, worked out once from a fit: first the answer, then what may overturn it."""

import warnings
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import pandas as pd

from bayesmed.conclusions.claim import Claim
from bayesmed.conclusions.comparison import ComparisonResult, compare
from bayesmed.conclusions.summary import rho_grid
from bayesmed.core.errors import ArgumentError, BayesmedWarning, warn
from bayesmed.fit.diagnose import complaints_about
from bayesmed.fit.grouped import GroupedResult
from bayesmed.fit.result import FitResult
from bayesmed.priors import AnyOn, panel
from bayesmed.study.audit import Audit, audit

if TYPE_CHECKING:
    from bayesmed.conclusions.tipping import TippingResult
    from bayesmed.conclusions.yardsticks import YardsticksResult
    from bayesmed.report.limits import Reach

ANY_WITHIN = (-0.3, 0.3)
"""The range of rho over which the smallest and largest probability are told, whatever the belief."""


@dataclass(frozen=True, eq=False)
class Answer:
    """What is told first, while the rest of a report is still to be worked out.

    Attributes
    ----------
    title : str
    result : FitResult
    audit : Audit
    comparison : ComparisonResult
        Under every belief; holds claim, moderator points and interval width too.
    own_beliefs : bool
        False where the documented default set of beliefs stands in.
    at : dict, optional
        Moderator points as they were asked for.
    warned : dict of str to Warning
        What was warned of so far.
    """

    title: str
    result: FitResult
    audit: Audit
    comparison: ComparisonResult
    own_beliefs: bool
    at: Any
    warned: dict[str, Warning]


@dataclass(frozen=True, eq=False)
class Findings(Answer):
    """What a report says: the answer, and what else was worked out.

    Attributes
    ----------
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
    """

    grid: pd.DataFrame
    reaches: "tuple[Reach, ...]"
    tipping: "TippingResult | None"
    yardsticks: "YardsticksResult | None"
    envelope: pd.DataFrame | None
    complaints: list[str]

    @property
    def warnings(self) -> tuple[str, ...]:
        """What the package warned of while concluding, each once."""
        return tuple(words for words, message in self.warned.items() if isinstance(message, BayesmedWarning))


def find(
    result: FitResult,
    beliefs: Mapping[str, Any] | None = None,
    at: Any = None,
    claim: Claim | None = None,
    ci_prob: float = 0.95,
    title: str | None = None,
) -> Findings:
    """Work out what a report says; parameters are those of :func:`answer`."""
    return completed(answer(result, beliefs, at, claim, ci_prob, title))


def answer(
    result: FitResult,
    beliefs: Mapping[str, Any] | None = None,
    at: Any = None,
    claim: Claim | None = None,
    ci_prob: float = 0.95,
    title: str | None = None,
) -> Answer:
    """Compare the beliefs, which is what a reader waits for.

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
    warned: dict[str, Warning] = {}
    with _each_warning_once(warned):
        comparison = compare(result, usual_beliefs(result) if beliefs is None else beliefs, at, claim, ci_prob)
    return Answer(
        title=title or f"{observed.exposure} → {observed.mediator_name} → {observed.outcome_name}",
        result=result,
        audit=audit(observed),
        comparison=comparison,
        own_beliefs=beliefs is not None,
        at=at,
        warned=warned,
    )


def completed(first: Answer) -> Findings:
    """Work out what else a report says: fixed rho, tipping, yardsticks, envelope, diagnostics."""
    # Here, so that the answer is not kept waiting for them.
    from bayesmed.conclusions.envelope import envelope
    from bayesmed.conclusions.tipping import tipping
    from bayesmed.report.limits import reaches

    result, comparison, at = first.result, first.comparison, first.at
    claim, ci_prob = comparison.claim, comparison.ci_prob
    tips = not result.joint and claim.effect != "total"
    told = vars(first) | {"warned": dict(first.warned)}
    with _each_warning_once(told["warned"]):
        grid = rho_grid(result, None, at, claim, ci_prob)
        found_tipping = tipping(result, at, claim, ci_prob) if tips else None
        return Findings(
            **told,
            grid=grid,
            reaches=reaches(claim, grid, found_tipping),
            tipping=found_tipping,
            yardsticks=_yardsticks(result, at, claim) if tips else None,
            envelope=envelope(result, AnyOn(*ANY_WITHIN), at, claim) if tips else None,
            complaints=complaints_about(result),
        )


@contextmanager
def _each_warning_once(warned: dict[str, Warning]) -> Iterator[None]:
    """Let each warning that is not among those warned of through once, and put it there.

    Each conclusion warns of the same points again: once is enough, on the page and on the screen.
    """
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        yield
    for one in caught:
        words = str(one.message)
        if words not in warned:
            warned[words] = one.message if isinstance(one.message, Warning) else one.category(one.message)
            warn(warned[words])


def usual_beliefs(result: FitResult) -> dict[str, Any]:
    """Return the beliefs of a report that names none: the fit's own, then the documented default set."""
    own = {} if result.belief is None else {"the belief of this fit": result.belief}
    return {**own, **panel()}


def _yardsticks(result: FitResult, at: Any, claim: Claim) -> "YardsticksResult | None":
    from bayesmed.conclusions.yardsticks import yardsticks

    if isinstance(result, GroupedResult):
        return None
    try:
        return yardsticks(result, at=at, claim=claim)
    except ArgumentError:
        # No covariate stands in terms of its own.
        return None
