"""Markdown of what users wrote, read back by a CommonMark parser (markdown-it-py)."""

import pytest
from markdown_it import MarkdownIt

from bayesmed.report.markdown import code, plain, table

HOSTILE = (
    "a|b",
    "<script>alert(1)</script>",
    "*stars* _under_ ~~gone~~",
    "[link](http://example.org)",
    "`tick` and ``ticks``",
    "5 & 6 &amp; 7",
    "back\\slash",
    "$x^2$ #1",
    "=1+1",
    '"quoted", comma',
)


def shown(markdown: str) -> str:
    """Return the text of a rendered inline, and fail on any markup in it."""
    (inline,) = [t for t in MarkdownIt("commonmark").enable("table").parse(markdown) if t.type == "inline"]
    assert inline.children is not None
    assert {child.type for child in inline.children} <= {"text", "text_special"}
    return "".join(child.content for child in inline.children)


@pytest.mark.parametrize("text", HOSTILE)
def test_plain_shows_what_was_written(text: str) -> None:
    assert shown(f"The label {plain(text)} here") == f"The label {text} here"


@pytest.mark.parametrize("text", ["y ~ x", "y ~ `my x` + b", "a `` b ` c"])
def test_code_shows_what_was_written(text: str) -> None:
    (inline,) = [t for t in MarkdownIt("commonmark").parse(code(text)) if t.type == "inline"]
    assert inline.children is not None
    assert [(child.type, child.content) for child in inline.children] == [("code_inline", text)]


@pytest.mark.parametrize("text", HOSTILE)
def test_a_cell_stays_one_cell(text: str) -> None:
    tokens = MarkdownIt("commonmark").enable("table").parse(table(("a", "b"), [(plain(text), "2")]))
    cells = [tokens[k + 1] for k, token in enumerate(tokens) if token.type == "td_open"]
    assert len(cells) == 2
    assert "".join(child.content for child in cells[0].children or []) == text
