"""Regressions as journals print them, coefficients with standard errors or t, read into the moments of a study."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array
from bayesmed.study.figures import Figure, figure
from bayesmed.study.moments import from_moments, whole
from bayesmed.study.published import Published
from bayesmed.study.regression_layout import INTERCEPT, RESIDUAL, Key, Layout, Solution

UNPRINTED = "covariate not printed {0}"


def from_regressions(
    *,
    exposure: str,
    mediator: str,
    outcome: str,
    mediator_on: Mapping[str, Any],
    outcome_on: Mapping[str, Any],
    total_on: Mapping[str, Any] | None = None,
    n: Any,
    arms: Sequence[int] | None = None,
    unprinted_covariates: int = 0,
    decimals: int | None = None,
    binary: bool = True,
) -> Published:
    """Return what printed regressions tell; see ``Study.from_regressions``.

    Parameters
    ----------
    binary : bool
        True if the exposure is coded 0/1.
    others :
        As in ``Study.from_regressions``.

    Raises
    ------
    ArgumentError
        If a figure is missing or no number, naming the place.
    DataError
        If the figures cannot all be true.
    """
    rows = whole("n", n, 6)
    equations = {"mediator_on": mediator_on, "outcome_on": outcome_on, "total_on": total_on or {}}
    hidden = tuple(UNPRINTED.format(k + 1) for k in range(whole("unprinted_covariates", unprinted_covariates, 0)))
    listed = _covariates(equations, exposure, mediator)
    layout = Layout(exposure, mediator, outcome, (*listed, *hidden), rows)
    if layout.df < 4:
        raise ArgumentError(f"n={rows}: too few rows for {2 + len(layout.covariates)} terms")
    figures = _figures(equations, layout, decimals)
    _check_enough(figures, layout, listed)
    start, free = _start(layout, figures, listed)
    shares, notes = _exposure(layout, figures, arms, binary)
    best = None
    for share in shares:
        fixed = start.copy()
        fixed[layout.place("mean")] = share if binary else 0.0
        fixed[layout.place("log_ssx")] = np.log(rows * share * (1 - share) if binary else rows - 1)
        fixed[layout.place("log_s_m")] += 0.5 * fixed[layout.place("log_ssx")]
        fixed[layout.place("log_s_y")] += fixed[layout.place("log_s_m")]
        solution = Solution.of(layout, figures, fixed, free)
        best = solution if best is None or solution.worst < best.worst else best
    assert best is not None
    best.check()
    source = {
        "exposure": exposure,
        "mediator": mediator,
        "outcome": outcome,
        **{name: {term: _plain(given) for term, given in eq.items()} for name, eq in equations.items() if eq},
        "n": rows,
        "arms": None if arms is None else [int(arm) for arm in arms],
        "unprinted_covariates": len(hidden),
        "decimals": decimals,
        "binary": binary,
    }
    return Published(
        source,
        best.moments_at(best.theta),
        best.theta,
        best.printed,
        best.half,
        best.implied,
        best.moments_at,
        hidden,
        notes,
    )


def republished(source: dict[str, Any]) -> Published:
    """Return what was published from the arguments that :class:`Published` keeps."""
    return from_regressions(**source) if "mediator_on" in source else from_moments(**source)


def _covariates(equations: Mapping[str, Mapping[str, Any]], exposure: str, mediator: str) -> tuple[str, ...]:
    """Return the terms beside intercept, exposure and mediator, which must be the same in every equation."""
    known = (INTERCEPT, RESIDUAL, exposure)
    found: dict[str, tuple[str, ...]] = {}
    for name, equation in equations.items():
        if not isinstance(equation, Mapping):
            raise ArgumentError(f"{name}: expected a dict of term → (estimate, standard error), got {equation!r}")
        if equation:
            beside = (*known, mediator) if name == "outcome_on" else known
            found[name] = tuple(term for term in equation if term not in beside)
    first = found.get("mediator_on", ())
    for name, terms in found.items():
        if set(terms) != set(first):
            raise ArgumentError(
                f"{name} holds the covariates {sorted(terms)!r}, mediator_on {sorted(first)!r}; the equations must "
                "adjust for the same ones. Products cannot be made of printed regressions; use Study.from_moments with "
                "the products' own moments"
            )
    return first


def _figures(equations: Mapping[str, Mapping[str, Any]], layout: Layout, decimals: int | None) -> dict[Key, Figure]:
    figures: dict[Key, Figure] = {}
    for equation, terms in equations.items():
        for term, given in terms.items():
            place = f"{equation}[{term!r}]"
            for what, printed in _pieces(place, term, given).items():
                one = figure(f"{place} {what}" if term != RESIDUAL else f"{place}", printed, decimals)
                if what in ("se", "sd") and one.value <= 0:
                    raise ArgumentError(f"{one.name}={one.value:g} must be above zero")
                if term == INTERCEPT and layout.covariates:
                    # Where the covariates lie is not known, so an intercept says nothing.
                    continue
                figures[equation, term, what] = one
    return figures


def _pieces(place: str, term: str, given: Any) -> dict[str, Any]:
    if term == RESIDUAL:
        return {"sd": given}
    if isinstance(given, Mapping):
        unknown = set(given) - {"estimate", "se", "t"}
        if unknown or "estimate" not in given:
            raise ArgumentError(f"{place}: expected 'estimate' with 'se', 't' or both, got {sorted(given)!r}")
        return dict(given)
    if isinstance(given, tuple | list) and len(given) == 2:
        return {"estimate": given[0], "se": given[1]}
    raise ArgumentError(
        f"{place}: expected (estimate, standard error), or a dict with 'estimate' and 'se' or 't', got {given!r}"
    )


def _check_enough(figures: Mapping[Key, Figure], layout: Layout, listed: Sequence[str]) -> None:
    x, m = layout.exposure, layout.mediator
    needed = [("mediator_on", x), ("outcome_on", m), *(("mediator_on", c) for c in listed)]
    for equation, term in needed:
        if (equation, term, "estimate") not in figures or not _precision(figures, equation, term):
            raise ArgumentError(f"{equation}: {term!r} is needed with its estimate and its standard error or t")
    if ("outcome_on", x, "estimate") not in figures and ("total_on", x, "estimate") not in figures:
        raise ArgumentError(f"outcome_on: {x!r} is needed, or total_on= with it, for the direct effect")


def _precision(figures: Mapping[Key, Figure], equation: str, term: str) -> float | None:
    """Return a standard error as printed, or as t makes it."""
    if (equation, term, "se") in figures:
        return figures[equation, term, "se"].value
    t = figures.get((equation, term, "t"))
    estimate = figures.get((equation, term, "estimate"))
    return abs(estimate.value / t.value) if t and estimate and t.value and estimate.value else None


def _start(layout: Layout, figures: Mapping[Key, Figure], listed: Sequence[str]) -> tuple[Array, Array]:
    """Return first values, those of log s_M and log s_Y relative to what comes before them, and which are free."""
    x, m = layout.exposure, layout.mediator

    def estimate(equation: str, term: str) -> float | None:
        found = figures.get((equation, term, "estimate"))
        return None if found is None else found.value

    start = np.zeros(9 + 3 * len(layout.covariates))
    free = np.zeros(len(start), dtype=bool)

    def put(name: str, value: float | None, *, isfree: bool = True) -> None:
        if value is not None:
            start[layout.place(name)] = value
            free[layout.place(name)] = isfree

    a, b, c = estimate("mediator_on", x), estimate("outcome_on", m), estimate("outcome_on", x)
    assert a is not None
    assert b is not None
    if c is None:
        total = estimate("total_on", x)
        c = None if total is None else total - a * b
    put("log_s_m", np.log(_precision(figures, "mediator_on", x) or 1.0))
    put("log_s_y", np.log(_precision(figures, "outcome_on", m) or 1.0) + 0.5 * np.log(layout.df))
    put("a", a)
    put("b", b)
    put("c", c)
    a0, total0 = estimate("mediator_on", INTERCEPT), estimate("total_on", INTERCEPT)
    c0 = estimate("outcome_on", INTERCEPT)
    put("a0", a0)
    put("c0", total0 - b * (a0 or 0.0) if c0 is None and total0 is not None else c0)
    put("log_ssx", 0.0, isfree=("mediator_on", RESIDUAL, "sd") in figures)
    s_m = start[layout.place("log_s_m")]
    for k, name in enumerate(listed):
        error = _precision(figures, "mediator_on", name) or 1.0
        in_y = estimate("outcome_on", name) or 0.0
        start[9 + 3 * k : 12 + 3 * k] = 2 * (s_m - np.log(error)), estimate("mediator_on", name) or 0.0, in_y
        free[9 + 3 * k : 12 + 3 * k] = True, True, ("outcome_on", name, "estimate") in figures
    return start, free


def _exposure(
    layout: Layout, figures: Mapping[Key, Figure], arms: Sequence[int] | None, binary: bool
) -> tuple[list[float], tuple[str, ...]]:
    """Return candidates for the share of rows with the exposure, and what had to be taken for granted."""
    n = layout.rows
    if arms is not None:
        if not binary:
            raise ArgumentError("arms: they belong to an exposure coded 0/1, so leave out contrast= or arms=")
        if len(arms) != 2 or whole("arms", arms[0], 1) + whole("arms", arms[1], 1) != n:
            raise ArgumentError(f"arms={arms!r} must be the two numbers of rows, without and with, which make n={n}")
        return [arms[1] / n], ()
    if not binary:
        return [0.5], (
            "The exposure's mean and SD were not given and taken as 0 and 1. Effects do not depend on them; the "
            "residual SD of the mediator does.",
        )
    errors = [
        (_precision(figures, equation, INTERCEPT), _precision(figures, equation, layout.exposure))
        for equation in ("mediator_on", "total_on")
    ]
    for intercept, slope in errors:
        if intercept and slope:
            # Among 0/1 rows the squared ratio of both errors is the share of the exposed.
            count = round(n * (intercept / slope) ** 2)
            near = sorted({min(max(count + step, 1), n - 1) for step in range(-3, 4)})
            return [k / n for k in near], ("The arms' sizes were found from the standard errors.",)
    return [0.5], (
        "The arms' sizes were not given and taken as equal. Effects do not depend on them; the residual SD of the "
        "mediator does: give arms=(without, with).",
    )


def _plain(given: Any) -> Any:
    """Return a term's figures as JSON holds them."""
    if isinstance(given, Mapping):
        return {what: _plain(value) for what, value in given.items()}
    if isinstance(given, tuple | list):
        return [_plain(value) for value in given]
    value = given.item() if isinstance(given, np.generic) else given
    return value if isinstance(value, float | int) else str(value)
