"""Frames of every kind, types, missing values, and what is kept."""

import numpy as np
import pandas as pd
import pyarrow as pa
import pytest

from bayesmed.core.errors import DataError
from bayesmed.study.observe import observe


def observed(data, outcome="y ~ m + x + z", **options):
    return observe(data, **{"exposure": "x", "mediator": "m ~ x + z", "outcome": outcome, **options})


def test_complete_rows_are_taken_once_over_both_formulas(frame):
    frame.loc[[1, 2], "z"] = np.nan
    frame.loc[[2, 3], "age"] = np.nan
    frame.loc[5, "dose"] = np.nan  # not used
    frame.loc[6, "site"] = None
    ours = observed(frame, "y ~ m + x + bs(age, df=4) + site")
    assert ours.rows.given == 160
    assert ours.rows.used == len(ours.frame) == len(ours.mediator_design) == len(ours.outcome_design) == 156
    assert ours.rows.dropped == 4
    assert ours.rows.missing == {"z": 2, "age": 2, "site": 1}
    assert set(ours.frame.columns) == {"x", "m", "y", "z", "age", "site"}
    assert list(ours.frame.index[:4]) == [0, 4, 5, 7]


def test_columns_not_used_are_not_kept_and_the_data_are_not_changed(frame):
    before = frame.copy()
    ours = observed(frame)
    assert set(ours.frame.columns) == {"x", "m", "y", "z"}
    pd.testing.assert_frame_equal(frame, before)


def test_mediator_inside_its_expression_counts_for_completeness(frame):
    frame.loc[9, "steps"] = np.nan
    ours = observed(frame, "y ~ log(steps) + x", mediator="log(steps) ~ x")
    assert ours.rows.missing == {"steps": 1}


@pytest.mark.parametrize("make", [dict, lambda d: {k: v.tolist() for k, v in d.items()}, pa.Table.from_pandas])
def test_frames_of_other_kinds_give_the_same_designs(frame, make):
    plain = frame.drop(columns="flag")
    ours, other = observed(plain, "y ~ m*site + x"), observed(make(plain), "y ~ m*site + x")
    assert other.outcome_terms == ours.outcome_terms
    np.testing.assert_array_equal(other.outcome_design, ours.outcome_design)


def test_an_arrow_table_with_nulls_and_dictionaries():
    rng = np.random.default_rng(3)
    table = pa.table(
        {
            "x": pa.array([True, False, None] * 20),
            "m": rng.normal(size=60),
            "y": rng.normal(size=60),
            "g": pa.array(["a", "b", None, "c"] * 15).dictionary_encode(),
            "i": pa.array([1, 2, 3, 4, None] * 12),
        }
    )
    ours = observe(table, exposure="x", mediator="m ~ x + g", outcome="y ~ m + x + i")
    assert ours.rows.missing == {"x": 20, "g": 15, "i": 12}
    assert ours.contrast == (False, True)


@pytest.mark.parametrize(
    ("values", "dtype"),
    [
        (lambda d: d.age.astype("Int64"), np.int64),
        (lambda d: d.age.astype("UInt8"), np.int64),
        (lambda d: d.age.astype("Float64"), np.float64),
        (lambda d: d.age.astype("float32"), np.float64),
        (lambda d: d.age.astype("int64[pyarrow]"), np.int64),
        (lambda d: d.age.astype("double[pyarrow]"), np.float64),
        (lambda d: d.age.astype(object), np.float64),
        (lambda d: d.flag.astype("boolean"), np.bool_),
        (lambda d: d.flag.astype(object), np.bool_),
        (lambda d: d.flag.astype("bool[pyarrow]"), np.bool_),
        (lambda d: pd.arrays.SparseArray(d.z.round(), fill_value=0.0), np.float64),
    ],
    ids=range(11),
)
def test_numbers_and_truth_values_become_plain_after_complete_cases(frame, values, dtype):
    frame["w"] = values(frame)
    if not isinstance(frame.w.dtype, pd.SparseDtype) and frame.w.dtype != np.float32:
        frame.loc[4, "w"] = None
    ours = observed(frame, "y ~ m + x + w")
    assert ours.frame.w.dtype == dtype
    assert ours.outcome_terms[-1] == "w"
    np.testing.assert_allclose(ours.outcome_design[:, -1], np.asarray(ours.frame.w, dtype=float))


@pytest.mark.parametrize("dtype", [object, "str", "string", "string[pyarrow]", "category"])
def test_text_becomes_categorical(frame, dtype):
    frame["site"] = frame.site.astype(dtype)
    ours = observed(frame, "y ~ m + x + site")
    assert ours.outcome_terms[-2:] == ("site[T.b]", "site[T.c]")
    assert isinstance(ours.frame.site.dtype, pd.CategoricalDtype)


def test_levels_that_no_used_row_has_are_left_out_and_told(frame):
    frame["site"] = pd.Categorical(frame.site, categories=["d", "c", "b", "a"])
    frame.loc[frame.site == "b", "z"] = np.nan
    ours = observed(frame, "y ~ m + x + site")
    assert ours.outcome_terms[-1:] == ("site[T.a]",)
    assert ours.unused_levels == {"site": ("b", "d")}


def test_intervals_become_text_levels(frame):
    frame["band"] = pd.cut(frame.age, [0, 30, 50, 100])
    ours = observed(frame, "y ~ m + x + band")
    assert ours.outcome_terms[-2:] == ("band[T.(30, 50]]", "band[T.(50, 100]]")


def test_repeated_index_labels_do_no_harm(frame):
    frame.index = np.repeat(np.arange(80), 2)
    frame.iloc[7, frame.columns.get_loc("z")] = np.nan
    assert observed(frame).rows.used == 159


@pytest.mark.parametrize("name", ["x", "m", "y", "z"])
def test_the_first_infinite_row_is_named_by_its_label(frame, name):
    frame[name] = frame[name].astype(float)
    frame.index = [f"p{i}" for i in range(len(frame))]
    frame.loc["p11", name] = np.inf
    with pytest.raises(DataError, match=f"'{name}' is infinite.*'p11'"):
        observed(frame)


def test_a_lazy_frame_is_refused_with_what_to_do(frame):
    import narwhals as nw

    lazy = nw.from_native(frame).lazy()
    with pytest.raises(DataError, match="collect"):
        observed(lazy)


def test_the_study_keeps_its_rows_when_the_data_change_afterwards():
    data = pd.DataFrame({"x": [0.0, 1, 0, 1, 0, 1], "m": [1.0, 2, 2, 3, 1, 4], "y": [1.0, 2, 3, 4, 5, 7]})
    study = observed(data, "y ~ m + x", mediator="m ~ x")
    before = study.frame.copy()
    for values in (data["m"].to_numpy(copy=False), data["y"].to_numpy(copy=False)):
        if values.flags.writeable:
            values[:] = -1
    data.loc[:, "x"] = 5.0
    pd.testing.assert_frame_equal(study.frame, before)
