"""Markdown of plain strings: everything a user wrote is shown as it was written, never as markup."""

import re
from collections.abc import Iterable, Sequence

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
