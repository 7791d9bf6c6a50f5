"""What `at` means."""

import numpy as np
import pandas as pd
import pytest

from bayesmed.core.errors import ArgumentError, ExtrapolationWarning
from bayesmed.study.observe import observe
from bayesmed.study.points import points


@pytest.fixture(scope="module")
def study(invented):
    return observe(
        invented.assign(few=invented.age % 4, total=invented.dose),
        exposure="x",
        mediator="m ~ x*site + flag + total + x:z",
        outcome="y ~ m*z + x + m:few + bs(age, df=4) + C(few)",
        moderators=["z", "site"],
    )


def test_a_dict_is_a_product_grid_in_its_own_order(study):
    asked = points(study, {"site": ["c", "a"], "age": 30, "z": (0.0, 1)})
    assert asked.dims == {"site": ("c", "a"), "z": (0.0, 1.0)}
    assert asked.scalars == {"age": 30}
    assert asked.shape == (2, 2)
    assert [tuple(p.items()) for p in asked.values] == [
        (("site", "c"), ("z", 0.0), ("age", 30)),
        (("site", "c"), ("z", 1.0), ("age", 30)),
        (("site", "a"), ("z", 0.0), ("age", 30)),
        (("site", "a"), ("z", 1.0), ("age", 30)),
    ]


def test_an_empty_dict_averages(study):
    asked = points(study, {})
    assert (asked.dims, asked.scalars, asked.shape, asked.values) == ({}, {}, (), ({},))


def test_by_default_observed_values_near_percentiles_and_every_level(study):
    asked = points(study)
    z = study.frame.z.to_numpy()
    assert list(asked.dims) == ["z", "site"]
    assert asked.dims["site"] == ("a", "b", "c")
    for value, percentile in zip(asked.dims["z"], (20, 50, 80), strict=True):
        assert value in z
        assert np.abs(z - np.percentile(z, percentile)).min() == abs(value - np.percentile(z, percentile))
    assert len(asked.values) == 9


def test_by_default_few_values_truth_values_and_coded_ones_are_all_shown(frame):
    frame["few"] = frame.age % 5
    frame["seven"] = frame.age % 7
    frame["zero"] = np.where(np.arange(len(frame)) < 150, 0, np.arange(len(frame)))
    ours = observe(frame, exposure="x", mediator="m ~ x*few", outcome="y ~ m*few + x")
    assert points(ours).dims == {"few": (0, 1, 2, 3, 4)}
    ours = observe(frame, exposure="x", mediator="m ~ x*flag", outcome="y ~ m*C(seven) + x")
    assert points(ours).dims == {"flag": (False, True), "seven": tuple(range(7))}
    ours = observe(frame, exposure="x", mediator="m ~ x*zero", outcome="y ~ m + x")
    assert points(ours).dims == {"zero": (0,)}


def test_more_than_thirty_default_points_are_refused_with_a_way_out(frame):
    ours = observe(frame, exposure="x", mediator="m ~ x*site*z", outcome="y ~ m*age*flag + x")
    with pytest.raises(ArgumentError, match=r"54 points.*'site' 3.*at=\{\}"):
        points(ours)
    assert len(points(ours, {"age": [30, 40]}).values) == 2


@pytest.mark.parametrize("value", [1, True, 1.0, np.int64(1), np.float32(1), np.bool_(True), np.array(1)], ids=repr)
def test_values_come_back_as_plain_python(study, value):
    assert points(study, {"flag": value}).scalars["flag"] is True


@pytest.mark.parametrize(
    "values",
    [[0, 1], (0, 1), np.array([0.0, 1.0]), pd.Series([0, 1]), pd.Index([0, 1]), range(2)],
    ids=range(6),
)
def test_every_kind_of_list_makes_a_dimension(study, values):
    found = points(study, {"z": values}).dims["z"]
    assert found == (0.0, 1.0)
    assert all(type(v) is float for v in found)
    assert type(points(study, {"age": np.float64(30)}).scalars["age"]) is int


BAD = [
    ({"x": 1}, "'x' is the exposure"),
    ({"m": 1}, "'m' is the mediator"),
    ({"y": 1}, "'y' is the outcome"),
    ({"dose": 1}, "'dose' is no variable"),
    ({"nonsense": 1}, "It may name: 'site', 'flag'"),
    ({3: 1}, "3 is no variable"),
    ({"total": 1}, "rename"),
    ({"site": "q"}, "'q' is not a level of 'site'. Levels: 'a', 'b', 'c'"),
    ({"site": ["a", "q"]}, "'q' is not a level"),
    ({"site": 0}, "0 is not a level"),
    ({"few": 7}, "7 is not a level of 'few'. Levels: 0, 1, 2, 3"),
    ({"few": True}, "number"),
    ({"z": np.nan}, "nan"),
    ({"z": [0, np.inf]}, "inf"),
    ({"z": None}, "None"),
    ({"z": "0"}, "'0'"),
    ({"z": True}, "True"),
    ({"z": 1j}, "1j"),
    ({"z": {0, 1}}, "{0, 1}"),
    ({"flag": 2}, "False or True, got 2"),
    ({"flag": "True"}, "'True'"),
    ({"z": []}, "empty"),
    ({"z": np.zeros((2, 2))}, "shape (2, 2)"),
    ({"z": [1, 1.0]}, "twice"),
    ({"site": ["a", "a"]}, "twice"),
    (["z"], "expected a dict"),
    ("z", "expected a dict"),
    (0.5, "expected a dict"),
]


@pytest.mark.parametrize(("at", "named"), BAD, ids=range(len(BAD)))
def test_bad_at_is_refused(study, at, named):
    with pytest.raises(ArgumentError) as caught:
        points(study, at)
    assert str(caught.value).startswith("at: ")
    assert named in str(caught.value)


def test_mediator_in_an_expression_cannot_be_set_either(frame):
    ours = observe(frame, exposure="x", mediator="log(steps) ~ x", outcome="log(y + 9) ~ log(steps)*z")
    for name in ("steps", "log(steps)", "y", "log(y + 9)"):
        with pytest.raises(ArgumentError, match="cannot be set"):
            points(ours, {name: 1})


def test_values_outside_those_observed_warn(study):
    with pytest.warns(ExtrapolationWarning, match="'z' = 9, -9 lies outside"):
        assert points(study, {"z": [9, 0, -9]}).dims["z"] == (9.0, 0.0, -9.0)
    with pytest.warns(ExtrapolationWarning, match="'age' = 80"):
        points(study, {"age": 80})
