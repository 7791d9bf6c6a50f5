"""The model's likelihood against row-by-row normal densities of scipy."""

import numpy as np
import pytest
from scipy import stats

import bayesmed as bm
from bayesmed.fit.statistics import reduce_study

SILENT = {
    "mediator": "m ~ x * z + c",
    "outcome": "y ~ m * z + x * z + c",
}
INFORMED = {
    "an exclusion": {"mediator": "m ~ x * z + c", "outcome": "y ~ m * z + x + c"},
    "two exclusions": {"mediator": "m ~ x * z + c", "outcome": "y ~ m + x"},
    "functional form": {"mediator": "m ~ x + z", "outcome": "y ~ exp(m / 10) + x + z"},
    "both": {"mediator": "m ~ x * z", "outcome": "y ~ m:z + x + z"},
}


def compiled(model, names):
    """Return the model's log likelihood as a function of named parameter values."""
    import pytensor

    variables = {rv.name: rv for rv in model.free_RVs}
    logp = model.logp(vars=[model[name] for name in names])
    mode = pytensor.compile.mode.Mode(linker="py", optimizer=None)
    function = model.compile_fn(logp, inputs=model.value_vars, mode=mode, on_unused_input="ignore")

    def evaluate(**values):
        point = {}
        for name, value in values.items():
            rv = variables[name]
            value_variable, transform = model.rvs_to_values[rv], model.rvs_to_transforms[rv]
            moved = value if transform is None else transform.forward(value, *rv.owner.inputs).eval()
            point[value_variable.name] = np.asarray(moved, dtype=float)
        return float(function(point))

    return evaluate


@pytest.mark.parametrize("formulas", [SILENT, *INFORMED.values()], ids=["silent", *INFORMED])
def test_equals_the_joint_normal_of_both_equations_row_by_row(formulas, simulated, random):
    data = simulated(60, 0.3, seed=1)
    study = bm.Study(data, exposure="x", contrast=(0, 1), **formulas)
    observed, statistics = study.observed, reduce_study(study.observed)
    assert statistics.informed == (formulas is not SILENT)
    evaluate = compiled(study.model(rho=bm.Uniform(-0.9, 0.9)), ["mediator_rows", "outcome_rows"])
    for _ in range(4):
        alpha = statistics.mediator.coefficients + random.normal(0, 0.3, statistics.mediator.terms)
        gamma = statistics.outcome.coefficients + random.normal(0, 0.3, statistics.outcome.terms)
        sigma_m, tau, rho = random.uniform(1, 2), random.uniform(1, 3), random.uniform(-0.8, 0.8)
        from bayesmed.core.mapping import sigma_outcome, structural_outcome

        beta = structural_outcome(gamma, alpha, np.asarray(sigma_m), tau, rho, statistics.alignment)
        sigma_y = sigma_outcome(rho, tau)
        covariance = [
            [sigma_m**2, rho * sigma_m * sigma_y],
            [rho * sigma_m * sigma_y, sigma_y**2],
        ]
        residuals = np.column_stack(
            [
                observed.mediator - observed.mediator_design @ alpha,
                observed.outcome - observed.outcome_design @ beta,
            ]
        )
        expected = stats.multivariate_normal([0, 0], covariance).logpdf(residuals).sum()
        found = evaluate(alpha=alpha, gamma=gamma, sigma_m=sigma_m, tau=tau, rho=rho)
        assert found == pytest.approx(expected, rel=1e-10)


def test_the_likelihood_of_a_silent_model_does_not_contain_rho(simulated):
    study = bm.Study(simulated(60, 0.3, seed=1), exposure="x", **SILENT)
    s = reduce_study(study.observed)
    evaluate = compiled(study.model(rho=bm.Uniform(-0.99, 0.99)), ["mediator_rows", "outcome_rows"])
    values = {"alpha": s.mediator.coefficients, "gamma": s.outcome.coefficients, "sigma_m": 1.5, "tau": 2.0}
    found = {evaluate(**values, rho=rho) for rho in (-0.9, 0.0, 0.7)}
    assert len(found) == 1
