"""What a careful reader checks before a fit: rows, arms, overlap, scale, rank, spread, what informs rho."""

from __future__ import annotations

import html
from collections.abc import Iterator
from dataclasses import dataclass

import pandas as pd

from bayesmed.study.audit_columns import rank_findings, scale_findings, variable_findings
from bayesmed.study.findings import Finding, Level, listed
from bayesmed.study.identifiers import Identifier
from bayesmed.study.informed import Informed, informed
from bayesmed.study.moderators import Moderator
from bayesmed.study.observe import Observed
from bayesmed.study.overlap import LARGE_DIFFERENCE, SMALL_ARM, Arms, Overlap, arms_of, overlap_of
from bayesmed.study.published import Published
from bayesmed.study.rank import Deficiency, rank_deficiencies
from bayesmed.study.spread import Spread, residual_spread

MANY_DROPPED = 0.1
"""Share of rows dropped that is pointed out. Common practice, no source."""


@dataclass(frozen=True, eq=False, repr=False)
class Audit:
    """What was found in the rows and formulas of a study.

    Attributes
    ----------
    findings : tuple of Finding
    moderators : tuple of Moderator
    informed : Informed
        Whether the data inform the residual correlation, by which terms, how strongly.
    arms : Arms or None
        None, as `overlap` and `spread` are empty, where there are only published figures.
    overlap : tuple of Overlap
    spread : tuple of Spread
    deficiencies : dict of str to tuple of Deficiency
        By equation.
    identifiers : tuple of Identifier
    """

    findings: tuple[Finding, ...]
    moderators: tuple[Moderator, ...]
    informed: Informed
    arms: Arms | None
    overlap: tuple[Overlap, ...]
    spread: tuple[Spread, ...]
    deficiencies: dict[str, tuple[Deficiency, ...]]
    identifiers: tuple[Identifier, ...]

    @property
    def stops(self) -> bool:
        """True if a finding stops the fit."""
        return any(finding.level == "stops the fit" for finding in self.findings)

    def lines(self) -> tuple[str, ...]:
        """Return the findings as plain text, one a line."""
        marks = {"note": "  ", "attention": "! ", "stops the fit": "✗ "}
        width = max(len(finding.about) for finding in self.findings)
        return tuple(f"{marks[f.level]}{f.about:<{width}}  {f.text}" for f in self.findings)

    def to_frame(self) -> pd.DataFrame:
        """Return the findings as a table with columns level, about, text."""
        return pd.DataFrame([(f.level, f.about, f.text) for f in self.findings], columns=["level", "about", "text"])

    def __str__(self) -> str:
        return "\n".join(self.lines())

    def __repr__(self) -> str:
        return str(self)

    def _repr_html_(self) -> str:
        rows = "".join(
            f"<tr><td>{html.escape(f.level)}</td><td>{html.escape(f.about)}</td><td "
            f"style='text-align:left'>{html.escape(f.text)}</td></tr>"
            for f in self.findings
        )
        head = "<tr><th>level</th><th>about</th><th>finding</th></tr>"
        return f"<table><thead>{head}</thead><tbody>{rows}</tbody></table>"


def audit(observed: Observed) -> Audit:
    """Return what there is to know before the fit.

    Parameters
    ----------
    observed : Observed
    """
    deficiencies = {
        "mediator": rank_deficiencies(observed.compressed.mediator_design, observed.mediator_terms),
        "outcome": rank_deficiencies(observed.compressed.outcome_design, observed.outcome_terms),
    }
    known = informed(observed)
    if observed.published is not None:
        findings = (
            *_published(observed.published),
            *_moderators(observed),
            *_informed(observed, known),
            *rank_findings(observed, deficiencies),
        )
        return Audit(findings, observed.moderators, known, None, (), (), deficiencies, ())
    arms, overlap, spread = arms_of(observed), overlap_of(observed), residual_spread(observed)
    findings = (
        *_rows(observed),
        *_moderators(observed),
        *_informed(observed, known),
        *_arms(observed, arms),
        *_overlap(observed, overlap),
        *variable_findings(observed),
        *rank_findings(observed, deficiencies),
        *scale_findings(observed),
        *_spread(spread),
        *_identifiers(observed),
    )
    return Audit(
        findings,
        observed.moderators,
        known,
        arms,
        overlap,
        spread,
        deficiencies,
        observed.identifiers,
    )


def _published(published: Published) -> Iterator[Finding]:
    yield Finding(
        "attention",
        "rows",
        f"none: the study is known by published figures (n = {published.moments.rows}). Missing values, outliers, "
        "the arms' overlap, the spread of residuals, linearity in the mediator and dependence of rows were not checked",
    )
    yield Finding("note", "figures", "rounded as printed; study.rounding(…) carries that to an answer")
    for note in published.notes:
        yield Finding("note", "figures", note)
    if published.unprinted:
        yield Finding(
            "note",
            "figures",
            f"of {len(published.unprinted)} covariate(s) only the number is known: they cost degrees of freedom and "
            "cannot serve as yardsticks",
        )


def _rows(observed: Observed) -> Iterator[Finding]:
    if observed.batches is not None:
        yield Finding(
            "note",
            "rows",
            f"the data come in batches: arms, overlap, spread and values are judged on {len(observed.frame)} evenly "
            "spaced rows, all else on every row; repeated identifiers are not looked for",
        )
    rows = observed.rows
    if not rows.dropped:
        yield Finding("note", "rows", f"all {rows.given} rows are complete in every column used")
        return
    by_column = ", ".join(f"{name} lacks {count}" for name, count in rows.missing.items())
    level: Level = "attention" if rows.dropped > MANY_DROPPED * rows.given else "note"
    yield Finding(
        level,
        "rows",
        f"{rows.used} of {rows.given} rows used; {rows.dropped} are incomplete ({by_column}). That takes "
        "the values to be missing regardless of what they would have been, given the columns used",
    )


def _moderators(observed: Observed) -> Iterator[Finding]:
    if not observed.moderators:
        yield Finding("note", "moderators", "none: no variable shares a term with the exposure or the mediator")
    for moderator in observed.moderators:
        chosen = "" if moderator.name in observed.default_moderators else "; averaged over unless named in at="
        yield Finding(
            "note",
            "moderators",
            f"{moderator.name} ({moderator.kind}) on {', '.join(moderator.paths)}{chosen}",
        )


def _informed(observed: Observed, known: Informed) -> Iterator[Finding]:
    level: Level = "attention" if known else "note"
    for sentence in known.words(observed.mediator_name):
        yield Finding(level, "rho", sentence)


def _arms(observed: Observed, arms: Arms) -> Iterator[Finding]:
    low, high = observed.contrast
    name = observed.exposure
    if arms.discrete:
        counts = ", ".join(f"{value!r}: {count}" for value, count in arms.counts.items())
        yield Finding("note", "exposure", f"{name}, contrast {low!r} → {high!r}; rows by value: {counts}")
        few = [f"{x!r} has {n}" for x, n in zip(observed.contrast, arms.at_contrast, strict=True) if n < SMALL_ARM]
        if few:
            yield Finding(
                "attention",
                "exposure",
                f"{name} = {' and '.join(few)} row(s), fewer than {SMALL_ARM}; what is concluded there "
                "rests on little but the formula",
            )
        return
    quantiles = ", ".join(f"{100 * q:g} % {value:.4g}" for q, value in arms.quantiles.items())
    yield Finding("note", "exposure", f"{name}, contrast {low!r} → {high!r}; quantiles: {quantiles}")
    if not arms.inside:
        yield Finding(
            "attention",
            "exposure",
            f"the contrast {low!r} → {high!r} of {name} reaches outside the values observed; the conclusion "
            "there rests on the formula alone",
        )


def _overlap(observed: Observed, overlap: tuple[Overlap, ...]) -> Iterator[Finding]:
    for one in overlap:
        if not one.notable:
            continue
        said = [f"no row with {observed.exposure} = {x!r} has {listed(v)}" for x, v in one.missing_levels.items()]
        if one.difference is not None and abs(one.difference) > LARGE_DIFFERENCE:
            said.append(f"the arms' means differ by {one.difference:.2f} SD (above {LARGE_DIFFERENCE})")
        said += [
            f"{100 * share:.0f} % of the rows with {observed.exposure} = {x!r} lie outside the range of the others"
            for x, share in one.outside.items()
            if share > 0.1
        ]
        yield Finding("attention", "overlap", f"{one.name}: {'; '.join(said)}. There the formula stands in for rows")
    if overlap and not any(one.notable for one in overlap):
        yield Finding("note", "overlap", "both sides of the contrast cover the covariates alike")


def _spread(spread: tuple[Spread, ...]) -> Iterator[Finding]:
    notable = [one for one in spread if one.notable]
    for one in notable:
        yield Finding(
            "attention",
            "spread",
            f"{one}. The map needs rho·sigma_y/sigma_m to be the same for all; where it is not, confounding "
            "alone makes interactions that one rho does not undo",
        )
    if spread and not notable:
        smallest = min(spread, key=lambda one: one.p)
        yield Finding(
            "note",
            "spread",
            f"no notable change of residual spread in {len(spread)} comparisons; the least p: {smallest}",
        )


def _identifiers(observed: Observed) -> Iterator[Finding]:
    for one in observed.identifiers:
        yield Finding(
            "attention",
            "identifiers",
            f"{one.name} looks like an identifier and repeats ({one.distinct} values in "
            f"{observed.rows.used} rows, up to {one.most} rows each). Rows of one unit or group are not "
            "independent, which the model takes them to be",
        )
