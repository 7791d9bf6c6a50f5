"""What a report holds, as page and as Markdown alike, and what the page stores of the draws."""

import base64
import dataclasses
import json
import re
from html.parser import HTMLParser
from xml.etree import ElementTree

import numpy as np
import pytest

import bayesmed as bm
from bayesmed.core.errors import ArgumentError
from bayesmed.fit.result import FitResult
from bayesmed.report import live
from bayesmed.report.blocks import Bullets, Document, Gap, Grid, Paragraph
from bayesmed.report.diagram import diagram, standing_alone
from bayesmed.report.document import document
from bayesmed.report.findings import Findings, find
from bayesmed.report.live import as_script_data, stored_draws, why_not_live
from bayesmed.report.markdown import as_markdown
from bayesmed.report.page import as_page
from bayesmed.report.standards import agrema, barg

AT = {"confidence": [4, 6, 8]}
BELIEFS = {"none": 0.0, "<i>half</i> | *": bm.Uniform(0, 0.5)}
VOID = {"meta", "link", "input", "img", "br"}


@pytest.fixture(scope="module")
def found(knee: FitResult) -> Findings:
    return find(knee, BELIEFS, AT, title="Knee & <b>coaching</b>")


class Reader(HTMLParser):
    """Reads text outside scripts and styles, and checks that elements are closed in order."""

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.words: list[str] = []
        self.addresses: list[str] = []

    def handle_starttag(self, tag: str, attributes: list[tuple[str, str | None]]) -> None:
        if tag not in VOID:
            self.open.append(tag)
        self.addresses += [value or "" for name, value in attributes if name in ("src", "href", "action", "srcset")]

    def handle_startendtag(self, tag: str, attributes: list[tuple[str, str | None]]) -> None:
        pass

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        if self.open and self.open[-1] not in ("script", "style"):
            self.words.append(data)


def read(page: str) -> Reader:
    reader = Reader()
    reader.feed(page)
    assert reader.open == []
    return reader


def sentences(made: Document) -> list[str]:
    """Every plain text of a report's paragraphs, lists and tables."""
    rows = []
    for section in made.sections:
        for block in section.blocks:
            if isinstance(block, Paragraph):
                rows.append(block.words)
            elif isinstance(block, Bullets):
                rows += list(block.entries)
            elif isinstance(block, Grid):
                rows += [cell for row in block.rows for cell in row]
    return [run if isinstance(run, str) else run.text for words in rows for run in words]


def test_page_and_markdown_say_the_same(found: Findings) -> None:
    made = document(found, {}, ("Nothing is kept.",))
    reader = read(as_page(made, {}))
    on_page = " ".join("".join(reader.words).split())
    in_markdown = " ".join(re.sub(r"\\(.)", r"\1", as_markdown(made)).replace("&amp;", "&").replace("`", "").split())
    everything = sentences(made)
    assert len(everything) > 200
    for text in everything:
        flat = " ".join(text.split())
        assert flat in on_page, text
        assert flat in in_markdown, text


def test_the_page_asks_for_nothing_outside_itself(found: Findings) -> None:
    page = as_page(document(found, {}), {})
    assert all(address.startswith(("#", "data:")) for address in read(page).addresses)
    assert "default-src 'none'" in page
    (script,) = re.findall(r"<script>(.*?)</script>", page, flags=re.DOTALL)
    (stated,) = re.findall(r"script-src 'sha256-([^']+)'", page)
    import hashlib

    assert base64.b64encode(hashlib.sha256(script.encode()).digest()).decode() == stated


def test_question_and_answer_are_three_sentences(found: Findings) -> None:
    first = document(found, {}).sections[0].blocks[0]
    assert isinstance(first, Paragraph)
    text = "".join(run if isinstance(run, str) else run.text for run in first.words)
    assert len(re.findall(r"[.?](?= [A-Z]|$)", text)) == 3
    assert "“none”" in text
    assert "changes at least one verdict" in text


def test_both_standards_are_answered_and_blanks_are_seen(found: Findings) -> None:
    """AGReMA has 25 items (Lee and others 2021, JAMA 326, 1045)."""
    assert [item.split()[0] for item, _ in agrema(found)] == [str(k) for k in range(1, 26)]
    assert all(words for _, words in (*agrema(found), *barg(found)))
    blanks = [run.text for _, words in agrema(found) for run in words if isinstance(run, Gap)]
    assert len(blanks) >= 15
    made = document(found, {})
    page, text = as_page(made, {}), as_markdown(made)
    for blank in blanks:
        assert f'<span class="gap">Authors: {blank}</span>' in page
        assert f"**\\[Authors: {blank}\\]**" in text


def test_stored_draws_give_every_line_again(found: Findings, knee: FitResult) -> None:
    stored = stored_draws(found)
    rows = np.frombuffer(base64.b64decode(stored["rows"]), dtype="<f4").reshape(-1, stored["draws"]).astype(float)
    # Three points on a line in the moderator, and one slope for all: three rows instead of six.
    assert len(rows) == 3
    constant, slope = knee.contrasts(found.comparison.points).line("indirect")
    for k, point in enumerate(stored["points"]):
        np.testing.assert_allclose(point["constant"] @ rows, constant[k], atol=3e-7 * np.abs(constant).max())
        np.testing.assert_allclose(point["slope"] @ rows, slope[k], atol=3e-7 * np.abs(slope).max())


def test_more_draws_than_a_page_should_hold_are_thinned_and_it_is_said(
    found: Findings, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(live, "MOST_NUMBERS", 1000)
    stored = stored_draws(found)
    assert (stored["draws"], stored["of"], stored["chains"]) == (4 * 84, 1000, 4)
    assert "The page holds 336 of 1000 draws" in as_page(document(found, {}), {})


def test_data_in_a_script_element_cannot_end_it() -> None:
    value = {"</script><!-- & \u2028": "<script>"}
    assert not set("<>&\u2028") & set(as_script_data(value))
    assert json.loads(as_script_data(value)) == value


def test_where_no_belief_can_be_put_in_the_page_says_why(found: Findings, knee: FitResult) -> None:
    informed = dataclasses.replace(found, result=knee.replaced(joint=True))
    assert "let the data inform rho" in why_not_live(informed)
    total = find(knee, BELIEFS, AT, bm.Claim("total"))
    page = as_page(document(total, {}), {})
    assert "This part is not offered here: the claim is about the total effect" in page
    assert "stored-draws" not in page.split("<script>")[0]
    read(page)


def test_the_diagram_is_a_picture_of_its_own(knee: FitResult) -> None:
    drawn = diagram(knee.observed)
    root = ElementTree.fromstring(standing_alone(drawn))
    texts = [element.text for element in root.iter("{http://www.w3.org/2000/svg}text")]
    assert {"X", "M", "Y", "U", "C", "ρ", "coaching", "exercise", "function"} <= set(texts)
    assert "confidence" in drawn.text


def test_an_unknown_point_is_refused_before_a_page_is_made(knee: FitResult) -> None:
    from bayesmed.front.fit import Fit

    with pytest.raises(ArgumentError, match="confidnce"):
        Fit(knee).explore(BELIEFS, at={"confidnce": 4})
