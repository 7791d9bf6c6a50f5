"""The map between identified and structural parameters, against simulation and against itself."""

import numpy as np
import pytest
from scipy import stats

from bayesmed.core.mapping import (
    align,
    correlation,
    identified_outcome,
    odds,
    residual_outcome,
    sigma_outcome,
    structural_outcome,
)


def structural_rows(rows, rho, random):
    x = random.integers(0, 2, rows).astype(float)
    z = random.normal(1, 1, rows)
    e_m = random.normal(0, 1.5, rows)
    e_y = 2.0 * (rho * e_m / 1.5 + np.sqrt(1 - rho**2) * random.normal(0, 1, rows))
    v = np.column_stack([np.ones(rows), x, z, x * z])
    alpha = np.array([1.0, 0.8, 0.5, 0.3])
    m = v @ alpha + e_m
    w = np.column_stack([np.ones(rows), m, x, z, m * z, m * x, x * z])
    beta = np.array([2.0, 0.6, -0.4, 0.2, 0.25, -0.2, 0.15])
    return v, w, m, w @ beta + e_y, alpha, beta


def test_least_squares_plus_the_map_recovers_structural_coefficients(random):
    v, w, m, y, _, beta = structural_rows(200_000, 0.35, random)
    alpha_hat = np.linalg.lstsq(v, m, rcond=None)[0]
    gamma_hat = np.linalg.lstsq(w, y, rcond=None)[0]
    sigma_m, tau = (m - v @ alpha_hat).std(), (y - w @ gamma_hat).std()
    place = align(v, w, m)
    assert not place.informs
    found = structural_outcome(gamma_hat, alpha_hat, np.asarray(sigma_m), tau, 0.35, place)
    error = tau * np.sqrt(np.diag(np.linalg.inv(w.T @ w)))
    # Moved coefficients carry the sampling error of the slope as well: four standard errors of each, added.
    assert np.all(np.abs(found - beta) < 4 * error + 4 * 0.37 * 2 / 1.5 / np.sqrt(200_000))
    assert np.abs(gamma_hat - beta).max() > 0.3
    assert sigma_outcome(0.35, tau) == pytest.approx(2.0, rel=0.01)


def test_the_map_has_an_inverse(random):
    v, w, m, *_ = structural_rows(50, 0.0, random)
    place = align(v, w, m)
    gamma, alpha = random.normal(size=(6, 7)), random.normal(size=(6, 4))
    sigma_m, tau = random.uniform(0.5, 2, 6), random.uniform(0.5, 2, 6)
    rho = random.uniform(-0.95, 0.95, 6)
    beta = structural_outcome(gamma, alpha, sigma_m, tau, rho, place)
    np.testing.assert_allclose(identified_outcome(beta, alpha, sigma_m, tau, rho, place), gamma, atol=1e-12)
    np.testing.assert_allclose(residual_outcome(rho, sigma_outcome(rho, tau)), tau, rtol=1e-14)
    np.testing.assert_allclose(correlation(odds(rho)), rho, rtol=1e-13)


def test_interactions_with_the_mediator_do_not_move(random):
    v, w, m, *_ = structural_rows(50, 0.0, random)
    place = align(v, w, m)
    gamma = random.normal(size=7)
    moved = structural_outcome(gamma, random.normal(size=4), np.asarray(1.0), 1.0, 0.6, place) - gamma
    np.testing.assert_array_equal(moved[[4, 5]], 0.0)
    assert np.all(moved[[0, 1, 2, 3, 6]] != 0)


@pytest.mark.parametrize("rho", [-0.8, -0.2, 0.0, 0.5, 0.9])
def test_joint_normal_of_both_equations_factors_as_the_map_says(rho, random):
    """Reference: the bivariate normal density of scipy."""
    alpha, beta, sigma_m, sigma_y = np.array([0.3, 0.7]), np.array([1.0, 0.4, -0.2]), 1.3, 0.9
    v = np.array([[1.0, 1.0]])
    m, y = 0.8, 1.9
    w = np.array([[1.0, m, 1.0]])
    covariance = [[sigma_m**2, rho * sigma_m * sigma_y], [rho * sigma_m * sigma_y, sigma_y**2]]
    joint = stats.multivariate_normal([float((v @ alpha)[0]), float((w @ beta)[0])], covariance).logpdf([m, y])
    rows = np.array([[1.0, 1.0], [1.0, 0.0], [1.0, 2.0]])
    mediator = np.array([0.8, 0.1, -0.3])
    place = align(rows, np.column_stack([rows[:, 0], mediator, rows[:, 1]]), mediator)
    tau = residual_outcome(rho, sigma_y)
    gamma = identified_outcome(beta, alpha, np.asarray(sigma_m), tau, rho, place)
    factored = stats.norm((v @ alpha)[0], sigma_m).logpdf(m) + stats.norm((w @ gamma)[0], tau).logpdf(y)
    assert factored == pytest.approx(joint, abs=1e-12)


def test_terms_outside_the_outcome_design_inform(random):
    v, w, m, *_ = structural_rows(80, 0.0, random)
    without_exposure_by_moderator = w[:, :6]
    place = align(v, without_exposure_by_moderator, m)
    assert place.informs
    assert np.flatnonzero(place.term_residuals > 1e-8).tolist() == [3]
    assert align(v, np.delete(w, 1, axis=1), m).mediator_residual > 1e-3
