"""A methods paragraph and a results paragraph in plain words with every number, ready to paste."""

from collections.abc import Iterator
from typing import Any

from bayesmed.conclusions.claim import CLOSE
from bayesmed.conclusions.words import listed, number_text, probability_text
from bayesmed.priors import LKJ, FisherNormal, PointMass, StretchedBeta, TruncatedNormal, Uniform
from bayesmed.report.blocks import Block, Gap, Paragraph, Sub, Words, said
from bayesmed.report.findings import Findings
from bayesmed.report.method import made_with
from bayesmed.report.opening import where
from bayesmed.report.overturning import rho_text
from bayesmed.report.tables import one_by_one


def to_paste(findings: Findings) -> Iterator[Block]:
    """Yield both paragraphs, each under its heading."""
    yield said("Both can be pasted as they are; what is marked in them only the authors can write.")
    yield Sub("Methods")
    yield Paragraph(methods(findings), "quoted")
    yield Sub("Results")
    yield Paragraph(results(findings), "quoted")


def methods(findings: Findings) -> Words:
    """Return the methods paragraph."""
    result, comparison = findings.result, findings.comparison
    observed, settings, claim = result.observed, result.settings, comparison.claim
    x, m, y = observed.exposure, observed.mediator_name, observed.outcome_name
    low, high = observed.contrast
    belief_list = listed(_belief(label, prior) for label, prior in one_by_one(comparison.beliefs).items())
    version = made_with(findings)
    return (
        f"We estimated how much of the effect of {x} ({low} against {high}) on {y} runs through {m} with two Bayesian "
        f"linear regressions with normal errors, {observed.mediator_formula} for the mediator and "
        f"{observed.outcome_formula} for the outcome ({_rows(findings)}). {_draws(findings)} "
        f"Effects are natural effects on the scale of {y}, averaged over all rows{_at(findings)}. Unmeasured "
        f"common causes of {m} and {y} were expressed as ρ, the correlation of what the two equations leave "
        "unexplained. " + _informed(findings) + f"The beliefs about ρ were {belief_list}; ",
        Gap("why these beliefs, and when they were stated"),
        f". The claim was {claim}, and it was said to hold where its posterior probability was {claim.required:g} or "
        f"more. Intervals are equal-tailed and hold {100 * comparison.ci_prob:g} %. "
        f"{'Made with ' + version + '; random' if version else 'Random'} seed {settings.random_seed}.",
    )


def _rows(findings: Findings) -> str:
    rows = findings.result.observed.rows
    if findings.result.observed.published is not None:
        return f"from published figures, n = {rows.given}"
    dropped = f", {rows.dropped} of {rows.given} having missing values" if rows.dropped else ""
    return f"{rows.used} complete rows{dropped}"


def _draws(findings: Findings) -> str:
    settings = findings.result.settings
    total = settings.chains * settings.draws
    if settings.method == "exact":
        return f"We made {total} independent draws from the posterior under the reference prior."
    if settings.method == "adopted":
        return f"The {total} draws come from a model of our own."
    found = findings.complaints
    checked = (
        f"diagnostics outside their bounds: {'; '.join(found)}" if found else "no diagnostic was outside its bound"
    )
    return (
        f"We kept {settings.chains} chains of {settings.draws} draws of the No-U-Turn sampler after {settings.tune} to "
        f"adapt; {checked}."
    )


def _at(findings: Findings) -> str:
    dims = findings.comparison.points.names
    return f" with {listed(dims)} set to stated values" if dims else ""


def _informed(findings: Findings) -> str:
    if findings.result.joint:
        return "Formulas or priors let the data inform ρ, and it was estimated with the rest. "
    return (
        "The data do not inform ρ, so that its posterior is its prior and one set of draws serves every "
        "belief about it. "
    )


def results(findings: Findings) -> Words:
    """Return the results paragraph."""
    comparison, claim = findings.comparison, findings.comparison.claim
    count = len(comparison.points.values)
    effect = claim.effect.replace("_", " ")
    sentences = [
        f"Effects are means with {100 * comparison.ci_prob:g} % intervals, in units of "
        f"{findings.result.observed.outcome_name}; Pr is the posterior probability of an effect "
        f"{claim.direction} {claim.limit:g}."
    ]
    for k, point in enumerate(comparison.points.values):
        rows = comparison.claimed.iloc[k::count]
        each = [
            f"{number_text(row['mean'])} ({number_text(row['lower'])} to {number_text(row['upper'])}; Pr "
            f"{_equal(probability_text(row['probability'], row['mcse']))}: the claim "
            f"{'is ' if row['verdict'] == CLOSE else ''}{row['verdict']}) under “{row['prior']}”"
            for _, row in rows.iterrows()
        ]
        sentences.append(f"{where(point)}, the {effect} effect was {listed(each)}.")
        if findings.tipping is not None:
            tip = findings.tipping.table.iloc[k]
            sentences.append(
                f"There the claim tips at ρ = {rho_text(tip['median'])} ({rho_text(tip['lower'])} to "
                f"{rho_text(tip['upper'])} over draws)."
            )
        if claim.effect != "total":
            total = comparison.table[comparison.table["effect"] == "total"].iloc[k]
            sentences.append(
                f"The total effect was {number_text(total['mean'])} ({number_text(total['lower'])} to "
                f"{number_text(total['upper'])})."
            )
    return (" ".join(sentences),)


def _equal(probability: str) -> str:
    return probability if probability[0] in "<>" else f"= {probability}"


def _belief(label: str, prior: Any) -> str:
    low, high = (float(end) for end in prior.ppf([0.05, 0.95]))
    return f"“{label}” ({_in_words(prior)}" + (")" if low == high else f"; 90 % between {low:.2f} and {high:.2f})")


def _in_words(prior: Any) -> str:
    match prior:
        case PointMass(value=value):
            return f"ρ = {value:g} for certain"
        case Uniform(lower=lower, upper=upper):
            return f"uniform from {lower:g} to {upper:g}"
        case TruncatedNormal(mean=mean, sd=sd, lower=lower, upper=upper):
            return f"normal with mean {mean:g} and SD {sd:g}, cut off at {lower:g} and {upper:g}"
        case FisherNormal(mean=mean, sd=sd):
            return f"normal on the scale of atanh ρ with mean {mean:g} and SD {sd:g}"
        case LKJ(eta=eta):
            return f"LKJ with shape {eta:g}"
        case StretchedBeta(alpha=alpha, beta=beta):
            return f"beta on −1 to 1 with shapes {alpha:g} and {beta:g}"
    return repr(prior)
