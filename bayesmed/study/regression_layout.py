"""The few numbers behind printed regressions: every figure that follows from them, and those closest to figures.

With ``SSX = sum of squares of the exposure given the covariates``, ``SSM = df_M s_M²`` and the covariates taken as
orthogonal to the exposure and to each other, every printed figure follows from a few free numbers:

    mediator:  estimate a, SE s_M / sqrt(SSX);  of a covariate, SE s_M / sqrt(SSC);  of the intercept of a regression
               on the exposure alone, SE s_M sqrt(1/n + mean² / SSX)
    outcome:   slope of M b, SE s_Y / sqrt(SSM);  of the exposure, SE s_Y sqrt(1/SSX + a²/SSM), the others alike
    total:     exposure c + b a, with residual sum of squares SSE_Y + b² SSM

Orthogonality is no restriction: an effect of the exposure depends on the covariates only through what they leave of
it, and so does the standard error of each. The free numbers are found by least squares, each figure weighed by half a
unit of its last digit.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from scipy.optimize import least_squares

from bayesmed.core.errors import DataError
from bayesmed.core.mapping import Array
from bayesmed.study.figures import Figure
from bayesmed.study.published import Moments

INTERCEPT = "Intercept"
RESIDUAL = "residual"
"""In place of a term: the equation's residual SD."""
FINEST = 1e-9
"""Figures are not taken as more exact than this, relative."""
WITHIN = 1.05
"""How many half units a figure may be off before it is said to contradict the others."""

Key = tuple[str, str, str]
"""Equation, term, and which of its figures."""


@dataclass(frozen=True, eq=False)
class Layout:
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


@dataclass(frozen=True, eq=False)
class Solution:
    """Free numbers that come closest to the figures."""

    layout: Layout
    keys: tuple[Key, ...]
    names: tuple[str, ...]
    printed: Array
    half: Array
    fixed: Array
    free: Array
    theta: Array

    @classmethod
    def of(cls, layout: Layout, figures: Mapping[Key, Figure], fixed: Array, free: Array) -> Solution:
        """Return the solution for some figures, from `fixed`, of which those marked `free` move."""
        printed = np.array([one.value for one in figures.values()])
        # Figures given to the last bit need room for rounding in arithmetic.
        half = np.array([max(one.half, FINEST * abs(one.value)) for one in figures.values()])
        names = tuple(one.name for one in figures.values())
        made = cls(layout, tuple(figures), names, printed, half, fixed, free, fixed[free])
        found: Any = least_squares(made.misfit, fixed[free], x_scale="jac", xtol=1e-15, ftol=1e-15, gtol=1e-15)
        return replace(made, theta=found.x)

    def implied(self, theta: Array) -> Array:
        """Return the figures that free numbers imply, in the order of the printed ones."""
        return self.layout.implied(self._whole(theta), self.keys)

    def moments_at(self, theta: Array) -> Moments:
        """Return the means and covariances that free numbers imply."""
        return self.layout.moments(self._whole(theta))

    def misfit(self, theta: Array) -> Array:
        """Return how many half units of its last digit each figure is off."""
        return (self.implied(theta) - self.printed) / self.half

    @property
    def worst(self) -> float:
        """How many half units the figure that is farthest off is off."""
        return float(np.abs(self.misfit(self.theta)).max())

    def check(self) -> None:
        """Raise a DataError that names the figures which contradict the others, if some do."""
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
