"""The probability of a claim over the plane of a belief's mean and SD of rho, and where it meets what is required."""

from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from scipy.special import ndtr

from bayesmed.conclusions.accuracy import effective_draws
from bayesmed.conclusions.claim import Claim
from bayesmed.conclusions.envelope import ClaimLines, claim_lines
from bayesmed.core.errors import ArgumentError
from bayesmed.core.knots import FARTHEST, crossings, knots_for, weights_at
from bayesmed.core.mapping import Array
from bayesmed.fit.result import FitResult
from bayesmed.priors.by_moments import Members, members

MEANS = tuple(round(-0.9 + 0.03 * k, 2) for k in range(61))
SDS = tuple(round(0.01 * (k + 1), 2) for k in range(60))
PROBES = 5
UNANIMOUS = 1e-9


def prior_map(
    result: FitResult,
    family: str = "StretchedBeta",
    mean: Sequence[float] | float | None = None,
    sd: Sequence[float] | float | None = None,
    at: Any = None,
    claim: Claim | None = None,
    bounds: tuple[float, float] | None = None,
) -> xr.DataArray:
    """Return the probability of a claim under every belief of a family, laid out by its mean and SD of rho.

    Parameters
    ----------
    result : FitResult
    family : {"StretchedBeta", "TruncatedNormal", "FisherNormal"}
    mean : list of float, optional
        Means of rho, increasing, strictly between -1 and 1; -0.9, -0.87, …, 0.9 if left out.
    sd : list of float, optional
        SDs of rho, increasing, above 0; 0.01, 0.02, …, 0.6 if left out.
    at : dict, optional
    claim : Claim, optional
    bounds : (float, float), optional
        Bounds of the TruncatedNormal family, ±0.99 if left out.

    Returns
    -------
    xarray.DataArray
        ``probability`` with one dim per listed moderator, then mean and sd; nan where the family has no member with
        that mean and SD. Coordinate ``mcse`` of the same shape holds its Monte Carlo error. Attributes: claim,
        required, family.

    Notes
    -----
    Within 3e-4 of averaging each belief's distribution function over the tipping draws, whatever the draws, and
    within 1e-4 for draws that spread: between knots the distribution function is replaced by the cubic with its
    values and slopes, so that one set of weights of the draws serves all beliefs. Where draws depend on each other,
    their effective number for mcse is the least found for five beliefs of the plane.

    Raises
    ------
    ArgumentError
        For a mean or SD that is not allowed, or values not in increasing order.
    PriorError
        For an unknown family or bounds it does not take.
    FitError
        If the data inform rho in this fit.
    """
    means = _axis("mean", MEANS if mean is None else mean, -1.0, 1.0)
    sds = _axis("sd", SDS if sd is None else sd, 0.0, 1.0)
    lines = claim_lines(result, at, claim, "prior_map")
    pair_mean, pair_sd = (grid.ravel() for grid in np.meshgrid(means, sds, indexing="ij"))
    found = members(family, pair_mean, pair_sd, bounds)
    probability, variance = _over_members(lines, found, pair_sd)
    worth = _effective(lines, found, pair_mean, pair_sd)[:, None]
    # As everywhere, draws that all agree leave a probability known to within about one of them.
    unanimous = np.minimum(probability, 1 - probability) < UNANIMOUS
    error = np.where(unanimous, 1 / worth, np.sqrt(variance / worth))
    shape = (*lines.points.shape, means.size, sds.size)
    dims = (*lines.points.dims, "mean", "sd")
    coords: dict[str, Any] = {name: list(values) for name, values in lines.points.dims.items()}
    coords.update(mean=means, sd=sds, mcse=(dims, error.reshape(shape)), **lines.points.scalars)
    attributes = {"claim": str(lines.claim), "required": lines.claim.required, "family": family}
    mapped = xr.DataArray(probability.reshape(shape), coords, dims, name="probability", attrs=attributes)
    mapped["mean"].attrs["long_name"] = "mean of rho under the belief"
    mapped["sd"].attrs["long_name"] = "SD of rho under the belief"
    return mapped


def contour(mapped: xr.DataArray, level: float | None = None) -> pd.DataFrame:
    """Return where the probability on a map crosses a level: for each mean of rho, the SDs at which it does.

    Parameters
    ----------
    mapped : xarray.DataArray
        Of ``Fit.prior_map``.
    level : float, optional
        Between 0 and 1; what the claim requires if left out.

    Returns
    -------
    pandas.DataFrame
        A row per crossing: the moderators, mean, sd, and turn, "falls" where the probability falls below the level
        as the SD grows and "rises" where it reaches it. Between two SDs of the map the probability is taken as
        straight. No row for a mean at which the level is not crossed.

    Examples
    --------
    >>> plane = xr.DataArray([[0.99, 0.91]], {"mean": [0.1], "sd": [0.1, 0.2]}, attrs={"required": 0.95})
    >>> contour(plane).round(3).to_dict("records")
    [{'mean': 0.1, 'sd': 0.15, 'turn': 'falls'}]
    """
    if not isinstance(mapped, xr.DataArray) or not {"mean", "sd"} <= set(mapped.dims):
        raise ArgumentError("contour: mapped must be what fit.prior_map returned, with dims mean and sd")
    wanted = mapped.attrs.get("required") if level is None else level
    if isinstance(wanted, bool) or not isinstance(wanted, int | float | np.number) or not 0 < wanted < 1:
        raise ArgumentError(f"contour: level={level!r} must be a probability between 0 and 1, for example 0.95")
    moderators = [str(name) for name in mapped.dims if name not in ("mean", "sd")]
    rows = mapped.transpose(*moderators, "mean", "sd").to_numpy()
    excess, sds = rows - float(wanted), mapped["sd"].to_numpy()
    before, after = excess[..., :-1], excess[..., 1:]
    # Comparisons with nan are false: a cell without a member has no crossing beside it.
    crossed = ((before >= 0) & (after < 0)) | ((before < 0) & (after >= 0))
    place = np.nonzero(crossed)
    start, stop, k = before[crossed], after[crossed], place[-1]
    columns: dict[str, Any] = {
        name: mapped[name].to_numpy()[where] for name, where in zip([*moderators, "mean"], place[:-1], strict=True)
    }
    columns["sd"] = sds[k] + (sds[k + 1] - sds[k]) * start / (start - stop)
    columns["turn"] = np.where(start >= 0, "falls", "rises")
    return pd.DataFrame(columns)


def _over_members(lines: ClaimLines, found: Members, sd: Array) -> tuple[Array, Array]:
    """Return probability and variance over draws, each of shape (point, pair)."""
    tipping = crossings(lines.constant, lines.slope, lines.claim.limit, lines.claim.direction)
    with np.errstate(divide="ignore"):
        ends = np.clip(np.arctanh([found.lower, found.upper]), -FARTHEST, FARTHEST)
    first, last = np.clip(tipping.ends, *ends)
    probability = np.full((len(lines.constant), sd.size), np.nan)
    variance = probability.copy()
    existing = np.flatnonzero(found.exist)
    if existing.size == 0:
        return probability, variance
    # Narrow beliefs need close knots, wide ones do not: one set of knots to each doubling of the SD.
    octave = np.floor(np.log2(sd[existing] / sd[existing].min()) + 1e-9)
    for k in np.unique(octave):
        which = existing[octave == k]
        weights = weights_at(tipping, knots_for(float(sd[which].min()), float(first), float(last)))
        mean, spread = weights.probability(*found.at(which, weights.knots))
        probability[:, which], variance[:, which] = mean.T, spread.T
    return probability, variance


def _effective(lines: ClaimLines, found: Members, mean: Array, sd: Array) -> Array:
    """Return how many independent draws the probabilities are worth, shape (point,).

    It hardly depends on the shape of a belief, so normal ones of the same mean and SD stand for the members.
    """
    points, draws = lines.constant.shape
    existing = np.flatnonzero(found.exist)
    if lines.result.independent or existing.size == 0:
        return np.full(points, float(draws))
    probes = existing[np.linspace(0, existing.size - 1, PROBES).astype(int)]
    limit, direction = lines.claim.limit, lines.claim.direction
    tipping = crossings(lines.constant, lines.slope, limit, direction)
    rho, least = np.tanh(tipping.place), np.full(points, float(draws))
    for pair in probes:
        by_draw = tipping.sign * ndtr((rho - mean[pair]) / sd[pair])
        least = np.minimum(least, effective_draws(by_draw, lines.result))
    return least


def _axis(name: str, values: Any, lowest: float, highest: float) -> Array:
    """Return the values of one side of the plane as an increasing array."""
    try:
        array = np.atleast_1d(np.asarray(values, dtype=float))
    except (TypeError, ValueError) as error:
        raise ArgumentError(f"prior_map: {name}={values!r} must be a number or a list of numbers") from error
    if array.ndim != 1 or array.size == 0:
        raise ArgumentError(f"prior_map: {name} has shape {array.shape}; one number or more in a list are needed")
    wrong = ~((array > lowest) & (array < highest))
    if wrong.any():
        raise ArgumentError(
            f"prior_map: {name} holds {array[wrong][0]:g}; it must lie strictly between {lowest:g} and {highest:g}"
        )
    if np.any(np.diff(array) <= 0):
        raise ArgumentError(f"prior_map: {name} must be in increasing order with no value twice")
    return array
