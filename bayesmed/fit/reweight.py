"""Another belief about rho by importance weights, where rho was sampled jointly with the rest.

The weight of a draw is the ratio of the two beliefs' densities at its rho; the largest are smoothed by a
generalised Pareto distribution (Vehtari, Simpson, Gelman, Yao & Gabry 2024, JMLR 25(72)), whose shape says whether
the weights can be trusted.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np

from bayesmed.core.mapping import Array
from bayesmed.fit.result import FitResult

LARGEST_SHAPE = 0.7
LEAST_EFFECTIVE = 400
"""Weights worth fewer draws than this are not used: the tails of an interval need as many."""


@dataclass(frozen=True, eq=False)
class Reweighting:
    """Weights of a fit's draws under another belief.

    Attributes
    ----------
    weights : array, shape (draw,)
        They add up to one.
    shape : float
        Pareto k-hat of the largest weights.
    effective : float
        How many equal weights they are worth.
    """

    weights: Array
    shape: float
    effective: float

    @property
    def usable(self) -> bool:
        """True if neither the shape nor the effective number is out of bounds."""
        return self.shape <= LARGEST_SHAPE and self.effective >= LEAST_EFFECTIVE


def reweight(result: FitResult, belief: Any) -> Reweighting | None:
    """Return weights that turn a joint fit's draws into those under another belief.

    None where there can be no weights: one of the beliefs has atoms, or the new one allows correlations that the
    fit's own belief excluded, so that no draw stands for them.
    """
    base = result.belief
    if base is None or base.atoms() or belief.atoms():
        return None
    (lower, upper), (new_lower, new_upper) = base.support(), belief.support()
    if new_lower < lower or new_upper > upper:
        return None
    rho = result.flat("rho")
    log_ratio = np.asarray(belief.logpdf(rho) - base.logpdf(rho))
    inside = np.isfinite(log_ratio)
    if inside.sum() < LEAST_EFFECTIVE:
        return Reweighting(np.full(len(rho), 1 / len(rho)), np.inf, 0.0)
    weights = inside / inside.sum()
    if np.ptp(log_ratio[inside]) < 1e-10:
        return Reweighting(weights, -np.inf, float(inside.sum()))
    from arviz_stats.base import array_stats

    # Draws outside the new belief's support weigh nothing and are no part of the tail that is fitted.
    # psislw takes log likelihoods, of which the log weights are the negative.
    smoothed, shape = array_stats.psislw(-log_ratio[inside])
    weights[inside] = np.exp(smoothed - smoothed.max())
    weights /= weights.sum()
    return Reweighting(weights, float(shape), float(1 / np.sum(weights**2)))
