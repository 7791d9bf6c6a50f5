"""A finished picture, with the text that says the same in numbers; and what all pictures are drawn with."""

import warnings
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from contextvars import ContextVar
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from bayesmed.core.errors import ArgumentError

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

FONT = "DejaVu Sans"
"""Comes with matplotlib, so that a picture measures the same everywhere."""
DOTS_PER_INCH = 150


@dataclass(frozen=True)
class Theme:
    """Colours of a picture, each a hexadecimal one; nothing is told apart by colour alone.

    Attributes
    ----------
    ink, faint, wash, paper : str
        What is said, what helps to read it, areas behind what is said, and the ground.
    """

    ink: str
    faint: str
    wash: str
    paper: str

    def shade(self, share: float) -> str:
        """Return a colour between paper and ink, never fainter than a quarter of the way."""
        kept = 0.25 + 0.75 * min(1.0, max(0.0, share))
        pairs = zip(_channels(self.paper), _channels(self.ink), strict=True)
        return "#" + "".join(f"{round(p + kept * (i - p)):02x}" for p, i in pairs)


THEMES = {
    "blue": Theme("#16324f", "#8a949e", "#cfd6dd", "#ffffff"),
    "black": Theme("#000000", "#7a7a7a", "#d9d9d9", "#ffffff"),
    "dark": Theme("#e9eef3", "#8b97a3", "#3a4855", "#12181e"),
}
"""Dark blue that prints as near black; black alone; light on dark."""


@dataclass(frozen=True, eq=False)
class Style:
    """How a picture is asked to be drawn.

    Attributes
    ----------
    theme : Theme
    labels : mapping of str to str
        Words in place of names: of beliefs, moderators, covariates, the outcome.
    ax : matplotlib.axes.Axes or None
        Whose place the picture takes.
    """

    theme: Theme
    labels: Mapping[str, str]
    ax: "Axes | None"

    def named(self, name: str) -> str:
        """Return the words for a name."""
        return str(self.labels.get(name, name))


USUAL = Style(THEMES["blue"], {}, None)
_style: ContextVar[Style] = ContextVar("style", default=USUAL)


def style() -> Style:
    """Return how the picture that is being drawn is asked to be drawn."""
    return _style.get()


def colours() -> Theme:
    """Return the colours of the picture that is being drawn."""
    return _style.get().theme


@dataclass(frozen=True, eq=False)
class Picture:
    """A picture and its text alternative.

    Attributes
    ----------
    figure : matplotlib.figure.Figure
        To change before saving; it belongs to no window.
    title : str
    text : str
        What the picture shows, in words and numbers, for those who do not see it.
    paper : str
        Colour of the ground.
    """

    figure: "Figure"
    title: str
    text: str
    paper: str = THEMES["blue"].paper

    def savefig(self, path: str | Path, **options: Any) -> Path:
        """Write the picture to a file, its kind taken from the path's ending, and return the path.

        Title and text alternative go into the file's own description where the kind has one (PNG, SVG), and
        no date does, so that the same numbers make the same file.

        Parameters
        ----------
        path : str or Path
            Ending in .png, .svg, .pdf or another that matplotlib knows.
        **options
            Passed to ``matplotlib.figure.Figure.savefig``.
        """
        kind = Path(path).suffix.lower()
        if kind in (".png", ".svg"):
            options.setdefault("metadata", {"Title": self.title, "Description": self.text})
        if kind == ".svg":
            options["metadata"] = {"Date": None, **options["metadata"]}
        options.setdefault("dpi", DOTS_PER_INCH)
        with drawing():
            self.figure.savefig(path, facecolor=self.paper, **options)
        return Path(path)

    def _repr_html_(self) -> str:
        from base64 import b64encode
        from html import escape
        from io import BytesIO

        buffer = BytesIO()
        with drawing():
            self.figure.savefig(buffer, format="png", dpi=DOTS_PER_INCH, facecolor=self.paper)
        data = b64encode(buffer.getvalue()).decode("ascii")
        width = round(100 * self.figure.get_figwidth())
        return f'<img alt="{escape(self.text)}" width="{width}" src="data:image/png;base64,{data}">'

    def __repr__(self) -> str:
        return f"{self.title}\n\n{self.text}"


@contextmanager
def drawing(theme: Any = "blue", labels: Mapping[str, str] | None = None, ax: Any = None) -> Iterator[None]:
    """Draw under fixed settings, whatever style the user has set elsewhere, with the colours and words asked for.

    Raises
    ------
    ArgumentError
        If the theme is not known, labels are no texts by text, or `ax` is no matplotlib Axes.
    """
    token = _style.set(Style(_checked_theme(theme), _checked_labels(labels), _checked_axes(ax)))
    try:
        with _settings():
            yield
    finally:
        _style.reset(token)


@contextmanager
def _settings() -> Iterator[None]:
    import matplotlib

    settings: Any = {
        "font.family": [FONT],
        "text.usetex": False,
        # Letters fitted to pixels are wider than those that are measured.
        "text.hinting": "none",
        "axes.unicode_minus": True,
        "hatch.linewidth": 0.8,
        "hatch.color": colours().ink,
        "svg.fonttype": "path",
        "svg.hashsalt": "bayesmed",
    }
    with matplotlib.rc_context(settings), warnings.catch_warnings():
        # A label in a script the font does not have shows empty boxes; the text alternative has it in full.
        warnings.filterwarnings("ignore", message="Glyph .* missing from")
        yield


def _channels(colour: str) -> tuple[int, ...]:
    return tuple(int(colour[k : k + 2], 16) for k in (1, 3, 5))


def _checked_theme(theme: Any) -> Theme:
    if isinstance(theme, Theme):
        return theme
    if not isinstance(theme, str) or theme not in THEMES:
        raise ArgumentError(f"theme={theme!r} is not known; allowed are {', '.join(map(repr, THEMES))} and a Theme")
    return THEMES[theme]


def _checked_labels(labels: Any) -> Mapping[str, str]:
    if labels is None:
        return {}
    if not isinstance(labels, Mapping) or not all(isinstance(each, str) for pair in labels.items() for each in pair):
        raise ArgumentError(f"labels={labels!r} must be a dict of name → words, both text")
    return labels


def _checked_axes(ax: Any) -> Any:
    if ax is None:
        return None
    from matplotlib.axes import Axes

    if not isinstance(ax, Axes):
        raise ArgumentError(f"ax={ax!r} must be a matplotlib Axes")
    return ax
