"""Units, origins, names, order and signs decide nothing: every conclusion follows them and no further.

A study is stated again in other words (other units, another reference level, a mediator counted the other way), its
draws are carried into the new coordinates, and every conclusion, carried back, must be what it was. That the
posterior itself goes along is shown on the model's log density, which may differ by a constant only.
"""

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import bayesmed as bm
from bayesmed import priors as p

SITES = {"east": "zeta", "north": "Alpha", "west": "m"}


@dataclass(frozen=True)
class Change:
    """A study stated otherwise."""

    data: Callable[[pd.DataFrame], pd.DataFrame] = lambda data: data
    mediator: str = "m ~ x*z + c + site"
    outcome: str = "y ~ m*z + m:x + x*z + c + site"
    contrast: tuple[float, float] = (0, 1)
    m: tuple[float, float] = (1.0, 0.0)
    y: tuple[float, float] = (1.0, 0.0)
    z: tuple[float, float] = (1.0, 0.0)
    sites: dict[str, str] = field(default_factory=lambda: {site: site for site in SITES})
    order: Any = slice(None)

    def __post_init__(self) -> None:
        before = self.data

        def changed(data: pd.DataFrame) -> pd.DataFrame:
            columns = {name: getattr(self, name)[0] * data[name] + getattr(self, name)[1] for name in "myz"}
            return before(data.assign(**columns, site=data["site"].map(self.sites)))

        object.__setattr__(self, "data", changed)

    @property
    def mirrored(self) -> bool:
        """True if rho changes its sign."""
        return self.m[0] * self.y[0] < 0

    def study(self, data: pd.DataFrame) -> bm.Study:
        return bm.Study(
            self.data(data),
            exposure="x",
            contrast=self.contrast,
            mediator=self.mediator,
            outcome=self.outcome,
        )


CHANGES = {
    "mediator in other units": Change(m=(40.0, -3000.0)),
    "outcome in other units": Change(y=(0.01, 7.0)),
    "moderator in other units": Change(z=(5.0, 2000.0)),
    "covariate in other units": Change(data=lambda data: data.assign(c=1e-3 * data["c"] - 50)),
    "categories renamed, with another reference": Change(sites=SITES),
    "rows in another order": Change(data=lambda data: data.iloc[::-1], order=slice(None, None, -1)),
    "covariates in another order": Change(
        mediator="m ~ site + c + z + x + x:z", outcome="y ~ site + c + x:z + z + m:x + x + m:z + m"
    ),
    "exposure coded the other way": Change(data=lambda data: data.assign(x=1 - data["x"]), contrast=(1, 0)),
    "exposure in other units": Change(data=lambda data: data.assign(x=3 - 2 * data["x"]), contrast=(3, 1)),
    "mediator reversed": Change(m=(-1.0, 0.0)),
    "outcome reversed": Change(y=(-1.0, 0.0)),
    "mediator and outcome reversed": Change(m=(-2.0, 5.0), y=(-3.0, 0.0)),
}
BELIEFS = {
    "uniform": lambda s: p.Uniform(*sorted((-0.2 * s, 0.5 * s))),
    "truncated": lambda s: p.TruncatedNormal(0.2 * s, 0.2),
    "fixed": lambda s: p.PointMass(0.3 * s),
    "beta": lambda s: p.StretchedBeta(*((4, 2.5) if s > 0 else (2.5, 4))),
    "cause": lambda s: p.SharedCause(p.BetaShare(2, 6), p.BetaShare(1, 4), positive=0.5 + 0.3 * s),
}
SETS = {
    "any": lambda s: p.AnyOn(*sorted((-0.1 * s, 0.4 * s))),
    "statements": lambda s: p.Statements(
        p.Probability(**({"above": 0.3} if s > 0 else {"below": -0.3}), at_most=0.1),
        p.Mean(*sorted((0.0, 0.2 * s))),
        lower=min(-0.8 * s, 0.9 * s),
        upper=max(-0.8 * s, 0.9 * s),
    ),
    "contaminated": lambda s: p.Contaminated(BELIEFS["uniform"](s), 0.1),
    "unimodal": lambda s: p.UnimodalAt(0.1 * s, *sorted((-0.3 * s, 0.6 * s))),
    "nearby": lambda s: p.Nearby(BELIEFS["uniform"](s), 0.05),
}
Z = [-0.5, 1.0, 2.5]


@pytest.fixture(scope="module")
def data(simulated):
    return simulated(300, rho=0.3, seed=5)


@pytest.fixture(scope="module")
def base(data):
    study = Change().study(data)
    return study.fit(method="exact", draws=250, random_seed=3, progressbar=False)


@pytest.fixture(scope="module")
def expected(base):
    return conclusions(base, Change())


@pytest.mark.parametrize("name", CHANGES)
def test_every_conclusion_follows_a_change_of_words(name, data, base, expected):
    change = CHANGES[name]
    found = conclusions(carried(base, change.study(data), change), change)
    assert found.keys() == expected.keys()
    for key, values in found.items():
        # Roots and envelopes are searched for to 1e-9 … 1e-6 of their scale; everything else is arithmetic.
        np.testing.assert_allclose(values, expected[key], rtol=2e-5, atol=2e-6, err_msg=f"{name}: {key}")


@pytest.mark.parametrize("name", ["mediator in other units", "categories renamed, with another reference",
                                  "mediator and outcome reversed", "moderator in other units"])  # fmt: skip
def test_the_posterior_follows_a_change_of_words(name, data, base):
    """Log densities at the same draws in old and new coordinates differ by one number, the log Jacobian."""
    change = CHANGES[name]
    study = change.study(data)
    apart = log_density(study, carried(base, study, change)) - log_density(base.study, base)
    np.testing.assert_allclose(apart, apart[0], rtol=1e-9, atol=1e-6)


def log_density(study: bm.Study, fit: bm.Fit) -> np.ndarray:
    model = study.model()
    names = ("alpha", "gamma", "sigma_m", "tau")
    density = model.compile_logp(jacobian=False, sum=True)
    found = []
    for draw in range(5):
        point = model.initial_point()
        for name in names:
            values = fit.posterior[name].to_numpy()[0, draw]
            variable = model[name]
            transform = model.rvs_to_transforms[variable]
            value = model.rvs_to_values[variable]
            inputs = variable.owner.inputs
            point[value.name] = transform.forward(values, *inputs).eval()
        found.append(float(density(point)))
    return np.array(found)


def carried(base: bm.Fit, study: bm.Study, change: Change) -> bm.Fit:
    """Return the draws of one study as draws of the other: the same fitted values, row by row, in new units."""
    old, new = base.result.observed, study.observed
    posterior = base.posterior

    def coefficients(name: str, before: Any, after: Any, scale: float, shift: float) -> np.ndarray:
        fitted = posterior[name].to_numpy().reshape(-1, before.shape[1]) @ before.T
        found = np.linalg.lstsq(after, scale * fitted[:, change.order].T + shift, rcond=None)[0].T
        np.testing.assert_allclose(after @ found[0], scale * fitted[0, change.order] + shift, rtol=1e-8, atol=1e-8)
        return found.reshape(*base.result.shape, -1)

    alpha = coefficients("alpha", *designs(old, new, "mediator"), *change.m)
    gamma = coefficients("gamma", *designs(old, new, "outcome"), *change.y)
    made = xr.Dataset(
        {
            "alpha": (("chain", "draw", "mediator_term"), alpha),
            "gamma": (("chain", "draw", "outcome_term"), gamma),
            "sigma_m": posterior["sigma_m"] * abs(change.m[0]),
            "tau": posterior["tau"] * abs(change.y[0]),
        },
        coords={"mediator_term": list(new.mediator_terms), "outcome_term": list(new.outcome_terms)},
    )
    adopted = study.adopt(xr.DataTree.from_dict({"posterior": made}), rho="unidentified")
    # Quantiles of an effect start from the same random numbers.
    return bm.Fit(replace(adopted.result, settings=base.result.settings))


def designs(old: Any, new: Any, which: str) -> list[np.ndarray]:
    found = []
    for observed in (old, new):
        equation = getattr(observed, f"{which}_equation")
        mediator = () if which == "mediator" else (observed.frame["m"].to_numpy(),)
        found.append(equation.rows(observed.frame, *mediator))
    return found


def conclusions(fit: bm.Fit, change: Change) -> dict[str, np.ndarray]:
    """Return everything that can be concluded, in the units, order and signs of the study as it was."""
    sign = -1 if change.mirrored else 1
    scale, flipped = change.y[0], change.y[0] < 0
    at = {"z": [change.z[0] * z + change.z[1] for z in Z]}
    at_site = {"z": change.z[0] * 1.0 + change.z[1], "site": [change.sites[site] for site in SITES]}
    claim = bm.Claim("indirect", below=0.05 * scale) if flipped else bm.Claim("indirect", above=0.05 * scale)
    beliefs = {label: make(sign) for label, make in BELIEFS.items()}
    units = {"mean": 1 / scale, "sd": 1 / abs(scale), "lower": 1 / scale, "upper": 1 / scale}
    found: dict[str, np.ndarray] = {}

    def keep(key: str, table: pd.DataFrame, units: dict[str, float], swap: bool = False) -> None:
        other = {"lower": "upper", "upper": "lower"} if swap else {}
        for column, unit in units.items():
            found[f"{key}, {column}"] = unit * table[other.get(column, column)].to_numpy(float)

    probabilities = {"probability": 1.0, "mcse": 1.0}
    keep("compare", fit.compare(beliefs, at=at, claim=claim).table, units, flipped)
    table = fit.compare(beliefs, at=at_site, claim=claim).table
    keep("by site", table, units | probabilities, flipped)
    for label, belief in beliefs.items():
        summary = fit.summary(at=at, rho=belief, claim=claim)
        keep(f"summary {label}", summary, units, flipped)
        keep(f"summary {label}", summary[summary["effect"].str.contains("indirect")], probabilities)
    grid = [sign * rho for rho in (-0.6, 0.0, 0.3)]
    keep("grid", fit.rho_grid(grid, at=at, claim=claim), units, flipped)
    effects = fit.effects(at=at, rho=grid)
    for effect in effects:
        found[f"draws of {effect}"] = effects[effect].to_numpy() / scale

    tips = fit.tipping(at=at, claim=claim)
    found["tipping draws"] = sign * tips.draws.to_numpy()
    sides = ["toward_minus_one", "toward_plus_one"]
    found["ceilings"] = tips.table[sides if sign > 0 else sides[::-1]].to_numpy()
    reached = ["interval_down", "interval_up", "required_down", "required_up"]
    mirrored = ["interval_up", "interval_down", "required_up", "required_down"]
    found["limits"] = sign * tips.table[reached if sign > 0 else mirrored].to_numpy(float)
    keep("tipping", tips.table, {"median": sign, "lower": sign, "upper": sign}, sign < 0)
    keep("tipping", tips.probability(beliefs["truncated"]), {**probabilities, "unlimited": 1.0})
    keep("curve", tips.curve("z", at["z"]), {"median": sign, "lower": sign, "upper": sign}, sign < 0)

    for reading in ("pointwise", "simultaneous"):
        areas = fit.regions(beliefs["truncated"], "z", claim=claim, reading=reading)
        for edge in ("from", "to"):
            found[f"{reading} region {edge}"] = (areas[edge].to_numpy(float) - change.z[1]) / change.z[0]
        keep(f"{reading} region", areas, {"share": 1.0, "joint": 1.0, "joint_mcse": 1.0})
    slopes = fit.moderation_index("z", at["z"], rho=beliefs["uniform"])
    keep("index", slopes, units | {"free_of_rho": 1.0}, flipped)
    sites = fit.moderation_index("site", at_site["site"], rho=beliefs["uniform"])
    keep("index by site", sites, units, flipped)

    for label, make in SETS.items():
        among = fit.envelope(make(sign), at=at, claim=claim)
        found[f"envelope {label}"] = among[["lower", "upper", "all_rho"]].to_numpy(float)
        means = among[["mean_lower", "mean_upper"]].to_numpy(float) / scale
        found[f"envelope {label}, means"] = means[:, ::-1] if flipped else means
    keep("worst case", fit.worst_case(SETS["any"](sign), at=at, claim=claim), probabilities)
    breaking = fit.breaking_point(lambda e: p.Contaminated(beliefs["uniform"], e), at=at, claim=claim)
    keep("breaking point", breaking, {"size": 1.0, "probability": 1.0})
    means = [-0.2, 0.0, 0.3]
    plane = fit.prior_map(mean=sorted(sign * m for m in means), sd=[0.1, 0.3], at=at, claim=claim).to_numpy()
    found["map"] = plane[:, ::sign, :]

    yard = fit.yardsticks(["c", "site"], at=at, claim=claim)
    keep("yardsticks", yard.table, {"rho": sign, "lower": sign, "upper": sign, "left_out": sign}, sign < 0)
    keep("overturning", yard.overturning, {"strength": 1.0, "lower": 1.0, "upper": 1.0})
    wider = fit.with_covariance(0.1 * scale, at=at, rho=beliefs["uniform"], claim=claim)
    keep("with covariance", wider, units, flipped)
    needed = fit.covariance_tipping([0.0, 0.2 * sign], at=at, claim=claim)
    keep("covariance", needed, {"median": 1 / scale, "lower": 1 / scale, "upper": 1 / scale}, flipped)
    return found
