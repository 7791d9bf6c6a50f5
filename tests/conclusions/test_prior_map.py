"""The map over a belief's mean and SD against the same beliefs in a comparison, and its contour."""

import dataclasses

import numpy as np
import pytest
import xarray as xr
from scipy.optimize import brentq

import bayesmed as bm
from bayesmed.conclusions.prior_map import MEANS, SDS, contour, prior_map
from bayesmed.core.errors import ArgumentError, FitError, PriorError
from bayesmed.core.knots import PER_SD, WIDEST, crossings, knots_for, weights_at
from bayesmed.core.tipping import claim_probability
from bayesmed.priors.by_moments import FAMILIES, members, with_mean_and_sd

CLAIMS = [
    bm.Claim("indirect", above=0),
    bm.Claim("direct", below=0.2),
    bm.Claim("pure_indirect", above=0.4),
    bm.Claim("total_direct", above=-0.3),
]
AT = {"z": [-1.0, 0.5, 2.0]}


@pytest.fixture(scope="module")
def fit(simulated):
    """The exposure moves the mediator weakly at small z, so that B has either sign there."""
    study = bm.Study(
        simulated(150, 0.3, seed=4),
        exposure="x",
        mediator="m ~ x * z + x * c + site",
        outcome="y ~ m * x * z + m * c + x * c + site",
    )
    return study.fit(method="exact", draws=500, random_seed=1, progressbar=False)


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("claim", CLAIMS, ids=repr)
def test_the_map_equals_a_comparison_of_its_beliefs(fit, family, claim):
    random = np.random.default_rng(3)
    mapped = prior_map(fit.result, family, at=AT, claim=claim)
    assert mapped.dims == ("z", "mean", "sd")
    assert mapped.shape == (3, len(MEANS), len(SDS))
    found = np.argwhere(np.isfinite(mapped[0].to_numpy()))
    chosen = found[random.choice(len(found), 12, replace=False)]
    beliefs = {f"{i} {j}": with_mean_and_sd(MEANS[i], SDS[j], family) for i, j in chosen}
    tipped = {label: fit.tipping(at=AT, claim=claim).probability(belief) for label, belief in beliefs.items()}
    for (i, j), table in zip(chosen, tipped.values(), strict=True):
        np.testing.assert_allclose(mapped[:, i, j], table["probability"], atol=2e-4)
        # Where all draws agree the error is a floor, which an exact 0 or 1 decides.
        exact = table["probability"].to_numpy()
        near = np.minimum(exact, 1 - exact) > 1e-6
        np.testing.assert_allclose(mapped["mcse"].to_numpy()[:, i, j][near], table["mcse"].to_numpy()[near], atol=1e-4)
    # One of them by the public route as well.
    label, belief = next(iter(beliefs.items()))
    compared = fit.compare({label: belief}, at=AT, claim=claim).table
    compared = compared[compared["effect"] == claim.effect]
    np.testing.assert_allclose(compared["probability"], tipped[label]["probability"])


@pytest.mark.parametrize("family", FAMILIES)
def test_the_cubic_between_knots_is_near_the_distribution_function_everywhere(family):
    """Whatever the draws are, the error of a probability is no larger than that of the distribution function.

    A single draw that tips at t turns weights into the interpolated distribution function at t.
    """
    random = np.random.default_rng(9)
    mean, sd = random.uniform(-0.95, 0.95, 200), np.exp(random.uniform(np.log(0.005), np.log(0.9), 200))
    found = members(family, mean, sd)
    t = np.sort(random.uniform(-4, 4, 700))
    if family == "TruncatedNormal":
        t = t[np.abs(np.tanh(t)) < 0.99]
    worst = 0.0
    for pair in np.flatnonzero(found.exist):
        # The knots as they are in the worst case: those of an SD up to half as large serve this one.
        knots = knots_for(float(sd[pair]), t[0], t[-1])
        assert np.diff(knots).max() <= WIDEST + 1e-9
        assert np.diff(np.tanh(knots)).max() <= PER_SD * sd[pair] + 1e-9
        draws = crossings(np.sinh(t)[:, None], np.ones((t.size, 1)), 0.0, "above")
        cdf, density = found.at(np.array([pair]), knots)
        probability, variance = weights_at(draws, knots).probability(cdf, density)
        exact = found.prior(int(pair)).cdf(np.tanh(t))
        worst = max(worst, np.abs(probability[0] - exact).max())
        assert np.all(variance[0] < 2e-4)
    assert worst < 3e-4


def test_weights_count_flat_and_rising_draws_and_draws_that_never_cross():
    random = np.random.default_rng(4)
    constant, slope = random.normal(0.3, 0.6, (2, 200)), random.normal(0.2, 1.0, (2, 200))
    slope[:, ::10] = 0
    slope[1, 1::10] = 1e-20
    slope[1, 2::10] = -1e-20
    belief = with_mean_and_sd(0.2, 0.3)
    for direction in ("above", "below"):
        draws = crossings(constant, slope, 0.1, direction)
        knots = knots_for(0.3, *draws.ends)
        found = members("StretchedBeta", np.array([0.2]), np.array([0.3]))
        mean, variance = weights_at(draws, knots).probability(*found.at(np.array([0]), knots))
        exact = claim_probability(constant, slope, 0.1, direction, belief)
        np.testing.assert_allclose(mean[0], exact.mean(axis=1), atol=1e-4)
        np.testing.assert_allclose(variance[0], exact.var(axis=1), atol=2e-4)


def test_cells_that_no_member_reaches_are_blank(fit):
    mapped = prior_map(fit.result, "StretchedBeta", [-0.9, 0.0, 0.9], [0.1, 0.43, 0.44, 0.99], at={})
    # A distribution on (-1, 1) with mean 0.9 has an SD below √(1 - .81) = 0.436.
    blank = np.isnan(mapped.to_numpy())
    expected = np.array([[False, False, True, True], [False] * 4, [False, False, True, True]])
    np.testing.assert_array_equal(blank, expected)
    np.testing.assert_array_equal(np.isnan(mapped["mcse"]), expected)
    wide = prior_map(fit.result, "TruncatedNormal", [0.0], [0.4, 0.571, 0.572], at={}, bounds=(-0.99, 0.99))
    # The widest is as good as uniform, of SD 0.99/√3 = 0.5716.
    assert np.isnan(wide.to_numpy().ravel()).tolist() == [False, False, True]


def test_a_unanimous_probability_has_the_error_of_one_draw(fit):
    claim = bm.Claim("indirect", above=-1000)
    mapped = prior_map(fit.result, mean=[0.0], sd=[0.01], at={}, claim=claim)
    assert float(mapped.squeeze()) == pytest.approx(1)
    assert float(mapped["mcse"].squeeze()) == pytest.approx(1 / 2000)
    assert fit.tipping(at={}, claim=claim).probability(0.0)["mcse"][0] == pytest.approx(1 / 2000)


def test_bounds_of_the_truncated_family_are_used(fit):
    mapped = prior_map(fit.result, "TruncatedNormal", [0.1], [0.15], at=AT, bounds=(-0.2, 0.5))
    belief = with_mean_and_sd(0.1, 0.15, "TruncatedNormal", (-0.2, 0.5))
    assert belief.support() == (-0.2, 0.5)
    expected = fit.tipping(at=AT).probability(belief)["probability"]
    np.testing.assert_allclose(mapped[:, 0, 0], expected, atol=1e-4)


def test_dims_and_coordinates_follow_at(fit):
    mapped = prior_map(fit.result, mean=[0.0, 0.1], sd=0.2, at={"z": 1.0})
    assert mapped.dims == ("mean", "sd")
    assert mapped.coords["z"] == 1.0
    assert mapped.attrs["claim"] == "indirect effect > 0"
    assert mapped.attrs["required"] == 0.95
    both = prior_map(fit.result, mean=[0.0, 0.1], sd=[0.2], at={"z": [0.0, 1.0], "site": ["east", "west"]})
    assert both.dims == ("z", "site", "mean", "sd")
    one = prior_map(fit.result, mean=[0.1], sd=[0.2], at={"z": 1.0, "site": "west"})
    assert float(both.sel(z=1.0, site="west", mean=0.1, sd=0.2)) == pytest.approx(float(one.squeeze()), abs=1e-5)


def test_dependent_draws_have_larger_errors(fit):
    """Draws in blocks of equal values are worth as many draws as there are blocks."""
    tree = fit.result.tree.copy()
    posterior = tree["posterior"].to_dataset()
    blocks = posterior.isel(draw=np.arange(500) // 10 * 10).assign_coords(draw=posterior["draw"])
    tree["posterior"] = xr.DataTree(blocks)
    settings = dataclasses.replace(fit.result.settings, method="nuts")
    result = dataclasses.replace(fit.result, tree=tree, settings=settings, memory={})
    mapped, independent = (prior_map(r, mean=[0.2], sd=[0.2], at={}) for r in (result, fit.result))
    ratio = float(mapped["mcse"].squeeze() / independent["mcse"].squeeze())
    assert 2 < ratio < 6


def test_the_contour_is_where_the_probability_is_the_required_one(fit):
    claim = bm.Claim("indirect", above=0, required=0.9)
    mapped = prior_map(fit.result, mean=[-0.3, 0.0, 0.3], at=AT, claim=claim)
    lines = contour(mapped)
    assert list(lines.columns) == ["z", "mean", "sd", "turn"]
    assert len(lines) > 0
    for _, row in lines.iterrows():
        at = {"z": [row["z"]]}

        def gap(sd, at=at, mean=row["mean"]):
            return fit.tipping(at=at, claim=claim).probability(with_mean_and_sd(mean, sd))["probability"][0] - 0.9

        assert row["sd"] == pytest.approx(brentq(gap, row["sd"] - 0.01, row["sd"] + 0.01), abs=1e-3)
        assert (gap(row["sd"] + 0.01) < 0) == (row["turn"] == "falls")
    # Every other mean stays on one side of the level.
    crossed = set(zip(lines["z"], lines["mean"], strict=True))
    for z in AT["z"]:
        for mean in (-0.3, 0.0, 0.3):
            above = mapped.sel(z=z, mean=mean) >= 0.9
            assert ((z, mean) in crossed) == (bool(above.any()) and not bool(above.all()))


def test_contours_keep_to_their_level_and_their_cells(fit):
    values = np.array([[0.99, 0.9, 0.96, np.nan, 0.5], [0.5, 0.4, 0.3, 0.2, 0.1]])
    mapped = xr.DataArray(values, {"mean": [0.0, 0.1], "sd": [0.1, 0.2, 0.3, 0.4, 0.5]}, ["mean", "sd"])
    found = contour(mapped, 0.95)
    np.testing.assert_allclose(found["sd"], [0.1 + 0.1 * 4 / 9, 0.2 + 0.1 * 5 / 6])
    assert found["turn"].tolist() == ["falls", "rises"]
    np.testing.assert_allclose(contour(mapped, 0.45)["sd"], [0.15])
    with pytest.raises(ArgumentError, match="level=None must be a probability"):
        contour(mapped)
    with pytest.raises(ArgumentError, match=r"level=1\.0 must be a probability between 0 and 1"):
        contour(mapped, 1.0)
    with pytest.raises(ArgumentError, match="mapped must be what fit"):
        contour(mapped.rename(sd="width"))


REFUSED = [
    ({"mean": [-1.0, 0.0]}, ArgumentError, "mean holds -1; it must lie strictly between -1 and 1"),
    ({"sd": [0.0]}, ArgumentError, "sd holds 0; it must lie strictly between 0 and 1"),
    ({"sd": [0.2, 0.1]}, ArgumentError, "sd must be in increasing order"),
    ({"mean": []}, ArgumentError, r"mean has shape \(0,\); one number or more"),
    ({"mean": "zero"}, ArgumentError, "mean='zero' must be a number or a list of numbers"),
    ({"mean": [float("nan")]}, ArgumentError, "mean holds nan"),
    ({"family": "Beta"}, PriorError, "family is 'Beta'; it is one of StretchedBeta, TruncatedNormal, FisherNormal"),
    ({"bounds": (-0.5, 0.5)}, PriorError, r"StretchedBeta reaches from -1 to 1 and takes none"),
    ({"family": "TruncatedNormal", "bounds": (0.5, -0.5)}, PriorError, "the first must be less than the second"),
    ({"family": "TruncatedNormal", "bounds": 0.5}, PriorError, "two correlations are needed"),
]


@pytest.mark.parametrize(("arguments", "kind", "message"), REFUSED)
def test_refusals(fit, arguments, kind, message):
    with pytest.raises(kind, match=message):
        prior_map(fit.result, at={}, **arguments)


def test_a_fit_whose_data_inform_rho_has_no_map(fit):
    with pytest.raises(FitError, match="prior_map: the data inform rho"):
        prior_map(dataclasses.replace(fit.result, joint=True))


def test_the_map_can_be_written_to_a_file(fit, tmp_path):
    mapped = prior_map(fit.result, mean=[0.0], sd=[0.2], at=AT)
    mapped.to_netcdf(tmp_path / "map.nc", engine="h5netcdf")
    with xr.open_dataarray(tmp_path / "map.nc", engine="h5netcdf") as again:
        np.testing.assert_array_equal(again, mapped)
