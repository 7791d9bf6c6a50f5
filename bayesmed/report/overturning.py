"""What would change the conclusion: fixed rho, tipping correlations, yardsticks, and sets of beliefs."""

from collections.abc import Iterator

import numpy as np

from bayesmed.conclusions.summary import RHO_GRID
from bayesmed.conclusions.tipping import CAUTION
from bayesmed.conclusions.words import listed, number_text, point_text, probability_text
from bayesmed.report.blocks import Block, Bullets, Figure, Grid, Sub, Words, cells, said
from bayesmed.report.findings import ANY_WITHIN, Findings
from bayesmed.report.limits import Reach
from bayesmed.report.opening import where

BRIEF_GRID = (-0.6, -0.3, -0.1, 0.0, 0.1, 0.2, 0.3, 0.4, 0.6)


def overturning(findings: Findings, figures: tuple[Figure, ...]) -> Iterator[Block]:
    """Yield what rho stands for, which of its values would change the answer, and how likely they are."""
    comparison, observed = findings.comparison, findings.result.observed
    claim = comparison.claim
    m, y = observed.mediator_name, observed.outcome_name
    yield said(
        f"rho is 0 if nothing that drives both {m} and {y} was left out. It is positive if what was left out "
        "pushes both the same way, negative if it pushes them apart. One unmeasured cause that explains a "
        f"share A of what is left unexplained of {m} and a share B of what is left unexplained of {y} makes "
        "a rho of √(A·B) in size: 0.3 takes a cause that explains 30 % of each, or 10 % of one and 90 % of "
        "the other. Several causes may cancel, so that for them √(A·B) is the most there can be."
    )
    yield from figures
    effect = claim.effect.replace("_", " ")
    yield Bullets(
        tuple(
            (f"{where(point)} {_reach_words(reach, effect, comparison.ci_prob, claim.limit)}",)
            for point, reach in zip(comparison.points.values, findings.reaches, strict=True)
        )
    )
    yield _brief_grid(findings, effect)
    yield from _tipping(findings)
    yield from _yardsticks(findings)
    yield from _any_belief(findings)


def _tipping(findings: Findings) -> Iterator[Block]:
    if findings.tipping is None:
        return
    comparison = findings.comparison
    yield Sub("The rho at which the claim tips")
    yield said(
        f"Each posterior draw crosses {comparison.claim.limit:g} at a rho of its own. Half of them do so below the "
        f"median, and {100 * comparison.ci_prob:g} % within the interval."
    )
    rows = zip(comparison.points.values, findings.tipping.table.iterrows(), strict=True)
    yield Grid(
        ("where", "median rho", "interval", "draws that cross beyond ±0.9, or nowhere"),
        tuple(
            cells(
                where(point),
                rho_text(row["median"]),
                f"{rho_text(row['lower'])} to {rho_text(row['upper'])}",
                probability_text(row["outside"]),
            )
            for point, (_, row) in rows
        ),
        "Tipping correlations",
    )
    yield said(CAUTION)


def _yardsticks(findings: Findings) -> Iterator[Block]:
    found = findings.yardsticks
    if found is None:
        return
    yield Sub("Unmeasured causes beside measured covariates")
    yield said(
        "What rho would a cause nobody measured leave, were it so many times as strong as a covariate that was "
        "measured? That says something of plausibility only as far as the covariates are those that matter."
    )
    yield Grid(
        ("covariate", "times as strong", "rho it would leave", "95 % of draws"),
        tuple(
            cells(
                str(row["covariate"]),
                f"{row['strength']:g}",
                rho_text(row["rho"]),
                f"{rho_text(row['lower'])} to {rho_text(row['upper'])}",
            )
            for _, row in found.table.iterrows()
        ),
        "Yardsticks",
    )
    yield Bullets(tuple((sentence,) for sentence in found.sentences))


def _any_belief(findings: Findings) -> Iterator[Block]:
    if findings.envelope is None:
        return
    lower, upper = ANY_WITHIN
    yield Sub("Without any one belief")
    yield said(
        f"Of all beliefs that keep rho between {lower:g} and {upper:g}, whatever their shape, these give the smallest "
        "and the largest probability of the claim. The last column is another thing: the probability that the claim is "
        "true at every rho of that range at once."
    )
    rows = zip(findings.comparison.points.values, findings.envelope.iterrows(), strict=True)
    yield Grid(
        ("where", "smallest", "largest", "true at every rho"),
        tuple(
            cells(
                where(point),
                probability_text(row["lower"], row["lower_mcse"]),
                probability_text(row["upper"], row["upper_mcse"]),
                probability_text(row["all_rho"], row["all_rho_mcse"]),
            )
            for point, (_, row) in rows
        ),
        f"Every belief between {lower:g} and {upper:g}",
    )


def rho_text(rho: float) -> str:
    """Return a correlation in two decimals."""
    return "not defined" if np.isnan(rho) else f"{round(rho, 2) + 0.0:.2f}"


def _reach_words(reach: Reach, effect: str, ci_prob: float, limit: float) -> str:
    width = f"{100 * ci_prob:g} % interval"
    if not reach.clear_at_zero:
        return f"the {width} of the {effect} effect takes in {limit:g} already at rho = 0."
    ends = []
    for side, rho, sign in (("up", reach.up, 1), ("down", reach.down, -1)):
        if rho is None:
            ends.append(f"going {side} it stays clear of it as far as rho = {sign * reach.farthest:g}")
        else:
            ends.append(f"going {side} it first takes it in at rho = {rho_text(rho)}")
    steps = "" if reach.step is None else f" (looked at in steps of {reach.step:g})"
    return f"the {width} of the {effect} effect is clear of {limit:g} at rho = 0; {listed(ends)}{steps}."


def _brief_grid(findings: Findings, effect: str) -> Grid:
    claim, points = findings.comparison.claim, findings.comparison.points.values
    claimed = findings.grid[findings.grid["effect"] == claim.effect]
    rows: list[tuple[Words, ...]] = []
    for rho in (rho for rho in BRIEF_GRID if rho in RHO_GRID):
        at_rho = claimed[claimed["rho"] == rho]
        shown = [
            f"{number_text(row['mean'])} ({number_text(row['lower'])} to {number_text(row['upper'])})"
            for _, row in at_rho.iterrows()
        ]
        rows.append(cells(f"{rho:g}", *shown))
    caption = f"The {effect} effect at some fixed values of rho (all of them are in rho_grid.csv)"
    return Grid(("rho", *(point_text(point) for point in points)), tuple(rows), caption)
