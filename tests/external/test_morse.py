"""Case management for homeless people with mental illness: figures of a published trial.

Source: Morse, Calsyn, Allen & Kenny (1994), Hospital and Community Psychiatry 45, 274-280, its regressions as
tabulated in D. A. Kenny's teaching slides: mediator on exposure 8.063, 5.502 (SE 1.417, 2.182); outcome on exposure
6.558 (2.474); outcome on both, t of the mediator 4.646 and residual SDs 12.755, 11.247, 11.681; n = 109. Rows with
exactly these regressions are made here. The other figures were recomputed from them, by 2,000,000 draws where they
are posterior ones, and are not printed in the source.
"""

import numpy as np
import pytest

import bayesmed as bm


@pytest.fixture(scope="module")
def fit(morse_study):
    return morse_study.fit(method="exact", draws=100_000, random_seed=8, progressbar=False)


def test_the_rows_have_the_printed_regressions(fit):
    outcome = fit.result.statistics.outcome
    assert outcome.coefficients[-2:] == pytest.approx([0.466, 3.992], abs=0.002)
    assert outcome.standard_errors == pytest.approx([1.680, 0.100, 2.332], abs=0.002)
    assert fit.result.statistics.mediator.standard_errors == pytest.approx([1.417, 2.182], abs=0.001)


def test_effects_at_fixed_correlations(fit):
    """Point estimates, through the map at least squares and maximum-likelihood SDs."""
    from bayesmed.core.mapping import structural_outcome

    s = fit.result.statistics
    place = s.mediator.residual_sum_of_squares / 109, s.outcome.residual_sum_of_squares / 109
    sigma_m, tau = np.sqrt(place)
    assert tau / sigma_m == pytest.approx(1.0337, abs=5e-5)

    def indirect(rho):
        beta = structural_outcome(s.outcome.coefficients, s.mediator.coefficients, sigma_m, tau, rho, s.alignment)
        return 5.502 * beta[1], beta[2]

    for rho, expected in {0.1: 1.99, 0.2: 1.41, 0.3: 0.78, 0.4: 0.08}.items():
        assert indirect(rho)[0] == pytest.approx(expected, abs=0.005)
    assert indirect(0.4113)[0] == pytest.approx(0, abs=0.001)
    assert indirect(-0.574)[1] == pytest.approx(0, abs=0.01)


@pytest.mark.parametrize(
    ("belief", "mean", "lower", "upper", "probability"),
    [
        (0.0, 2.564, 0.498, 5.148, 0.9935),
        (bm.Uniform(-0.3, 0.3), 2.563, 0.161, 6.297, 0.986),
        (bm.Uniform(0, 0.5), 1.025, -1.197, 3.779, 0.800),
        (bm.LKJ(2), 2.56, -5.68, 12.25, 0.782),
    ],
    ids=repr,
)
def test_posterior_under_four_beliefs(fit, belief, mean, lower, upper, probability):
    row = fit.summary(at={}, rho=belief).set_index("effect").loc["indirect"]
    error = row["sd"] / np.sqrt(400_000)
    assert row["mean"] == pytest.approx(mean, abs=4 * error + 0.005)
    # A 2.5 % quantile of a near-normal has a Monte Carlo SD of about 2.7 times that of the mean.
    assert row["lower"] == pytest.approx(lower, abs=11 * error + 0.005)
    assert row["upper"] == pytest.approx(upper, abs=11 * error + 0.005)
    assert row["probability"] == pytest.approx(probability, abs=4 * row["mcse"] + 0.0005)


def test_tipping_correlations(fit):
    indirect = fit.tipping(at={}).table.iloc[0]
    assert indirect["median"] == pytest.approx(0.4113, abs=0.002)
    direct = fit.tipping(at={}, claim=bm.Claim("direct", above=0)).table.iloc[0]
    assert direct["median"] == pytest.approx(-0.574, abs=0.01)


def test_the_limit_with_unlimited_data_tells_ignorance_from_imprecision(fit):
    row = fit.tipping(at={}).probability(bm.LKJ(2)).iloc[0]
    assert row["probability"] == pytest.approx(0.782, abs=4 * row["mcse"] + 0.0005)
    assert row["unlimited"] == pytest.approx(0.791, abs=0.002)
