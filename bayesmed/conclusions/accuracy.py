"""Monte Carlo error of averages over draws, with effective sample sizes where draws depend on each other."""

import numpy as np

from bayesmed.core.mapping import Array
from bayesmed.fit.result import FitResult


def effective_draws(values: Array, result: FitResult) -> Array:
    """Return how many independent draws the average of each row is worth.

    Parameters
    ----------
    values : array, shape (row, draw)
    result : FitResult
        Tells how draws divide into chains and whether they are independent.

    Returns
    -------
    array, shape (row,)
    """
    rows, draws = values.shape
    if result.independent or result.shape[1] < 4:
        return np.full(rows, float(draws))
    from arviz_stats.base import array_stats

    chains, per_chain = result.shape
    ess = np.asarray(array_stats.ess(values.reshape(rows, chains, per_chain), chain_axis=1, draw_axis=2, method="mean"))
    # A row without spread has no autocorrelation to estimate.
    return np.where(np.isfinite(ess), np.minimum(ess, draws), draws)


def mean_with_error(values: Array, result: FitResult, weights: Array | None = None) -> tuple[Array, Array]:
    """Return the mean of each row, and its Monte Carlo error.

    With importance weights, the error is that of the ratio they form, by linearisation.

    Values are probabilities per draw. Where every draw agrees, on 0, on 1, or on a mixture of atoms, the sample
    spread is zero, yet the probability is only known to be within about one effective draw, which is then the error.
    """
    mean = np.average(values, axis=1, weights=weights)
    scaled = influence(values, mean, weights)
    ess = effective_draws(scaled, result)
    centred = scaled - (mean if weights is None else scaled.mean(axis=1))[:, None]
    spread = np.sqrt(np.einsum("ij,ij->i", centred, centred) / values.shape[1])
    # Draws that all agree differ from their mean by rounding alone.
    unanimous = spread < 1e-9
    unanimous[unanimous] = np.ptp(values[unanimous], axis=1) == 0
    return mean, np.where(unanimous, 1 / ess, spread / np.sqrt(ess))


def influence(values: Array, mean: Array, weights: Array | None) -> Array:
    """Return what each draw adds to an average, shape (row, draw): its spread over sqrt(draws) is the average's.

    With importance weights, by linearisation of the ratio they form.
    """
    return values if weights is None else (values - mean[:, None]) * weights * len(weights)
