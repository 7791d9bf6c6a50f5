"""Invented rows of an invented trial, for the tests of the study room."""

import numpy as np
import pandas as pd
import pytest


@pytest.fixture
def frame(invented: pd.DataFrame) -> pd.DataFrame:
    return invented.copy()


@pytest.fixture(scope="session")
def invented() -> pd.DataFrame:
    rng = np.random.default_rng(20260101)
    n = 160
    data = pd.DataFrame(
        {
            "x": rng.integers(0, 2, n),
            "z": rng.normal(size=n),
            "age": rng.integers(20, 70, n),
            "site": rng.choice(["a", "b", "c"], n),
            "flag": rng.random(n) < 0.4,
            "dose": rng.uniform(1, 9, n),
        }
    )
    data["m"] = 2 + data.x + 0.3 * data.z + rng.normal(size=n)
    data["y"] = 1 + 0.5 * data.m + 0.2 * data.x + rng.normal(size=n)
    data["steps"] = np.exp(data.m / 2)
    return data
