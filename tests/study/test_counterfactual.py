"""Row averages against the formula evaluated row by row by formulaic itself, and the test of linearity."""

import formulaic
import numpy as np
import pandas as pd
import pytest

from bayesmed.core.contrasts import linear_contrasts
from bayesmed.core.errors import ArgumentError, DesignError, FormulaError
from bayesmed.study import counterfactual, linearity
from bayesmed.study.counterfactual import curved_rows, linear_in_mediator, linear_moments
from bayesmed.study.observe import observe
from bayesmed.study.points import points

NO_SITE = {"site": ["a", "c"]}
STUDIES = [
    ("m ~ x", "y ~ m + x", {}),
    ("m ~ x*site", "y ~ m*site", {}),
    ("m ~ x*site + z", "y ~ m*site + x*site", NO_SITE),
    ("m ~ x*z + age", "y ~ m*x*z + age", {"z": [-1.0, 0.5]}),
    ("m ~ x*z + age", "y ~ m*x*z*site + flag", {"flag": True}),
    ("m ~ x*age + site", "y ~ m*x + m:age + bs(age, df=5)", {}),
    ("m ~ x*bs(age, df=4) + z", "y ~ m*bs(age, df=4) + x:z", {"z": 0.3}),
    ("m ~ x*bs(age, df=4) + z", "y ~ m*bs(age, df=4) + x*m", {"age": [30, 50]}),
    ("m ~ C(x)*flag", "y ~ m:site + C(x)*site + flag", NO_SITE),
    ("m ~ 0 + site + x:site", "y ~ 0 + site + m:site + x", {}),
    ("m ~ x*log(dose) + center(z)", "y ~ scale(m)*log(dose) + x*poly(z, 2)", {}),
    ("m ~ x + z", "y ~ I(m*z) + I(x*m) + I(m/dose) + m", {"dose": [2.0, 3.0]}),
    ("m ~ x*z", "y ~ m:z + I((age > 40)*m*x)", {}),
    ("m ~ x*cr(dose, df=4)", "y ~ m*x*site + cr(dose, df=4)*m", {"site": "b"}),
]


def _by_formulaic(frame, mediator, outcome, at, contrast, alpha, gamma):
    """Effects at rho = 0 from the text of the formulas: every row's own prediction, averaged."""
    v = formulaic.model_matrix(mediator.split("~")[1], frame).model_spec
    w = formulaic.model_matrix(outcome.split("~")[1], frame).model_spec
    changed = frame.assign(**at)
    low, high = (changed.assign(x=x) for x in contrast)

    def mean_m(rows):
        return np.asarray(v.get_model_matrix(rows), dtype=float) @ alpha

    def mean_y(rows, m):
        return np.asarray(w.get_model_matrix(rows.assign(m=m)), dtype=float) @ gamma

    m0, m1 = mean_m(low), mean_m(high)
    return {
        "a": np.mean(mean_y(high, m1) - mean_y(high, m0)),
        "a_pure": np.mean(mean_y(low, m1) - mean_y(low, m0)),
        "b": np.mean(m1 - m0),
        "t": np.mean(mean_y(high, m1) - mean_y(low, m0)),
    }


@pytest.mark.parametrize(
    ("mediator", "outcome", "at", "most_rows"),
    [(*study, 250_000) for study in STUDIES] + [(*study, 300) for study in STUDIES[4:7]],
)
def test_moments_are_those_of_the_formula_row_by_row(frame, monkeypatch, mediator, outcome, at, most_rows):
    # Reference library: formulaic, on the user's own text; small pieces must add up to the same.
    for module in (counterfactual, linearity):
        monkeypatch.setattr(module, "MOST_ROWS", most_rows)
    ours = observe(frame, exposure="x", mediator=mediator, outcome=outcome)
    asked = points(ours, at)
    rng = np.random.default_rng(5)
    alpha, gamma = rng.normal(size=len(ours.mediator_terms)), rng.normal(size=len(ours.outcome_terms))
    moments = linear_moments(ours, asked)
    found = linear_contrasts(moments, alpha[None], gamma[None], np.ones(1), np.ones(1))
    for k, point in enumerate(asked.values):
        expected = _by_formulaic(frame, mediator, outcome, point, ours.contrast, alpha, gamma)
        for name, value in expected.items():
            np.testing.assert_allclose(getattr(found, name)[k, 0], value, rtol=1e-8, atol=1e-8, err_msg=name)


def test_a_mean_of_products_is_no_product_of_means():
    # Two sites, invented: the effect on m is 2 and 0, that of m is 0 and 3, so no row has an indirect effect.
    site = np.repeat(["a", "b"], 40)
    x, noise = np.tile([0, 1], 40), np.random.default_rng(0).normal(size=80)
    m = np.where(site == "a", 2.0 * x, 0) + noise
    y = np.where(site == "b", 3.0 * m, 0)
    data = pd.DataFrame({"x": x, "m": m, "y": y, "site": site})
    ours = observe(data, exposure="x", mediator="m ~ x*site", outcome="y ~ m*site")
    moments = linear_moments(ours, points(ours, {}))
    alpha = np.array([0, 2.0, 0, -2.0])
    gamma = np.array([0, 0, 0, 3.0])
    assert ours.outcome_terms == ("Intercept", "m", "site[T.b]", "m:site[T.b]")
    assert ours.mediator_terms == ("Intercept", "x", "site[T.b]", "x:site[T.b]")
    assert gamma @ moments.indirect[0] @ alpha == pytest.approx(0, abs=1e-12)
    assert alpha @ moments.exposure_shift[0] * 1.5 == pytest.approx(1.5)


def test_exposure_meets_mediator_only_where_it_does(frame):
    for outcome, meets in (
        ("y ~ m + x", False),
        ("y ~ m*x", True),
        ("y ~ m*z + x*z", False),
        ("y ~ m + I(m*x*z)", True),
    ):
        ours = observe(frame, exposure="x", mediator="m ~ x*z", outcome=outcome)
        assert linear_moments(ours, points(ours, {"z": 0.5})).exposure_meets_mediator is meets


LINEAR = [
    "m + x",
    "m*z*x",
    "scale(m) + center(m):z",
    "poly(m, 1) + x",
    "I(m*age) + I(2 - m/3)",
    "log(exp(m)) + x",
    "I((m + z)*x)",
    "minimum(m, 1e9) + x",
]
CURVED = [
    "m + I(m**2)",
    "log(m + 20)",
    "bs(m, df=4)",
    "bs(m, df=4, extrapolation='extend')",
    "cr(m, df=4)",
    "poly(m, 2)",
    "m + maximum(m, 2)",
    "m + I(m*(m > 3))",
    "m + C(m > 3)",
    "m + I(m**2*(site == 'b'))",
    "m + x:I(m**3)",
    "sqrt(m + 20)",
    "m + I(m*m*flag*x)",
    "exp(m)",
    "abs(m)",
]


@pytest.mark.parametrize(("right", "linear"), [(r, True) for r in LINEAR] + [(r, False) for r in CURVED])
def test_linearity_is_found_by_evaluation(frame, right, linear):
    ours = observe(frame, exposure="x", mediator="m ~ x", outcome=f"y ~ {right}")
    assert linear_in_mediator(ours) is linear
    if not linear:
        with pytest.raises(DesignError, match="not linear in m"):
            linear_moments(ours, points(ours, {}))


@pytest.mark.parametrize(("shift", "scale"), [(1e6, 1), (0, 1e-9), (0, 1e9), (1e9, 1e3), (-1e5, 1)])
def test_linearity_does_not_depend_on_units(frame, shift, scale):
    frame["m"] = shift + scale * frame.m
    for right, linear in (
        ("m*z", True),
        ("m + I(m**2)", False),
        ("scale(m)", True),
        ("m + poly(m, 2)", False),
    ):
        ours = observe(frame, exposure="x", mediator="m ~ x", outcome=f"y ~ {right}")
        assert linear_in_mediator(ours) is linear, right


def test_the_verdict_is_kept_for_each_study(frame, monkeypatch):
    ours = observe(frame, exposure="x", mediator="m ~ x", outcome="y ~ m + x")
    assert linear_in_mediator(ours)
    monkeypatch.setattr(counterfactual, "tested_linear", lambda observed: pytest.fail("tested again"))
    assert linear_in_mediator(ours)


@pytest.mark.filterwarnings("ignore::bayesmed.core.errors.ExtrapolationWarning")
def test_a_bend_that_no_row_shows_is_found_where_it_is_asked(frame):
    # Linear in m for every age observed, a parabola for ages above them.
    ours = observe(frame, exposure="x", mediator="m ~ x", outcome="y ~ m + x + age + I(m*m*maximum(age - 100, 0))")
    assert linear_in_mediator(ours)
    linear_moments(ours, points(ours, {"age": 40}))
    with pytest.raises(ArgumentError, match="not at the values asked"):
        linear_moments(ours, points(ours, {"age": 120}))


@pytest.mark.filterwarnings("ignore::bayesmed.core.errors.ExtrapolationWarning")
def test_a_value_at_which_a_formula_has_no_value_is_refused(frame):
    ours = observe(frame, exposure="x", mediator="m ~ x*bs(age, df=4)", outcome="y ~ m*log(dose) + x")
    with pytest.raises(ArgumentError, match=r"bs\(age, df=4\)"):
        linear_moments(ours, points(ours, {"age": 90}))
    with pytest.raises(ArgumentError, match=r"log\(dose\)"):
        linear_moments(ours, points(ours, {"dose": [1.5, 0]}))


@pytest.mark.filterwarnings("ignore::bayesmed.core.errors.ExtrapolationWarning")
def test_curved_rows_are_those_of_the_formula(frame):
    text = "y ~ m*z + I(m**2)*x + site + log(dose)"
    ours = observe(frame, exposure="x", mediator="m ~ x*z + site", outcome=text)
    asked = points(ours, {"z": 0.5, "dose": [2.0, 12.0]})
    grid = np.array([-3.0, 0.0, 1.5, 9.0])
    rows = curved_rows(ours, asked.values[1])
    w = formulaic.model_matrix(text.split("~")[1], frame).model_spec
    v = formulaic.model_matrix("x*z + site", frame).model_spec
    changed = frame.assign(z=0.5, dose=12.0)
    np.testing.assert_allclose(rows.mediator_low, v.get_model_matrix(changed.assign(x=0)))
    np.testing.assert_allclose(rows.mediator_high, v.get_model_matrix(changed.assign(x=1)))
    for which in (0, 1):
        found = rows.outcome_rows(which, grid)
        assert found.shape == (len(frame), 4, len(ours.outcome_terms))
        for g, m in enumerate(grid):
            expected = w.get_model_matrix(changed.assign(x=which, m=m))
            np.testing.assert_allclose(found[:, g], expected)
    own = np.arange(2.0 * len(frame)).reshape(-1, 2)
    found = rows.outcome_rows(1, own[10:20], slice(10, 20))
    np.testing.assert_allclose(found[3, 1], w.get_model_matrix(changed.assign(x=1, m=own[:, 1])).iloc[13])


@pytest.mark.parametrize(
    ("right", "named"), [("log(m + 4)", r"log\(m \+ 4\)"), ("bs(m, df=4)", "extrapolation='extend'")]
)
def test_a_mediator_value_at_which_the_formula_has_none_is_refused(frame, right, named):
    ours = observe(frame, exposure="x", mediator="m ~ x", outcome=f"y ~ {right}")
    with pytest.raises(FormulaError, match=named):
        curved_rows(ours, {}).outcome_rows(1, np.array([-9.0, 1.0]))
