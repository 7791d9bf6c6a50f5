"""Placing by measure: widths of text, labels broken into lines, axes and words put at inches."""

from functools import cache
from typing import TYPE_CHECKING, Any

from bayesmed.core.errors import ArgumentError
from bayesmed.plots.picture import FONT, colours, style

if TYPE_CHECKING:
    from matplotlib.axes import Axes

LINE = 1.25
"""Height of a line of text in multiples of its size."""
POINTS_PER_INCH = 72


def line_height(size: float) -> float:
    """Return the height in inches of a line of text of a size in points."""
    return LINE * size / POINTS_PER_INCH


@cache
def text_width(text: str, size: float, weight: str = "normal") -> float:
    """Return the width in inches of one line of text of a size in points."""
    from matplotlib.font_manager import FontProperties
    from matplotlib.textpath import TextToPath

    font = FontProperties(family=[FONT], size=size, weight=weight)
    width, _, _ = TextToPath().get_text_width_height_descent(text, font, ismath=False)
    return float(width) / POINTS_PER_INCH


def broken(text: str, size: float, width: float, weight: str = "normal") -> list[str]:
    """Return text as lines no wider than `width` inches, broken at spaces, or within too long a word."""
    lines: list[str] = []
    line = ""
    for word in text.split():
        candidate = f"{line} {word}" if line else word
        if text_width(candidate, size, weight) <= width:
            line = candidate
            continue
        if line:
            lines.append(line)
        while text_width(word, size, weight) > width and len(word) > 1:
            fits = next(k for k in range(len(word) - 1, 0, -1) if k == 1 or text_width(word[:k], size, weight) <= width)
            lines.append(word[:fits])
            word = word[fits:]
        line = word
    return [*lines, line] if line or not lines else lines


def sheet_width(usual: float, least: float = 5.0) -> float:
    """Return the width in inches to draw on: that of the axes asked for, or the usual one.

    Raises
    ------
    ArgumentError
        If the axes are narrower than `least` inches.
    """
    ax = style().ax
    if ax is None:
        return usual
    width = float(ax.get_window_extent().width / ax.figure.dpi)
    if width < least:
        raise ArgumentError(f"ax: the axes are {width:.1f} inches wide; this picture needs at least {least:g}")
    return width


class Sheet:
    """A figure, or the place of the axes asked for, on which things are placed in inches from left and top.

    Parameters
    ----------
    width, height : float
        In inches.

    Raises
    ------
    ArgumentError
        If the axes asked for are too small.
    """

    def __init__(self, width: float, height: float) -> None:
        from matplotlib.figure import Figure

        self.width, self.height = width, height
        ax = style().ax
        self._left = self._above = 0.0
        if ax is None:
            self.figure: Any = Figure(figsize=(width, height), facecolor=colours().paper)
            self._whole = width, height
            return
        self.figure = ax.figure
        box, figure = ax.get_window_extent(), ax.figure.bbox
        inches = box.height / ax.figure.dpi
        if inches < height - 0.01:
            raise ArgumentError(
                f"ax: the axes are {inches:.1f} inches high; this picture needs {height:.1f} at a width of {width:.1f}"
            )
        self._left = (box.x0 - figure.x0) / ax.figure.dpi
        self._above = (figure.y1 - box.y1) / ax.figure.dpi
        self._whole = figure.width / ax.figure.dpi, figure.height / ax.figure.dpi
        ax.set_axis_off()

    def axes(self, left: float, top: float, width: float, height: float) -> "Axes":
        """Return bare axes whose upper left corner is at (left, top)."""
        whole_width, whole_height = self._whole
        corner = (self._left + left) / whole_width, 1 - (self._above + top + height) / whole_height
        box = (*corner, width / whole_width, height / whole_height)
        made: Axes = self.figure.add_axes(box)
        made.patch.set_visible(False)
        ink = colours().ink
        made.tick_params(labelsize=7.5, length=2.5, width=0.6, color=ink, labelcolor=ink)
        for side in made.spines.values():
            side.set(linewidth=0.6, edgecolor=ink)
        return made

    def write(self, lines: list[str] | str, left: float, top: float, size: float, **options: Any) -> None:
        """Write lines of text, the first one's upper edge at `top`; never read as mathematics."""
        usual: dict[str, Any] = {"fontsize": size, "color": colours().ink, "family": [FONT], "parse_math": False}
        usual["va"] = "center_baseline"
        for k, line in enumerate([lines] if isinstance(lines, str) else lines):
            if not line:
                continue
            self.figure.text(
                (self._left + left) / self._whole[0],
                1 - (self._above + top + (k + 0.5) * line_height(size)) / self._whole[1],
                line,
                **{**usual, **options},
            )
