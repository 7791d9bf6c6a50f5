"""Differences between beliefs, with errors that know which draws they share; rho before and after the data."""

import numpy as np
import pytest

import bayesmed as bm
from bayesmed.core.errors import ArgumentError, InformedWarning

BELIEFS = {"none": 0.0, "some": bm.Uniform(0, 0.4), "wide": bm.LKJ(2), "wider": bm.StretchedBeta(0.4, 0.4)}
AT = {"z": [0.0, 1.0]}


@pytest.fixture(scope="module")
def study(simulated):
    data = simulated(150, rho=0.3, seed=4)
    return bm.Study(data, exposure="x", mediator="m ~ x + z + c", outcome="y ~ m * z + x + c")


@pytest.fixture(scope="module")
def compared(study):
    fit = study.fit(method="exact", draws=500, random_seed=2, progressbar=False)
    return fit.compare(BELIEFS, at=AT)


def test_differences_are_those_of_the_table(compared):
    found = compared.differences()
    table = compared.table[compared.table["effect"] == "indirect"].set_index(["prior", "z"])
    for _, row in found.iterrows():
        here, base = table.loc[(row["prior"], row["z"])], table.loc[("none", row["z"])]
        assert row["probability"] == pytest.approx(here["probability"] - base["probability"], abs=1e-12)
        if np.isfinite(here["mean"]):
            assert row["mean"] == pytest.approx(here["mean"] - base["mean"], abs=1e-10)
        else:
            assert np.isnan(row["mean"])
            assert np.isnan(row["mean_mcse"])
    assert list(found["prior"].unique()) == ["some", "wide", "wider"]
    # LKJ(2) leaves the mean where it is, draw by draw.
    wide = found[found["prior"] == "wide"]
    assert wide["mean"].to_numpy() == pytest.approx(0, abs=1e-12)


def test_the_error_is_the_spread_between_fits(study):
    """Paired draws: the error of the difference is that of repeated fits, well under that of two separate fits."""
    gaps, errors, separate = [], [], []
    for seed in range(60):
        fit = study.fit(method="exact", draws=50, random_seed=seed, progressbar=False)
        compared = fit.compare({"a": 0.1, "b": bm.Uniform(0, 0.4)}, at={"z": 0.0})
        row = compared.differences().iloc[0]
        gaps.append([row["probability"], row["mean"]])
        errors.append([row["mcse"], row["mean_mcse"]])
        claimed = compared.table[compared.table["effect"] == "indirect"]
        separate.append(np.hypot(*claimed["mcse"]))
    ratio = np.std(gaps, axis=0) / np.mean(errors, axis=0)
    # The SD of 60 values has a relative standard error of .092.
    assert ratio == pytest.approx(1, abs=4 * 0.092)
    assert np.mean(errors, axis=0)[0] < 0.9 * np.mean(separate)


def test_any_label_is_a_reference_and_nothing_else(compared):
    assert list(compared.differences("wide")["prior"].unique()) == ["none", "some", "wider"]
    with pytest.raises(ArgumentError, match="none of the beliefs compared"):
        compared.differences("None")


def test_one_belief_has_nothing_to_differ_from(study):
    fit = study.fit(method="exact", draws=20, random_seed=2, progressbar=False)
    with pytest.raises(ArgumentError, match="one belief only"):
        fit.compare({"none": 0.0}, at={}).differences()


def test_where_the_data_are_silent_the_posterior_of_rho_is_its_prior(compared):
    rho = compared.rho.set_index("prior")
    assert (rho["posterior_mean"] == rho["prior_mean"]).all()
    assert rho.loc["some", "prior_mean"] == pytest.approx(0.2)
    assert rho.loc["some", "posterior_sd"] == pytest.approx(0.4 / np.sqrt(12))
    assert "before the data" not in repr(compared)


def test_where_they_inform_it_the_comparison_says_how_far_each_belief_moved(simulated):
    data = simulated(400, rho=0.5, seed=4, interact=False)
    study = bm.Study(data.assign(m=data.m + 2 * data.x * data.z), exposure="x", mediator="m ~ x * z",
                     outcome="y ~ m + x + z")  # fmt: skip
    with pytest.warns(InformedWarning):
        fit = study.fit(rho=bm.Uniform(-0.9, 0.9), random_seed=1, progressbar=False)
    compared = fit.compare({"own": bm.Uniform(-0.9, 0.9), "sceptic": bm.TruncatedNormal(0, 0.1)}, at={"z": 1.0})
    rho = compared.rho.set_index("prior")
    assert rho.loc["own", "posterior_mean"] == pytest.approx(float(fit.posterior["rho"].mean()))
    assert rho.loc["own", "posterior_sd"] < 0.5 * rho.loc["own", "prior_sd"]
    assert 0 < rho.loc["sceptic", "posterior_mean"] < rho.loc["own", "posterior_mean"]
    assert "own: rho has mean 0.00 and SD 0.52 before the data" in repr(compared)
    row = compared.differences().iloc[0]
    table = compared.table[compared.table["effect"] == "indirect"]["probability"].to_numpy()
    assert row["probability"] == pytest.approx(table[1] - table[0], abs=1e-12)
    assert row["mean_mcse"] > 0


def test_a_belief_for_each_group(simulated):
    data = simulated(300, rho=0.3, seed=4)
    study = bm.Study(data, exposure="x", mediator="m ~ x * site", outcome="y ~ m * site + x * site")
    own = bm.ByGroup({"east": 0.0, "north": bm.Uniform(0, 0.3), "west": 0.2}, correlation=0.5)
    fit = study.fit(rho=own, method="exact", draws=200, random_seed=1, progressbar=False)
    at = {"site": ["west", "east", "north"]}
    tips = fit.tipping(at=at)
    found = tips.probability(own).set_index("site")
    table = fit.summary(at=at).query("effect == 'indirect'").set_index("site")
    assert found["probability"].to_numpy() == pytest.approx(table.loc[found.index, "probability"].to_numpy(), abs=1e-12)
    alone = tips.probability(bm.Uniform(0, 0.3)).set_index("site")
    assert found.loc["north", "probability"] == alone.loc["north", "probability"]
    with pytest.raises(ArgumentError, match="no belief for 'west'"):
        tips.probability(bm.ByGroup({"east": 0.0, "north": 0.1}, correlation=0))
    rho = fit.compare({"own": own, "none": 0.0}, at=at).rho
    assert list(rho["group"].dropna()) == ["east", "north", "west"]
    fit.compare({"own": own, "none": 0.0}, at=at).differences()
    plain = study.fit(method="exact", draws=20, random_seed=1, progressbar=False)
    with pytest.raises(ArgumentError, match="needs a fit made with rho=ByGroup"):
        plain.tipping(at=at).probability(own)


def test_draws_that_agree_on_a_mixture_of_atoms_carry_an_error(study):
    fit = study.fit(method="exact", draws=100, random_seed=2, progressbar=False)
    belief = bm.Mixture([-0.99, 0.99], [0.25, 0.75])
    row = fit.summary(at={"z": 1.0}, rho=belief).iloc[0]
    assert row["probability"] == pytest.approx(0.25)
    assert row["mcse"] == pytest.approx(1 / 400)
