"""What a notebook and a rich terminal show: sentence and table, everything escaped, nothing lost."""

import io
import re
from html import unescape
from xml.etree import ElementTree

import numpy as np
import pandas as pd
import pytest
from rich.console import Console

import bayesmed as bm
from bayesmed.priors.shown import short

HOSTILE = {
    "markup": "<script>alert('x')</script>",
    "quotes": "he said \"no\" & left it 'so'",
    "right to left": "\u0627\u0644\u062b\u0642\u0629 [bold]",
    "long": "very " * 60 + "long",
    "emoji": "\U0001f9b5 knee [/red]",
}


@pytest.fixture(scope="module")
def fit() -> bm.Fit:
    data = bm.load_example("knee_rehab").dropna()
    study = bm.Study(
        data.rename(columns={"confidence": "<b>confidence"}),
        exposure="coaching",
        mediator="exercise ~ coaching + `<b>confidence` + age",
        outcome="function ~ exercise * `<b>confidence` + coaching + age",
    )
    return study.fit(method="exact", draws=50, random_seed=1, progressbar=False)


def parsed(html: str) -> ElementTree.Element:
    """Return HTML that is well formed as XML; what is not is no HTML that a notebook should get."""
    return ElementTree.fromstring(html)


def all_of(fit: bm.Fit) -> dict[str, object]:
    tipping = fit.tipping()
    return {
        "study": fit.study,
        "audit": fit.study.audit(),
        "fit": fit,
        "comparison": fit.compare({"none": 0.0, "half": bm.Uniform(0, 0.5)}),
        "tipping": tipping,
        "yardsticks": fit.yardsticks("age"),
        "belief": bm.TruncatedNormal(0.25, 0.15),
        "mixture": bm.Mixture([0, bm.LKJ(4)], [0.5, 0.5]),
        "like": bm.SharedCause.like(fit, "age"),
        "set": bm.AnyOn(-0.3, 0.3),
        "groups": bm.ByGroup({"<i>": 0.0, "b": bm.LKJ(2)}, correlation=0.5),
        "movement": fit.under(bm.LKJ(3)).movement(),
    }


def test_everything_shows_itself_in_a_notebook_in_its_own_colours(fit: bm.Fit) -> None:
    for name, each in all_of(fit).items():
        html = each._repr_html_()
        assert "<b>" not in html, name
        assert "<i>" not in html, name
        parsed(html)
        assert not re.search(r"#[0-9a-fA-F]{3,6}\b|\brgb\(|background", html), f"{name} sets a colour of its own"
        assert len(html) < 20_000, name


@pytest.mark.parametrize("label", HOSTILE.values(), ids=HOSTILE)
def test_a_hostile_label_is_shown_whole_and_does_nothing(fit: bm.Fit, label: str) -> None:
    comparison = fit.compare({label: 0.0, "half": bm.Uniform(0, 0.5)}, at={})
    root = parsed(comparison._repr_html_())
    assert label in "".join(root.itertext())
    assert root.find(".//script") is None
    assert label in repr(comparison)
    out = io.StringIO()
    Console(file=out, width=400, force_terminal=False).print(comparison)
    assert "".join(label.split()) in "".join(out.getvalue().split())


@pytest.mark.parametrize("name", HOSTILE.values(), ids=HOSTILE)
def test_a_hostile_column_and_level_are_shown_whole(name: str) -> None:
    random = np.random.default_rng(1)
    site = pd.Series(random.choice(["plain", name], 60), dtype="category")
    x = np.arange(60) % 2
    m = x + random.normal(size=60)
    data = pd.DataFrame({"x": x, "m": m, "y": m + random.normal(size=60), "site": site})
    study = bm.Study(data, exposure="x", mediator="m ~ x + site", outcome="y ~ m * site + x")
    fit = study.fit(method="exact", draws=25, random_seed=1, progressbar=False)
    for each in (fit, fit.compare({"none": 0.0, "half": bm.Uniform(0, 0.5)}), fit.tipping()):
        assert name in unescape("".join(parsed(each._repr_html_()).itertext()))
        assert name in repr(each)


@pytest.mark.parametrize("label", ["\x1b[31mred\x1b[0m", "ab\u202ecd", "bell\x07"])
def test_a_label_cannot_command_a_terminal_or_turn_the_writing(fit: bm.Fit, label: str) -> None:
    comparison = fit.compare({label: 0.0, "half": bm.Uniform(0, 0.5)}, at={})
    out = io.StringIO()
    Console(file=out, width=400, force_terminal=False).print(comparison)
    spelt = ascii(label)[1:-1]
    for text in (repr(comparison), out.getvalue(), unescape(comparison._repr_html_())):
        assert spelt in text
        assert label not in text


def test_rich_says_what_text_says(fit: bm.Fit) -> None:
    for each in (fit, fit.compare({"none": 0.0}), fit.tipping(), fit.yardsticks("age")):
        out = io.StringIO()
        Console(file=out, width=250, force_terminal=False).print(each)
        assert sorted(out.getvalue().split()) == sorted(repr(each).split())


def test_a_belief_made_of_hundreds_of_numbers_is_cut_short_in_a_notebook_alone(fit: bm.Fit) -> None:
    like = bm.SharedCause.like(fit, "age")
    assert eval(repr(like), {name: getattr(bm, name) for name in bm.__all__}) == like
    assert len(short(like)) < 200
    assert short(like) in unescape(like._repr_html_())
    assert short(bm.LKJ(2)) == repr(bm.LKJ(2))


def test_the_shape_of_a_belief_is_its_distribution() -> None:
    svg = parsed(bm.Mixture([0.5, bm.Uniform(0, 0.5)], [0.5, 0.5])._repr_html_()).find(".//svg")
    assert svg is not None
    heights = [float(h) for h in re.findall(r"V([\d.]+)H", svg.find("path").get("d"))]
    raised = [k for k, h in enumerate(heights) if h < max(heights)]
    # 120 bars from -1 to 1: those from 0 to 0.5 are 60 to 89; all alike, as the single value is a stem.
    assert raised == list(range(60, 90))
    assert len({heights[k] for k in raised}) == 1
    stem = svg.find("line")
    assert float(stem.get("x1")) == pytest.approx(180)
