"""A fit written to a file and read back."""

import numpy as np
import pytest

import bayesmed as bm


@pytest.fixture
def fit(simulated):
    data = simulated(120, 0.2, seed=3).assign(site=lambda d: d["site"].astype("category"), b=lambda d: d["z"] > 1)
    data["i"] = np.arange(120) % 7
    study = bm.Study(
        data, exposure="x", contrast=(0, 1), mediator="m ~ x * site + b", outcome="y ~ m * site + x * site + b + i"
    )
    return study.fit(method="exact", draws=50, random_seed=1, progressbar=False)


@pytest.mark.parametrize("belief", [None, bm.LKJ(2), 0.25], ids=repr)
def test_comes_back_the_same(fit, tmp_path, belief):
    before = fit if belief is None else fit.under(belief)
    path = before.save(tmp_path / "fit.nc")
    after = bm.load(path)
    assert after.posterior.identical(before.posterior)
    assert after.how == before.how
    assert after.rho == before.rho
    other = bm.Uniform(-0.4, 0.4)
    assert after.summary(rho=other).equals(before.summary(rho=other))
    assert after.tree.attrs["versions"] == before.tree.attrs["versions"]
    after.save(path)
    assert [p.name for p in tmp_path.iterdir()] == ["fit.nc"]


def test_another_file_is_refused(tmp_path):
    path = tmp_path / "fit.nc"
    path.write_text("not a fit")
    with pytest.raises(bm.errors.FitError, match=r"not a file that fit\.save wrote"):
        bm.load(path)
