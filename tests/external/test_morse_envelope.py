"""Sets of beliefs on the published Morse regressions (see test_morse.py for the source).

The smallest and largest posterior mean over every prior on ±.3, 0.758 and 4.370, were recomputed by 2,000,000 draws
and are not printed in the source.
"""

import numpy as np
import pytest

import bayesmed as bm
from bayesmed.conclusions.envelope import envelope, worst_case
from bayesmed.priors.sets import AnyOn, Contaminated, UnimodalAt


@pytest.fixture(scope="module")
def fit(morse_study):
    return morse_study.fit(method="exact", draws=50_000, random_seed=9, progressbar=False)


def test_posterior_means_over_every_prior_within_three_tenths(fit):
    row = envelope(fit.result, AnyOn(-0.3, 0.3), at={}).iloc[0]
    sd = [fit.summary(at={}, rho=rho)["sd"][0] for rho in (0.3, -0.3)]
    assert row["mean_lower"] == pytest.approx(0.758, abs=4 * sd[0] / np.sqrt(200_000) + 0.0005)
    assert row["mean_upper"] == pytest.approx(4.370, abs=4 * sd[1] / np.sqrt(200_000) + 0.0005)


def test_probabilities_over_a_range_are_those_at_its_ends(fit):
    """Nearly all draws have B > 0, so the probability falls with rho."""
    row = envelope(fit.result, AnyOn(-0.3, 0.3), at={}).iloc[0]
    ends = fit.rho_grid([-0.3, 0.3], at={}).query("effect == 'indirect'")["probability"].to_numpy()
    assert row["lower"] == pytest.approx(ends[1], abs=1e-4)
    # A few draws of B < 0 make the largest probability lie inside.
    assert ends[0] <= row["upper"] <= ends[0] + 0.005
    assert row["all_rho"] < row["lower"]
    assert row["mean_lower"] > 0
    assert np.isfinite(row["mean_upper"])


def test_a_tenth_of_doubt_about_a_belief(fit):
    """The claim of .986 under Uniform(-.3, .3) falls by a tenth of it, less what no rho can take away."""
    base = bm.Uniform(-0.3, 0.3)
    row = envelope(fit.result, Contaminated(base, 0.1), at={}).iloc[0]
    least = fit.tipping(at={}).table["toward_plus_one"][0]
    assert row["lower"] == pytest.approx(0.9 * 0.986 + 0.1 * least, abs=0.001)
    assert row["mean_lower"] == -np.inf


def test_the_worst_unimodal_belief_leans_one_way(fit):
    prior = worst_case(fit.result, UnimodalAt(0.0, -0.5, 0.5), at={})["prior"][0]
    assert prior == bm.Uniform(0, 0.5)
    row = envelope(fit.result, UnimodalAt(0.0, -0.5, 0.5), at={}).iloc[0]
    # Uniform(0, .5): mean 1.025 and probability .800, as recomputed for test_morse.py.
    assert row["lower"] == pytest.approx(0.800, abs=0.002)
    assert row["mean_lower"] == pytest.approx(1.025, abs=0.02)
