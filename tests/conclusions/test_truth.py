"""Effects at the true residual correlation against brute-force potential outcomes, at 200,000 rows.

The simulation knows both errors of every row, so each potential outcome Y(x, M(x')) is computed, not modelled.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
import pytest

import bayesmed as bm

ROWS, RHO, SIGMA_M, SIGMA_Y = 200_000, 0.35, 1.5, 2.0
SHIFT = {"east": 0.0, "north": 0.4, "west": -0.3}


def columns() -> dict[str, Any]:
    random = np.random.default_rng(7)
    c = random.normal(0, 1, ROWS)
    site = random.choice(list(SHIFT), ROWS, p=[0.5, 0.3, 0.2])
    return {
        "x": random.integers(0, 2, ROWS),
        # The moderator goes with the covariate, so that averages of products are not products of averages.
        "z": 1 + 0.6 * c + 0.8 * random.normal(0, 1, ROWS),
        "c": c,
        "site": site,
        "e_m": (e_m := random.normal(0, SIGMA_M, ROWS)),
        "e_y": SIGMA_Y * (RHO * e_m / SIGMA_M + np.sqrt(1 - RHO**2) * random.normal(0, 1, ROWS)),
    }


@dataclass(frozen=True)
class World:
    """Structural functions and the formulas that hold them."""

    name: str
    mediator: str
    outcome: str
    m: Any
    y: Any


def g(row):
    return pd.Series(SHIFT)[row["site"]].to_numpy()


WORLDS = [
    World(
        "interactions everywhere, a covariate and a category in both paths",
        "m ~ x * z + x * c + x * site",
        "y ~ m * x * z + m * c + m * site + x * c + x * site",
        lambda x, w: (
            1 + 0.8 * x + 0.5 * w["z"] + 0.3 * w["c"] + 0.3 * x * w["z"] + 0.4 * x * w["c"] + (0.5 * x + 1) * g(w)
        ),
        lambda x, m, w: (
            2
            + 0.6 * m
            - 0.4 * x
            + 0.2 * w["z"]
            + 0.25 * m * w["z"]
            - 0.2 * m * x
            + 0.1 * m * x * w["z"]
            + 0.3 * m * w["c"]
            + 0.15 * x * w["z"]
            + 0.4 * m * g(w)
            + g(w)
        ),
    ),
    World(
        "square of the mediator",
        "m ~ x * z + c",
        "y ~ m + I(m**2) + x * z + c",
        lambda x, w: 0.5 + 0.8 * x + 0.5 * w["z"] + 0.3 * x * w["z"] + 0.2 * w["c"],
        lambda x, m, w: 1 + 0.6 * m + 0.15 * m**2 - 0.4 * x + 0.2 * w["z"] + 0.1 * w["c"] + 0.1 * x * w["z"],
    ),
    World(
        "spline of a covariate that moderates both paths",
        "m ~ x * bs(c, df=4, extrapolation='extend') + z",
        "y ~ m * bs(c, df=4, extrapolation='extend') + x * bs(c, df=4, extrapolation='extend') + z",
        lambda x, w: 0.5 + 0.8 * x + (0.3 * x + 0.2) * w["c"] ** 2 + 0.2 * w["z"],
        lambda x, m, w: 1 + 0.6 * m + (0.2 * m + 0.1 * x + 0.3) * w["c"] ** 3 / 3 - 0.4 * x + 0.1 * w["z"],
    ),
    World(
        "cell slopes, no intercept",
        "m ~ 0 + site + site:x + z",
        "y ~ 0 + site + site:m + site:x + z",
        lambda x, w: 1 + g(w) + (0.8 + g(w)) * x + 0.2 * w["z"],
        lambda x, m, w: 2 - g(w) + (0.6 + 0.5 * g(w)) * m + (0.3 - g(w)) * x + 0.1 * w["z"],
    ),
]


@pytest.fixture(scope="module")
def world_columns():
    return columns()


@pytest.mark.parametrize("world", WORLDS, ids=lambda w: w.name)
def test_effects_equal_brute_force_potential_outcomes(world, world_columns):
    w = world_columns
    m_seen = world.m(w["x"], w) + w["e_m"]
    y_seen = world.y(w["x"], m_seen, w) + w["e_y"]
    data = pd.DataFrame({k: w[k] for k in ("x", "z", "c", "site")}).assign(m=m_seen, y=y_seen)
    study = bm.Study(data, exposure="x", mediator=world.mediator, outcome=world.outcome)
    assert study.observed.alignment.informs is False
    fit = study.fit(method="exact", draws=30, chains=1, random_seed=1, progressbar=False)
    for at in ({}, {"site": "north"}, {"z": 0.5}):
        if "site" in at and "site" not in world.mediator:
            continue
        found = fit.effects(at=at, rho=RHO)
        here = {**w, **{k: np.full(ROWS, v) for k, v in at.items()}}

        def outcome(x, x_mediator, here=here):
            return (world.y(x, world.m(x_mediator, here) + here["e_m"], here) + here["e_y"]).mean()

        truth = {
            "indirect": outcome(1, 1) - outcome(1, 0),
            "direct": outcome(1, 0) - outcome(0, 0),
            "total": outcome(1, 1) - outcome(0, 0),
            "pure_indirect": outcome(0, 1) - outcome(0, 0),
            "total_direct": outcome(1, 1) - outcome(0, 1),
        }
        for name, draws in found.data_vars.items():
            error = 4 * float(draws.std()) * np.sqrt(1 + 1 / 30) + 2e-4
            assert float(draws.mean()) == pytest.approx(truth[name], abs=error), (name, at)
        naive = float(fit.effects(at=at, rho=0.0)["indirect"].mean())
        assert abs(naive - truth["indirect"]) > 4 * float(found["indirect"].std())


@pytest.mark.parametrize("world", WORLDS, ids=lambda w: w.name)
def test_the_total_effect_is_the_same_at_every_rho(world, world_columns):
    w = {k: v[:300] for k, v in world_columns.items()}
    m_seen = world.m(w["x"], w) + w["e_m"]
    data = pd.DataFrame({k: w[k] for k in ("x", "z", "c", "site")}).assign(
        m=m_seen, y=world.y(w["x"], m_seen, w) + w["e_y"]
    )
    study = bm.Study(data, exposure="x", mediator=world.mediator, outcome=world.outcome)
    fit = study.fit(method="exact", draws=10, random_seed=1, progressbar=False)
    found = fit.effects(rho=[-0.95, -0.3, 0.0, 0.6, 0.95], at={})
    total = found["total"].to_numpy()
    assert np.ptp(total, axis=2).max() == 0
    parts = (found["indirect"] + found["direct"]).to_numpy()
    np.testing.assert_allclose(parts, total, atol=1e-10)


def test_the_total_effect_from_structural_parameters_does_not_move_with_rho(world_columns):
    """T is computed from identified coefficients; here it is computed from beta at each rho instead."""
    from bayesmed.core.contrasts import linear_contrasts
    from bayesmed.core.mapping import structural_outcome
    from bayesmed.study.counterfactual import linear_moments
    from bayesmed.study.points import points

    world = WORLDS[0]
    w = {k: v[:500] for k, v in world_columns.items()}
    m_seen = world.m(w["x"], w) + w["e_m"]
    data = pd.DataFrame({k: w[k] for k in ("x", "z", "c", "site")}).assign(
        m=m_seen, y=world.y(w["x"], m_seen, w) + w["e_y"]
    )
    study = bm.Study(data, exposure="x", mediator=world.mediator, outcome=world.outcome)
    fit = study.fit(method="exact", draws=50, random_seed=1, progressbar=False).result
    moments = linear_moments(study.observed, points(study.observed, {"z": [0.0, 2.0]}))
    alpha, gamma, sigma_m, tau = (fit.flat(k) for k in ("alpha", "gamma", "sigma_m", "tau"))
    identified = linear_contrasts(moments, alpha, gamma, sigma_m, tau)
    for rho in (-0.8, 0.4, 0.9):
        beta = structural_outcome(gamma, alpha, sigma_m, tau, np.full(len(tau), rho), study.observed.alignment)
        structural = linear_contrasts(moments, alpha, beta, sigma_m, tau)
        np.testing.assert_allclose(structural.t, identified.t, atol=1e-10)
        np.testing.assert_allclose(structural.a, identified.effect("indirect", rho), atol=1e-10)
        np.testing.assert_allclose(structural.a_pure, identified.effect("pure_indirect", rho), atol=1e-10)
