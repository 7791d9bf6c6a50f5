"""The pull of a structural coefficient prior on rho, on the published Morse regressions (see test_morse.py).

The mean of 0.341 and SD of 0.164 (0.331 without the Jacobian) were recomputed, and are not printed in the source.
"""

import pytest

import bayesmed as bm


def test_the_mean_of_rho_moves_from_zero_to_a_third(morse_study):
    priors = bm.Coefficients(
        outcome={"contacts": bm.Normal(0, 0.2)}, sigma_outcome=bm.HalfNormal(15), scale="structural"
    )
    fit = morse_study.fit(rho=bm.LKJ(2), coefficients=priors, draws=10_000, random_seed=1, progressbar=False)
    moved = fit.movement()
    assert moved.prior_mean == 0
    assert moved.posterior_mean == pytest.approx(0.341, abs=0.003)
    assert moved.posterior_sd == pytest.approx(0.164, abs=0.003)
