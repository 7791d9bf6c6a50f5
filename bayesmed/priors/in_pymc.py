"""Beliefs as variables of a PyMC model: by density where it has a formula there, else by quantiles."""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy.special import ndtr, ndtri

from bayesmed.priors.prior import Floats, Prior

__all__ = ["normal_score_table", "register"]

FARTHEST_SCORE = 8.0  # a standard normal is farther out with probability 1e-15


def register(prior: Prior, name: str) -> Any:
    """Register a fresh variable called `name` for `prior` in the current `pymc.Model` and return it.

    With a density that PyMC can write, the variable is free, on the interval transform of its support.
    Otherwise a standard normal `<name>_normal_score` is registered and ρ = ppf(Φ(score)) is a deterministic:
    the sampler then moves on a scale where the prior has no atoms, gaps or poles, whatever its shape. The
    quantile function is piecewise linear there, within 1e-5 of the prior's cdf.
    """
    import pymc as pm
    from pymc.distributions.transforms import Interval

    dist = prior._pymc_dist()
    if dist is not None:
        return pm.modelcontext(None).register_rv(
            dist, name, default_transform=None, transform=Interval(*prior.support())
        )
    score = pm.Normal(f"{name}_normal_score", 0.0, 1.0)
    return pm.Deterministic(name, _interpolated(score, *normal_score_table(prior)))


def normal_score_table(prior: Prior) -> tuple[Floats, Floats]:
    """Return normal scores and the values of ρ they stand for, both in increasing order, of equal shape.

    Linear interpolation between the entries is the quantile function on the normal scale. An atom appears as
    two scores with one value, a gap as one score with two values.
    """
    lower, upper = prior.support()
    scores = np.linspace(-FARTHEST_SCORE, FARTHEST_SCORE, 2049)
    by_score = np.column_stack([scores, prior.ppf(ndtr(scores))])
    bends = np.array(prior._bends())
    beside = (upper - lower) * 0.5 ** np.arange(1.0, 30.0, 0.125)
    near = (bends[:, None] + np.concatenate([-beside, beside])).ravel()
    near = near[(near > lower) & (near < upper)]
    values = np.unique(np.concatenate([np.linspace(lower, upper, 2049), bends, near]))
    with np.errstate(divide="ignore"):
        up_to = np.column_stack([ndtri(prior.cdf(values)), values])
        before = np.column_stack([ndtri(prior.below(values)), values])
    rows = np.concatenate([by_score, up_to, before])
    rows = rows[(np.abs(rows[:, 0]) <= FARTHEST_SCORE) & (np.abs(rows[:, 1]) < 1)]
    rows = np.unique(rows, axis=0)
    return rows[:, 0].copy(), np.maximum.accumulate(rows[:, 1])


def _interpolated(score: Any, scores: Floats, values: Floats) -> Any:
    import pytensor.tensor as pt

    last = scores.size - 1
    right = pt.clip(pt.searchsorted(pt.constant(scores), score), 1, last)
    widths = np.maximum(np.diff(scores), 1e-300)
    slopes = np.where(np.diff(scores) > 0, np.diff(values) / widths, 0.0)
    offset = pt.clip(score, scores[0], scores[last]) - pt.constant(scores)[right - 1]
    return pt.constant(values)[right - 1] + pt.constant(slopes)[right - 1] * offset
