"""Draws at moderator points as a labelled array."""

from typing import Any

import numpy as np
import xarray as xr

from bayesmed.core.mapping import Array
from bayesmed.study.points import Points


def labelled(values: Array, points: Points, shape: tuple[int, int]) -> xr.DataArray:
    """Return draws with dims chain, draw and one per listed moderator; scalars become coordinates.

    Parameters
    ----------
    values : array, shape (point, chain * draw)
    points : Points
    shape : tuple of two ints
        Chains and draws per chain.
    """
    chains, draws = shape
    coords: dict[str, Any] = {"chain": np.arange(chains), "draw": np.arange(draws)}
    coords.update({name: list(along) for name, along in points.dims.items()})
    coords.update(points.scalars)
    gridded = np.moveaxis(values.reshape(*points.shape, chains, draws), (-2, -1), (0, 1))
    return xr.DataArray(gridded, coords=coords, dims=("chain", "draw", *points.dims))
