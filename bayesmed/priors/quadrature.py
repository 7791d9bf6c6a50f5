"""Composite Gauss–Legendre quadrature over stated breaks, for the moments that have no formula."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

import numpy as np
from numpy.typing import ArrayLike

from bayesmed.priors.prior import Floats

__all__ = ["integrate", "panels"]


def integrate(function: Callable[[Floats], Floats], breaks: ArrayLike, nodes: int = 32) -> float:
    """Return the integral of `function` from the first to the last of `breaks`.

    Parameters
    ----------
    function : callable
        Takes and returns an array; smooth between neighbouring breaks.
    breaks : array_like
        Points between which the rule is applied; repeats are dropped and order does not matter.
    nodes : int
        Points of the rule in each panel.
    """
    points, weights = panels(breaks, nodes)
    return float(np.sum(weights * function(points)))


def panels(breaks: ArrayLike, nodes: int = 32) -> tuple[Floats, Floats]:
    """Return the points and weights of the composite rule over `breaks`, each of shape (panels × nodes,)."""
    edges = np.unique(np.asarray(breaks, dtype=float))
    unit_points, unit_weights = _rule(nodes)
    half = np.diff(edges)[:, None] / 2
    middle = (edges[:-1] + edges[1:])[:, None] / 2
    return (middle + half * unit_points).ravel(), (half * unit_weights).ravel()


@cache
def _rule(nodes: int) -> tuple[Floats, Floats]:
    points, weights = np.polynomial.legendre.leggauss(nodes)
    return points, weights
