"""What the audit says of single columns and terms: values, curvature, rank, scale."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pandas as pd

from bayesmed.core.errors import FormulaError
from bayesmed.study.changed import with_values
from bayesmed.study.counterfactual import linear_in_mediator
from bayesmed.study.findings import Finding, listed
from bayesmed.study.observe import Observed
from bayesmed.study.rank import Deficiency
from bayesmed.study.spread import residuals

FAR_FROM_ZERO = 1e4
APART = 1e6
"""``|mean| / SD`` of a column, and ratio of two columns' SDs, beyond which squares lose half their digits."""

NEARLY = 1e-5
"""A unit-norm column of which less than this lies outside the span of the others is nearly a combination."""


def variable_findings(observed: Observed) -> Iterator[Finding]:
    """Yield what there is to say of the values of single columns, and of the mediator's place."""
    for role, name, values in (
        ("mediator", observed.mediator_name, observed.mediator),
        ("outcome", observed.outcome_name, observed.outcome),
    ):
        distinct = len(np.unique(values))
        if distinct <= 4:
            yield Finding(
                "attention",
                role,
                f"{name} takes only {distinct} values; the model takes it as a normal variable given the terms",
            )
    for name in observed.frame.columns:
        column = observed.frame[name]
        if (
            isinstance(column.dtype, pd.CategoricalDtype)
            and len(column.cat.categories) > 5
            and _reads_as_numbers(column)
        ):
            yield Finding(
                "attention",
                "columns",
                f"{name} is text or categories, yet every value reads as a number; was it meant as one?",
            )
    for name, levels in observed.unused_levels.items():
        yield Finding("note", "columns", f"{name}: no row used has {listed(levels)}; these levels are left out")
    if not linear_in_mediator(observed):
        yield from _curved(observed)


def _curved(observed: Observed) -> Iterator[Finding]:
    yield Finding(
        "note",
        "mediator",
        f"the outcome formula is not linear in {observed.mediator_name}; effects are averaged over the "
        "mediator's error",
    )
    residual = residuals(observed.compressed.mediator_design, observed.compressed.mediator)
    reach = 6.5 * np.linalg.norm(residual) / np.sqrt(observed.rows.used)
    ends = np.array([observed.mediator.min() - reach, observed.mediator.max() + reach])
    row = with_values(observed.frame.iloc[[0, 0]], {observed.exposure: observed.contrast[1]})
    try:
        observed.outcome_equation.rows(row, ends)
    except FormulaError:
        yield Finding(
            "attention",
            "mediator",
            f"the outcome formula is not defined for every value of {observed.mediator_name} that its "
            f"normal model can draw ({ends[0]:.4g} to {ends[1]:.4g}). Transform the mediator itself, as in "
            "log(m) ~ …, or for a spline write extrapolation='extend'",
        )


def rank_findings(observed: Observed, deficiencies: dict[str, tuple[Deficiency, ...]]) -> Iterator[Finding]:
    """Yield which terms add nothing, or nearly nothing, to the others."""
    compressed = observed.compressed
    for equation, found in deficiencies.items():
        for deficiency in found:
            yield Finding("stops the fit", "rank", f"{equation} equation: {deficiency}; remove one of these terms")
        if not found:
            design, terms = (
                (compressed.mediator_design, observed.mediator_terms)
                if equation == "mediator"
                else (compressed.outcome_design, observed.outcome_terms)
            )
            for term, share in _nearly_dependent(design, terms):
                yield Finding(
                    "attention",
                    "rank",
                    f"{equation} equation: {term} is nearly a combination of other terms; only a share of "
                    f"{share:.1g} of it is its own",
                )
        response = compressed.mediator if equation == "mediator" else compressed.outcome
        design = compressed.mediator_design if equation == "mediator" else compressed.outcome_design
        side = compressed.sides[0 if equation == "mediator" else 1]
        spread = np.linalg.norm(compressed.summary.centred([side]))
        if np.linalg.norm(residuals(design, response)) <= 1e-10 * spread:
            yield Finding(
                "stops the fit",
                "rank",
                f"{equation} equation: the terms explain every row exactly; nothing is random",
            )


def _nearly_dependent(design: np.ndarray, terms: tuple[str, ...]) -> list[tuple[str, float]]:
    """Return the terms of which only a small share lies outside the span of all others."""
    norms = np.linalg.norm(design, axis=0)
    triangle = np.linalg.qr(design / norms, mode="r")
    # 1 / |row j of R⁻¹| is the part of unit-norm column j outside the span of the others.
    share = 1 / np.linalg.norm(np.linalg.inv(triangle), axis=1)
    return [(terms[j], float(share[j])) for j in np.flatnonzero(share < NEARLY) if terms[j] != "Intercept"]


def scale_findings(observed: Observed) -> Iterator[Finding]:
    """Yield which columns are so far from zero, or from each other in size, that digits are lost."""
    sds = {}
    numeric = [c for c in observed.frame.columns if observed.frame[c].dtype.kind in "if"]
    columns = {name: observed.frame[name].to_numpy(dtype=float) for name in numeric}
    for name, values in columns.items():
        sd = float(values.std())
        if sd == 0:
            continue
        sds[name] = sd
        if abs(values.mean()) > FAR_FROM_ZERO * sd:
            yield Finding(
                "attention",
                "scale",
                f"{name} has mean {values.mean():.4g} and SD {sd:.2g}, so most of its digits are the same "
                "in every row; subtract a constant first",
            )
    if sds and max(sds.values()) > APART * min(sds.values()):
        small, large = min(sds, key=sds.__getitem__), max(sds, key=sds.__getitem__)
        yield Finding(
            "attention",
            "scale",
            f"{large} has SD {sds[large]:.2g} and {small} SD {sds[small]:.2g}; measure them in units nearer "
            "to each other, such as thousands",
        )


def _reads_as_numbers(column: pd.Series) -> bool:
    levels = list(column.cat.categories)
    if not all(isinstance(level, str) for level in levels):
        return False
    return bool(pd.to_numeric(pd.Series(levels), errors="coerce").notna().all())
