"""The size √(R²_M R²_Y) of the correlation that one common cause leaves, by its two shares of variance."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import Protocol

import numpy as np
from scipy.special import betainc, betaincinv, betaln, hyp2f1, logsumexp, xlog1py, xlogy

from bayesmed.core.errors import PriorError
from bayesmed.priors.arguments import positive
from bayesmed.priors.cdf_table import CdfTable
from bayesmed.priors.prior import Floats
from bayesmed.priors.quadrature import panels

__all__ = ["BetaShare", "Size", "size_of"]

MOST_CERTAIN = 20_000
BLOCK = 64


@dataclass(frozen=True)
class BetaShare:
    """An uncertain share of variance, Beta(`alpha`, `beta`), of mean alpha/(alpha + beta).

    Examples
    --------
    >>> BetaShare(2, 10)
    BetaShare(alpha=2.0, beta=10.0)
    """

    alpha: float
    beta: float

    def __post_init__(self) -> None:
        object.__setattr__(self, "alpha", positive("BetaShare", "alpha", self.alpha))
        object.__setattr__(self, "beta", positive("BetaShare", "beta", self.beta))


class Size(Protocol):
    """A distribution on [0, 1) of s = |ρ|; arrays have one dimension."""

    largest: float
    """The upper end of its support."""

    def logpdf(self, s: Floats) -> Floats:
        """Log density at points of (0, largest)."""
        ...

    def cdf(self, s: Floats) -> Floats:
        """P(|ρ| ≤ s)."""
        ...

    def ppf(self, q: Floats) -> Floats:
        """Quantiles."""
        ...

    def odds_moments(self) -> tuple[float, float]:
        """E|r| and E[r²]."""
        ...


@lru_cache(maxsize=64)
def size_of(first: float | BetaShare, second: float | BetaShare) -> Size:
    """Return the distribution of the root of the product of two shares, at least one of them uncertain."""
    for share in (first, second):
        if isinstance(share, BetaShare) and share.alpha + share.beta > MOST_CERTAIN:
            raise PriorError(
                f"SharedCause: {share!r} is as good as certain; give the number"
                f" {share.alpha / (share.alpha + share.beta):.4g} itself, or shapes that add up to"
                f" {MOST_CERTAIN} at most"
            )
    if isinstance(first, BetaShare) and isinstance(second, BetaShare):
        return _BothUncertain(first, second)
    if isinstance(first, BetaShare) and not isinstance(second, BetaShare):
        return _OneUncertain(second, first)
    if isinstance(second, BetaShare) and not isinstance(first, BetaShare):
        return _OneUncertain(first, second)
    raise TypeError("two fixed shares give one fixed size")


class _OneUncertain:
    """|ρ| = √(c B) with c fixed and B ~ Beta(a, b); everything is in closed form."""

    def __init__(self, fixed: float, share: BetaShare) -> None:
        self.fixed, self.a, self.b = fixed, share.alpha, share.beta
        self.largest = math.sqrt(fixed)

    def logpdf(self, s: Floats) -> Floats:
        x = s**2 / self.fixed
        log_beta = xlogy(self.a - 1, x) + xlog1py(self.b - 1, -x) - betaln(self.a, self.b)
        with np.errstate(divide="ignore"):
            log_density: Floats = log_beta + np.log(2 * s / self.fixed)
        return log_density

    def cdf(self, s: Floats) -> Floats:
        cdf: Floats = betainc(self.a, self.b, np.minimum(s**2 / self.fixed, 1.0))
        return cdf

    def ppf(self, q: Floats) -> Floats:
        ppf: Floats = np.sqrt(self.fixed * betaincinv(self.a, self.b, q))
        return ppf

    def odds_moments(self) -> tuple[float, float]:
        """By Euler's integral: E(1 − cB)^−p = ₂F₁(p, a; a + b; c)."""
        a, b, c = self.a, self.b, self.fixed
        root = math.sqrt(c) * math.exp(float(betaln(a + 0.5, b) - betaln(a, b)))
        first = root * float(hyp2f1(0.5, a + 0.5, a + b + 0.5, c))
        # r² = cB/(1 − cB), one power of B taken out so that nothing cancels where c is small
        second = c * a / (a + b) * float(hyp2f1(1.0, a + 1, a + b + 1, c))
        return first, second


class _BothUncertain:
    """|ρ| = √(B₁ B₂), the shares independent, on the scale t = logit |ρ|.

    The density of the product is an integral over B₁, done by a double-exponential rule; its logarithm is a
    spline in t, whose exponential is integrated for the cdf. At the ends t has exponential tails, of rates
    2·min(a) below and b₁ + b₂ above.
    """

    largest = 1.0

    def __init__(self, first: BetaShare, second: BetaShare) -> None:
        from scipy.interpolate import CubicSpline

        self.first, self.second = first, second
        self.rate_above = first.beta + second.beta
        knots = self._knots()
        self._spline = CubicSpline(knots, self._log_density_t(knots))
        points, weights = panels(knots, nodes=8)
        masses = (weights * np.exp(self._spline(points))).reshape(-1, 8).sum(axis=1)
        density = np.exp(self._spline(knots))
        cumulative = np.concatenate([[0.0], np.cumsum(masses)])
        self.total = float(cumulative[-1])
        if abs(self.total - 1) > 1e-7:
            raise PriorError(
                f"SharedCause: {first!r} and {second!r} are too extreme to compute with: their joint"
                f" probability comes out as {self.total!r}; give larger shapes or a fixed share"
            )
        self._table = CdfTable(knots, cumulative / self.total, density / self.total)

    def logpdf(self, s: Floats) -> Floats:
        with np.errstate(divide="ignore"):
            t = np.log(s) - np.log1p(-s)
        knots = self._table.knots
        inner = np.clip(t, knots[0], knots[-1])
        log_density: Floats = self._spline(inner)
        below, above = t < knots[0], t > knots[-1]
        log_density[below] += 2 * min(self.first.alpha, self.second.alpha) * (t - knots[0])[below]
        log_density[above] -= self.rate_above * (t - knots[-1])[above]
        # dt/ds = 1/(s(1 − s))
        with np.errstate(divide="ignore", invalid="ignore"):
            result: Floats = log_density - np.log(s) - np.log1p(-s)
        return result

    def cdf(self, s: Floats) -> Floats:
        with np.errstate(divide="ignore"):
            return self._table.cdf(np.log(s) - np.log1p(-s))

    def ppf(self, q: Floats) -> Floats:
        t = self._table.quantile(q)
        ppf: Floats = 1 / (1 + np.exp(-t))
        return ppf

    def odds_moments(self) -> tuple[float, float]:
        """By quadrature over t, with the exponential tail beyond the last knot in closed form."""
        points, weights = panels(self._table.knots, nodes=8)
        s, rest = 1 / (1 + np.exp(-points)), 1 / (1 + np.exp(points))
        odds = s / np.sqrt(rest * (1 + s))
        mass = weights * np.exp(self._spline(points)) / self.total
        last = float(self._table.knots[-1])
        # beyond it 1 − s = e^−t nearly, so r = e^{t/2}/√2
        log_end = float(self._spline(last)) - math.log(self.total)
        moments = []
        for power in (1, 2):
            rate = self.rate_above - power / 2
            if rate <= 0:
                moments.append(math.inf)
                continue
            tail = math.exp(log_end + power * last / 2) / 2 ** (power / 2) / rate
            moments.append(float(np.sum(mass * odds**power)) + tail)
        return moments[0], moments[1]

    def _knots(self) -> Floats:
        """Places in t that hold all but 1e-16, dense where most of the mass is and where |ρ| bends most."""
        scan = np.linspace(-340.0, 390.0, 400)
        for _ in range(4):
            log_density = self._log_density_t(scan)
            kept = np.flatnonzero(log_density > log_density.max() - 60)
            scan = np.linspace(scan[max(kept[0] - 1, 0)], scan[min(kept[-1] + 1, scan.size - 1)], 400)
        log_density = self._log_density_t(scan)
        core = scan[log_density > log_density.max() - 15]
        parts = [scan, np.linspace(core[0], core[-1], 600), np.linspace(-12.0, 12.0, 601)]
        knots: Floats = np.sort(np.concatenate(parts))
        knots = knots[(knots >= scan[0]) & (knots <= scan[-1])]
        # knots nearer than this add nothing, and the rounding of their masses would spoil the slopes between
        apart: Floats = knots[np.diff(knots, prepend=-np.inf) > 1e-7]
        return apart

    def _log_density_t(self, t: Floats) -> Floats:
        """Log density of t = logit √(B₁B₂), by ∫ f₁(m) f₂(v/m) dm/m over d = logit m − logit v, d > 0."""
        a1, b1, a2, b2 = self.first.alpha, self.first.beta, self.second.alpha, self.second.beta
        step = min(0.02, 0.2 / math.sqrt(max(a1 + b1, a2 + b2)))
        tau = np.arange(-5.0, 7.5, step)
        d = np.exp(tau - np.exp(-tau))
        log_weight = math.log(step) + np.log(d) + np.log1p(np.exp(-tau))
        logit_v = t - np.logaddexp(math.log(2), -t)
        log_v, log_not_v = -np.logaddexp(0, -logit_v), -np.logaddexp(0, logit_v)
        blocks = range(0, t.size, BLOCK)  # a block at a time, to keep memory small
        log_integrals: list[Floats] = []
        for rows in (slice(start, start + BLOCK) for start in blocks):
            y = logit_v[rows, None] + d
            log_m, log_not_m = -np.logaddexp(0, -y), -np.logaddexp(0, y)
            log_x = log_v[rows, None] - log_m
            log_not_x = log_not_v[rows, None] + np.log(-np.expm1(-d))  # 1 − v/m = (1 − v)(1 − e^−d)
            log_terms = (a1 - 1) * log_m + b1 * log_not_m + (a2 - 1) * log_x + (b2 - 1) * log_not_x
            log_integrals.append(np.asarray(logsumexp(log_terms + log_weight, axis=1), dtype=float))
        log_density_v = np.concatenate(log_integrals) - betaln(a1, b1) - betaln(a2, b2)
        # dv/dt = 2v(1 − s)
        return np.asarray(log_density_v + math.log(2) + log_v - np.logaddexp(0, t), dtype=float)
