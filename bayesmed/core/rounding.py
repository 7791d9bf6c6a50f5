"""How far an answer can move while every figure stays within the rounding of its last digit.

To first order the figures and the answers are linear in the free numbers behind them, so that the smallest and the
largest answer are linear programmes over the numbers that all figures allow.
"""

from collections.abc import Callable
from typing import Any

import numpy as np
from scipy.optimize import linprog

from bayesmed.core.mapping import Array


def steps(implied: Callable[[Array], Array], theta: Array, half: Array) -> tuple[Array, Array]:
    """Return a step for each number that moves a figure by half a unit, and what the steps do to the figures.

    Returns
    -------
    step : array, shape (number,)
        Zero for a number that moves no figure.
    moves : array, shape (figure, number)
        Change of each figure, in half units, by a step of each number.
    """
    trial = 1e-6 * np.maximum(np.abs(theta), 1e-3)
    slope = np.column_stack([_central(implied, theta, k, size) / half for k, size in enumerate(trial)])
    most = np.abs(slope).max(axis=0)
    with np.errstate(divide="ignore"):
        step = np.where(most > 0, 1 / most, 0.0)
    return step, slope * step


def gradient(answer: Callable[[Array], Array], theta: Array, step: Array) -> Array:
    """Return the change of each answer by a step of each number, shape (answer, number)."""
    columns = [_central(answer, theta, k, size) * size for k, size in enumerate(step)]
    return np.column_stack(columns)


def reach(moves: Array, off: Array, slopes: Array) -> tuple[Array, Array]:
    """Return how far each answer can fall and rise, both of shape (answer,).

    Parameters
    ----------
    moves : array, shape (figure, number)
        Of :func:`steps`.
    off : array, shape (figure,)
        How many half units the figures are off to begin with.
    slopes : array, shape (answer, number)
        Of :func:`gradient`.
    """
    room = max(1.0, float(np.abs(off).max(initial=0.0)))
    sides = np.vstack([moves, -moves])
    bounds = np.concatenate([room - off, room + off])
    extremes = np.zeros((2, len(slopes)))
    for place, slope in enumerate(slopes):
        for row, sign in enumerate((1.0, -1.0)):
            if np.any(slope):
                found: Any = linprog(sign * slope, A_ub=sides, b_ub=bounds, bounds=(None, None))
                extremes[row, place] = sign * found.fun if found.success else np.nan
    return extremes[0], extremes[1]


def _central(function: Callable[[Array], Array], theta: Array, place: int, size: float) -> Array:
    if size == 0:
        return np.zeros_like(function(theta))
    shift = np.zeros_like(theta)
    shift[place] = size
    return (function(theta + shift) - function(theta - shift)) / (2 * size)
