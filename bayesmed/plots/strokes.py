"""What the picture of an effect by rho is drawn from: intervals at fixed rho, and beliefs as weights."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from bayesmed.conclusions.claim import Claim
from bayesmed.conclusions.summary import RHO_GRID
from bayesmed.conclusions.view import beliefs_along_rho, view
from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array
from bayesmed.fit.result import FitResult
from bayesmed.study.points import Points

SLICE = 0.01
"""Width of the slices of rho in which a belief's shape is drawn."""


@dataclass(frozen=True, eq=False)
class Strokes:
    """An effect at each of a list of fixed correlations.

    Attributes
    ----------
    rho : array, shape (rho,)
        Increasing.
    edges : array, shape (rho + 1,)
        Where the slice of each correlation ends.
    quantiles : array, shape (point, rho, 5)
        Lower end of the interval, 25 %, 50 %, 75 %, upper end.
    probability : array, shape (point, rho)
        Of the claim.
    weight : array, shape (rho,)
        How much the beliefs make of each slice: the average over beliefs of the probability of the slice
        divided by that of the belief's most probable slice; scaled so that the largest is 1.
    """

    rho: Array
    edges: Array
    quantiles: Array
    probability: Array
    weight: Array


def strokes(
    result: FitResult,
    beliefs: Mapping[str, Any],
    points: Points,
    claim: Claim,
    ci_prob: float,
    rho: Sequence[float] | None = None,
) -> Strokes:
    """Return the claim's effect at each fixed correlation, weighed by the beliefs.

    Where the data inform rho, each correlation needs a refit, which the fit keeps.
    """
    chosen = list(RHO_GRID) if rho is None else beliefs_along_rho(rho)
    if chosen is None or len(chosen) < 2:
        raise ArgumentError(f"rho={rho!r} must be a list of at least two numbers between -1 and 1")
    values = np.sort(np.asarray(chosen))
    tail = (1 - ci_prob) / 2
    levels = np.array([tail, 0.25, 0.5, 0.75, 1 - tail])
    quantiles = np.empty((len(points.values), len(values), len(levels)))
    probability = np.empty((len(points.values), len(values)))
    for k, value in enumerate(values):
        seen = view(result, points, float(value))
        quantiles[:, k] = seen.quantiles(claim.effect, levels)
        probability[:, k] = seen.probability(claim.effect, claim)[0]
    edges = slice_edges(values)
    return Strokes(values, edges, quantiles, probability, joint_weight(beliefs, edges))


def slice_edges(rho: Array) -> Array:
    """Return the edges half-way between correlations, the outer ones as far out, but not beyond ±1."""
    inner = (rho[1:] + rho[:-1]) / 2
    first, last = rho[0] - (inner[0] - rho[0]), rho[-1] + (rho[-1] - inner[-1])
    return np.concatenate([[max(first, -1.0)], inner, [min(last, 1.0)]])


def joint_weight(beliefs: Mapping[str, Any], edges: Array) -> Array:
    """Return how much the beliefs together make of each slice, the largest being 1; see :class:`Strokes`."""
    total = np.zeros(len(edges) - 1)
    for belief in beliefs.values():
        mass = slice_mass(belief, edges)
        if mass.max() > 0:
            total += mass / mass.max()
    return total / total.max() if total.max() > 0 else np.ones_like(total)


def slice_mass(belief: Any, edges: Array) -> Array:
    """Return P(edge <= rho < next edge) of a belief for each slice, shape (slice,)."""
    return np.maximum(np.diff(np.asarray(belief.below(edges), dtype=float)), 0.0)


type Atoms = tuple[tuple[float, float], ...]


def shape(belief: Any, low: float, high: float) -> tuple[Array, Array, Atoms]:
    """Return a belief's shape between two correlations: slice edges, height of its smooth part, and atoms.

    The smooth part is scaled to a largest height of 1; atoms are pairs of value and probability.
    """
    edges = np.linspace(low, high, max(2, round((high - low) / SLICE)) + 1)
    mass = slice_mass(belief, edges)
    atoms = tuple((float(value), float(probability)) for value, probability in belief.atoms())
    for value, probability in atoms:
        if low <= value < high:
            mass[int(np.searchsorted(edges, value, side="right")) - 1] -= probability
    mass = np.maximum(mass, 0.0)
    # What rounding leaves of a belief made of atoms alone is no density.
    height = mass / mass.max() if mass.sum() > 1e-9 else np.zeros_like(mass)
    return edges, height, atoms
