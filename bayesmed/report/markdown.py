"""Markdown of plain strings: everything a user wrote is shown as it was written, never as markup."""

import re
from collections.abc import Iterable, Sequence

from bayesmed.report.blocks import (
    Block,
    Bullets,
    Code,
    Diagram,
    Document,
    Figure,
    Gap,
    Grid,
    Live,
    Paragraph,
    Run,
    Strong,
    Sub,
    Words,
)  # fmt: skip

SPECIAL = re.compile(r"([\\`*_\[\]<|~$#])")


def plain(text: str) -> str:
    r"""Return text on one line that Markdown shows as it is.

    >>> plain("a|b <i>c</i>\n*d* & e")
    'a\\|b \\<i>c\\</i> \\*d\\* &amp; e'
    """
    return SPECIAL.sub(r"\\\1", " ".join(text.split()).replace("&", "&amp;"))


def code(text: str) -> str:
    """Return text as a code span, whatever backticks it holds.

    >>> code("y ~ x"), code("y ~ `my x`")
    ('`y ~ x`', '`` y ~ `my x` ``')
    """
    text = " ".join(text.split())
    runs = [len(run) for run in re.findall("`+", text)]
    fence = "`" * (max(runs, default=0) + 1)
    return f"{fence} {text} {fence}" if runs else f"`{text}`"


def table(heads: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    """Return a table of cells that are Markdown already, except that bars are kept out of code spans' way."""
    lines = [f"| {' | '.join(heads)} |", f"|{' --- |' * len(heads)}"]
    lines += [f"| {' | '.join(row)} |" for row in rows]
    return "\n".join(lines)


def bullets(items: Iterable[str]) -> str:
    """Return a list of items that are Markdown already."""
    return "\n".join(f"- {item}" for item in items)


def as_markdown(document: Document) -> str:
    """Return a report as Markdown; pictures are those of its folder."""
    parts = [f"# {plain(document.title)}"]
    for section in document.sections:
        parts.append(f"## {plain(section.heading)}")
        parts += [_block(block) for block in section.blocks]
    return "\n\n".join(parts) + "\n"


def _block(block: Block) -> str:
    match block:
        case Paragraph():
            text = _words(block.words)
            return f"> {text}" if block.style == "quoted" else text
        case Sub():
            return f"### {plain(block.text)}"
        case Bullets():
            return bullets(_words(entry) for entry in block.entries)
        case Grid():
            heads = [plain(head) for head in block.heads]
            return f"{plain(block.caption)}:\n\n" + table(heads, [[_words(cell) for cell in row] for row in block.rows])
        case Figure():
            return f"![{plain(block.caption)}; in words and numbers in {block.name}.txt]({block.name}.png)"
        case Diagram():
            return f"![The assumed causes]({block.name}.svg)\n\n{plain(block.caption)}"
        case Live():
            return "Open `report.html` for this part: there a belief can be put in and moved."


def _words(words: Words) -> str:
    return "".join(_run(run) for run in words)


def _run(run: Run) -> str:
    match run:
        case Code():
            return code(run.text)
        case Strong():
            return f"**{_kept_apart(run.text)}**"
        case Gap():
            return f"**\\[Authors: {_kept_apart(run.text)}\\]**"
    return _kept_apart(run)


def _kept_apart(text: str) -> str:
    """Return plain Markdown that keeps a space at either end, which parts it from its neighbours."""
    return " " * text[:1].isspace() + plain(text) + " " * (text[-1:].isspace() and bool(text.strip()))
