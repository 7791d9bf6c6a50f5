"""The audit: what it says of rows, arms, overlap, columns, rank, scale, spread, identifiers and rho."""

import numpy as np
import pandas as pd
import pytest

from bayesmed.study.audit import audit
from bayesmed.study.frame import given
from bayesmed.study.identifiers import identifiers
from bayesmed.study.observe import observe


def audited(data, mediator="m ~ x + z", outcome="y ~ m + x + z", **options):
    return audit(observe(data, **{"exposure": "x", "mediator": mediator, "outcome": outcome, **options}))


def about(found, subject, level=None):
    return [f.text for f in found.findings if f.about == subject and level in (None, f.level)]


def test_an_ordinary_study_raises_no_alarm(frame):
    found = audited(frame, "m ~ x*z + site", "y ~ m*z + x*z + site")
    assert {finding.level for finding in found.findings} == {"note"}
    assert not found.stops
    assert about(found, "rows") == ["all 160 rows are complete in every column used"]
    assert about(found, "moderators") == ["z (numeric) on exposure → mediator, mediator → outcome, exposure → outcome"]
    assert "silent" in about(found, "rho")[0]
    assert "0 → 1" in about(found, "exposure")[0]


def test_rows_dropped_and_the_columns_at_fault(frame):
    frame.loc[:19, "z"] = np.nan
    frame.loc[[3, 90], "site"] = None
    found = audited(frame, "m ~ x + z + site", "y ~ m + x + z + site")
    assert "139 of 160 rows used; 21 are incomplete (z lacks 20, site lacks 2)" in about(found, "rows", "attention")[0]


def test_unused_levels_and_text_that_reads_as_numbers(frame):
    frame["site"] = pd.Categorical(frame.site, categories=list("abcd"))
    frame["age"] = frame.age.astype(str)
    found = audited(frame, outcome="y ~ m + x + z + site + age")
    assert about(found, "columns", "note") == ["site: no row used has 'd'; these levels are left out"]
    assert "age is text" in about(found, "columns", "attention")[0]


def test_rank_stops_the_fit_and_names_the_terms(frame):
    found = audited(frame, outcome="y ~ m + x + z + I(2*z)")
    assert found.stops
    assert about(found, "rank", "stops the fit") == [
        "outcome equation: I(2 * z) is a multiple of z; remove one of these terms"
    ]
    assert found.deficiencies["outcome"][0].combines == ("z",)
    frame["copy"] = frame.m * 2
    assert "explain every row" in about(audited(frame, mediator="m ~ x + copy"), "rank", "stops the fit")[0]


def test_near_dependence_and_scales(frame):
    frame["close"] = frame.z + 1e-6 * np.random.default_rng(0).normal(size=160)
    found = audited(frame, outcome="y ~ m + x + z + close")
    assert any("close is nearly a combination" in text for text in about(found, "rank", "attention"))
    frame["z"] = frame.z + 1e7
    found = audited(frame)
    assert about(found, "scale", "attention")[0].startswith("z has mean 1e+07")
    frame["z"] = frame.dose * 1e8
    assert "z has SD" in about(audited(frame), "scale", "attention")[0]


def test_arms(frame):
    small = frame[(frame.x == 0) | (frame.index < 12)]
    found = audited(small)
    assert found.arms.counts[1] == found.arms.at_contrast[1] < 10
    assert "fewer than 10" in about(found, "exposure", "attention")[0]
    many = audit(observe(frame, exposure="dose", contrast=(2, 12), mediator="m ~ dose", outcome="y ~ m + dose"))
    assert not many.arms.discrete
    assert "quantiles" in about(many, "exposure", "note")[0]
    assert "outside the values observed" in about(many, "exposure", "attention")[0]


def test_overlap(frame):
    frame["z"] = frame.z + 3 * frame.x
    frame.loc[(frame.x == 1) & (frame.site == "b"), "site"] = "c"
    found = audited(frame, "m ~ x + z + site", "y ~ m + x + z + site")
    texts = about(found, "overlap", "attention")
    assert any(text.startswith("z: the arms' means differ by") for text in texts)
    assert any("no row with x = 1 has 'b'" in text for text in texts)
    z = next(one for one in found.overlap if one.name == "z")
    low, high = frame.z[frame.x == 0], frame.z[frame.x == 1]
    assert z.difference == pytest.approx((high.mean() - low.mean()) / np.sqrt((high.var() + low.var()) / 2))
    assert z.outside[1] == pytest.approx(((high > low.max()) | (high < low.min())).mean())


def test_what_informs_rho_is_pointed_out(frame):
    found = audited(frame, "m ~ x*z", "y ~ m + x + z")
    assert "x:z" in about(found, "rho", "attention")[0]
    assert found.informed.terms == ("x:z",)


def test_curved_outcomes(frame):
    assert "not linear in m" in about(audited(frame, outcome="y ~ m + I(m**2) + x + z"), "mediator", "note")[0]
    found = audited(frame, outcome="y ~ m + log(m + 4) + x + z")
    assert "is not defined for every value of m" in about(found, "mediator", "attention")[0]
    found = audited(frame, outcome="y ~ m + bs(m, df=4, extrapolation='extend') + x + z")
    assert about(found, "mediator", "attention") == []


def test_two_valued_mediators_and_outcomes(frame):
    frame["m"] = (frame.m > 2).astype(int)
    assert "only 2 values" in about(audited(frame), "mediator", "attention")[0]


def test_spread_is_pointed_out(frame):
    frame["m"] = frame.m + 3 * frame.x * frame.z.sample(frac=1, random_state=1).to_numpy()
    found = audited(frame)
    assert "mediator along x" in about(found, "spread", "attention")[0]
    assert "p < 0.001" in about(found, "spread", "attention")[0]


@pytest.mark.parametrize(
    ("name", "values", "suspect"),
    [
        ("patient_id", lambda n, r: np.repeat(np.arange(n // 2), 2), True),
        ("subjectID", lambda n, r: [f"S{i // 4}" for i in range(n)], True),
        ("school", lambda n, r: r.integers(0, 8, n), True),
        ("id", lambda n, r: np.arange(n), False),
        ("who", lambda n, r: np.repeat(np.arange(n // 2), 2), True),
        ("code", lambda n, r: [f"P{i // 2}" for i in range(n)], True),
        ("code", lambda n, r: pd.array([f"P{i // 2}" for i in range(n)], dtype="string"), True),
        ("age", lambda n, r: r.integers(18, 80, n), False),
        ("income", lambda n, r: r.integers(0, 100_000, n), False),
        ("score", lambda n, r: r.integers(0, 10, n), False),
        ("year", lambda n, r: np.repeat(2020, n), False),
        ("colour", lambda n, r: r.choice(["red", "blue"], n), False),
        ("note", lambda n, r: [f"a remark of several words on visit {i // 2}" for i in range(n)], False),
        ("weight", lambda n, r: r.normal(size=n).round(1), False),
        ("width", lambda n, r: r.integers(0, 9, n), False),
        ("confidence", lambda n, r: r.integers(1, 8, n), False),
        ("lists", lambda n, r: [[1]] * n, False),
    ],
)
def test_columns_that_look_like_identifiers(name, values, suspect):
    n = 160
    data = pd.DataFrame({"x": np.tile([0, 1], n // 2)})
    data[name] = values(n, np.random.default_rng(7))
    found = identifiers(given(data), ["x"], np.arange(n))
    assert [one.name for one in found] == [name] * suspect


def test_identifiers_are_looked_for_in_the_rows_used_only(frame):
    frame["patient"] = np.arange(160) % 100
    found = audited(frame)
    assert (
        "patient looks like an identifier and repeats (100 values in 160 rows, up to 2"
        in about(found, "identifiers")[0]
    )
    frame.loc[100:, "z"] = np.nan
    assert about(audited(frame), "identifiers") == []
    assert about(audited(frame.assign(z=0.5 * frame.age), outcome="y ~ m + x + z + patient"), "identifiers") == []


def test_shown_as_text_table_and_escaped_html(frame):
    frame["site"] = frame.site.map({"a": "<b>a", "b": "b", "c": "c"})
    found = audited(frame, "m ~ x*site", "y ~ m + x")
    lines = found.lines()
    assert len(lines) == len(found.findings) == len(found.to_frame())
    assert str(found) == repr(found) == "\n".join(lines)
    assert list(found.to_frame().columns) == ["level", "about", "text"]
    html = found._repr_html_()
    assert "<b>a" not in html
    assert html.count("<tr>") == len(lines) + 1
