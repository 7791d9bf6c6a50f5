"""How far one belief's answer lies from another's, on the same draws, with the error of the difference."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bayesmed.conclusions.accuracy import effective_draws, influence
from bayesmed.conclusions.view import View
from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array

if TYPE_CHECKING:
    from bayesmed.conclusions.comparison import ComparisonResult


def differences(compared: ComparisonResult, reference: str | None = None) -> pd.DataFrame:
    """Return each belief's probability and mean of the claim's effect less those of a reference belief.

    Parameters
    ----------
    compared : ComparisonResult
    reference : str, optional
        A label; the first belief if left out.

    Returns
    -------
    pandas.DataFrame
        One row per other belief and moderator point: prior, moderators; probability, its difference, and mcse; mean,
        the difference of means, nan where one is infinite, and mean_mcse. Beliefs that share draws are compared draw by
        draw, so that what the draws have in common drops out of the error.

    Raises
    ------
    ArgumentError
        If the reference is none of the labels.
    """
    labels = list(compared.beliefs)
    base = labels[0] if reference is None else reference
    if base not in compared.beliefs:
        raise ArgumentError(f"reference={reference!r} is none of the beliefs compared: {labels!r}")
    other = compared.views[base]
    other_probability, other_mean = _by_draw(other, compared)
    parts = []
    for label in labels:
        if label == base:
            continue
        one = compared.views[label]
        probability, mean = _by_draw(one, compared)
        gap, error = _apart([probability, other_probability], one, other)
        mean_gap, mean_error = _apart([mean, other_mean], one, other)
        columns = {"probability": gap, "mcse": error, "mean": mean_gap, "mean_mcse": mean_error}
        parts.append(pd.DataFrame({"prior": label, **compared.points.columns, **columns}))
    if not parts:
        raise ArgumentError("differences: there is one belief only; compare two or more")
    return pd.concat(parts, ignore_index=True)


def _by_draw(seen: View, compared: ComparisonResult) -> tuple[Array, Array]:
    """Return each draw's probability and mean over the belief, the mean nan where it is infinite."""
    effect = compared.claim.effect
    mean, _ = seen.moments(effect)
    values = np.where(np.isfinite(mean)[:, None], seen.mean_by_draw(effect), np.nan)
    return seen.probability_by_draw(effect, compared.claim), values


def _apart(values: list[Array], one: View, other: View) -> tuple[Array, Array]:
    """Return the difference of two averages and its Monte Carlo error."""
    averages = [np.average(v, axis=1, weights=seen.weights) for v, seen in zip(values, (one, other), strict=True)]
    shares = [influence(v, a, seen.weights) for v, a, seen in zip(values, averages, (one, other), strict=True)]
    gap = averages[0] - averages[1]
    if one.draws_of is other.draws_of:
        return gap, _error(shares[0] - shares[1], one)
    return gap, np.hypot(_error(shares[0], one), _error(shares[1], other))


def _error(added: Array, seen: View) -> Array:
    known = np.isfinite(added).all(axis=1)
    safe = np.where(known[:, None], added, 0.0)
    return np.where(known, safe.std(axis=1) / np.sqrt(effective_draws(safe, seen.draws_of)), np.nan)
