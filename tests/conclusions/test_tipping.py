"""The tipping distribution: limits at fixed rho, probabilities, and what unlimited data would give."""

import numpy as np
import pytest

import bayesmed as bm
from bayesmed.core.errors import ArgumentError


@pytest.fixture(scope="module")
def fit(simulated):
    study = bm.Study(
        simulated(250, 0.3, seed=4), exposure="x", mediator="m ~ x * z + c", outcome="y ~ m * z + x * z + c"
    )
    return study.fit(method="exact", random_seed=1, progressbar=False)


@pytest.mark.parametrize(
    "claim", [bm.Claim(above=0.2), bm.Claim(below=3.0, required=0.8), bm.Claim("direct", below=0)], ids=repr
)
def test_limits_at_fixed_rho_are_where_the_summary_changes(fit, claim):
    where = {"z": [0.0, 1.0, 2.0]}
    tipping = fit.tipping(at=where, claim=claim).table

    def at(rho, place):
        row = fit.summary(at=where, rho=rho, claim=claim).query("effect == @claim.effect").iloc[place]
        return row["lower"] > claim.limit or row["upper"] < claim.limit, row["probability"] >= claim.required

    checked = 0
    for place, row in enumerate(tipping.itertuples()):
        for k, name in enumerate(("interval", "required")):
            for sign, side in ((-1, "down"), (1, "up")):
                edge = getattr(row, f"{name}_{side}")
                if np.isnan(edge):
                    assert at(sign * 0.9, place)[k]
                elif edge == 0:
                    assert not at(0.0, place)[k]
                else:
                    assert at(edge - sign * 1e-3, place)[k]
                    assert not at(edge + sign * 1e-3, place)[k]
                    checked += 1
    assert checked >= 3


def test_a_distribution_function_serves_as_a_belief(fit):
    tipping, belief = fit.tipping(at={"z": 1.0}), bm.LKJ(2)
    ours, theirs = tipping.probability(belief), tipping.probability(belief.cdf)
    np.testing.assert_allclose(ours[["probability", "unlimited"]], theirs[["probability", "unlimited"]], atol=1e-12)
    with pytest.raises(ArgumentError, match="distribution function"):
        tipping.probability(lambda x: 2 + x)


def test_more_rows_bring_the_probability_to_its_limit(simulated):
    belief, gaps = bm.LKJ(2), []
    for rows in (100, 40_000):
        data = simulated(rows, 0.3, seed=4)
        study = bm.Study(data, exposure="x", mediator="m ~ x + z", outcome="y ~ m + x + z")
        found = study.fit(method="exact", random_seed=1, progressbar=False).tipping(at={}).probability(belief).iloc[0]
        gaps.append(abs(found["probability"] - found["unlimited"]))
    assert gaps[1] < 0.002
    assert gaps[1] < gaps[0] / 3


def test_a_curve_along_a_moderator(fit):
    curve = fit.tipping().curve("z")
    assert len(curve) == 41
    middle = fit.tipping(at={"z": [float(curve["z"].iloc[20])]}).table["median"].iloc[0]
    assert curve["median"].iloc[20] == pytest.approx(middle)
    assert np.all(curve["lower"] <= curve["median"])
    with pytest.raises(ArgumentError, match="'site'"):
        fit.tipping().curve("site")


def test_it_says_what_it_does_not_say(fit):
    assert "does not say how plausible" in repr(fit.tipping())
