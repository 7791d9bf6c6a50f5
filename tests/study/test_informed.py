"""What informs the residual correlation, and how strongly."""

import math

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from statsmodels.tools.numdiff import approx_hess

from bayesmed.core.mapping import structural_outcome
from bayesmed.study.informed import informed
from bayesmed.study.observe import observe


def observed(frame, mediator, outcome):
    return observe(frame, exposure="x", mediator=mediator, outcome=outcome)


SILENT = [
    ("m ~ x + z", "y ~ m + x + z"),
    ("m ~ x*z", "y ~ m*z + x*z"),
    ("m ~ x + z", "y ~ 0 + m + x + z + site"),
    ("m ~ 0 + x + z", "y ~ 0 + m + x + z"),
    ("m ~ x + z", "y ~ scale(m) + center(x) + poly(z, 3)"),
    ("m ~ scale(z) + center(x)", "y ~ m + x + z"),
    ("m ~ x + site", "y ~ m + 0 + site + x"),
    ("m ~ 0 + site + x:site", "y ~ m + x*site"),
    ("m ~ x*site", "y ~ m:site + x*site"),
    ("m ~ x*site", "y ~ 0 + site + m:site + x:site"),
    ("m ~ x + C(site, contr.sum())", "y ~ m + x + site"),
    ("m ~ x + z", "y ~ I(m - 3*x) + x + z"),
    ("m ~ x + poly(age, 2)", "y ~ m + x + age + I(age**2)"),
    ("log(steps) ~ x", "y ~ log(steps) + x"),
    ("m ~ C(x)", "y ~ m + x"),
    ("m ~ x + bs(age, df=4)", "y ~ m*x + bs(age, df=4)"),
]


@pytest.mark.parametrize(("mediator", "outcome"), SILENT, ids=range(len(SILENT)))
def test_the_same_space_in_any_coding_is_silent(frame, mediator, outcome):
    found = informed(observed(frame, mediator, outcome))
    assert not found
    assert found.terms == ()
    assert found.r_standard_error == math.inf
    assert found.first_stage_f is None
    assert found.weak is None
    assert len(found.words()) == 1
    assert "silent" in found.words()[0]


INFORMING = [
    ("m ~ x + z", "y ~ m + x", ("z",), False, 1),
    ("m ~ x*z", "y ~ m + x + z", ("x:z",), False, 1),
    ("m ~ x + z", "y ~ m + z", ("x",), False, 1),
    ("m ~ x + site", "y ~ m + x", ("site[T.b]", "site[T.c]"), False, 2),
    ("m ~ x + z + age", "y ~ m + x + I(z + age)", ("z", "age"), False, 1),
    ("m ~ x", "y ~ 0 + m + x", ("Intercept",), False, 1),
    ("m ~ x", "y ~ log(m + 20) + x", (), True, 0),
    ("m ~ x + z", "y ~ m:z + x + z", (), True, 0),
    ("m ~ x + z", "y ~ I(m**2) + x", ("z",), True, 1),
]


@pytest.mark.parametrize(("mediator", "outcome", "terms", "form", "restrictions"), INFORMING, ids=range(len(INFORMING)))
def test_what_informs_is_named(frame, mediator, outcome, terms, form, restrictions):
    found = informed(observed(frame, mediator, outcome))
    assert (found.terms, found.functional_form, found.restrictions) == (terms, form, restrictions)
    assert math.isfinite(found.r_standard_error)
    assert found.r_standard_error > 0
    said = " ".join(found.words("m"))
    assert all(term in said for term in terms)
    assert ("shape of the formula" in said) is form


@pytest.mark.parametrize(
    ("mediator", "outcome", "zero"),
    [
        ("m ~ x + z", "y ~ m + x", ["z"]),
        ("m ~ x + site + z", "y ~ m + x", ["site[T.b]", "site[T.c]", "z"]),
        ("m ~ x*z", "y ~ m + x", ["z", "x:z"]),
    ],
)
def test_first_stage_f_is_that_of_statsmodels(frame, mediator, outcome, zero):
    # Reference library: statsmodels, F test of the excluded terms in the mediator regression.
    study = observed(frame, mediator, outcome)
    fitted = sm.OLS(study.mediator, pd.DataFrame(study.mediator_design, columns=list(study.mediator_terms))).fit()
    rows = np.array([[term == name for term in study.mediator_terms] for name in zero], dtype=float)
    reference = fitted.f_test(rows)
    found = informed(study)
    assert found.first_stage_f == pytest.approx(float(reference.fvalue), rel=1e-9)
    assert found.first_stage_df == (len(zero), int(fitted.df_resid))


def test_first_stage_f_of_a_partly_missing_space_is_that_of_the_restriction(frame):
    # statsmodels: only z + age stands in the outcome equation, so what is tested is that both slopes are equal.
    study = observed(frame, "m ~ x + z + age", "y ~ m + x + I(z + age)")
    fitted = sm.OLS(study.mediator, study.mediator_design).fit()
    assert study.mediator_terms == ("Intercept", "x", "z", "age")
    reference = fitted.f_test(np.array([[0.0, 0, 1, -1]]))
    assert informed(study).first_stage_f == pytest.approx(float(reference.fvalue), rel=1e-9)


def test_first_stage_f_where_the_mediator_design_itself_is_rank_deficient(frame):
    study = observed(frame, "m ~ x + z + I(2*z)", "y ~ m + x")
    fitted = sm.OLS(study.mediator, study.mediator_design[:, :3]).fit()
    found = informed(study)
    assert found.first_stage_f == pytest.approx(float(fitted.f_test(np.array([[0.0, 0, 1]])).fvalue), rel=1e-9)
    assert found.first_stage_df == (1, 157)


def test_standard_error_is_that_of_the_added_column_in_statsmodels(frame):
    study = observed(frame, "m ~ x*z + site", "y ~ m*z + x")
    first = sm.OLS(study.mediator, study.mediator_design).fit()
    second = sm.OLS(study.outcome, np.column_stack([study.outcome_design, first.resid])).fit()
    expected = second.bse[-1] * math.sqrt(first.scale) / math.sqrt(second.scale)
    assert informed(study).r_standard_error == pytest.approx(expected, rel=1e-9)


def test_standard_error_of_exclusions_follows_from_f(frame):
    found = informed(observed(frame, "m ~ x + site + z", "y ~ m + x"))
    k, df = found.first_stage_df
    assert found.r_standard_error == pytest.approx(math.sqrt(1 / (k * found.first_stage_f) + 1 / df), rel=1e-9)


@pytest.mark.parametrize("outcome", ["y ~ m + x", "y ~ I(m**2) + x + z", "y ~ log(m + 4) + x"])
def test_standard_error_is_the_curvature_of_the_structural_likelihood(frame, outcome):
    """At rho = 0 and with every parameter free, by numerical second derivatives (statsmodels.tools.numdiff)."""
    study = observed(frame, "m ~ x + z", outcome)
    v, w, m = study.mediator_design, study.outcome_design, study.mediator
    n, p, q = len(m), v.shape[1], w.shape[1]
    alpha = np.linalg.lstsq(v, m, rcond=None)[0]
    noise = np.random.default_rng(1).normal(size=n)
    # An outcome whose residual has nothing to do with the mediator's: the likelihood is largest at rho = 0.
    both = np.column_stack([w, m - v @ alpha])
    noise -= both @ np.linalg.lstsq(both, noise, rcond=None)[0]
    y = w @ np.linspace(1, 2, q) + noise
    gamma = np.linalg.lstsq(w, y, rcond=None)[0]
    sigma, tau = np.std(m - v @ alpha), np.std(y - w @ gamma)

    def log_likelihood(theta):
        # The structural model itself: M and Y with correlated errors, Y given M by the conditional normal.
        a, b, (s, t, r) = theta[:p], theta[p : p + q], theta[p + q :]
        e = m - v @ a
        rho, s, t = r / math.sqrt(1 + r * r), math.exp(s), math.exp(t)
        sigma_y = t / math.sqrt(1 - rho**2)
        rest = y - w @ b - rho * sigma_y / s * e
        return -n * math.log(s) - e @ e / (2 * s * s) - n * math.log(t) - rest @ rest / (2 * t * t)

    at = np.concatenate([alpha, gamma, [math.log(sigma), math.log(tau), 0.0]])
    information = -approx_hess(at, log_likelihood)
    standard_error = math.sqrt(np.linalg.inv(information)[-1, -1])
    # The likelihood's sigma divides by n, the estimate reported by n - p.
    assert informed(study).r_standard_error * math.sqrt((n - p) / n) == pytest.approx(standard_error, rel=1e-3)


def test_weak_and_strong_are_told_apart(frame):
    frame["noise"] = np.random.default_rng(8).normal(size=len(frame))
    frame["strong"] = frame.m + frame.noise
    weak = informed(observed(frame, "m ~ x + noise", "y ~ m + x"))
    strong = informed(observed(frame, "m ~ x + strong", "y ~ m + x"))
    assert weak.weak is True
    assert strong.weak is False
    assert f"F = {weak.first_stage_f:.1f} < 10" in " ".join(weak.words())
    assert "Staiger & Stock 1997" in " ".join(strong.words())
    assert weak.r_standard_error > strong.r_standard_error


def test_alignment_places_the_mediator_and_its_terms(frame):
    study = observed(frame, "m ~ x + z", "y ~ m*z + x")
    beta = structural_outcome(
        np.arange(5.0), np.array([0.1, 0.2, 0.3]), np.array(1.0), np.array(2.0), np.array(0.6), study.alignment
    )
    # By hand: r = .6/.8 = .75, slope 1.5; (Intercept, m, z, x, m:z) lose 1.5 (-.1, 1, -.3, -.2, 0).
    assert study.outcome_terms == ("Intercept", "m", "z", "x", "m:z")
    np.testing.assert_allclose(beta, [0.15, -0.5, 2.45, 3.3, 4.0], atol=1e-12)
