"""A study known by its published figures equals the study of the rows they were computed from."""

import numpy as np
import pandas as pd
import pytest

import bayesmed as bm
from bayesmed.core.errors import ArgumentError, DataError, FormulaError

EXACT = {"method": "exact", "draws": 200, "random_seed": 4, "progressbar": False}
FORMULAS = {
    "main effects": ("m ~ x + c", "y ~ m + x + c"),
    "a moderated second path": ("m ~ x + z + c", "y ~ m * z + x + c"),
    "both paths moderated": ("m ~ x * z", "y ~ m * z + x * z"),
    "exposure and mediator interact": ("m ~ x + c", "y ~ m * x + c"),
    "informed": ("m ~ x * z", "y ~ m + x + z"),
}


@pytest.fixture(scope="module")
def data(simulated):
    rows = simulated(200, rho=0.3, seed=9).drop(columns="site")
    return rows.assign(**{"x:z": rows.x * rows.z, "z:m": rows.m * rows.z, "m:x": rows.m * rows.x})


def both(data, mediator, outcome, **options):
    rows = bm.Study(data, exposure="x", mediator=mediator, outcome=outcome)
    figures = bm.Study.from_moments(
        mean=data.mean().to_dict(), cov=data.cov(), n=len(data), exposure="x", mediator=mediator, outcome=outcome
    )
    return rows, figures


@pytest.mark.parametrize("name", FORMULAS)
def test_statistics_are_those_of_the_rows(data, name):
    rows, figures = both(data, *FORMULAS[name])
    assert figures.observed.contrast == (0, 1)
    from bayesmed.fit.statistics import reduce_study

    first, second = reduce_study(rows.observed), reduce_study(figures.observed)
    for equation in ("mediator", "outcome", "informed_outcome"):
        a, b = getattr(first, equation), getattr(second, equation)
        np.testing.assert_allclose(b.coefficients, a.coefficients, rtol=1e-8, atol=1e-10)
        np.testing.assert_allclose(b.standard_errors, a.standard_errors, rtol=1e-8)
        assert b.residual_sd == pytest.approx(a.residual_sd, rel=1e-10)
        assert b.response_sd == pytest.approx(a.response_sd, rel=1e-10)
        # Signs of a triangular factor are free.
        for factor in ("factor", "centred_factor"):
            squares = [getattr(one, factor).T @ getattr(one, factor) for one in (a, b)]
            np.testing.assert_allclose(squares[1], squares[0], rtol=1e-8, atol=1e-8)
    assert first.informed == second.informed


@pytest.mark.parametrize("name", [name for name in FORMULAS if name != "informed"])
def test_conclusions_are_those_of_the_rows(data, name):
    rows, figures = both(data, *FORMULAS[name])
    points = ({}, {"z": [0.0, 1.0]}) if "z" in FORMULAS[name][1] else ({},)
    # Draws of one in the coordinates of the other: signs of factors may differ, and with them the draws.
    fit = rows.fit(**EXACT)
    other = figures.adopt(fit.tree, rho="unidentified")
    for at in points:
        for rho in (0.0, bm.Uniform(-0.3, 0.5)):
            expected, found = fit.summary(at=at, rho=rho), other.summary(at=at, rho=rho)
            # An adopted fit takes its draws for a chain's, and estimates how many they are worth.
            same = [column for column in expected if column != "mcse"]
            pd.testing.assert_frame_equal(found[same], expected[same], rtol=1e-8, atol=1e-8)
        pd.testing.assert_frame_equal(other.tipping(at=at).table, fit.tipping(at=at).table, rtol=1e-8)
    if "c" in FORMULAS[name][0]:
        pd.testing.assert_frame_equal(other.yardsticks("c", at={}).table, fit.yardsticks("c", at={}).table, rtol=1e-8)


def test_correlations_and_sds_are_covariances(data):
    data = data[["x", "m", "y", "c"]]
    formulas = {"exposure": "x", "mediator": "m ~ x + c", "outcome": "y ~ m + x + c"}
    first = bm.Study.from_moments(mean=data.mean(), cov=data.cov(), n=200, **formulas)
    corr, sd = data.corr().to_numpy(), data.std().to_dict()
    lower = {row: dict(list(values.items())[: k + 1]) for k, (row, values) in enumerate(data.corr().T.items())}
    for table in (data.corr(), corr, lower):
        second = bm.Study.from_moments(mean=data.mean(), corr=table, sd=sd, n=200, **formulas)
        np.testing.assert_allclose(
            second.fit(**EXACT).posterior["gamma"], first.fit(**EXACT).posterior["gamma"], rtol=1e-8
        )
    without = bm.Study.from_moments(mean=None, corr=data.corr(), sd=sd, n=200, contrast=(0, 1), **formulas)
    effects = [study.fit(**EXACT).effects(at={}, rho=0.2)["indirect"].to_numpy() for study in (first, without)]
    np.testing.assert_allclose(*effects, rtol=1e-8)


def test_what_needs_rows_is_left_out_and_said(data, tmp_path):
    study = both(data, *FORMULAS["a moderated second path"])[1]
    audit = study.audit()
    assert "none: the study is known by published figures (n = 200)" in str(audit)
    assert (audit.arms, audit.overlap, audit.spread) == (None, (), ())
    assert "none; published figures, n = 200" in repr(study)
    fit = study.fit(**EXACT)
    z = data["z"]
    at = fit.summary(rho=0.0)["z"].unique()
    assert at == pytest.approx([z.mean() - z.std(), z.mean(), z.mean() + z.std()])
    assert fit.regions(0.0, "z")["share"].isna().all()
    assert fit.summary(at={"z": 50.0}, rho=0.0)["mean"].notna().all()
    assert fit.moderation_index("z")["free_of_rho"].all()
    text = (fit.report(tmp_path / "report", beliefs={"none": 0.0}) / "report.md").read_text()
    assert "no row was seen" in text


@pytest.mark.parametrize("name", ["moments", "regressions"])
def test_a_fit_is_saved_with_its_figures(name, data, tmp_path):
    study = both(data, *FORMULAS["main effects"])[1] if name == "moments" else printed()
    fit = study.fit(**EXACT)
    again = bm.load(fit.save(tmp_path / "fit.nc"))
    assert again.study.observed.published.source == study.observed.published.source
    pd.testing.assert_frame_equal(again.summary(at={}, rho=0.1), fit.summary(at={}, rho=0.1))
    assert repr(again.study) == repr(study)


REGRESSIONS = {
    "mediator_on": {"x": ("0.81", "0.17"), "c": ("0.30", "0.09")},
    "outcome_on": {"m": ("0.58", "0.097"), "x": ("-0.40", "0.27"), "c": ("0.50", "0.14")},
    "n": 250,
}


def printed(**changes):
    return bm.Study.from_regressions(**{"exposure": "x", "mediator": "m", "outcome": "y", **REGRESSIONS, **changes})


def test_printed_regressions_of_rows_give_their_fit(data):
    """Figures printed to many decimals; the covariate's correlation with the exposure is not among them."""
    import statsmodels.api as sm

    equations = {}
    for name, response, terms in (("mediator_on", "m", ["x", "c"]), ("outcome_on", "y", ["m", "x", "c"])):
        fitted = sm.OLS(data[response], sm.add_constant(data[terms])).fit()
        equations[name] = {term: (fitted.params[term], fitted.bse[term]) for term in terms}
        equations[name]["residual"] = np.sqrt(fitted.scale)
    figures = printed(**equations, n=len(data))
    fit = bm.Study(data, exposure="x", mediator="m ~ x + c", outcome="y ~ m + x + c").fit(**{**EXACT, "draws": 4000})
    other = figures.fit(**{**EXACT, "draws": 4000})
    assert other.result.statistics.mediator.residual_sd == pytest.approx(fit.result.statistics.mediator.residual_sd)
    for rho in (0.0, 0.4, bm.Uniform(-0.5, 0.2)):
        expected, found = fit.summary(at={}, rho=rho), other.summary(at={}, rho=rho)
        error = expected["sd"] / np.sqrt(16000)
        assert np.all(np.abs(found["mean"] - expected["mean"]) < 5 * error)
        assert found["sd"].to_numpy() == pytest.approx(expected["sd"].to_numpy(), rel=0.03)
    least = fit.yardsticks("c", at={}).table, other.yardsticks("c", at={}).table
    assert least[1]["rho"].to_numpy() == pytest.approx(least[0]["rho"].to_numpy(), abs=0.01)


def test_covariates_that_were_not_printed_cost_degrees_of_freedom():
    few, many = printed(), printed(unprinted_covariates=3)
    spread = [study.fit(**EXACT).result.statistics.outcome.degrees_of_freedom for study in (few, many)]
    assert spread == [246, 243]
    fit = many.fit(**EXACT)
    assert list(fit.yardsticks(at={}).table["covariate"].unique()) == ["c"]
    with pytest.raises(ArgumentError, match="is no covariate of the formulas"):
        fit.yardsticks("covariate not printed 1")
    assert "of 3 covariate(s) only the number is known" in str(many.audit())


def test_rounding_is_the_least_and_most_over_the_box(data, random):
    """Against random and extreme points of the box."""
    data = data[["x", "m", "y", "c"]]
    mean = {name: f"{value:.1f}" for name, value in data.mean().items()}
    table = {row: {column: f"{v:.1f}" for column, v in values.items()} for row, values in data.cov().T.items()}
    roles = {"exposure": "x", "contrast": (0, 1), "mediator": "m ~ x + c", "outcome": "y ~ m + x + c", "n": 200}

    def indirect(study):
        return study.fit(**EXACT).effects(at={}, rho=0.1)["indirect"].mean().item()

    table["x"]["x"], table["x"]["m"], table["m"]["x"] = "0.251", "0.22", "0.22"
    study = bm.Study.from_moments(mean=mean, cov=table, **roles)
    found = study.rounding(lambda fit: fit.effects(at={}, rho=0.1)["indirect"].mean().item(), draws=200, random_seed=4)
    low, high = found.loc[0, "answer_from"], found.loc[0, "answer_to"]
    assert low < found.loc[0, "answer"] < high
    published = study.observed.published
    from bayesmed.study.published import observe_published

    asked = {k: roles[k] for k in ("exposure", "contrast", "mediator", "outcome")}
    reached = []
    for _ in range(25):
        corner = published.theta + published.half * random.choice([-1, 1], len(published.theta))
        reached.append(indirect(bm.Study.of(observe_published(published.at(corner), **asked))))
    width = high - low
    assert min(reached) > low - 0.1 * width
    assert max(reached) < high + 0.1 * width
    assert max(reached) - min(reached) > 0.5 * width


def test_rounding_of_a_table_keeps_what_does_not_move():
    study = printed()
    found = study.rounding(lambda fit: fit.compare({"a": 0.0, "b": 0.2}, at={}), draws=100)
    assert list(found["prior"].unique()) == ["a", "b"]
    assert (found["mean_from"] < found["mean"]).all()
    assert (found["mean_to"] > found["mean"]).all()
    # The estimate 0.81 may be 0.805 to 0.815 and 0.58 may be 0.575 to 0.585.
    row = found.iloc[0]
    assert row["mean_from"] == pytest.approx(0.805 * 0.575, abs=0.02)
    assert row["mean_to"] == pytest.approx(0.815 * 0.585, abs=0.02)


def test_rounding_is_asked_only_of_published_figures(data):
    rows = both(data, *FORMULAS["main effects"])[0]
    with pytest.raises(ArgumentError, match="has rows of its own"):
        rows.rounding(lambda fit: fit.summary(rho=0.0))
    mediator, outcome = FORMULAS["a moderated second path"]
    data = data[["x", "z", "c", "m", "y", "z:m"]]
    figures = {"mean": data.mean(), "cov": data.cov(), "n": 200, "decimals": 3}
    moderated = bm.Study.from_moments(exposure="x", mediator=mediator, outcome=outcome, **figures)
    with pytest.raises(ArgumentError, match="ask at given values"):
        moderated.rounding(lambda fit: fit.summary(rho=0.0), draws=20)
    with pytest.raises(ArgumentError, match="expected a number, a table"):
        printed().rounding(lambda fit: "text", draws=20)


GOOD = {
    "mean": {"x": 0.5, "m": 2, "y": 3},
    "cov": [[0.2512, 0.2, 0.3], [0.2, 4, 1], [0.3, 1, 9]],
    "n": 200,
    "exposure": "x",
    "mediator": "m ~ x",
    "outcome": "y ~ m + x",
}


def test_a_plain_example_works():
    assert bm.Study.from_moments(**GOOD).observed.contrast == (0, 1)


@pytest.mark.parametrize(
    ("changes", "error", "words"),
    [
        ({"n": 4}, ArgumentError, "n=4 must be a whole number of at least 5"),
        ({"n": 5.5}, ArgumentError, "n=5.5"),
        ({"cov": None}, ArgumentError, "give one of both"),
        ({"sd": {"x": 1, "m": 1, "y": 1}}, ArgumentError, "go with corr="),
        ({"mean": {"x": 0.5, "m": "two", "y": 3}}, ArgumentError, r"mean\['m'\]: expected a printed number"),
        ({"mean": {"x": 0.5, "m": float("inf"), "y": 3}}, ArgumentError, r"mean\['m'\]"),
        ({"mean": [0.5, 2, 3]}, ArgumentError, "name the columns"),
        ({"cov": [[1, 2], [2, 1]]}, ArgumentError, "expected 3 rows and columns"),
        ({"cov": [[0.2512, 0.2, 0.3], [0.1, 4, 1], [0.3, 1, 9]]}, ArgumentError, "not symmetric: 'm' with 'x'"),
        ({"cov": [[0.2512, 0.2, 0.3], [0.2, 4, 7], [0.3, 7, 9]]}, DataError, "are those of no data"),
        ({"cov": [[0.2512, 0.2, 0.3], [0.2, 0, 1], [0.3, 1, 9]]}, DataError, "variance of 'm' must be above zero"),
        ({"cov": [[0.5, 0.2, 0.3], [0.2, 4, 1], [0.3, 1, 9]]}, ArgumentError, "name two values as contrast="),
        ({"outcome": "y ~ m * x"}, FormulaError, "the moments hold no column 'm:x'"),
        ({"outcome": "y ~ m + x + I(m**2)"}, FormulaError, "cannot be made of means and covariances"),
        ({"mediator": "log(m) ~ x", "outcome": "y ~ log(m) + x"}, FormulaError, "left of '~'"),
        ({"decimals": -1}, ArgumentError, "decimals=-1"),
        ({"cov": {"x": {"x": 0.25}, "m": {"m": 4}, "y": {"y": 9}}}, ArgumentError, "no entry for 'm' and 'x'"),
        ({"cov": {"x": {"x": 0.25}, "q": {"q": 4}, "y": {"y": 9}}}, ArgumentError, "beyond the columns"),
        ({"corr": np.eye(3) * 2 - 1, "cov": None, "sd": {"x": 1, "m": 1, "y": 1}}, ArgumentError, "between -1 and 1"),
        ({"corr": np.eye(3), "cov": None, "sd": {"x": 1, "m": -1, "y": 1}}, ArgumentError, "must be above zero"),
    ],
)
def test_moments_that_cannot_be_are_refused(changes, error, words):
    with pytest.raises(error, match=words):
        bm.Study.from_moments(**{**GOOD, **changes})


def test_two_variables_in_one_product_are_too_many(data):
    data = data.assign(**{"m:z:c": data.m * data.z * data.c})
    with pytest.raises(FormulaError, match="multiplies"):
        both(data, "m ~ x + z + c", "y ~ m + x + z + c + m:z:c")[1]


@pytest.mark.parametrize(
    ("changes", "error", "words"),
    [
        ({"mediator_on": {"x": ("0.81", "0.17")}}, ArgumentError, "must adjust for the same ones"),
        ({"mediator_on": {"c": ("0.3", "0.1")}}, ArgumentError, "'x' is needed with its estimate"),
        ({"outcome_on": {"x": ("1", "1"), "c": ("1", "1")}}, ArgumentError, "'m' is needed with its estimate"),
        (
            {"outcome_on": {"m": ("0.58", "0.097"), "c": ("1", "1")}},
            ArgumentError,
            "or total_on= with it, for the direct effect",
        ),
        ({"mediator_on": {"x": 0.81, "c": ("1", "1")}}, ArgumentError, "expected .estimate, standard error."),
        ({"mediator_on": {"x": ("0.81", "-0.17"), "c": ("1", "1")}}, ArgumentError, "must be above zero"),
        ({"arms": (100, 100)}, ArgumentError, "which make n=250"),
        ({"arms": (125, 125), "contrast": (0, 2)}, ArgumentError, "leave out contrast= or arms="),
        ({"total_on": {"x": ("2.50", "0.30"), "c": ("0.67", "0.15")}}, DataError, "cannot all be true"),
        ({"n": 6}, ArgumentError, "too few rows"),
        ({"mediator_on": 3}, ArgumentError, "expected a dict of term"),
        ({"mediator_on": {"x": {"se": 1}, "c": ("1", "1")}}, ArgumentError, "expected 'estimate' with"),
    ],
)
def test_regressions_that_cannot_be_are_refused(changes, error, words):
    with pytest.raises(error, match=words):
        printed(**changes)


def test_an_exposure_in_other_units_and_names_with_spaces():
    study = bm.Study.from_regressions(
        exposure="hours of coaching",
        mediator="m's",
        outcome="y",
        contrast=(2, 6),
        mediator_on={"hours of coaching": (0.81, 0.17)},
        outcome_on={"m's": (0.58, 0.097), "hours of coaching": (-0.40, 0.27)},
        n=250,
    )
    found = study.fit(**EXACT).summary(at={}, rho=0.0)
    assert found.loc[0, "mean"] == pytest.approx(4 * 0.81 * 0.58, abs=0.15)
    assert "taken as 0 and 1" in str(study.audit())
