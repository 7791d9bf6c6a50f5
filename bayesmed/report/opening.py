"""The first pages of a report: the question, the answer in three sentences, and the answer under each belief."""

from collections.abc import Iterator, Mapping
from typing import Any

import pandas as pd

from bayesmed.conclusions.claim import CLOSE, HOLDS
from bayesmed.conclusions.words import listed, number_text, point_text, probability_text
from bayesmed.report.blocks import Block, Bullets, Grid, Live, Paragraph, Strong, Sub, cells, said
from bayesmed.report.findings import Findings
from bayesmed.report.live import stored_draws, why_not_live

FEW_POINTS = 4
"""So many moderator points are named one by one in the answer; more are counted."""


def question_and_answer(findings: Findings) -> Iterator[Block]:
    """Yield the question and the answer in three sentences, then what the data were."""
    observed, claim = findings.result.observed, findings.comparison.claim
    low, high = observed.contrast
    yield Paragraph(
        (
            f"How much of the effect of {observed.exposure} ({low} → {high}) on {observed.outcome_name} runs through "
            f"{observed.mediator_name}, and is the ",
            Strong(str(claim)),
            f", in units of {observed.outcome_name}, with a probability of {claim.required:g} or more? ",
            _under_the_first(findings),
            " ",
            _across(findings),
        ),
        "lead",
    )
    yield said(
        "The claim is said to hold where its probability is as high as required, to fail where it is not, and "
        "to be too "
        "close to call within two Monte Carlo errors of that. ",
        rows_sentence(findings),
    )


def rows_sentence(findings: Findings) -> str:
    """Return the sentence on the rows used."""
    observed = findings.result.observed
    rows = observed.rows
    if observed.published is not None:
        return f"The study is known by its published figures alone (n = {rows.given}): no row was seen."
    left_out = f"; {rows.dropped} were left out for missing values" if rows.dropped else ""
    return f"The data have {rows.given} rows, of which {rows.used} are used{left_out}."


def _under_the_first(findings: Findings) -> str:
    comparison = findings.comparison
    first = next(iter(comparison.beliefs))
    rows = comparison.claimed[comparison.claimed["prior"] == first]
    points = comparison.points.values
    if len(points) > FEW_POINTS:
        count = int((rows["verdict"] == HOLDS).sum())
        least, most = (rows.iloc[k] for k in (rows["probability"].argmin(), rows["probability"].argmax()))
        return (
            f"Under the first belief, “{first}”, the claim holds at {count} of {len(points)} moderator points, its "
            f"probability going from {_shown(least)} to {_shown(most)}."
        )
    by_verdict: dict[str, list[str]] = {}
    for point, (_, row) in zip(points, rows.iterrows(), strict=True):
        by_verdict.setdefault(str(row["verdict"]), []).append(f"{where(point, inside=True)} ({_shown(row)})")
    said_of = listed(f"{_verb(verdict)} {listed(places)}" for verdict, places in by_verdict.items())
    return f"Under the first belief, “{first}”, the claim {said_of}, its probability in brackets."


def _across(findings: Findings) -> str:
    comparison = findings.comparison
    first = next(iter(comparison.beliefs))
    pivot = comparison.claimed.pivot_table(
        index="prior", columns=comparison.claimed.groupby("prior", sort=False).cumcount(), values="verdict",
        aggfunc="first", sort=False,
    )  # fmt: skip
    others = [label for label in comparison.beliefs if label != first]
    if not others:
        return "No other belief was looked at."
    differing = [label for label in others if list(pivot.loc[label]) != list(pivot.loc[first])]
    if not differing:
        return f"No other of the {len(others) + 1} beliefs looked at changes a verdict."
    named = listed(f"“{label}”" for label in differing)
    which = f"Of the {len(others) + 1} beliefs looked at, {named}"
    return (
        f"{which} {'changes' if len(differing) == 1 else 'change'} at least one verdict, so that the answer "
        "rests on which of them is held."
    )


def _verb(verdict: str) -> str:
    return "is too close to call" if verdict == CLOSE else str(verdict)


def _shown(row: "pd.Series[Any]") -> str:
    return probability_text(row["probability"], row["mcse"])


def own_belief(findings: Findings) -> Iterator[Block]:
    """Yield the part that answers to the reader's own belief, or why it is not offered."""
    reason = why_not_live(findings)
    if reason:
        yield said(f"This part is not offered here: {reason}")
        return
    yield said(
        "The data do not tell how large ρ is, so put in what you believe about it. The answer below follows from the "
        "stored draws at once, by the same route as every number of this report; nothing leaves this page."
    )
    yield Live(stored_draws(findings))


def answers(findings: Findings) -> Iterator[Block]:
    """Yield the answer under each belief, a table for each moderator point."""
    comparison = findings.comparison
    observed, count = findings.result.observed, len(comparison.points.values)
    yield said(
        f"Causes of both {observed.mediator_name} and {observed.outcome_name} that nobody measured leave a "
        f"correlation, "
        "called rho (ρ), between what the two equations leave unexplained. "
        + (
            "Here formulas or priors let the data say something about rho, on an assumption (see below)."
            if findings.result.joint
            else "The data cannot tell its size, so the answer depends on what is believed about it."
        )
    )
    if not findings.own_beliefs:
        yield said("No beliefs were given; the package's documented default set stands in.")
    yield Bullets(tuple((sentence,) for sentence in comparison.shifts))
    for k, point in enumerate(comparison.points.values):
        rows = comparison.claimed.iloc[k::count]
        yield Sub(where(point))
        width = f"{100 * comparison.ci_prob:g} % interval"
        yield Grid(
            ("belief about rho", "mean", width, "probability", "claim"),
            tuple(_belief_row(row) for _, row in rows.iterrows()),
            f"{comparison.claim.effect.replace('_', ' ').capitalize()} effect, {where(point, inside=True)}",
        )
        if comparison.claim.effect != "total":
            yield said(_total(findings, k))


def _belief_row(row: "pd.Series[Any]") -> Any:
    return cells(
        str(row["prior"]),
        number_text(row["mean"]),
        f"{number_text(row['lower'])} to {number_text(row['upper'])}",
        _shown(row),
        str(row["verdict"]),
    )


def _total(findings: Findings, k: int) -> str:
    """Return the sentence on the total effect at one moderator point."""
    comparison = findings.comparison
    rows = comparison.table[comparison.table["effect"] == "total"].iloc[k :: len(comparison.points.values)]
    row = rows.iloc[0]
    which = "under the first belief" if findings.result.joint else "does not depend on rho: it"
    return (
        f"The total effect {which} is {number_text(row['mean'])} ({number_text(row['lower'])} to "
        f"{number_text(row['upper'])})."
    )


def where(point: Mapping[str, Any], *, inside: bool = False) -> str:
    """Return "At confidence = 4" or "Averaged over all rows", in small letters inside a sentence."""
    words = f"At {point_text(point)}" if point else "Averaged over all rows"
    return words[0].lower() + words[1:] if inside else words
