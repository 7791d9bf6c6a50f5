"""How a report's numbers were made: equations, draws, diagnostics, beliefs, the audit, and how to make them again."""

import json
from collections.abc import Iterator
from typing import Any

from bayesmed.conclusions.words import listed
from bayesmed.fit.coefficients import SIGMA_LOG_SD, WIDTH
from bayesmed.fit.diagnose import LARGEST_RHAT, LEAST_ESS, rank_diagnostics
from bayesmed.fit.informants import informants
from bayesmed.priors import Coefficients
from bayesmed.report.blocks import Block, Bullets, Code, Figure, Grid, Paragraph, Strong, Sub, Words, cells, said
from bayesmed.report.findings import Findings


def how_it_was_done(findings: Findings) -> Iterator[Block]:
    """Yield equations, effects, what informs rho, the draws and the beliefs."""
    result, comparison = findings.result, findings.comparison
    observed, settings = result.observed, result.settings
    x, m, y = observed.exposure, observed.mediator_name, observed.outcome_name
    yield said(
        "Two linear equations with normal errors: ",
        Code(observed.mediator_formula),
        " and ",
        Code(observed.outcome_formula),
        ". The indirect effect is the total natural indirect effect: what the change of "
        f"{m} that {x} brings about does to {y}, {x} being held at its second value. The "
        "direct effect is the rest of the total. At a moderator value, every row is given that value and the "
        "rows are averaged.",
    )
    if result.joint:
        through = informants(observed, result.statistics, result.coefficients)
        held = "was sampled with the coefficients" if settings.learn else "was held at its prior all the same"
        yield said(f"rho is informed through {through or 'a model of your own'}, and {held}.")
        if comparison.routes:
            yield said("How each belief was brought to the draws:")
            yield Bullets(tuple((f"{label}: {route}",) for label, route in comparison.routes.items()))
    else:
        yield said(
            "The likelihood is silent on rho, and the coefficients' prior does not involve it, so that one "
            "set of draws serves every belief: probabilities come from each belief's distribution function, "
            "without drawing rho."
        )
    yield draws_made(findings)
    yield said("The beliefs, in the order of the tables, the first being the reference:")
    yield Bullets(tuple((f"{label}: ", Code(repr(prior))) for label, prior in comparison.beliefs.items()))


def draws_made(findings: Findings) -> Paragraph:
    """Return how the draws were made."""
    result, settings = findings.result, findings.result.settings
    if settings.method == "exact":
        return said(
            f"{settings.chains * settings.draws} independent draws were made from the posterior under the "
            "reference prior (flat in the coefficients and in the logarithms of the two residual SDs). They "
            "are independent, so no convergence is in question."
        )
    if settings.method == "adopted":
        return said("The draws were adopted from a model of the user's own.")
    given: Words = (
        ("All coefficients and residual SDs have the default prior: ",)
        if result.coefficients == Coefficients()
        else ("Priors were given as ", Code(repr(result.coefficients)), "; all others are the default: ")
    )
    return said(
        f"{settings.chains} chains of {settings.draws} draws, after {settings.tune} to adapt, were made "
        "with the No-U-Turn sampler (PyMC, nutpie). ",
        *given,
        f"flat for the mean level, normal around zero with an SD of {WIDTH:g} √n SDs of the response "
        "along each direction of the centred terms, which no change of units moves, and log-normal about "
        f"the response's SD for a residual SD, with {SIGMA_LOG_SD:g} as the SD of its logarithm.",
    )


def diagnostics(findings: Findings, figures: tuple[Figure, ...]) -> Iterator[Block]:
    """Yield the sampler's diagnostics, the audit of the data, and what was warned of."""
    yield Sub("The sampler")
    if findings.complaints:
        yield said(Strong("Diagnostics outside their bounds:"), f" {'; '.join(findings.complaints)}.")
    elif findings.result.independent:
        yield said(
            "The draws are independent: there is nothing to converge. The Monte Carlo error of every "
            "probability stands "
            "in ",
            Code("comparison.csv"),
            ".",
        )
    else:
        yield said(
            f"No diagnostic is outside its bound: no divergent transitions, r-hat at most {LARGEST_RHAT:g} and "
            f"effective sample sizes of at least {LEAST_ESS} for coefficients, residual SDs and effects (bounds "
            "of Vehtari and others 2021, doi:10.1214/20-BA1221). The Monte Carlo error of every probability "
            "stands in ",
            Code("comparison.csv"),
            ".",
        )
    checked = rank_diagnostics(findings.result)
    if checked is not None:
        yield Grid(
            ("quantity", "r-hat", "effective draws, bulk", "effective draws, tails"),
            tuple(
                cells(str(row.quantity), f"{row.rhat:.3f}", f"{row.bulk:.0f}", f"{row.tail:.0f}")
                for row in checked.itertuples()
            ),
            "Diagnostics of every quantity that conclusions rest on",
        )
    yield from figures
    yield Sub("The data, before the fit")
    yield Bullets(tuple(_finding(finding) for finding in findings.audit.findings))
    if findings.warnings:
        yield Sub("Warnings while concluding")
        yield Bullets(tuple((words,) for words in findings.warnings))


def _finding(finding: Any) -> Words:
    marks: dict[str, Words] = {
        "note": (),
        "attention": (Strong("Attention."), " "),
        "stops the fit": (Strong("Stops the fit."), " "),
    }
    return (*marks[finding.level], f"{finding.about}: {finding.text}")


def made_with(findings: Findings) -> str:
    """Return the versions that made the draws, "" where they are not known."""
    versions = findings.result.tree.attrs.get("versions")
    named = json.loads(versions) if isinstance(versions, str) else {}
    return listed(f"{name} {number}" for name, number in named.items())


def again(findings: Findings, kept: tuple[str, ...]) -> Iterator[Block]:
    """Yield what is needed to make the report again, and what the folder keeps of the participants."""
    used = made_with(findings)
    seed = findings.result.settings.random_seed
    yield said(
        f"Random seed {seed}. {'Made with ' + used + '. ' if used else ''}The same versions and seed give the same "
        "numbers on the same kind of machine."
    )
    for sentence in kept:
        yield said(sentence)
