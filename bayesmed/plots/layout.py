"""Placing by measure: widths of text, labels broken into lines, axes and words put at inches."""

from functools import cache
from typing import TYPE_CHECKING, Any

from bayesmed.plots.picture import FONT, INK

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


class Sheet:
    """A figure on which things are placed in inches from its left and top.

    Parameters
    ----------
    width, height : float
        In inches.
    """

    def __init__(self, width: float, height: float) -> None:
        from matplotlib.figure import Figure

        self.width, self.height = width, height
        self.figure: Figure = Figure(figsize=(width, height))

    def axes(self, left: float, top: float, width: float, height: float) -> "Axes":
        """Return bare axes whose upper left corner is at (left, top)."""
        box = (
            left / self.width,
            1 - (top + height) / self.height,
            width / self.width,
            height / self.height,
        )
        made = self.figure.add_axes(box)
        made.patch.set_visible(False)
        made.tick_params(labelsize=7.5, length=2.5, width=0.6, color=INK, labelcolor=INK)
        for side in made.spines.values():
            side.set(linewidth=0.6, edgecolor=INK)
        return made

    def write(self, lines: list[str] | str, left: float, top: float, size: float, **options: Any) -> None:
        """Write lines of text, the first one's upper edge at `top`; never read as mathematics."""
        usual: dict[str, Any] = {"fontsize": size, "color": INK, "family": [FONT], "parse_math": False}
        usual["va"] = "center_baseline"
        for k, line in enumerate([lines] if isinstance(lines, str) else lines):
            if not line:
                continue
            self.figure.text(
                left / self.width,
                1 - (top + (k + 0.5) * line_height(size)) / self.height,
                line,
                **{**usual, **options},
            )
