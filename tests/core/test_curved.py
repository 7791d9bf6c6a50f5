"""Contrasts of an outcome that is not linear in the mediator, against closed forms."""

from dataclasses import dataclass

import numpy as np
import pytest

from bayesmed.core.curved import curved_contrasts
from bayesmed.core.errors import ArgumentError


@dataclass
class Rows:
    mediator_low: np.ndarray
    mediator_high: np.ndarray
    transform: object

    def outcome_rows(self, which, mediator_grid, rows=slice(None)):
        rows, grid = len(self.mediator_low[rows]), len(mediator_grid)
        table = np.empty((rows, grid, 3))
        table[..., 0] = 1
        table[..., 1] = self.transform(mediator_grid) * (1 + which)
        table[..., 2] = which
        return table


@pytest.fixture
def draws():
    random = np.random.default_rng(2)
    return (
        random.normal([1.0, 0.8], 0.1, (50, 2)),
        random.normal([0.5, 0.3, -0.2], 0.1, (50, 3)),
        random.uniform(0.9, 1.1, 50),
        random.uniform(1.9, 2.1, 50),
    )


@pytest.mark.parametrize(
    ("transform", "expectation"),
    [
        (lambda m: m**2, lambda mean, sd: mean**2 + sd**2),
        (np.exp, lambda mean, sd: np.exp(mean + sd**2 / 2)),
        (np.sin, lambda mean, sd: np.sin(mean) * np.exp(-(sd**2) / 2)),
        (lambda m: m, lambda mean, sd: mean),
    ],
    ids=["square", "exponential", "sine", "linear"],
)
def test_expectations_over_the_error_equal_closed_forms(draws, transform, expectation):
    alpha, gamma, sigma_m, tau = draws
    low = np.column_stack([np.ones(4), np.array([0.0, 0.1, 0.2, 0.3])])
    high = low + np.array([0, 1])
    found = curved_contrasts(Rows(low, high, transform), alpha, gamma, sigma_m, tau)

    def mean_outcome(which, rows):
        means = rows @ alpha.T
        return gamma[:, 0] + (1 + which) * gamma[:, 1] * expectation(means, sigma_m).mean(axis=0) + which * gamma[:, 2]

    expected = {
        "a": mean_outcome(1, high) - mean_outcome(1, low),
        "a_pure": mean_outcome(0, high) - mean_outcome(0, low),
        "t": mean_outcome(1, high) - mean_outcome(0, low),
        "b": ((high - low) @ alpha.T).mean(axis=0),
    }
    for name, value in expected.items():
        np.testing.assert_allclose(getattr(found, name)[0], value, rtol=2e-6, atol=2e-6)


def test_a_term_undefined_within_reach_of_the_mediator_is_refused(draws):
    alpha, gamma, sigma_m, tau = draws
    low = np.column_stack([np.ones(2), np.zeros(2)])
    with pytest.raises(ArgumentError, match="not finite at a mediator value"), np.errstate(invalid="ignore"):
        curved_contrasts(Rows(low, low + np.array([0, 1]), np.log), alpha, gamma, sigma_m, tau)
