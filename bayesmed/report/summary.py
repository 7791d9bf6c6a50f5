"""The summary page, report.md: question, answer, which rho would undo it, how it was done, cautions."""

import json
from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.summary import RHO_GRID
from bayesmed.conclusions.tipping import CAUTION
from bayesmed.conclusions.words import listed, number_text, point_text, probability_text
from bayesmed.fit.coefficients import SIGMA_LOG_SD, WIDTH
from bayesmed.fit.diagnose import LARGEST_RHAT, LEAST_ESS
from bayesmed.fit.informants import informants
from bayesmed.priors import Coefficients
from bayesmed.report.assumptions import CAUTIONS, assumptions
from bayesmed.report.findings import Findings
from bayesmed.report.limits import Reach
from bayesmed.report.markdown import bullets, code, plain, table

BRIEF_GRID = (-0.6, -0.3, -0.1, 0.0, 0.1, 0.2, 0.3, 0.4, 0.6)
PICTURE = "effect_by_rho.png"


def summary_page(findings: Findings) -> str:
    """Return report.md."""
    sections = (
        f"# {plain(findings.title)}",
        *_question(findings),
        *_answer(findings),
        *_fixed_rho(findings),
        *_method(findings),
        "## What is taken for granted",
        bullets(plain(sentence) for sentence in assumptions(findings.result.observed)),
        "## What this page is not",
        bullets(CAUTIONS),
        *_again(findings),
    )
    return "\n\n".join(sections) + "\n"


def _question(findings: Findings) -> Iterator[str]:
    observed, claim = findings.result.observed, findings.comparison.claim
    low, high = observed.contrast
    yield "## The question"
    yield (
        f"How much of the effect of {plain(observed.exposure)} ({plain(f'{low} → {high}')}) on "
        f"{plain(observed.outcome_name)} runs through {plain(observed.mediator_name)}? The claim put to the "
        f"test is: **{plain(str(claim))}**, in units of {plain(observed.outcome_name)}. It is said to hold "
        f"where its probability is {claim.required:g} or more, and to be too close to call within two Monte "
        "Carlo errors of that."
    )
    rows = observed.rows
    if observed.published is not None:
        yield f"The study is known by its published figures alone (n = {rows.given}): no row was seen."
        return
    left_out = f"; {rows.dropped} were left out for missing values" if rows.dropped else ""
    yield f"The data have {rows.given} rows, of which {rows.used} are used{left_out}."


def _answer(findings: Findings) -> Iterator[str]:
    comparison = findings.comparison
    observed, count = findings.result.observed, len(comparison.points.values)
    yield "## The answer under each belief"
    yield (
        f"Causes of both {plain(observed.mediator_name)} and {plain(observed.outcome_name)} that nobody "
        "measured leave a correlation, called rho, between what the two equations leave unexplained. "
        + (
            "Here formulas or priors let the data say something about rho, on an assumption (see below)."
            if findings.result.joint
            else "The data cannot tell its size, so the answer depends on what is believed about it."
        )
    )
    if not findings.own_beliefs:
        yield "No beliefs were given; the package's documented default set stands in."
    yield "\n".join(f"- {plain(sentence)}" for sentence in comparison.shifts)
    for k, point in enumerate(comparison.points.values):
        rows = comparison.claimed.iloc[k::count]
        yield f"**{plain(_where(point))}**"
        width = f"{100 * comparison.ci_prob:g} % interval"
        yield table(
            ("belief about rho", "mean", width, "probability", "claim"),
            [_belief_row(row) for _, row in rows.iterrows()],
        )
        if comparison.claim.effect != "total":
            yield _total(findings, k)


def _belief_row(row: "pd.Series[float]") -> tuple[str, ...]:
    return (
        plain(str(row["prior"])),
        number_text(row["mean"]),
        f"{number_text(row['lower'])} to {number_text(row['upper'])}",
        probability_text(row["probability"], row["mcse"]),
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


def _fixed_rho(findings: Findings) -> Iterator[str]:
    comparison, observed = findings.comparison, findings.result.observed
    claim = comparison.claim
    m, y = plain(observed.mediator_name), plain(observed.outcome_name)
    yield "## What rho stands for, and which rho would change the answer"
    yield (
        f"rho is 0 if nothing that drives both {m} and {y} was left out. It is positive if what was left out "
        "pushes both the same way, negative if it pushes them apart. One unmeasured cause that explains a "
        f"share A of what is left unexplained of {m} and a share B of what is left unexplained of {y} makes "
        "a rho of √(A·B) in size: 0.3 takes a cause that explains 30 % of each, or 10 % of one and 90 % of "
        "the other. Several causes may cancel, so that for them √(A·B) is the most there can be."
    )
    yield f"![The effect at fixed rho, with the beliefs about rho; in numbers in rho_grid.csv]({PICTURE})"
    effect = claim.effect.replace("_", " ")
    yield bullets(
        f"{plain(_where(point))} {_reach_words(reach, effect, comparison.ci_prob, claim.limit)}"
        for point, reach in zip(comparison.points.values, findings.reaches, strict=True)
    )
    yield f"The {effect} effect at some fixed values of rho (all of them are in `rho_grid.csv`):"
    yield _brief_grid(findings)
    if findings.tipping is not None:
        yield (
            f"Each posterior draw crosses {claim.limit:g} at a rho of its own. Half of them do so below the "
            f"median, and {100 * comparison.ci_prob:g} % within the interval:"
        )
        yield table(
            ("where", "median rho", "interval", "draws that cross beyond ±0.9, or nowhere"),
            [
                (
                    plain(_where(point)),
                    _rho_text(row["median"]),
                    f"{_rho_text(row['lower'])} to {_rho_text(row['upper'])}",
                    probability_text(row["outside"]),
                )
                for point, (_, row) in zip(comparison.points.values, findings.tipping.table.iterrows(), strict=True)
            ],
        )
        yield CAUTION


def _where(point: Mapping[str, Any]) -> str:
    return f"At {point_text(point)}" if point else "Averaged over all rows"


def _rho_text(rho: float) -> str:
    return "not defined" if np.isnan(rho) else f"{rho:.2f}"


def _reach_words(reach: Reach, effect: str, ci_prob: float, limit: float) -> str:
    width = f"{100 * ci_prob:g} % interval"
    if not reach.clear_at_zero:
        return f"the {width} of the {effect} effect takes in {limit:g} already at rho = 0."
    ends = []
    for side, rho, sign in (("up", reach.up, 1), ("down", reach.down, -1)):
        if rho is None:
            ends.append(f"going {side} it stays clear of it as far as rho = {sign * reach.farthest:g}")
        else:
            ends.append(f"going {side} it first takes it in at rho = {rho:g}")
    return (
        f"the {width} of the {effect} effect is clear of {limit:g} at rho = 0; {listed(ends)} "
        f"(looked at in steps of {reach.step:g})."
    )


def _brief_grid(findings: Findings) -> str:
    claim, points = findings.comparison.claim, findings.comparison.points.values
    claimed = findings.grid[findings.grid["effect"] == claim.effect]
    shown = [rho for rho in BRIEF_GRID if rho in RHO_GRID]
    rows = []
    for rho in shown:
        at_rho = claimed[claimed["rho"] == rho]
        cells = [
            f"{number_text(row['mean'])} ({number_text(row['lower'])} to {number_text(row['upper'])})"
            for _, row in at_rho.iterrows()
        ]
        rows.append((f"{rho:g}", *cells))
    return table(("rho", *(plain(point_text(point)) for point in points)), rows)


def _method(findings: Findings) -> Iterator[str]:
    result, comparison = findings.result, findings.comparison
    observed, settings = result.observed, result.settings
    yield "## How it was done"
    yield (
        f"Two linear equations with normal errors: {code(observed.mediator_formula)} and "
        f"{code(observed.outcome_formula)}. The indirect effect is the total natural indirect effect: what "
        f"the change of {plain(observed.mediator_name)} that {plain(observed.exposure)} brings about does to "
        f"{plain(observed.outcome_name)}, {plain(observed.exposure)} being held at its second value. The "
        "direct effect is the rest of the total. At a moderator value, every row is given that value and the "
        "rows are averaged."
    )
    if result.joint:
        through = informants(observed, result.statistics, result.coefficients)
        held = "was sampled with the coefficients" if settings.learn else "was held at its prior all the same"
        yield f"rho is informed through {plain(through) or 'a model of your own'}, and {held}."
        if comparison.routes:
            yield "How each belief was brought to the draws:"
            yield bullets(f"{plain(label)}: {plain(route)}" for label, route in comparison.routes.items())
    else:
        yield (
            "The likelihood is silent on rho, and the coefficients' prior does not involve it, so that one "
            "set of draws serves every belief: probabilities come from each belief's distribution function, "
            "without drawing rho."
        )
    if settings.method == "exact":
        yield (
            f"{settings.chains * settings.draws} independent draws were made from the posterior under the "
            "reference prior (flat in the coefficients and in the logarithms of the two residual SDs). They "
            "are independent, so no convergence is in question."
        )
    elif settings.method == "nuts":
        yield (
            f"{settings.chains} chains of {settings.draws} draws, after {settings.tune} to adapt, were made "
            "with the No-U-Turn sampler (PyMC, nutpie). "
            + (
                "All coefficients and residual SDs have the default prior: "
                if result.coefficients == Coefficients()
                else f"Priors were given as {code(repr(result.coefficients))}; all others are the default: "
            )
            + f"flat for the mean level, normal around zero with an SD of {WIDTH:g} √n SDs of the response "
            "along each direction of the centred terms, which no change of units moves, and log-normal about "
            f"the response's SD for a residual SD, with {SIGMA_LOG_SD:g} as the SD of its logarithm."
        )
    else:
        yield "The draws were adopted from a model of the user's own."
    yield _diagnostics(findings)
    yield "The beliefs, in the order of the tables, the first being the reference:"
    yield bullets(f"{plain(label)}: {code(repr(prior))}" for label, prior in comparison.beliefs.items())
    yield "The audit of the data before the fit:"
    marks = {"note": "", "attention": "**Attention.** ", "stops the fit": "**Stops the fit.** "}
    yield bullets(
        f"{marks[finding.level]}{plain(finding.about)}: {plain(finding.text)}" for finding in findings.audit.findings
    )
    if findings.warnings:
        yield "Warnings while concluding:"
        yield bullets(plain(words) for words in findings.warnings)


def _diagnostics(findings: Findings) -> str:
    if findings.complaints:
        return f"**Diagnostics outside their bounds:** {plain('; '.join(findings.complaints))}."
    if findings.result.independent:
        return "The Monte Carlo error of every probability stands in `comparison.csv`."
    return (
        f"No diagnostic is outside its bound: no divergent transitions, r-hat at most {LARGEST_RHAT:g} and "
        f"effective sample sizes of at least {LEAST_ESS} for coefficients, residual SDs and effects (bounds "
        "of Vehtari and others 2021, doi:10.1214/20-BA1221). The Monte Carlo error of every probability "
        "stands in `comparison.csv`."
    )


def _again(findings: Findings) -> Iterator[str]:
    attributes = findings.result.tree.attrs
    yield "## To make it again"
    versions = attributes.get("versions")
    named = json.loads(versions) if isinstance(versions, str) else {}
    used = listed(f"{name} {number}" for name, number in named.items())
    yield (
        f"Random seed {findings.result.settings.random_seed}. "
        f"{'Made with ' + used + '. ' if used else ''}The same versions and seed give the same numbers on "
        "the same kind of machine."
    )
