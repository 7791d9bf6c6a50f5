"""Published studies from nothing but their printed tables.

Morse, Calsyn, Allen & Kenny (1994), Hospital and Community Psychiatry 45, 274-280, regressions as tabulated in D. A.
Kenny's teaching slides. Posterior figures were recomputed from them with 2,000,000 draws and are not printed in the
source; they take the slope of the mediator as .466 and the ratio of the SDs from t = 4.646, and differ from a fit to
all figures at once by no more than the rounding of the tables.

Blau & Duncan (1967), The American Occupational Structure, p. 169-170: correlations among 20,700 men and the path
coefficients of the basic model. Both from memory; .310 and .279 agree with a lecture on the book by J. Rice.
"""

import numpy as np
import pandas as pd
import pytest

import bayesmed as bm


@pytest.fixture(scope="module")
def morse():
    return bm.Study.from_regressions(
        exposure="case_management",
        mediator="contacts",
        outcome="days_housed",
        mediator_on={"Intercept": ("8.063", "1.417"), "case_management": ("5.502", "2.182")},
        outcome_on={
            "Intercept": ("9.024", "1.680"),
            "case_management": ("3.992", "2.332"),
            "contacts": {"estimate": "0.466", "se": "0.100", "t": "4.646"},
        },
        total_on={"Intercept": ("12.784", "1.607"), "case_management": ("6.558", "2.474")},
        n=109,
    )


def test_arms_and_residual_sds_are_found(morse):
    moments = morse.observed.published.moments
    assert moments.mean[0] == pytest.approx(46 / 109)
    statistics = morse.fit(method="exact", draws=10, random_seed=1, progressbar=False).result.statistics
    assert statistics.mediator.residual_sd == pytest.approx(11.247, abs=0.005)
    assert statistics.outcome.residual_sd == pytest.approx(11.681, abs=0.005)
    total = moments.covariance[2, 2] - moments.covariance[0, 2] ** 2 / moments.covariance[0, 0]
    assert np.sqrt(total * 108 / 107) == pytest.approx(12.755, abs=0.005)


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
def test_posterior_under_four_beliefs(morse, belief, mean, lower, upper, probability):
    fit = morse.fit(method="exact", draws=20_000, random_seed=8, progressbar=False)
    row = fit.summary(at={}, rho=belief).set_index("effect").loc["indirect"]
    error = row["sd"] / np.sqrt(80_000)
    # Half units: of the figure here, and of .466 against the .46648 that the other figures make it.
    rounding = 0.0005 + 0.0005 * 5.502
    assert row["mean"] == pytest.approx(mean, abs=4 * error + rounding)
    assert row["lower"] == pytest.approx(lower, abs=11 * error + 2 * rounding + 0.005 * (abs(lower) > 5))
    assert row["upper"] == pytest.approx(upper, abs=11 * error + 3 * rounding + 0.005 * (abs(upper) > 10))
    assert row["probability"] == pytest.approx(probability, abs=4 * row["mcse"] + 0.0005)


def test_the_correlation_that_overturns_with_its_rounding(morse):
    """ρ* is t / sqrt(t² + df) at the point, .4113 from the printed t; the SE .100 alone leaves it within .01."""
    moved = morse.rounding(lambda fit: point(fit), draws=10).iloc[0]
    assert moved["answer"] == pytest.approx(0.4113, abs=0.0002)
    assert moved["answer_from"] <= 4.646 / np.sqrt(4.646**2 + 106) + 5e-5
    assert moved["answer_to"] - moved["answer_from"] < 0.0002
    coarse = bm.Study.from_regressions(
        exposure="x",
        mediator="m",
        outcome="y",
        mediator_on={"x": ("5.502", "2.182")},
        outcome_on={"m": ("0.466", "0.100"), "x": ("3.992", "2.332")},
        n=109,
        arms=(63, 46),
    )
    moved = coarse.rounding(lambda fit: point(fit), draws=10).iloc[0]
    assert moved["answer_from"] < 0.4113 < moved["answer_to"]


def point(fit):
    regression = fit.result.statistics.outcome
    t = regression.coefficients[1] / regression.standard_errors[1]
    return t / np.sqrt(t**2 + regression.degrees_of_freedom)


NAMES = ["father_education", "father_occupation", "education", "first_job", "occupation"]
CORRELATIONS = [
    [1, 0.516, 0.453, 0.332, 0.322],
    [0.516, 1, 0.438, 0.417, 0.405],
    [0.453, 0.438, 1, 0.538, 0.596],
    [0.332, 0.417, 0.538, 1, 0.541],
    [0.322, 0.405, 0.596, 0.541, 1],
]


@pytest.fixture(scope="module")
def attainment():
    return bm.Study.from_moments(
        mean=None,
        corr=pd.DataFrame(CORRELATIONS, NAMES, NAMES),
        sd=dict.fromkeys(NAMES, "1.000"),
        n=20_700,
        decimals=3,
        exposure="education",
        contrast=(0, 1),
        mediator="first_job ~ education + father_occupation",
        outcome="occupation ~ first_job + education + father_occupation",
    )


def test_path_coefficients_of_a_printed_correlation_matrix(attainment):
    fit = attainment.fit(method="exact", draws=2000, random_seed=1, progressbar=False)
    first, second = fit.result.statistics.mediator, fit.result.statistics.outcome
    assert first.coefficients == pytest.approx([0, 0.440, 0.224], abs=0.0015)
    assert second.coefficients == pytest.approx([0, 0.281, 0.394, 0.115], abs=0.0015)
    # Normal equations by hand, the textbook's way from correlations to coefficients.
    corr = np.array(CORRELATIONS)
    byhand = np.linalg.solve(corr[np.ix_([2, 1], [2, 1])], corr[[2, 1], 3])
    assert first.coefficients[1:] == pytest.approx(byhand, abs=1e-10)
    # The indirect effect as a product of printed paths, and as total less direct.
    indirect = fit.summary(at={}, rho=0.0).loc[0, "mean"]
    assert indirect == pytest.approx(0.440 * 0.281, abs=0.002)
    total = fit.summary(at={}, rho=0.0).loc[2, "mean"]
    byhand = np.linalg.solve(corr[np.ix_([2, 1], [2, 1])], corr[[2, 1], 4])
    assert total == pytest.approx(byhand[0], abs=0.001)


def test_what_overturns_it_and_rounding(attainment):
    fit = attainment.fit(method="exact", draws=500, random_seed=1, progressbar=False)
    tips = fit.tipping(at={}).table.iloc[0]
    corr = np.array(CORRELATIONS)
    inverse = np.linalg.inv(corr[np.ix_([1, 2, 3, 4], [1, 2, 3, 4])])
    partial = -inverse[2, 3] / np.sqrt(inverse[2, 2] * inverse[3, 3])
    assert tips["median"] == pytest.approx(partial, abs=0.001)
    moved = attainment.rounding(lambda fit: fit.tipping(at={}), draws=50).iloc[0]
    assert moved["median_from"] < moved["median"] < moved["median_to"]
    assert moved["median_to"] - moved["median_from"] < 0.006
