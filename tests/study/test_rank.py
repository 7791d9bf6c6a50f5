"""Rank deficiency by the names of the terms."""

import numpy as np
import pytest

from bayesmed.study.observe import observe
from bayesmed.study.rank import rank_deficiencies


def deficiencies(frame, right):
    study = observe(frame, exposure="x", mediator="m ~ x", outcome=f"y ~ {right}")
    return [str(found) for found in rank_deficiencies(study.outcome_design, study.outcome_terms)]


@pytest.mark.parametrize(
    ("right", "found"),
    [
        ("m + x", []),
        ("m*site*x", []),
        ("m + x + I(2*x)", ["I(2 * x) is a multiple of x"]),
        ("m + x + I(x + z) + z", ["z is a combination of x and I(x + z)"]),
        ("m + x + I(x*0)", ["I(x * 0) is zero in every row"]),
        ("m + x + I(x*0 + 3)", ["I(x * 0 + 3) is the same in every row"]),
        ("m + x + C(x)", ["C(x)[T.1] is a multiple of x"]),
        (
            "m + x + I(1 - x) + I(age*1e6) + I(age - 40)",
            [
                "I(1 - x) is a combination of Intercept and x",
                "I(age - 40) is a combination of Intercept and I(age * 1000000.0)",
            ],
        ),
        ("m + x + poly(age, 8)", []),
        ("m + x + scale(z) + z", ["z is a combination of Intercept and scale(z)"]),
    ],
)
def test_named(frame, right, found):
    assert deficiencies(frame, right) == found


def test_units_and_many_rows_do_not_change_the_verdict():
    rng = np.random.default_rng(2)
    design = rng.normal(size=(20_000, 6)) * 10.0 ** np.array([-9, 9, 0, 4, -4, 0])
    assert rank_deficiencies(design, "abcdef") == ()
    design[:, 5] = 3 * design[:, 0] * 1e9 - design[:, 3] * 1e-4
    (found,) = rank_deficiencies(design, "abcdef")
    assert (found.term, found.combines) == ("f", ("a", "d"))


def test_more_columns_than_rows():
    found = rank_deficiencies(np.random.default_rng(0).normal(size=(3, 5)), "abcde")
    assert [one.term for one in found] == ["d", "e"]
