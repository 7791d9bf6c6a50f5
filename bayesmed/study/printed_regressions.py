"""Regressions as journals print them, coefficients with standard errors or t, as the moments of a study.

With ``SSX = sum of squares of the exposure given the covariates``, ``SSM = df_M s_M²`` and the covariates taken as
orthogonal to the exposure and to each other, every printed figure follows from a few free numbers:

    mediator:  estimate a, SE s_M / sqrt(SSX);  of a covariate, SE s_M / sqrt(SSC);  of the intercept of a regression
               on the exposure alone, SE s_M sqrt(1/n + mean² / SSX)
    outcome:   slope of M b, SE s_Y / sqrt(SSM);  of the exposure, SE s_Y sqrt(1/SSX + a²/SSM), the others alike
    total:     exposure c + b a, with residual sum of squares SSE_Y + b² SSM

Orthogonality is no restriction: an effect of the exposure depends on the covariates only through what they leave of
it, and so does the standard error of each. The free numbers are found by least squares, each figure weighed by half a
unit of its last digit; figures that cannot all be true are named.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from scipy.optimize import least_squares

from bayesmed.core.errors import ArgumentError, DataError
from bayesmed.core.mapping import Array
from bayesmed.study.figures import Figure, figure
from bayesmed.study.moments import from_moments, whole
from bayesmed.study.published import Moments, Published

INTERCEPT = "Intercept"
RESIDUAL = "residual"
"""In place of a term: the equation's residual SD."""
FINEST = 1e-9
"""Figures are not taken as more exact than this, relative."""
WITHIN = 1.05
"""How many half units a figure may be off before it is said to contradict the others."""
UNPRINTED = "covariate not printed {0}"


@dataclass(frozen=True, eq=False)
class _Layout:
    """Which numbers stand behind the figures, and in which order.

    log s_M, log s_Y, log SSX, mean of X, a0, a, b, c0, c; then per covariate log SSC and its coefficients in the
    mediator and in the outcome equation.
    """

    exposure: str
    mediator: str
    outcome: str
    covariates: tuple[str, ...]
    rows: int

    def place(self, name: str) -> int:
        """Return where one of the first nine stands."""
        return ("log_s_m", "log_s_y", "log_ssx", "mean", "a0", "a", "b", "c0", "c").index(name)

    @property
    def df(self) -> int:
        """Degrees of freedom of the mediator equation."""
        return self.rows - 2 - len(self.covariates)

    def implied(self, theta: Array, wanted: Sequence[tuple[str, str, str]]) -> Array:
        """Return the figures named by (equation, term, what)."""
        values = self._values(theta)
        return np.array([values[key] for key in wanted])

    def _values(self, theta: Array) -> dict[tuple[str, str, str], float]:
        s_m, s_y, ssx = np.exp(theta[:3])
        mean, a0, a, b, c0, c = theta[3:9]
        ssm = self.df * s_m**2
        inverse = {self.exposure: 1 / ssx, INTERCEPT: 1 / self.rows + mean**2 / ssx}
        in_m, in_y = {self.exposure: a, INTERCEPT: a0}, {self.exposure: c, INTERCEPT: c0}
        for k, name in enumerate(self.covariates):
            log_ssc, in_m[name], in_y[name] = theta[9 + 3 * k : 12 + 3 * k]
            inverse[name] = float(np.exp(-log_ssc))
        s_total = np.sqrt(((self.df - 1) * s_y**2 + b**2 * ssm) / self.df)
        found: dict[tuple[str, str, str], float] = {}

        def keep(equation: str, term: str, estimate: float, error: float) -> None:
            found[equation, term, "estimate"] = estimate
            found[equation, term, "se"] = error
            found[equation, term, "t"] = estimate / error

        for term, value in inverse.items():
            keep("mediator_on", term, in_m[term], s_m * np.sqrt(value))
            keep("outcome_on", term, in_y[term], s_y * np.sqrt(value + in_m[term] ** 2 / ssm))
            keep("total_on", term, in_y[term] + b * in_m[term], s_total * np.sqrt(value))
        keep("outcome_on", self.mediator, b, s_y / np.sqrt(ssm))
        for equation, spread in (("mediator_on", s_m), ("outcome_on", s_y), ("total_on", s_total)):
            found[equation, RESIDUAL, "sd"] = float(spread)
        return found

    def moments(self, theta: Array) -> Moments:
        """Return means and covariances; covariates have mean zero."""
        n, q = self.rows, len(self.covariates)
        s_m, s_y, ssx = np.exp(theta[:3])
        mean, a0, a, b, c0, c = theta[3:9]
        blocks = theta[9:].reshape(q, 3)
        squares = np.array([ssx, *np.exp(blocks[:, 0])])
        in_m = np.array([a, *blocks[:, 1]])
        in_y = np.array([c, *blocks[:, 2]])
        ssm, sse = self.df * s_m**2, (self.df - 1) * s_y**2
        names = (self.exposure, *self.covariates, self.mediator, self.outcome)
        # Columns of the rows as combinations of orthogonal ones: exposure, covariates, the two residuals.
        loading = np.zeros((q + 3, q + 3))
        loading[: q + 1, : q + 1] = np.eye(q + 1)
        loading[q + 1, : q + 1], loading[q + 1, q + 1] = in_m, 1
        loading[q + 2] = b * loading[q + 1]
        loading[q + 2, : q + 1] += in_y
        loading[q + 2, q + 2] = 1
        covariance = loading @ np.diag([*squares, ssm, sse]) @ loading.T / (n - 1)
        m_mean = a0 + a * mean
        means = np.array([mean, *np.zeros(q), m_mean, c0 + c * mean + b * m_mean])
        return Moments(names, means, covariance, n)


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
    layout = _Layout(exposure, mediator, outcome, (*listed, *hidden), rows)
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
        solution = _Solution.of(layout, figures, fixed, free)
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


Key = tuple[str, str, str]


@dataclass(frozen=True, eq=False)
class _Solution:
    """Free numbers that come closest to the figures."""

    layout: _Layout
    keys: tuple[Key, ...]
    names: tuple[str, ...]
    printed: Array
    half: Array
    fixed: Array
    free: Array
    theta: Array

    @classmethod
    def of(cls, layout: _Layout, figures: Mapping[Key, Figure], fixed: Array, free: Array) -> _Solution:
        printed = np.array([one.value for one in figures.values()])
        # Figures given to the last bit need room for rounding in arithmetic.
        half = np.array([max(one.half, FINEST * abs(one.value)) for one in figures.values()])
        names = tuple(one.name for one in figures.values())
        made = cls(layout, tuple(figures), names, printed, half, fixed, free, fixed[free])
        found: Any = least_squares(made.misfit, fixed[free], x_scale="jac", xtol=1e-15, ftol=1e-15, gtol=1e-15)
        return replace(made, theta=found.x)

    def implied(self, theta: Array) -> Array:
        return self.layout.implied(self._whole(theta), self.keys)

    def moments_at(self, theta: Array) -> Moments:
        return self.layout.moments(self._whole(theta))

    def misfit(self, theta: Array) -> Array:
        """Return how many half units of its last digit each figure is off."""
        return (self.implied(theta) - self.printed) / self.half

    @property
    def worst(self) -> float:
        return float(np.abs(self.misfit(self.theta)).max())

    def check(self) -> None:
        if self.worst <= WITHIN:
            return
        implied, off = self.implied(self.theta), np.abs(self.misfit(self.theta))
        wrong = [
            f"{self.names[k]} is printed as {self.printed[k]:.6g}, the others together make it {implied[k]:.6g}"
            for k in np.argsort(-off)
            if off[k] > WITHIN
        ]
        raise DataError(
            "the figures cannot all be true, even with room for rounding: "
            + "; ".join(wrong[:3])
            + ". Look for a misprint, leave one out, or say with decimals= how far they are rounded"
        )

    def _whole(self, theta: Array) -> Array:
        whole_theta = self.fixed.copy()
        whole_theta[self.free] = theta
        return whole_theta


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


def _figures(equations: Mapping[str, Mapping[str, Any]], layout: _Layout, decimals: int | None) -> dict[Key, Figure]:
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


def _check_enough(figures: Mapping[Key, Figure], layout: _Layout, listed: Sequence[str]) -> None:
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


def _start(layout: _Layout, figures: Mapping[Key, Figure], listed: Sequence[str]) -> tuple[Array, Array]:
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
    layout: _Layout, figures: Mapping[Key, Figure], arms: Sequence[int] | None, binary: bool
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
