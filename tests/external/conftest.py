"""Published studies as rows: the Morse trial, whose source stands in test_morse.py."""

import numpy as np
import pandas as pd
import pytest

import bayesmed as bm

ARMS = (63, 46)
CORRELATION = 4.646 / np.sqrt(4.646**2 + 106)
SLOPE = CORRELATION * 12.755 / 11.247


def rows_with_these_regressions() -> pd.DataFrame:
    random = np.random.default_rng(0)
    x = np.repeat([0.0, 1.0], ARMS)
    exposure = np.column_stack([np.ones(109), x])
    m = exposure @ [8.063, 5.502] + _residual(random, exposure, 11.247 * np.sqrt(107))
    both = np.column_stack([exposure, m])
    y = both @ [9.024, 6.558 - 5.502 * SLOPE, SLOPE] + _residual(random, both, 11.681 * np.sqrt(106))
    return pd.DataFrame({"case_management": x, "contacts": m, "days_housed": y})


def _residual(random, design, norm):
    noise = random.normal(size=len(design))
    noise -= design @ np.linalg.lstsq(design, noise, rcond=None)[0]
    return noise * norm / np.linalg.norm(noise)


@pytest.fixture(scope="session")
def morse_study():
    """A study whose regressions are exactly those printed for the Morse trial."""
    return bm.Study(
        rows_with_these_regressions(),
        exposure="case_management",
        mediator="contacts ~ case_management",
        outcome="days_housed ~ contacts + case_management",
    )
