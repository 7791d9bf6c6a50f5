"""The exposure's contrast: when it may be left out, and that it works however the exposure is coded."""

import numpy as np
import pandas as pd
import pytest

from bayesmed.study.counterfactual import linear_moments
from bayesmed.study.observe import observe
from bayesmed.study.points import points


@pytest.mark.parametrize(
    ("coded", "contrast", "found"),
    [
        (lambda x: x, None, (0, 1)),
        (lambda x: x.astype(float), None, (0, 1)),
        (lambda x: x == 1, None, (False, True)),
        (
            lambda x: pd.Categorical(x.map({0: "usual", 1: "coached"}), ["usual", "coached"]),
            None,
            ("usual", "coached"),
        ),
        (lambda x: x.map({0: "usual", 1: "coached"}), ("usual", "coached"), ("usual", "coached")),
        (lambda x: x.map({0: "usual", 1: "coached"}), ["usual", "coached"], ("usual", "coached")),
        (lambda x: x + 1, (1, 2), (1, 2)),
        (lambda x: x + 1, np.array([1, 2]), (1, 2)),
        (lambda x: x == 1, (0, 1), (False, True)),
        (lambda x: pd.Categorical(x), None, (0, 1)),
        (lambda x: x.astype("Int64"), None, (0, 1)),
    ],
    ids=range(11),
)
@pytest.mark.parametrize("term", ["x", "C(x)"])
def test_every_coding_of_two_arms_gives_the_same_contrast_of_the_mediator(frame, coded, contrast, found, term):
    usual = observe(frame, exposure="x", mediator="m ~ x", outcome="y ~ m*x")
    data = frame.assign(x=coded(frame.x))
    ours = observe(data, exposure="x", contrast=contrast, mediator=f"m ~ {term}", outcome=f"y ~ m*{term}")
    assert ours.contrast == found
    assert [type(value) for value in ours.contrast] == [type(value) for value in found]
    np.testing.assert_allclose(_shift_and_indirect(ours), _shift_and_indirect(usual), rtol=1e-9)


def _shift_and_indirect(study):
    alpha = np.linalg.lstsq(study.mediator_design, study.mediator, rcond=None)[0]
    gamma = np.linalg.lstsq(study.outcome_design, study.outcome, rcond=None)[0]
    moments = linear_moments(study, points(study, {}))
    return moments.exposure_shift[0] @ alpha, gamma @ moments.indirect[0] @ alpha


def test_a_continuous_exposure_and_its_functions(frame):
    frame["m"] = np.log(frame.dose) * 2 + frame.z
    ours = observe(frame, exposure="dose", contrast=(2, 4.0), mediator="m ~ log(dose) + z", outcome="y ~ m")
    assert ours.contrast == (2, 4.0)
    moments = linear_moments(ours, points(ours, {}))
    np.testing.assert_allclose(moments.exposure_shift, [[0, np.log(2), 0]], atol=1e-12)


def test_three_levels_take_any_two(frame):
    ours = observe(frame, exposure="site", contrast=("c", "a"), mediator="m ~ site + z", outcome="y ~ m + site")
    moments = linear_moments(ours, points(ours, {}))
    assert ours.mediator_terms == ("Intercept", "site[T.b]", "site[T.c]", "z")
    np.testing.assert_allclose(moments.exposure_shift, [[0, 0, -1, 0]])
