"""Input that cannot be used: one clear error of the package's own type, naming what is at fault."""

import datetime

import numpy as np
import pandas as pd
import pytest

from bayesmed.core.errors import ArgumentError, BayesmedError, DataError, DesignError, FormulaError
from bayesmed.study.observe import observe

USUAL = {"exposure": "x", "mediator": "m ~ x + z", "outcome": "y ~ m + x + z"}


def _changed(**columns):
    return lambda data: data.assign(**{k: (v(data) if callable(v) else v) for k, v in columns.items()})


def _infinite(data):
    data.loc[data.index[7], "z"] = np.inf
    return data


def _all_missing(data):
    return data.assign(z=np.nan)


def _no_row_complete(data):
    half = np.arange(len(data)) % 2 == 0
    return data.assign(z=data.z.where(half), m=data.m.where(~half))


def _mixed(data):
    return data.assign(z=[1 if i % 2 else "one" for i in range(len(data))])


def _only_x1_complete(data):
    return data.assign(z=data.z.where(data.x == 1))


SAME = "same data"
BAD = [
    # the data
    (lambda data: [1, 2, 3], {}, DataError, "builtins.list"),
    (lambda data: data.x, {}, DataError, "Series"),
    (lambda data: None, {}, DataError, "NoneType"),
    (lambda data: {"x": [1, 2], "m": [1]}, {}, DataError, "dict"),
    (lambda data: data.iloc[:0], {}, DataError, "no rows"),
    (lambda data: data.rename(columns={"age": "x"}), {}, DataError, "'x'"),
    (lambda data: pd.concat({"a": data}, axis=1), {}, DataError, "several levels"),
    (_infinite, {}, DataError, "'z' is infinite in 1 row(s), first in row 7"),
    (_changed(z=lambda d: -np.inf * d.x), {}, DataError, "'z'"),
    (_all_missing, {}, DataError, "'z' has no value"),
    (_no_row_complete, {}, DataError, "'m' lacks 80"),
    (_only_x1_complete, {}, DataError, "'x' is 1 in every one"),
    (_changed(z=pd.Timestamp("2020-01-01")), {}, DataError, "'z' is of type datetime64"),
    (_changed(z=pd.Timedelta(days=1)), {}, DataError, "'z' is of type timedelta64"),
    (_changed(z=lambda d: d.z + 1j), {}, DataError, "complex"),
    (_changed(z=datetime.date(2020, 1, 1)), {}, DataError, "date"),
    (_mixed, {}, DataError, "'z' holds objects of type int, str"),
    (_changed(x=1), {}, DataError, "'x' is 1 in every one"),
    (_changed(m=3.5), {}, DataError, "m is constant (3.5)"),
    (_changed(y=0), {}, DataError, "y is constant"),
    (_changed(m=lambda d: d.m.astype(str)), {}, DataError, "'m' is text"),
    (_changed(y=lambda d: pd.cut(d.y, 3)), {}, DataError, "'y' is categorical"),
    (lambda data: data.iloc[:4], {}, DesignError, "4 complete rows"),
    (_changed(z=lambda d: d.index.astype(str)), {}, DesignError, "'z' has 160 levels"),
    # roles
    (SAME, {"exposure": "coach"}, DataError, "'coach'"),
    (SAME, {"exposure": "xx"}, DataError, "Did you mean 'x'"),
    (SAME, {"exposure": 3}, ArgumentError, "exposure"),
    (SAME, {"exposure": "m"}, FormulaError, "'m' stands left"),
    (SAME, {"exposure": "y"}, FormulaError, "'y' stands left"),
    (SAME, {"mediator": "m ~ z"}, FormulaError, "'x' does not stand right"),
    (SAME, {"outcome": "y ~ x + z"}, FormulaError, "m does not stand right"),
    (SAME, {"outcome": "m ~ x + z"}, FormulaError, "m stands left of '~' in both"),
    (SAME, {"outcome": "I(y - m) ~ x + z"}, FormulaError, "m stands left of '~' in both"),
    (SAME, {"mediator": "m ~ x + y"}, FormulaError, "y stands right"),
    (SAME, {"outcome": "y ~ m + x + log(y + 9)"}, FormulaError, "y stands right"),
    (SAME, {"outcome": "log(y + 9) ~ m + x + y"}, FormulaError, "y stands right"),
    (SAME, {"mediator": "m ~ x + m"}, FormulaError, "m stands on both sides"),
    (SAME, {"mediator": "log(steps) ~ x + steps", "outcome": "y ~ log(steps)"}, FormulaError, "steps"),
    (
        SAME,
        {"mediator": "log(steps) ~ x", "outcome": "y ~ log(steps) + steps"},
        FormulaError,
        "steps is used outside",
    ),
    (SAME, {"mediator": "log(steps) ~ x", "outcome": "y ~ steps + x"}, FormulaError, "outside log(steps)"),
    (SAME, {"mediator": "I(m - x) ~ x", "outcome": "y ~ I(m - x)"}, FormulaError, "'x' stands left"),
    # formulas
    (SAME, {"mediator": "m"}, FormulaError, "mediator: there is no '~'"),
    (SAME, {"mediator": ""}, FormulaError, "mediator"),
    (SAME, {"outcome": "y ~"}, FormulaError, "nothing right"),
    (SAME, {"outcome": "~ m + x"}, FormulaError, "nothing left"),
    (SAME, {"outcome": "y ~ m ~ x"}, FormulaError, "two '~'"),
    (SAME, {"outcome": "y ~ m + x | z"}, FormulaError, "'|'"),
    (SAME, {"outcome": "y ~ . + m"}, FormulaError, "'.'"),
    (SAME, {"outcome": "y ~ m**2 + x"}, FormulaError, "I(m**2)"),
    (SAME, {"outcome": "y ~ m + x^2"}, FormulaError, "I(x**2)"),
    (SAME, {"outcome": "y ~ m*m + x"}, FormulaError, "I(m**2)"),
    (SAME, {"outcome": "y ~ m + x + log(dose):log(dose)"}, FormulaError, "I(log(dose)**2)"),
    (SAME, {"outcome": "y ~ m + x + 2*z"}, FormulaError, "Numeric literals"),
    (SAME, {"outcome": "y ~ m + x + 0.5:z"}, FormulaError, "0.5"),
    (SAME, {"outcome": "y ~ m + x + 'z'"}, FormulaError, "'z'"),
    (SAME, {"outcome": "y ~ m x"}, FormulaError, "Missing operator"),
    (SAME, {"outcome": "y ~ m + x > 3"}, FormulaError, "'>'"),
    (SAME, {"outcome": "y + z ~ m + x"}, FormulaError, "I(y + z)"),
    (SAME, {"outcome": "C(y) ~ m + x"}, FormulaError, "number, not a categorical"),
    (SAME, {"outcome": "bs(y, df=4) ~ m + x"}, FormulaError, "4 columns"),
    (SAME, {"outcome": "y ~ m + x + agee"}, FormulaError, "Did you mean 'age'"),
    (SAME, {"outcome": "y ~ m + x + `my age`"}, FormulaError, "`my age`"),
    (SAME, {"outcome": "y ~ m + x + qqqqqq"}, FormulaError, "The data have 9 columns"),
    (SAME, {"outcome": "y ~ m - m - 1"}, FormulaError, "no term"),
    (SAME, {"outcome": None}, FormulaError, "outcome: a formula is a string"),
    (SAME, {"mediator": b"m ~ x"}, FormulaError, "bytes"),
    (SAME, {"mediator": 5, "outcome": 6}, FormulaError, "mediator"),
    (SAME, {"outcome": "y ~ m + x + log(z)"}, FormulaError, "log(z) is not finite"),
    (SAME, {"outcome": "log(z) ~ m", "mediator": "m ~ x"}, FormulaError, "log(z) is not finite"),
    (SAME, {"mediator": "log(z) ~ x", "outcome": "y ~ log(z)"}, FormulaError, "mediator: the term log(z)"),
    (SAME, {"outcome": "y ~ m + x + exp(I(age*99))"}, FormulaError, "exp(I(age * 99)) is not finite"),
    (SAME, {"outcome": "y ~ m + x + log(site)"}, FormulaError, "log(site) cannot be evaluated"),
    (SAME, {"outcome": "y ~ m + x + C(site, levels=['a', 'b'])"}, FormulaError, "level"),
    (SAME, {"outcome": "y ~ m + x + C(site, contr.treatment('q'))"}, FormulaError, "contr.treatment"),
    (SAME, {"outcome": "y ~ m + x + bs(z, df=4, knots=[0.5])"}, FormulaError, "bs(z"),
    # contrast
    (SAME, {"contrast": (1, 1)}, ArgumentError, "same"),
    (SAME, {"contrast": (0, 2)}, ArgumentError, "got 2"),
    (SAME, {"contrast": (0, np.nan)}, ArgumentError, "nan"),
    (SAME, {"contrast": ("0", "1")}, ArgumentError, "'0'"),
    (SAME, {"contrast": (0, 1, 2)}, ArgumentError, "two values"),
    (SAME, {"contrast": "01"}, ArgumentError, "two values"),
    (SAME, {"contrast": 1}, ArgumentError, "two values"),
    (_changed(x=lambda d: d.x + 1), {}, ArgumentError, "'x' is not coded 0/1 (values: 1, 2)"),
    (_changed(x=lambda d: d.x + (d.z > 1)), {}, ArgumentError, "values: 0, 1, 2"),
    (_changed(x=lambda d: d.dose), {}, ArgumentError, "contrast"),
    (_changed(x=lambda d: d.x.map({0: "no", 1: "yes"})), {}, ArgumentError, "alphabet"),
    (_changed(x=lambda d: d.x.map({0: "no", 1: "yes"}).astype("string")), {}, ArgumentError, "'no', 'yes'"),
    (_changed(x=lambda d: pd.Categorical(d.site)), {}, ArgumentError, "3 levels"),
    (
        _changed(x=lambda d: pd.Categorical(d.site)),
        {"contrast": ("a", "q")},
        ArgumentError,
        "'q' is not a level",
    ),
    (_changed(x=lambda d: d.flag), {"contrast": (0, 2)}, ArgumentError, "False or True, got 2"),
    (
        _changed(x=lambda d: d.dose),
        {"contrast": (0, 2), "mediator": "m ~ log(x)", "outcome": "y ~ m"},
        ArgumentError,
        "at x = 0",
    ),
    (
        _changed(x=lambda d: d.dose),
        {"contrast": (2, 20), "mediator": "m ~ bs(x, df=4)", "outcome": "y ~ m"},
        ArgumentError,
        "at x = 20",
    ),
    (
        _changed(x=lambda d: d.x + (d.z > 1)),
        {"contrast": (0, 5), "mediator": "m ~ C(x)", "outcome": "y ~ m + z"},
        ArgumentError,
        "at x = 5",
    ),
    # moderators
    (SAME, {"moderators": ["z"]}, ArgumentError, "Moderators found: none"),
    (SAME, {"outcome": "y ~ m*z + x", "moderators": ["age"]}, ArgumentError, "'age'"),
    (SAME, {"outcome": "y ~ m*z + x", "moderators": ["z", "z"]}, ArgumentError, "twice"),
    (SAME, {"outcome": "y ~ m*z + x", "moderators": 3}, ArgumentError, "list of names"),
]


@pytest.mark.parametrize(("change", "options", "kind", "named"), BAD, ids=range(len(BAD)))
def test_bad_input_gives_one_clear_error(frame, change, options, kind, named):
    data = frame if change is SAME else change(frame)
    with pytest.raises(BayesmedError) as caught:
        observe(data, **{**USUAL, **options})
    assert type(caught.value) is kind
    assert named in str(caught.value)
    assert len(str(caught.value)) < 700
    # Nothing from below is dragged along.
    assert caught.value.__cause__ is None
    assert caught.value.__suppress_context__ or caught.value.__context__ is None


RESERVED = [
    *("chain", "draw", "rho", "prior", "effect", "mean", "sd", "lower", "upper", "probability", "mcse", "verdict"),
    *("indirect", "direct", "total", "pure_indirect", "total_direct"),
]


@pytest.mark.parametrize("name", [*RESERVED, "a/b"])
def test_reserved_names_of_moderators(frame, name):
    data = frame.rename(columns={"z": name})
    with pytest.raises(DataError, match="rename") as caught:
        observe(data, exposure="x", mediator="m ~ x", outcome=f"y ~ m*`{name}` + x")
    assert name in str(caught.value)
    # As a covariate such a name is nobody's business.
    observe(data, exposure="x", mediator="m ~ x", outcome=f"y ~ m + `{name}` + x")
