"""A belief about rho that a compiled model can exchange for another without being compiled again.

rho is written as ``lower + width / (1 + exp(-z))`` and the log density of z is a table. Lower end, width and
table are data of the model, so that one compiled model serves every belief without atoms, and every fixed rho.
"""

from typing import Any

import numpy as np

from bayesmed.core.mapping import Array

REACH = 16.0
CELLS = 2048
"""Cells of the table of the log density of z on ±REACH, between which it is interpolated linearly."""


class MovableBelief:
    """Registers rho with an exchangeable density; see :func:`belief_data` for the data."""

    def __init__(self, belief: Any) -> None:
        self.data = belief_data(belief)

    def to_pymc(self, name: str) -> Any:
        """Register rho and what it is made of in the current model."""
        import pymc as pm
        import pytensor.tensor as pt

        held = {key: pm.Data(key, value) for key, value in self.data.items()}
        z = pm.Flat(f"{name}_position", initval=0.0)
        place = pt.clip((z + REACH) / (2 * REACH) * CELLS, 0.0, CELLS - 1e-9)
        cell = pt.cast(pt.floor(place), "int64")
        left, right = held["belief_table"][cell], held["belief_table"][cell + 1]
        # Beyond the table the density falls, so that z cannot drift away.
        beyond = -pt.sqr(pt.maximum(pt.abs(z) - REACH, 0.0))
        pm.Potential(f"{name}_belief", left + (place - pt.floor(place)) * (right - left) + beyond)
        return pm.Deterministic(name, held["belief_lower"] + held["belief_width"] * pt.sigmoid(z))


def belief_data(belief: Any) -> dict[str, Array]:
    """Return lower end, width and table for a belief without atoms, or with one atom and nothing else."""
    atoms = belief.atoms()
    grid = np.linspace(-REACH, REACH, CELLS + 1)
    if atoms:
        # rho does not move with z, which then needs any proper density of its own.
        return {
            "belief_lower": np.asarray(float(atoms[0][0])),
            "belief_width": np.asarray(0.0),
            "belief_table": -0.5 * grid**2,
        }
    lower, upper = belief.support()
    share = 1 / (1 + np.exp(-grid))
    inside = np.clip(lower + (upper - lower) * share, np.nextafter(lower, 1), np.nextafter(upper, -1))
    with np.errstate(divide="ignore"):
        density = belief.logpdf(inside) + np.log(upper - lower) - grid - 2 * np.log1p(np.exp(-grid))
    return {
        "belief_lower": np.asarray(float(lower)),
        "belief_width": np.asarray(float(upper - lower)),
        "belief_table": np.clip(density, -1e4, 1e4),
    }


def movable(belief: Any) -> bool:
    """True if a movable model can take this belief: it has no atoms, or is a single one."""
    atoms = belief.atoms()
    return not atoms or (len(atoms) == 1 and float(atoms[0][1]) == 1.0)
