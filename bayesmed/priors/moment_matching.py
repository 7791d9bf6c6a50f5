"""Parameters of families from the mean and SD of ρ, for many pairs of these at once."""

from __future__ import annotations

import numpy as np

from bayesmed.priors.fisher_normal import FARTHEST
from bayesmed.priors.prior import Floats

__all__ = ["fisher_normal", "stretched_beta", "truncated_normal"]

CONVERGED = 1e-9
MOST_STEPS = 60
HALF_NORMAL = float(np.sqrt((1 - 2 / np.pi) / (2 / np.pi)))  # SD over mean
WINDOW = 12.0  # SDs about the mean, outside which a log-concave density has nothing


def stretched_beta(mean: Floats, sd: Floats) -> Floats:
    """Return the shapes of StretchedBeta, shape (pair, 2), nan where there are none.

    With q = (1 + mean)/2 they are q·n and (1 − q)·n, n + 1 = (1 − mean²)/sd².
    """
    total = (1 - mean) * (1 + mean) / sd**2 - 1
    shapes = np.column_stack([(1 + mean) / 2 * total, (1 - mean) / 2 * total])
    shapes[~(total > 0)] = np.nan
    return shapes


def truncated_normal(mean: Floats, sd: Floats, lower: float, upper: float) -> Floats:
    """Return mean and SD of TruncatedNormal before it is cut off, shape (pair, 2), nan where there are none.

    By Newton steps on the exponential family exp(e₁z + e₂z²), z = (ρ − mean)/sd.
    The negative log likelihood of z's first two moments, 0 and 1, is convex in (e₁, e₂), so damped steps cannot
    fail. Where the solution has e₂ ≥ 0, or its centre outside the bounds, no member has these moments.
    """
    parameters = np.full((mean.size, 2), np.nan)
    # With its centre on a bound and little of it cut off, a member is a half normal; no other is so wide.
    which = np.flatnonzero(sd < 1.001 * HALF_NORMAL * np.minimum(mean - lower, upper - mean))
    if which.size == 0:
        return parameters
    centre, spread = mean[which], sd[which]
    start = np.maximum((lower - centre) / spread, -WINDOW)
    stop = np.minimum((upper - centre) / spread, WINDOW)
    points, weights = np.polynomial.legendre.leggauss(96)
    z = (start + stop)[:, None] / 2 + (stop - start)[:, None] / 2 * points
    natural = _matched(z, weights)
    with np.errstate(invalid="ignore", divide="ignore"):
        scale = spread / np.sqrt(-2 * natural[:, 1])
        middle = centre + scale**2 * natural[:, 0] / spread
    is_member = np.isfinite(scale) & (middle >= lower) & (middle <= upper)
    parameters[which[is_member]] = np.column_stack([middle, scale])[is_member]
    return parameters


def _matched(z: Floats, weights: Floats) -> Floats:
    """Return (e₁, e₂), shape (pair, 2), for which z has mean 0 and mean square 1; nan where not found."""
    natural = np.tile([0.0, -0.5], (z.shape[0], 1))
    active = np.arange(z.shape[0])
    step = np.zeros_like(natural)
    loss = np.full(z.shape[0], np.inf)
    for _ in range(MOST_STEPS):
        e, z_active = natural[active] + step[active], z[active]
        exponent = (e[:, 1:] * z_active + e[:, :1]) * z_active
        top = exponent.max(axis=1, keepdims=True)
        mass = np.exp(exponent - top) * weights
        total = mass.sum(axis=1)
        new_loss = np.log(total) + top[:, 0] - e[:, 1]
        worse = new_loss > loss[active] + 1e-12
        step[active[worse]] /= 4
        better, kept = active[~worse], ~worse
        natural[better], loss[better] = e[kept], new_loss[kept]
        powers, moments = mass[kept] / total[kept, None], []
        for _ in range(4):
            powers *= z_active[kept]
            moments.append(powers.sum(axis=1))
        m1, m2, m3, m4 = moments
        gradient = np.column_stack([m1, m2 - 1])
        a, b, c = m2 - m1**2, m3 - m1 * m2, m4 - m2**2
        determinant = a * c - b**2
        direction = np.column_stack([c * gradient[:, 0] - b * gradient[:, 1], a * gradient[:, 1] - b * gradient[:, 0]])
        step[better] = -direction / determinant[:, None]
        done = np.abs(gradient).max(axis=1, initial=0.0) < CONVERGED
        active = np.setdiff1d(active, better[done], assume_unique=True)
        if active.size == 0:
            break
    natural[active] = np.nan
    return natural


def fisher_normal(mean: Floats, sd: Floats) -> Floats:
    """Return mean and SD of FisherNormal, shape (pair, 2), nan where there are none.

    By Newton steps on scales on which the mean and SD of ρ are nearly lines in them.
    With E over z standard normal by the trapezoidal rule, whose error for tanh(μ + sz) is below 1e-5 at the
    largest s and vanishes for smaller ones.
    """
    z = np.linspace(-8.5, 8.5, 171)
    weights = np.exp(-0.5 * z**2) / np.sum(np.exp(-0.5 * z**2))
    parameters = np.full((mean.size, 2), np.nan)
    rest = 1 - mean**2 - sd**2  # E[1 − ρ²]
    which = np.flatnonzero(rest > 0)
    goal = np.column_stack([np.arctanh(mean[which]), np.log(sd[which]) - 0.5 * np.log(rest[which])])
    place = np.column_stack([goal[:, 0], np.clip(goal[:, 1], -20.0, np.log(FARTHEST))])
    active = np.arange(which.size)
    for _ in range(MOST_STEPS):
        centre, spread = place[active, :1], np.exp(place[active, 1:])
        rho = np.tanh(centre + spread * z)
        slope = 1 - rho**2
        bend = 2 * rho * slope
        first, left = _expect(rho, weights), _expect(slope, weights)
        by_centre = left, _expect(bend, weights)
        by_spread = _expect(slope, z * weights) * spread[:, 0], _expect(bend, z * weights) * spread[:, 0]
        variance = _expect((rho - first[:, None]) ** 2, weights)
        gap = np.column_stack([np.arctanh(first), 0.5 * np.log(variance / left)]) - goal[active]
        (a, b), (c, d) = (
            (by[0] / (1 - first**2), 0.5 * ((by[1] - 2 * first * by[0]) / variance + by[1] / left))
            for by in (by_centre, by_spread)
        )
        determinant = a * d - b * c
        move = -np.column_stack([d * gap[:, 0] - c * gap[:, 1], a * gap[:, 1] - b * gap[:, 0]])
        with np.errstate(divide="ignore", invalid="ignore"):
            move /= determinant[:, None]
        done = np.abs(gap).max(axis=1, initial=0.0) < CONVERGED
        parameters[which[active[done]]] = np.column_stack([centre[:, 0], spread[:, 0]])[done]
        place[active] += np.clip(move, -1.0, 1.0)
        # Where the search leaves every parameter that could be returned, there is no member.
        lost = ~(np.abs(place[active]).max(axis=1, initial=0.0) < 20)
        active = active[~(done | lost)]
        if active.size == 0:
            break
    parameters[(np.abs(parameters) > FARTHEST).any(axis=1)] = np.nan
    return parameters


def _expect(values: Floats, weights: Floats) -> Floats:
    """Return the weighted sum of each row, without the threads of a linear algebra library, which cost more."""
    return np.asarray(np.einsum("ij,j->i", values, weights))
