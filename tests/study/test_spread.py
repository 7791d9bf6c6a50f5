"""Residual spread: the tests against statsmodels, and what they find."""

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from statsmodels.stats.anova import anova_lm
from statsmodels.stats.diagnostic import het_breuschpagan

from bayesmed.study.observe import observe
from bayesmed.study.spread import compared, residual_spread, residuals


def test_score_test_is_koenkers_form_in_statsmodels(frame):
    residual = frame.z.to_numpy() * (1 + frame.dose.to_numpy() / 9)
    found = compared("outcome", residual, frame.dose)
    reference = het_breuschpagan(residual, sm.add_constant(frame.dose.to_numpy()))
    assert found.test == "score"
    assert found.p == pytest.approx(reference[1], rel=1e-9)


def test_group_test_is_an_anova_of_deviations_from_medians(frame):
    residual = frame.z.to_numpy()
    found = compared("mediator", residual, pd.Series(pd.Categorical(frame.site), name="site"))
    deviation = np.abs(residual - pd.Series(residual).groupby(frame.site).transform("median"))
    fitted = sm.OLS.from_formula("d ~ C(g)", pd.DataFrame({"d": deviation, "g": frame.site})).fit()
    reference = anova_lm(fitted)["PR(>F)"].iloc[0]
    assert found.test == "Brown–Forsythe"
    assert found.p == pytest.approx(reference, rel=1e-9)
    expected = pd.Series(residual).groupby(frame.site).std()
    assert found.ratio == pytest.approx(expected.max() / expected.min())


def test_residuals_are_those_of_least_squares_at_any_rank(frame):
    design = np.column_stack([np.ones(160), frame.z, 2 * frame.z, frame.age * 1e8])
    # The same span in columns of like size, which statsmodels' pseudo-inverse needs.
    expected = sm.OLS(frame.y.to_numpy(), np.column_stack([np.ones(160), frame.z, frame.age])).fit().resid
    np.testing.assert_allclose(residuals(design, frame.y.to_numpy()), expected, atol=1e-9)


def test_spread_by_arm_and_along_a_moderator_is_found():
    # Invented: sigma_m doubles in the second arm, the outcome's spread grows with z.
    rng = np.random.default_rng(4)
    x, z = np.tile([0, 1], 300), rng.uniform(0, 2, 600)
    m = x + rng.normal(size=600) * (1 + x)
    y = m + rng.normal(size=600) * (0.3 + z)
    study = observe(
        pd.DataFrame({"x": x, "z": z, "m": m, "y": y}), exposure="x", mediator="m ~ x*z", outcome="y ~ m*z + x"
    )
    notable = {(one.equation, one.along): one for one in residual_spread(study) if one.notable}
    assert set(notable) == {("mediator", "x"), ("outcome", "z")}
    assert notable["mediator", "x"].ratio == pytest.approx(2, abs=0.3)
    assert notable["outcome", "z"].sds["upper third"] > notable["outcome", "z"].sds["lower third"]
    assert "ratio" in str(notable["mediator", "x"])


def test_false_alarms_come_at_their_rate():
    # Of 200 studies with equal spread some 1 % of comparisons may be notable at p < .01.
    rng = np.random.default_rng(6)
    x, z = pd.Series(np.tile([0, 1], 50), name="x"), pd.Series(rng.normal(size=100), name="z")
    alarms = [compared("mediator", rng.normal(size=100), along).notable for along in (x, z) for _ in range(200)]
    assert sum(alarms) <= 12  # P(more | 400 at 1 %) < .001


def test_what_cannot_be_compared_is_left_out():
    residual = np.array([1.0, -1.0, 0.5, 2.0])
    assert compared("mediator", residual, pd.Series([0, 0, 1, 2], name="x")) is None
    assert compared("mediator", np.zeros(4), pd.Series([0, 0, 0, 1], name="x")) is None
