"""The default coefficient prior: unmoved by units, origin and coding; marginals kept when a term leaves it."""

import numpy as np
import pytest

import bayesmed as bm
from bayesmed.core.errors import ArgumentError
from bayesmed.core.regression import reduce_rows
from bayesmed.fit.coefficients import WIDTH, coefficient_prior


@pytest.fixture
def rows(random):
    n = 80
    group = random.integers(0, 3, n)
    x, z = random.integers(0, 2, n), random.normal(30, 4, n)
    dummies = (group[:, None] == np.arange(3)).astype(float)
    design = np.column_stack([np.ones(n), x, z, x * z, dummies[:, 1:]])
    return design, design @ random.normal(size=6) + random.normal(0, 2, n), dummies


def names(design):
    return tuple(f"t{k}" for k in range(design.shape[1]))


def density(design, response, theta):
    root = coefficient_prior(reduce_rows(design, response), names(design), {}).root
    return float(np.sum((root @ theta) ** 2))


def test_recoding_columns_leaves_the_density_unmoved(rows, random):
    design, response, dummies = rows
    theta = random.normal(size=6)
    shifted = design.copy()
    shifted[:, 2] = (design[:, 2] - 1000) / 17
    shifted[:, 3] = design[:, 1] * shifted[:, 2]
    cells = np.column_stack([dummies, design[:, 1:4]])
    for recoded in (shifted, cells):
        same = np.linalg.lstsq(recoded, design @ theta, rcond=None)[0]
        np.testing.assert_allclose(recoded @ same, design @ theta, atol=1e-7)
        assert density(recoded, response, same) == pytest.approx(density(design, response, theta), rel=1e-7)


def test_units_of_the_response_cancel(rows, random):
    design, response, _ = rows
    theta = random.normal(size=6)
    assert density(design, 1000 * response + 5, 1000 * theta) == pytest.approx(density(design, response, theta))


def test_the_mean_of_fitted_values_is_free(rows):
    design, response, _ = rows
    assert density(design, response, np.eye(6)[0] * 1e6) == pytest.approx(0, abs=1e-12)


def test_terms_that_stay_keep_their_marginal(rows):
    design, response, _ = rows
    regression = reduce_rows(design, response)
    prior = coefficient_prior(regression, names(design), {"t3": bm.Normal(0, 1), "t0": bm.Normal(0, 5)})
    centred = design - design.mean(axis=0)
    covariance = (WIDTH * response.std(ddof=1)) ** 2 * 80 * np.linalg.inv(centred[:, 1:].T @ centred[:, 1:])
    staying = [1, 2, 4, 5]
    expected = np.linalg.inv(covariance[np.ix_([0, 1, 3, 4], [0, 1, 3, 4])])
    found = (prior.root.T @ prior.root)[np.ix_(staying, staying)]
    np.testing.assert_allclose(found, expected, rtol=1e-8)
    assert np.all(prior.root[:, [0, 3]] == 0)


def test_whitened_coordinates_have_unit_posterior_precision(rows):
    design, response, _ = rows
    regression = reduce_rows(design, response)
    prior = coefficient_prior(regression, names(design), {"t1": bm.Normal(0.3, 0.01)})
    precision = design.T @ design / regression.residual_sd**2 + prior.root.T @ prior.root
    precision[1, 1] += 1e4
    np.testing.assert_allclose(prior.unwhiten.T @ precision @ prior.unwhiten, np.eye(6), atol=1e-7)


def test_an_unknown_term_is_answered_with_the_valid_ones(simulated):
    study = bm.Study(simulated(50, 0, seed=2), exposure="x", mediator="m ~ x + z", outcome="y ~ m + x + z")
    with pytest.raises(ArgumentError, match=r"(?s)'zz'.*'Intercept'.*'x'.*'z'"):
        study.fit(coefficients=bm.Coefficients(mediator={"zz": bm.Normal(0, 1)}), progressbar=False)
