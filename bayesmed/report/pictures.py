"""The pictures of a report: every maker stands in one list, and a new picture is one more entry."""

import warnings
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

from bayesmed.core.errors import ExtrapolationWarning
from bayesmed.priors import ByGroup
from bayesmed.report.findings import Findings

if TYPE_CHECKING:
    from bayesmed.plots.picture import Picture


@dataclass(frozen=True)
class Maker:
    """How one picture of a report is made.

    Attributes
    ----------
    name : str
        Of its files, without ending.
    section : {"answers", "overturning", "diagnostics"}
        Where it stands.
    caption : str
    make : callable
        Findings → Picture, or None where there is nothing to draw.
    """

    name: str
    section: Literal["answers", "overturning", "diagnostics"]
    caption: str
    make: "Callable[[Findings], Picture | None]"


def drawn(findings: Findings) -> "dict[str, Picture]":
    """Return name → picture, of those that there are for these findings, in the order of the list."""
    made = {}
    with warnings.catch_warnings():
        # That points lie outside the data was said when they were first used.
        warnings.simplefilter("ignore", ExtrapolationWarning)
        for maker in MAKERS:
            picture = maker.make(findings)
            if picture is not None:
                made[maker.name] = picture
    return made


def _beliefs(findings: Findings) -> "Picture":
    from bayesmed.plots import beliefs

    return beliefs.plot_beliefs(findings.comparison)


def _effect_by_rho(findings: Findings) -> "Picture | None":
    from bayesmed.plots import effect_by_rho

    comparison = findings.comparison
    if _by_group(findings):
        return None
    at: dict[str, Any] = {**{k: list(v) for k, v in comparison.points.dims.items()}, **comparison.points.scalars}
    return effect_by_rho.plot_effect_by_rho(
        findings.result, comparison.beliefs, at, comparison.claim, comparison.ci_prob
    )


def _tipping(findings: Findings) -> "Picture | None":
    from bayesmed.plots import tipping

    if findings.tipping is None or _by_group(findings):
        return None
    return tipping.plot_tipping(findings.tipping, findings.comparison.beliefs)


def _yardsticks(findings: Findings) -> "Picture | None":
    from bayesmed.plots import yardsticks

    if findings.yardsticks is None or findings.yardsticks.table.empty:
        return None
    return yardsticks.plot_yardsticks(findings.yardsticks, findings.tipping)


def _rho(findings: Findings) -> "Picture | None":
    from bayesmed.plots import rho

    if not findings.result.joint or not findings.result.settings.learn or _by_group(findings):
        return None
    return rho.plot_rho(findings.comparison)


def _spread(findings: Findings) -> "Picture | None":
    from bayesmed.plots import checks

    return checks.spread_drawn(findings.audit.spread) if findings.audit.spread else None


def _by_group(findings: Findings) -> bool:
    return any(isinstance(belief, ByGroup) for belief in findings.comparison.beliefs.values())


MAKERS = (
    Maker(
        "claim_by_belief", "answers", "The claim under every belief, and how far it is from what it requires", _beliefs
    ),
    Maker("rho", "answers", "What the data made of each belief about rho", _rho),
    Maker("effect_by_rho", "overturning", "The effect at fixed rho, with the beliefs about rho", _effect_by_rho),
    Maker("tipping", "overturning", "Where the claim tips, above the beliefs about rho", _tipping),
    Maker(
        "yardsticks", "overturning", "Causes as strong as measured covariates, beside where the claim tips", _yardsticks
    ),
    Maker("spread", "diagnostics", "Residual spread by exposure and moderator: one rho for all needs it even", _spread),
)
