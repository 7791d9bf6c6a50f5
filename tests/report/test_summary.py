"""The report as Markdown, and how far the interval stays clear of the limit."""

import pytest
from markdown_it import MarkdownIt

import bayesmed as bm
from bayesmed.conclusions.summary import rho_grid
from bayesmed.conclusions.tipping import tipping
from bayesmed.fit.result import FitResult
from bayesmed.priors import panel
from bayesmed.report.document import document
from bayesmed.report.findings import Findings, find
from bayesmed.report.limits import Reach, reaches
from bayesmed.report.markdown import as_markdown

AT = {"confidence": [4, 8]}
BELIEFS = {"none": 0.0, '<b>bold</b>, "and" | bar': bm.Uniform(0, 0.5), "=SUM(A1)": bm.LKJ(2)}


def summary_page(found: Findings) -> str:
    return as_markdown(document(found, {}))


@pytest.mark.parametrize("way", ["tipping", "grid"])
def test_the_reach_is_where_an_interval_first_holds_the_limit(knee: FitResult, way: str) -> None:
    """At the rho given the interval at that rho holds the limit; a little nearer to zero it does not."""
    claim = bm.Claim()
    found = reaches(claim, rho_grid(knee, None, AT), tipping(knee, AT, claim) if way == "tipping" else None)
    for k, reach in enumerate(found):
        assert reach.clear_at_zero
        assert reach.up is not None
        assert (reach.step is None) == (way == "tipping")
        past = 2e-6 if reach.step is None else 0.0
        table = rho_grid(knee, [reach.up - (reach.step or 2e-6), reach.up + past], AT, claim)
        rows = table[table["effect"] == "indirect"].iloc[k :: len(found)]
        assert list(rows["lower"] <= 0) == [False, True]
        assert reach.down is None


def test_the_reach_of_an_effect_unclear_at_zero(knee: FitResult) -> None:
    claim = bm.Claim("indirect", above=1.0)
    grid = rho_grid(knee, None, AT, claim)
    (found, _), (looked_up, _) = reaches(claim, grid, tipping(knee, AT, claim)), reaches(claim, grid, None)
    assert found == Reach(False, None, None, 0.98, None)
    assert looked_up == Reach(False, None, None, 0.9, 0.1)


def test_the_page_says_every_verdict_probability_and_belief(knee: FitResult) -> None:
    found = find(knee, BELIEFS, AT, title="A | title")
    page = summary_page(found)
    assert page.startswith("# A \\| title\n")
    rendered = MarkdownIt("commonmark", {"html": True}).enable("table").parse(page)
    inlines = [token for token in rendered if token.type == "inline"]
    kinds = {child.type for token in inlines for child in token.children or []}
    assert "html_inline" not in kinds
    assert not any(token.type == "html_block" for token in rendered)
    cells = ["".join(c.content for c in token.children or []) for token in inlines]
    for label in BELIEFS:
        assert cells.count(label) == 2  # one table row a subgroup
    for verdict in found.comparison.claimed["verdict"]:
        assert verdict in cells
    assert "At confidence = 4" in page
    assert "Random seed 1." in page
    assert "bayesmed 0." in page
    assert "230 are used; 10 were left out" in page


def test_the_page_holds_cautions_and_assumptions(knee: FitResult) -> None:
    page = " ".join(summary_page(find(knee, BELIEFS, AT)).split())
    for words in ("not medical advice", "ethics review", "licensed", "rows are independent", "rho is 0 if"):
        assert words in page


def test_the_page_names_a_reach(knee: FitResult) -> None:
    found = find(knee, BELIEFS, AT)
    page = summary_page(found)
    for reach in found.reaches:
        assert f"going up it first takes it in at rho = {reach.up:.2f}" in page


def test_without_beliefs_the_documented_set_stands_in_behind_the_fits_own(knee: FitResult) -> None:
    assert list(find(knee, at={}).comparison.beliefs) == list(panel())
    own = find(knee.with_belief(bm.Uniform(0, 0.3)), at={}).comparison.beliefs
    assert list(own) == ["the belief of this fit", *panel()]
    assert "documented default set" in summary_page(find(knee, at={}))


def test_a_claim_about_the_total_effect_has_no_tipping(knee: FitResult) -> None:
    found = find(knee, BELIEFS, AT, bm.Claim("total"))
    assert found.tipping is None
    assert found.yardsticks is None
    assert found.envelope is None
    assert "Averaged" not in summary_page(found)


def test_a_point_outside_the_data_is_warned_of_once_and_on_the_page(knee: FitResult) -> None:
    with pytest.warns(bm.errors.ExtrapolationWarning, match="12") as caught:
        found = find(knee, BELIEFS, {"confidence": [4, 12]})
    assert len(caught) == 1
    assert "lies outside the values observed" in summary_page(found)
