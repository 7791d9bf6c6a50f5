"""A finished picture: a matplotlib figure with the text that says the same in numbers."""

import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from matplotlib.figure import Figure

INK = "#16324f"
"""Dark blue that prints as near black."""
FAINT = "#8a949e"
PAPER = "white"
FONT = "DejaVu Sans"
"""Comes with matplotlib, so that a picture measures the same everywhere."""
DOTS_PER_INCH = 150


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
    """

    figure: "Figure"
    title: str
    text: str

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
            self.figure.savefig(path, facecolor=PAPER, **options)
        return Path(path)

    def _repr_html_(self) -> str:
        from base64 import b64encode
        from html import escape
        from io import BytesIO

        buffer = BytesIO()
        with drawing():
            self.figure.savefig(buffer, format="png", dpi=DOTS_PER_INCH, facecolor=PAPER)
        data = b64encode(buffer.getvalue()).decode("ascii")
        width = round(100 * self.figure.get_figwidth())
        return f'<img alt="{escape(self.text)}" width="{width}" src="data:image/png;base64,{data}">'

    def __repr__(self) -> str:
        return f"{self.title}\n\n{self.text}"


@contextmanager
def drawing() -> Iterator[None]:
    """Draw under fixed settings, whatever style the user has set elsewhere."""
    import matplotlib

    settings: Any = {
        "font.family": [FONT],
        "text.usetex": False,
        "axes.unicode_minus": True,
        "hatch.linewidth": 0.8,
        "hatch.color": INK,
        "svg.fonttype": "path",
        "svg.hashsalt": "bayesmed",
    }
    with matplotlib.rc_context(settings), warnings.catch_warnings():
        # A label in a script the font does not have shows empty boxes; the text alternative has it in full.
        warnings.filterwarnings("ignore", message="Glyph .* missing from")
        yield
