"""Priors on structural coefficients: rho learns from them, exactly as much as Bayes' rule says."""

import numpy as np
import pandas as pd
import pytest

import bayesmed as bm
from bayesmed.conclusions.accuracy import effective_draws
from bayesmed.core.mapping import odds
from bayesmed.core.regression import reduce_rows

QUIET = {"progressbar": False}
BELIEF = bm.LKJ(2)


def rows(n, seed, slope=0.45, rho=0.4):
    random = np.random.default_rng(seed)
    x = np.tile([0.0, 1.0], n // 2)
    e = random.normal(size=(2, n))
    m = 8 + 5 * x + 11 * e[0]
    y = 9 + 4 * x + slope * m + 12 * (rho * e[0] + np.sqrt(1 - rho**2) * e[1])
    return pd.DataFrame({"x": x, "m": m, "y": y})


CASES = {
    "110 rows": (rows(110, 1), bm.Normal(0, 0.2), bm.HalfNormal(15)),
    "40 rows, a path known from elsewhere": (rows(40, 2), bm.Normal(0.3, 0.1), bm.HalfNormal(10)),
    "300 rows, negative confounding": (rows(300, 3, slope=0.1, rho=-0.5), bm.Normal(0.2, 0.15), bm.HalfNormal(12)),
}


def study(data):
    return bm.Study(data, exposure="x", mediator="m ~ x", outcome="y ~ m + x")


def structural(slope, spread):
    return bm.Coefficients(outcome={"m": slope}, sigma_outcome=spread, scale="structural")


def by_quadrature(data, slope, spread, jacobian=True):
    """Mean and SD of rho by a grid over (rho, tau, sigma_m); all else is integrated by hand.

    With ``b`` and ``se tau`` the least-squares slope of M and its standard error per unit of tau, the structural
    slope given the rest is ``Normal(b - r tau / sigma_m, (tau se)²)``, against its prior ``Normal``.
    """
    n = len(data)
    v = np.column_stack([np.ones(n), data["x"]])
    first = reduce_rows(v, data["m"].to_numpy())
    second = reduce_rows(np.column_stack([v, data["m"]]), data["y"].to_numpy())
    b, unit = second.coefficients[2], second.standard_errors[2] / second.residual_sd
    rho = np.tanh(np.linspace(-4, 4, 641))
    tau = second.residual_sd * np.exp(np.linspace(-7, 7, 90) / np.sqrt(2 * n))
    sigma = first.residual_sd * np.exp(np.linspace(-7, 7, 90) / np.sqrt(2 * n))
    rho, tau, sigma = np.meshgrid(rho, tau, sigma, indexing="ij")
    variance = slope.sd**2 + (tau * unit) ** 2
    log = (
        BELIEF.logpdf(rho)
        + np.log(1 - rho**2)
        - (n - 3) * np.log(tau)
        - second.residual_sum_of_squares / (2 * tau**2)
        - (n - 2) * np.log(sigma)
        - first.residual_sum_of_squares / (2 * sigma**2)
        - 0.5 * ((np.log(sigma) - np.log(first.response_sd)) / 2) ** 2
        - 0.5 * np.log(variance)
        - (b - odds(rho) * tau / sigma - slope.mean) ** 2 / (2 * variance)
        + spread.logpdf(tau / np.sqrt(1 - rho**2))
        + np.log(tau)
    )
    if jacobian:
        log = log - 0.5 * np.log(1 - rho**2)
    weight = np.exp(log - log.max())
    mean = np.sum(weight * rho) / np.sum(weight)
    return mean, np.sqrt(np.sum(weight * (rho - mean) ** 2) / np.sum(weight))


@pytest.fixture(scope="module", params=list(CASES))
def case(request):
    data, slope, spread = CASES[request.param]
    fit = study(data).fit(rho=BELIEF, coefficients=structural(slope, spread), draws=4000, random_seed=1, **QUIET)
    return fit, CASES[request.param]


def errors_of(fit):
    rho = fit.posterior["rho"].to_numpy().reshape(1, -1)
    squares = (rho - rho.mean()) ** 2
    mean_error = rho.std() / np.sqrt(effective_draws(rho, fit.result)[0])
    sd_error = squares.std() / np.sqrt(effective_draws(squares, fit.result)[0]) / (2 * rho.std())
    return rho.mean(), mean_error, rho.std(), sd_error


def test_equals_numerical_quadrature(case):
    fit, data = case
    mean, mean_error, sd, sd_error = errors_of(fit)
    expected_mean, expected_sd = by_quadrature(*data)
    assert mean == pytest.approx(expected_mean, abs=4 * mean_error)
    assert sd == pytest.approx(expected_sd, abs=4 * sd_error)


def test_would_fail_without_the_jacobian(case):
    fit, data = case
    mean, error, *_ = errors_of(fit)
    assert abs(by_quadrature(*data, jacobian=False)[0] - mean) > 4 * error


@pytest.mark.parametrize(
    "name", ["110 rows", *(pytest.param(n, marks=pytest.mark.slow, id=f"{n} seed_1") for n in list(CASES)[1:])]
)
def test_equals_the_naive_structural_model(name):
    """The same model written down in structural parameters, row by row, with PyMC alone."""
    import pymc as pm

    data, slope, spread = CASES[name]
    x, m, y = (data[c].to_numpy() for c in ("x", "m", "y"))
    with pm.Model():
        alpha = pm.Normal("alpha", 0, 1000, shape=2)
        rest = pm.Normal("rest", 0, 1000, shape=2)
        b = pm.Normal("b", slope.mean, slope.sd)
        sigma_m = pm.LogNormal("sigma_m", np.log(m.std(ddof=1)), 2.0)
        sigma_y = pm.HalfNormal("sigma_y", spread.scale)
        rho = BELIEF.to_pymc("rho")
        left = m - alpha[0] - alpha[1] * x
        pm.Potential("m", pm.logp(pm.Normal.dist(0, sigma_m), left).sum())
        mean = rest[0] + rest[1] * x + b * m + rho * sigma_y / sigma_m * left
        pm.Potential("y", pm.logp(pm.Normal.dist(mean, sigma_y * pm.math.sqrt(1 - rho**2)), y).sum())
        tree = pm.sample(4000, tune=2000, chains=4, random_seed=1, progressbar=False, quiet=True, target_accept=0.95)
    fit = study(data).fit(rho=BELIEF, coefficients=structural(slope, spread), draws=4000, random_seed=1, **QUIET)
    for ours, theirs in ((fit.posterior["rho"], "rho"), (fit.posterior["beta"].sel(outcome_term="m"), "b")):
        a, b = ours.to_numpy().reshape(1, -1), tree.posterior[theirs].to_numpy().reshape(1, -1)
        error = np.hypot(
            a.std() / np.sqrt(effective_draws(a, fit.result)[0]), b.std() / np.sqrt(effective_draws(b, fit.result)[0])
        )
        assert abs(a.mean() - b.mean()) < 4 * error


def test_the_fit_says_how_far_rho_moved_and_why(case):
    fit, (data, slope, spread) = case
    moved = fit.movement()
    expected = by_quadrature(data, slope, spread)
    assert moved.prior_mean == 0
    assert moved.posterior_mean == pytest.approx(expected[0], abs=0.02)
    assert moved.distance > 10 * moved.mcse > 0
    assert "silent" in moved.because
    assert "'m' and" in moved.because or "'m', the outcome's residual SD" in moved.because
    silent = study(data).fit(method="exact", rho=BELIEF, draws=100, random_seed=1, **QUIET).movement()
    assert silent.distance == 0
    assert silent.because.startswith("Neither")


PAIRS = [
    bm.LKJ(3),
    bm.LKJ(5),
    bm.Uniform(-0.9, 0.9),
    bm.Uniform(0, 0.9),
    bm.TruncatedNormal(0.3, 0.2),
    bm.TruncatedNormal(0.0, 0.4),
    bm.FisherNormal(0.3, 0.3),
    bm.FisherNormal(0.0, 0.8),
    bm.StretchedBeta(3, 2),
    bm.Mixture([bm.FisherNormal(0, 0.15), bm.LKJ(2)], [0.5, 0.5]),
]


@pytest.fixture(scope="module")
def wide():
    data, slope, spread = CASES["110 rows"]
    return study(data).fit(rho=bm.LKJ(1), coefficients=structural(slope, spread), draws=4000, random_seed=1, **QUIET)


@pytest.mark.parametrize("belief", PAIRS, ids=repr)
def test_reweighting_equals_refitting(wide, belief):
    comparison = wide.compare({"new": belief}, at={})
    assert comparison._result.routes["new"].startswith("draws reweighted")
    weighted = comparison.table.query("effect == 'indirect'").iloc[0]
    again = wide.under(belief).summary(at={}).query("effect == 'indirect'").iloc[0]
    # Refits share the sampler's seed, not its draws: both carry their own error.
    error = again["sd"] / np.sqrt(2000)
    assert weighted["mean"] == pytest.approx(again["mean"], abs=4 * error)
    assert weighted["probability"] == pytest.approx(again["probability"], abs=4 * (weighted["mcse"] + again["mcse"]))
    assert weighted["lower"] == pytest.approx(again["lower"], abs=12 * error)
    assert weighted["upper"] == pytest.approx(again["upper"], abs=12 * error)


@pytest.mark.parametrize(
    ("belief", "route"),
    [
        (bm.TruncatedNormal(-0.8, 0.03), "sampled again (weights could not be trusted"),
        (0.2, "sampled again"),
        (bm.Mixture([bm.PointMass(0.0), bm.LKJ(2)], [0.3, 0.7]), "sampled again"),
    ],
    ids=repr,
)
def test_bad_weights_are_never_used(wide, belief, route):
    comparison = wide.compare({"new": belief}, at={})
    assert comparison._result.routes["new"].startswith(route)
    assert route in repr(comparison)
    found = comparison.table.query("effect == 'indirect'")["mean"].iloc[0]
    again = wide.under(belief)
    assert found == pytest.approx(float(again.effects(at={})["indirect"].mean()), rel=1e-9)
    assert np.all(np.asarray(again.rho.cdf(again.posterior["rho"].to_numpy().ravel())) > 0)


def test_a_cut_fit_holds_rho_at_its_prior(wide):
    from scipy import stats

    data, slope, spread = CASES["110 rows"]
    cut = study(data).fit(rho=BELIEF, coefficients=structural(slope, spread), learn=False, random_seed=1, **QUIET)
    rho = cut.posterior["rho"].to_numpy().ravel()
    assert stats.kstest(rho, BELIEF.cdf).pvalue > 0.5
    assert "held at its prior" in cut.how
    assert cut.movement().distance < 0.01
    # Given rho the structural prior still pulls the slope: its mean at each rho is that of a fit at that rho.
    near = np.abs(cut.posterior["rho"] - 0.3) < 0.03
    fixed = wide.under(0.3).posterior["beta"].sel(outcome_term="m")
    assert float(cut.posterior["beta"].sel(outcome_term="m").where(near).mean()) == pytest.approx(
        float(fixed.mean()), abs=0.02
    )


@pytest.mark.parametrize(
    "name", ["110 rows", *(pytest.param(n, marks=pytest.mark.slow, id=f"{n} seed_1") for n in list(CASES)[1:])]
)
def test_the_implied_prior_of_the_effect(name):
    data, slope, spread = CASES[name]
    priors = bm.Coefficients(
        mediator={"x": bm.Normal(5, 1)}, outcome={"m": slope}, sigma_outcome=spread, scale="structural"
    )
    fit = study(data).fit(rho=BELIEF, coefficients=priors, random_seed=1, **QUIET)
    found = fit.implied_prior(at={}, draws=200_000).iloc[0]
    random = np.random.default_rng(1)
    # The structural effect is the product of the two structural paths, whatever rho is.
    product = random.normal(5, 1, 400_000) * random.normal(slope.mean, slope.sd, 400_000)
    expected = np.quantile(product, [0.025, 0.5, 0.975])
    tolerance = 0.03 * product.std()
    assert found[["lower", "median", "upper"]].tolist() == pytest.approx(expected, abs=tolerance)
    assert found["probability"] == pytest.approx((product > 0).mean(), abs=4 * found["mcse"] + 0.002)


def test_power_scaling_tells_a_prior_that_matters(simulated):
    data = simulated(120, 0.2, seed=1, interact=False)
    s = bm.Study(data, exposure="x", mediator="m ~ x + z", outcome="y ~ m + x + z")
    default = s.fit(rho=0.0, random_seed=1, **QUIET).leaning(at={})
    assert not default["leans_on_prior"].any()
    strong = bm.Coefficients(outcome={"m": bm.Normal(0.0, 0.05)})
    leaning = s.fit(rho=0.0, coefficients=strong, random_seed=1, **QUIET).leaning(at={}).set_index("effect")
    assert leaning.loc["indirect", "leans_on_prior"]


def test_saved_with_its_priors(case, tmp_path):
    fit = case[0]
    again = bm.load(fit.save(tmp_path / "fit.nc"))
    assert again.result.coefficients == fit.result.coefficients
    assert again.result.joint
    assert again.summary(at={}).equals(fit.summary(at={}))


def test_a_structural_prior_needs_a_belief_and_a_sampler():
    data, slope, spread = CASES["110 rows"]
    with pytest.raises(bm.errors.BeliefNeededError, match="structural prior"):
        study(data).fit(coefficients=structural(slope, spread), **QUIET)
    with pytest.raises(bm.errors.ArgumentError, match="structural prior"):
        study(data).fit(rho=0.0, method="exact", coefficients=structural(slope, spread), **QUIET)
