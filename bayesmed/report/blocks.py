"""What a report is made of, before it is written as Markdown or as a page: sections of plain values."""

from dataclasses import dataclass
from typing import Any, Literal


@dataclass(frozen=True)
class Code:
    """Text shown as code."""

    text: str
    kind: Literal["code"] = "code"


@dataclass(frozen=True)
class Strong:
    """Text shown with weight."""

    text: str
    kind: Literal["strong"] = "strong"


@dataclass(frozen=True)
class Gap:
    """Something that only the authors can write, and what it is."""

    text: str
    kind: Literal["gap"] = "gap"


type Run = str | Code | Strong | Gap
type Words = tuple[Run, ...]


@dataclass(frozen=True)
class Paragraph:
    """A paragraph. `style` is "lead" or "quoted" on the page."""

    words: Words
    style: str = ""
    kind: Literal["paragraph"] = "paragraph"


@dataclass(frozen=True)
class Sub:
    """A heading within a section."""

    text: str
    kind: Literal["sub"] = "sub"


@dataclass(frozen=True)
class Bullets:
    """A list."""

    entries: tuple[Words, ...]
    kind: Literal["bullets"] = "bullets"


@dataclass(frozen=True)
class Grid:
    """A table. `style` is "items" on the page for a list of items with answers."""

    heads: tuple[str, ...]
    rows: tuple[tuple[Words, ...], ...]
    caption: str
    style: str = ""
    kind: Literal["grid"] = "grid"


@dataclass(frozen=True)
class Figure:
    """A picture by the name of its files, with its text alternative."""

    name: str
    caption: str
    text: str
    kind: Literal["figure"] = "figure"


@dataclass(frozen=True)
class Diagram:
    """A drawing as SVG made by this package, its file's name and what it shows in words."""

    name: str
    svg: str
    caption: str
    text: str
    kind: Literal["diagram"] = "diagram"


@dataclass(frozen=True)
class Live:
    """The part of the page that answers to the reader's belief, from stored draws."""

    stored: dict[str, Any]
    kind: Literal["live"] = "live"


type Block = Paragraph | Sub | Bullets | Grid | Figure | Diagram | Live


@dataclass(frozen=True)
class Section:
    """A heading with its anchor on the page, and what stands under it."""

    anchor: str
    heading: str
    blocks: tuple[Block, ...]


@dataclass(frozen=True)
class Document:
    """A whole report."""

    title: str
    sections: tuple[Section, ...]


def said(*runs: Run) -> Paragraph:
    """Return a paragraph."""
    return Paragraph(runs)


def cells(*texts: Run) -> tuple[Words, ...]:
    """Return a table's row of one run a cell."""
    return tuple((text,) for text in texts)
