"""Formulas: labels, designs as formulaic itself makes them, the mediator's expression, names of columns."""

import formulaic
import numpy as np
import pandas as pd
import pytest

from bayesmed.core.errors import FormulaError
from bayesmed.study.observe import observe


def observed(frame, mediator="m ~ x", outcome="y ~ m + x", **options):
    return observe(frame, exposure="x", mediator=mediator, outcome=outcome, **options)


@pytest.mark.parametrize(
    "right",
    [
        "m + x",
        "m*x + z",
        "0 + site + m",
        "m*site*x + z - 1",
        "m:site + x*site",
        "(m + x + z)**2",
        "m + x + bs(age, df=4)",
        "m + C(age > 40) + x",
        "m + scale(z) + center(age):x",
        "m + poly(z, 3):x + x",
        "m + C(site, contr.sum()) + x",
        'm + C(site, contr.treatment(base="b")):x',
        "m + C(site, levels=['c', 'b', 'a']) + x",
        "m + flag:x + log(dose) + I(dose**2)",
        "m + x/site + cr(dose, df=4)",
        "bs(m, df=4) + x",
        "log(dose)*m + I(m**2) + minimum(dose, 5)",
        "m*x - x",
    ],
)
def test_designs_are_those_formulaic_makes_from_the_plain_formula(frame, right):
    # Reference library: formulaic, given the user's own text and columns.
    ours = observed(frame, outcome=f"y ~ {right}")
    theirs = formulaic.model_matrix(right, frame, context={"minimum": np.minimum})
    np.testing.assert_allclose(ours.outcome_design, np.asarray(theirs, dtype=float), rtol=1e-12, atol=1e-12)
    as_written = [name.replace('"', "'").replace("base=", "") for name in theirs.columns]
    assert [name.replace('"', "'").replace("base=", "") for name in ours.outcome_terms] == as_written


def test_mediator_expression_is_one_column_wherever_it_stands(frame):
    ours = observed(frame, "log(steps) ~ x", "y ~ log(steps)*z + I(log(steps)**2) + bs(np.log( steps ), df=4)")
    m = np.log(frame.steps.to_numpy())
    assert ours.mediator_name == "log(steps)"
    np.testing.assert_allclose(ours.mediator, m)
    at = {label: ours.outcome_design[:, j] for j, label in enumerate(ours.outcome_terms)}
    np.testing.assert_allclose(at["log(steps)"], m)
    np.testing.assert_allclose(at["log(steps):z"], m * frame.z)
    np.testing.assert_allclose(at["I(log(steps) ** 2)"], m**2)
    assert "bs(log(steps), df=4)[1]" in at


def test_mediator_in_brackets_means_its_inside_too(frame):
    ours = observed(frame, "I(m + z) ~ x", "y ~ I(m + z) + center(m + z):x + x")
    assert ours.outcome_terms == ("Intercept", "I(m + z)", "x", "center(m + z):x")


def test_stateful_mediator_is_evaluated_once(frame):
    ours = observed(frame, "scale(m) ~ x", "y ~ scale(m) + x")
    np.testing.assert_allclose(ours.outcome_design[:, 1], (frame.m - frame.m.mean()) / frame.m.std())
    assert not ours.alignment.informs


def test_functions_of_a_plain_mediator_are_allowed(frame):
    ours = observed(frame, "m ~ x", "y ~ m + I(m**2) + log(m + 10) + x")
    assert ours.outcome_terms[1:4] == ("m", "I(m ** 2)", "log(m + 10)")


def test_outcome_may_be_an_expression(frame):
    ours = observed(frame, outcome="log(y + 10) ~ m + x")
    assert ours.outcome_name == "log(y + 10)"
    np.testing.assert_allclose(ours.outcome, np.log(frame.y + 10))


def test_sums_of_comparisons_count(frame):
    # numpy's True + True is True; here it is 2.
    ours = observed(frame, outcome="y ~ m + I((age > 30) + (dose > 3)) + I(-(z > 0)) + x")
    at = dict(zip(ours.outcome_terms, ours.outcome_design.T, strict=True))
    count = at["I((age > 30) + (dose > 3))"]
    np.testing.assert_array_equal(count, (frame.age > 30).astype(int) + (frame.dose > 3).astype(int))
    np.testing.assert_array_equal(at["I(-(z > 0))"], -(frame.z > 0).astype(float))


def test_and_or_not_of_comparisons(frame):
    ours = observed(frame, outcome="y ~ m + I((age > 30) & ~flag | (site == 'a')) + x")
    expected = (frame.age > 30) & ~frame.flag | (frame.site == "a")
    np.testing.assert_array_equal(ours.outcome_design[:, 2], expected.astype(float))
    assert ours.outcome_terms[2] == 'I((age > 30) & ~flag | (site == "a"))'


def test_whole_numbers_do_not_overflow(frame):
    frame["big"] = 10**6 + np.arange(len(frame))
    ours = observed(frame, outcome="y ~ m + x + I(big**4) + poly(big, 2, raw=True)")
    assert ours.outcome_design[:, 3].min() > 9.9e23


@pytest.mark.parametrize(
    ("name", "written"),
    [
        ("my column", "`my column`"),
        ("log", "log"),
        ("C", "C"),
        ("I", "I"),
        ("lambda", "`lambda`"),
        ("True", "`True`"),
        ("age.years", "age.years"),
        ("v_c1", "v_c1"),
        ("Größe", "Größe"),
        ("it's", "`it's`"),
        ("a:b", "`a:b`"),
        ("1st", "`1st`"),
        ("df", "df"),
        ("m_", "m_"),
        ("a + b", "`a + b`"),
        ("__import__", "__import__"),
    ],
)
def test_columns_may_have_any_name(frame, name, written):
    frame[name] = frame.dose
    ours = observed(frame, "m ~ x", f"y ~ m + C(site) + log({written}):x + I({written}**2) + {written} + bs(age, df=4)")
    at = dict(zip(ours.outcome_terms, ours.outcome_design.T, strict=True))
    np.testing.assert_allclose(at[written], frame.dose)
    np.testing.assert_allclose(at[f"log({written}):x"], np.log(frame.dose) * frame.x)
    np.testing.assert_allclose(at[f"I({written} ** 2)"], frame.dose**2)
    assert "C(site)[T.b]" in at


def test_a_column_called_like_a_function_does_not_hide_it(frame):
    frame["log"], frame["C"] = frame.dose, frame.site
    ours = observed(frame, outcome="y ~ m + x + log(log) + C(C)")
    assert ours.outcome_terms == ("Intercept", "m", "x", "log(log)", "C(C)[T.b]", "C(C)[T.c]")


def test_levels_that_look_like_placeholders_keep_their_names(frame):
    frame["site"] = frame.site.map({"a": "v_c1", "b": "v_m", "c": "v_c0:v_c1"})
    ours = observed(frame, outcome="y ~ m + x + site")
    assert ours.outcome_terms[3:] == ("site[T.v_c1]", "site[T.v_m]")


def test_levels_with_quotes_and_brackets(frame):
    frame["site"] = frame.site.map({"a": 'say "a"', "b": "it's", "c": "']+x["})
    ours = observed(frame, outcome="""y ~ m + x + C(site, contr.treatment("it's")) + I(site == 'say "a"')""")
    assert "C(site, contr.treatment(\"it's\"))[T.']+x[]" in ours.outcome_terms
    np.testing.assert_array_equal(ours.outcome_design[:, -1], (frame.site == 'say "a"').astype(float))


def test_two_names_that_read_alike_are_told_apart(frame):
    frame = frame.rename(columns={"dose": "\ufb01t"})  # the ligature, which Python reads as "fit"
    ours = observed(frame, outcome="y ~ m + x + fit")
    assert ours.outcome_terms[-1] == "\ufb01t"


def test_terms_are_written_once_and_in_order_of_degree(frame):
    ours = observed(frame, outcome="y ~ x:m + x + m + m:x + I( z ) + I(z)")
    assert ours.outcome_terms == ("Intercept", "x", "m", "I(z)", "x:m")


def test_centred_scaled_and_polynomial_terms_reproduce_themselves(frame):
    # They remember the rows they were made on, so no error is raised.
    observed(frame, outcome="y ~ m + x + center(z) + scale(age) + poly(dose, 3) + cc(z, df=4) + standardize(z):x")


def test_a_term_that_depends_on_the_other_rows_is_refused(frame, monkeypatch):
    from bayesmed.study import transforms

    leaning = dict(transforms.TRANSFORMS)
    leaning["abs"] = transforms.Transform(lambda x: np.asarray(x) - np.mean(x))
    for module in ("designs", "expressions", "lexing"):
        monkeypatch.setattr(f"bayesmed.study.{module}.TRANSFORMS", leaning)
    with pytest.raises(FormulaError, match=r"abs\(z\).*center\(z\)"):
        observed(frame, outcome="y ~ m + x + abs(z)")


def test_errors_hold_neither_colours_nor_placeholders(frame):
    for outcome in (
        "y ~ m z",
        "y ~ (m + z",
        "y ~ m +",
        "y ~ m + bs(z, df=1)",
        "y ~ m + log(site)",
        "y ~ m + I(site*2)",
    ):
        with pytest.raises(FormulaError) as caught:
            observed(frame, outcome=outcome)
        assert "\x1b" not in str(caught.value)
        assert "v_" not in str(caught.value)


def test_designs_are_read_only(frame):
    with pytest.raises(ValueError, match="read-only"):
        observed(frame).outcome_design[0, 0] = 3.0


def test_index_of_the_data_is_kept(frame):
    frame.index = pd.Index([f"row {i // 2}" for i in range(len(frame))])
    assert list(observed(frame).frame.index) == list(frame.index)
