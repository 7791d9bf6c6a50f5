"""Rows that come in batches give what the same rows give in one frame."""

from concurrent.futures import ProcessPoolExecutor, ThreadPoolExecutor

import numpy as np
import pandas as pd
import pytest

import bayesmed as bm
from bayesmed.core.errors import DataError, DesignError, FitError
from bayesmed.study import batches
from bayesmed.study.counterfactual import linear_moments
from bayesmed.study.points import points

FORMULAS = {
    "mediator": "m ~ x * site + scale(z) + bs(age, df=4)",
    "outcome": "y ~ m * x * z + site + x:site + bs(age, df=4)",
}


@pytest.fixture(scope="module")
def rows():
    random = np.random.default_rng(3)
    n = 1200
    frame = pd.DataFrame(
        {
            "x": random.integers(0, 2, n),
            "z": random.normal(10, 2, n),
            "age": random.uniform(20, 60, n),
            "site": np.where(np.arange(n) > 1100, "a", random.choice(["c", "b"], n)),
        }
    )
    frame["m"] = frame.x + 0.1 * frame.z + random.normal(size=n)
    frame["y"] = frame.m * frame.x + random.normal(size=n)
    frame.loc[[3, 700], "age"] = np.nan
    return frame


@pytest.fixture(autouse=True)
def small_batches(monkeypatch):
    monkeypatch.setattr(batches, "BATCH", 170)
    monkeypatch.setattr(batches, "KEPT", 100)


def same(found, whole):
    found, whole = found.observed, whole.observed
    assert found.rows == whole.rows
    assert found.outcome_terms == whole.outcome_terms
    v = [o.compressed.outcome_design for o in (found, whole)]
    size = np.linalg.norm(v[1], axis=0)
    np.testing.assert_allclose((v[0] / size).T @ (v[0] / size), (v[1] / size).T @ (v[1] / size), atol=1e-10)
    for at in (None, {"z": [8.0, 12.0]}, {}):
        a, b = (points(o, at) for o in (found, whole))
        assert a.values == b.values
        a, b = linear_moments(found, a), linear_moments(whole, b)
        for name in ("exposure_shift", "indirect", "pure_indirect", "total", "total_offset"):
            np.testing.assert_allclose(getattr(a, name), getattr(b, name), rtol=1e-10, atol=1e-9)


def test_parquet_a_list_and_a_function_give_what_one_frame_gives(rows, tmp_path):
    whole = bm.Study(rows, exposure="x", **FORMULAS)
    path = tmp_path / "rows.parquet"
    rows.to_parquet(path)
    pieces = [rows.iloc[k : k + 170] for k in range(0, len(rows), 170)]
    for data in (path, str(path), pieces, lambda: iter(pieces)):
        same(bm.Study(data, exposure="x", **FORMULAS), whole)


@pytest.mark.parametrize("kind", [ThreadPoolExecutor, ProcessPoolExecutor])
def test_an_executor_gives_the_same(rows, kind):
    pieces = [rows.iloc[k : k + 400] for k in range(0, len(rows), 400)]
    with kind(2) as executor:
        same(bm.Study(pieces, exposure="x", executor=executor, **FORMULAS), bm.Study(rows, exposure="x", **FORMULAS))


def test_what_batches_cannot_do_is_said(rows, tmp_path):
    with pytest.raises(DataError, match="read once only"):
        bm.Study(iter([rows]), exposure="x", **FORMULAS)
    study = bm.Study([rows], exposure="x", **FORMULAS)
    assert "evenly spaced rows" in str(study.audit())
    fit = study.fit(method="exact", draws=50, random_seed=1, progressbar=False)
    with pytest.raises(FitError, match="batches"):
        fit.save(tmp_path / "fit.nc")
    curved = bm.Study([rows], exposure="x", mediator="m ~ x", outcome="y ~ m + I(m**2) + x")
    with pytest.raises(DesignError, match="in memory at once"):
        curved.fit(method="exact", draws=50, random_seed=1, progressbar=False).effects(rho=0)
