"""Two reporting standards answered item by item: filled where the software knows, blank where only authors do.

AGReMA: Lee and others 2021, JAMA 326, 1045 (doi:10.1001/jama.2021.14075). BARG: Kruschke 2021, Nature Human Behaviour
5, 1282 (doi:10.1038/s41562-021-01177-7). Items are told by topic, in words of our own.
"""

from collections.abc import Iterator

from bayesmed.conclusions.words import listed, point_text
from bayesmed.report.blocks import Block, Code, Gap, Grid, Sub, Words, said
from bayesmed.report.findings import Findings
from bayesmed.report.method import draws_made, made_with
from bayesmed.report.opening import rows_sentence

type Item = tuple[str, Words]
HEADS = ("item", "what this report says, and what is left to the authors")


def standards(findings: Findings) -> Iterator[Block]:
    """Yield both lists."""
    yield said(
        "Topics are those of the two standards, in words of our own; the standards themselves say more. Numbers follow "
        "their order, quoted from memory. What is marked so is left to the authors: ",
        Gap("what only they know"),
        ".",
    )
    yield Sub("AGReMA: reporting a mediation analysis")
    yield _grid(agrema(findings), "AGReMA, item by item")
    yield Sub("BARG: reporting a Bayesian analysis")
    yield _grid(barg(findings), "BARG, step by step")


def _grid(items: tuple[Item, ...], caption: str) -> Grid:
    return Grid(HEADS, tuple(((topic,), words) for topic, words in items), caption, "items")


def agrema(findings: Findings) -> tuple[Item, ...]:
    """Return the 25 topics, each with its answer."""
    comparison, observed = findings.comparison, findings.result.observed
    x, m, y = observed.exposure, observed.mediator_name, observed.outcome_name
    covariates = listed(observed.covariates) or "none"
    return (
        ("1 Title", (Gap("say in the title that mediation is analysed"),)),
        ("2 Abstract", ("Question and answer stand at the head of this report. ", Gap("a structured abstract"))),
        ("3 Background", (Gap(f"why {x} should act on {y} through {m}, and what is known of it"),)),
        (
            "4 Objectives",
            (
                f"Whether the {comparison.claim} (in units of {y}), for {x} {observed.contrast[0]} → "
                f"{observed.contrast[1]}, through {m}.",
            ),
        ),
        ("5 Registration", (Gap("register and number, or that there was none; whether claim and beliefs were in it"),)),
        ("6 Design and source of data", (Gap("trial or observation, where and when, by whom"),)),
        ("7 Participants", (Gap("who could take part, and how they were found"),)),
        (
            "8 Sample size",
            (rows_sentence(findings), " ", Gap("whether and how the number was planned for the mediation analysis")),
        ),
        (
            "9 Effects of interest",
            (
                "Total natural indirect effect, direct effect and total effect, as differences in means, in units of "
                f"{y}; {_points(findings)}.",
            ),
        ),
        ("10 Causal diagram", ("Drawn under “What is taken for granted”. ", Gap("confirm it, or draw yours"))),
        (
            "11 Causal assumptions",
            (
                f"Listed there. Adjusted for: {covariates}. ",
                Gap("how these were chosen, and which known causes were not measured"),
            ),
        ),
        ("12 Measurement", (Gap(f"how and when {x}, {m}, {y} and the covariates were measured, and in which order"),)),
        (
            "13 Coding",
            (
                f"{m} and {y} as numbers in the units of the data; {x} from {observed.contrast[0]} to "
                f"{observed.contrast[1]}. ",
                *_levels(findings),
            ),
        ),
        (
            "14 Statistical methods",
            ("Under “How it was done”; interactions as in the formulas. ", _missing(findings)),
        ),
        (
            "15 Sensitivity analyses",
            (
                f"{len(comparison.beliefs)} beliefs about ρ, fixed ρ from −0.9 to 0.9"
                + (", tipping correlations" if findings.tipping is not None else "")
                + (", measured covariates as yardsticks" if findings.yardsticks is not None else "")
                + ". ",
                Gap("sensitivity to measurement error, to causes changed by the exposure, and to missing values"),
            ),
        ),
        ("16 Ethics", (Gap("committee and number, consent"),)),
        (
            "17 Flow of participants",
            (rows_sentence(findings), " ", *_dropped(findings), Gap("flow, and a table of who took part")),
        ),
        ("18 Estimates", ("Under “The answer under each belief” and in ", Code("comparison.csv"), ".")),
        ("19 Sensitivity results", ("Under “What would change the conclusion” and in ", Code("rho_grid.csv"), ".")),
        (
            "20 Limitations",
            ("What no ρ repairs is listed. ", Gap("which of it may apply here, and how much it may matter")),
        ),
        ("21 Interpretation", (Gap("what the effects mean, in view of the assumptions and of other evidence"),)),
        ("22 Implications", (Gap("for practice, policy and further work"),)),
        ("23 Funding", (Gap("who paid, and what part they had"),)),
        ("24 Interests", (Gap("financial and other interests"),)),
        (
            "25 Data and code",
            ("The folder of this report says what it keeps of the rows. ", Gap("where data and code can be had")),
        ),
    )


def barg(findings: Findings) -> tuple[Item, ...]:
    """Return the topics of the Bayesian standard, each with its answer."""
    result, comparison = findings.result, findings.comparison
    observed, settings = result.observed, result.settings
    y = observed.outcome_name
    version = made_with(findings)
    posterior = "Means and intervals of every effect under every belief stand in "
    return (
        (
            "Why Bayesian",
            (
                "Because what is believed about unmeasured causes can be stated and carried to the answer. ",
                Gap("your own reasons"),
            ),
        ),
        ("Goals", (f"The probability of the claim: {comparison.claim}.",)),
        (
            "1A Variables",
            (
                f"Exposure {observed.exposure}, mediator {observed.mediator_name}, outcome {y}, covariates "
                f"{listed(observed.covariates) or 'none'}.",
            ),
        ),
        (
            "1B Likelihood and parameters",
            (
                "Two linear equations with jointly normal errors: ",
                Code(observed.mediator_formula),
                " and ",
                Code(observed.outcome_formula),
                ".",
            ),
        ),
        (
            "1C Priors",
            (
                *draws_made(findings).words,
                " The beliefs about ρ are listed under “How it was done”. ",
                Gap("where each belief comes from"),
            ),
        ),
        ("1D Formal specification", ("In the documentation of the package, with its derivation.",)),
        (
            "1E Prior predictive check",
            (
                "What the priors imply for the effect: ",
                Code("fit.implied_prior()"),
                " in Python. ",
                Gap("what it showed, if it was looked at"),
            ),
        ),
        ("2A Software", (f"{version}." if version else Gap("software and versions"),)),
        ("2B Convergence of chains", ("Under “Diagnostics”.",)),
        (
            "2C Resolution of chains",
            ("Monte Carlo error of every probability, and effective sample sizes under “Diagnostics”. ",),
        ),
        (
            "3A Posterior predictive check",
            (
                "Residual spread by arm and moderator is compared in the audit. ",
                Gap("further checks of the model against the data"),
            ),
        ),
        ("3B Posterior summaries", (posterior, Code("comparison.csv"), ".")),
        (
            "4A Decision rule",
            (
                f"The claim holds at a probability of {comparison.claim.required:g} or more. ",
                Gap("why that limit and that probability: what is lost by either error"),
            ),
        ),
        ("4B Decisions", ("Verdicts stand beside every probability.",)),
        (
            "5 Sensitivity to priors",
            (
                f"Of {len(comparison.beliefs)} beliefs about ρ: under “What would change the conclusion”. Of "
                f"coefficients: ",
                Code("fit.leaning()"),
                " in Python. ",
                Gap("what it showed, if it was looked at"),
            ),
        ),
        (
            "6 Reproducibility",
            (
                f"Seed {settings.random_seed}; versions, a checksum of the rows and of every file in ",
                Code("bayesmed_report.json"),
                ".",
            ),
        ),
    )


def _points(findings: Findings) -> str:
    points = findings.comparison.points.values
    if not points[0]:
        return "averaged over all rows"
    named = listed(point_text(point) for point in points[:6])
    return f"at {named}" + ("" if len(points) <= 6 else f" and {len(points) - 6} more points")


def _levels(findings: Findings) -> Words:
    observed = findings.result.observed
    kinds = [
        f"{name}: {listed(map(str, column.cat.categories))}"
        for name in observed.covariates
        if hasattr(column := observed.frame[name], "cat")
    ]
    return (f"Categories, the first being what others are compared with: {'; '.join(kinds)}.",) if kinds else ()


def _missing(findings: Findings) -> str:
    rows = findings.result.observed.rows
    if not rows.dropped:
        return "No row was left out for missing values."
    return (
        f"Rows with missing values ({rows.dropped} of {rows.given}) were left out, which is right only if "
        "they are like the others given the columns used."
    )


def _dropped(findings: Findings) -> Words:
    missing = findings.result.observed.rows.missing
    return (f"Missing values: {listed(f'{name} {count}' for name, count in missing.items())}. ",) if missing else ()
