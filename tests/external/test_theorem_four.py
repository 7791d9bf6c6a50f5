"""The effect as a function of the residual correlation, against the published formula.

Source: Imai, Keele & Yamamoto (2010), Identification, inference and sensitivity analysis for causal mediation
effects, Statistical Science 25(1), 51-71, Theorem 4, doi:10.1214/10-STS321.
"""

import numpy as np
import pandas as pd
import pytest

import bayesmed as bm


@pytest.mark.parametrize("rho", [-0.9, -0.4, 0.0, 0.25, 0.8])
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_linear_models_without_interactions(rho, seed):
    random = np.random.default_rng(seed)
    n = 150
    x, c = random.integers(0, 2, n), random.normal(size=n)
    m = 0.5 * x + c + random.normal(0, 2, n)
    y = random.normal(size=3) @ [x, m, c] + random.normal(0, 0.7, n)
    frame = pd.DataFrame({"x": x, "m": m, "y": y, "c": c})
    study = bm.Study(frame, exposure="x", mediator="m ~ x + c", outcome="y ~ m + x + c")
    fit = study.fit(method="exact", draws=50_000, random_seed=seed, progressbar=False)

    design = np.column_stack([np.ones(n), x, c])
    e_y = y - design @ np.linalg.lstsq(design, y, rcond=None)[0]
    coefficient, *_ = np.linalg.lstsq(design, m, rcond=None)
    e_m = m - design @ coefficient
    s_1, s_2, observed = e_y.std(), e_m.std(), np.corrcoef(e_y, e_m)[0, 1]
    expected = coefficient[1] * s_1 / s_2 * (observed - rho * np.sqrt((1 - observed**2) / (1 - rho**2)))

    row = fit.summary(at={}, rho=rho).set_index("effect").loc["indirect"]
    # The mean over the posterior differs from the plug-in value by the SDs' skewness, of order 1/n.
    tolerance = 4 * row["sd"] / np.sqrt(200_000) + 2 / n * abs(expected - coefficient[1] * s_1 / s_2 * observed)
    assert row["mean"] == pytest.approx(expected, abs=tolerance)
    crossing = fit.tipping(at={}).table["median"].iloc[0]
    assert crossing == pytest.approx(observed, abs=0.01)
