"""Fixtures shared by all rooms: simulated studies with known truths."""

from collections.abc import Callable

import numpy as np
import pandas as pd
import pytest


@pytest.fixture
def random() -> np.random.Generator:
    return np.random.default_rng(20261201)


def simulate(rows: int, rho: float, seed: int, interact: bool = True) -> pd.DataFrame:
    """Rows of a randomised exposure with a mediator and an outcome whose errors correlate `rho`."""
    random = np.random.default_rng(seed)
    x = random.integers(0, 2, rows)
    z = random.normal(1, 1, rows)
    c = random.normal(0, 1, rows)
    site = random.choice(["east", "north", "west"], rows)
    shift = pd.Series({"east": 0.0, "north": 0.4, "west": -0.3})[site].to_numpy()
    e_m = random.normal(0, 1.5, rows)
    e_y = 2.0 * (rho * e_m / 1.5 + np.sqrt(1 - rho**2) * random.normal(0, 1, rows))
    both = 1.0 if interact else 0.0
    m = 1 + 0.8 * x + 0.5 * z + 0.3 * c + shift + both * (0.3 * x * z + 0.2 * x * c + 0.5 * x * shift) + e_m
    y = (
        2
        + 0.6 * m
        - 0.4 * x
        + 0.2 * z
        + 0.5 * c
        + shift
        + both * (0.25 * m * z - 0.2 * m * x + 0.3 * m * c + 0.15 * x * z + 0.1 * m * x * z + 0.4 * m * shift)
        + e_y
    )
    return pd.DataFrame({"x": x, "z": z, "c": c, "site": site, "m": m, "y": y})


@pytest.fixture(scope="session")
def simulated() -> Callable[..., pd.DataFrame]:
    return simulate
