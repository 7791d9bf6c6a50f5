"""The frame that pictures share: title, key, and a panel for each moderator point with its name above."""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from bayesmed.conclusions.words import point_text
from bayesmed.plots.layout import Sheet, broken, line_height, sheet_width, text_width
from bayesmed.plots.picture import colours, style

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes

TITLE_SIZE, HEAD_SIZE, SIZE = 11.0, 9.0, 8.0
EDGE, GAP = 0.2, 0.35
"""Inches: the outer margin, and between panels."""
LEAST_PANEL = 1.7
GLYPH = 0.34
"""Inches of a sign in the key, with the room after it."""

type Sign = Callable[["Axes", float, float], None]
"""Draws a sign at (left, middle) of axes in inches, at most 0.3 wide and 0.16 high."""


@dataclass(frozen=True)
class Frame:
    """A sheet with its panels.

    Attributes
    ----------
    sheet : Sheet
    panels : list of matplotlib.axes.Axes
    places : list of (float, float)
        Where each panel begins, in inches from the left and the top of the sheet.
    width : float
        How wide each is, in inches.
    """

    sheet: Sheet
    panels: "list[Axes]"
    places: list[tuple[float, float]]
    width: float

    def leftmost(self, k: int) -> bool:
        """True if a panel is the first of its row."""
        return self.places[k][0] == self.places[0][0]

    def name_row(self, lines: list[str], k: int, down: float, height: float) -> None:
        """Write the name of a row of a panel to its left, in the middle of the row that starts `down` inches below."""
        across, top = self.places[k]
        middle = top + down + (height - len(lines) * line_height(SIZE)) / 2
        self.sheet.write(lines, across - 0.12, middle, SIZE, ha="right")


def frame(
    title: str,
    heads: Sequence[str],
    key: Sequence[tuple[Sign, str]] = (),
    *,
    height: float,
    left: float = 0.75,
    along: str = "",
    up: str = "",
    usual: float = 9.0,
    room: float = 0.0,
) -> Frame:
    """Return a sheet with a panel under each head, wrapped so that nothing overlaps whatever the lengths.

    Parameters
    ----------
    title : str
    heads : sequence of str
        One a panel; a single empty one leaves the line out.
    key : sequence of (sign, str)
    height : float
        Of a panel, in inches.
    left : float
        Inches beside each row of panels for what stands left of the first one.
    along, up : str
        What the horizontal and the vertical axis show.
    usual : float
        Width of the sheet in inches unless axes were asked for.
    room : float
        Inches left free under each panel beside those for its ticks.
    """
    width = sheet_width(usual)
    inner = width - left - EDGE
    columns = max(1, min(len(heads) if len(heads) <= 3 else 2 if len(heads) == 4 else 3, int(inner / LEAST_PANEL)))
    panel = (inner - GAP * (columns - 1)) / columns
    rows = [range(k, min(k + columns, len(heads))) for k in range(0, len(heads), columns)]
    title_lines = broken(title, TITLE_SIZE, width - 2 * EDGE, "bold")
    head_lines = [broken(head, HEAD_SIZE, panel, "bold") for head in heads]
    up_lines = broken(up, SIZE, width - 2 * EDGE) if up else []
    along_lines = broken(along, SIZE, inner) if along else []
    placed, key_height = _placed(key, width)

    top = 0.15
    title_top, top = top, top + len(title_lines) * line_height(TITLE_SIZE) + 0.08
    key_top, top = top, top + key_height + (0.1 if key else 0.0)
    up_top, top = top, top + len(up_lines) * line_height(SIZE) + 0.05
    tops = []
    for row in rows:
        top += max(len(head_lines[k]) for k in row) * line_height(HEAD_SIZE) * any(heads[k] for k in row) + 0.05
        tops.append(top)
        top += height + room + 0.3
    along_top = top
    sheet = Sheet(width, top + len(along_lines) * line_height(SIZE) + 0.12)
    sheet.write(title_lines, EDGE, title_top, TITLE_SIZE, weight="bold")
    sheet.write(up_lines, EDGE, up_top, SIZE, style="italic")
    sheet.write(along_lines, left, along_top, SIZE, style="italic")
    _draw_key(sheet, placed, key_top, key_height)
    panels, places = [], []
    for row, over in zip(rows, tops, strict=True):
        for column, k in enumerate(row):
            across = left + column * (panel + GAP)
            if heads[k]:
                above = over - len(head_lines[k]) * line_height(HEAD_SIZE) - 0.04
                sheet.write(head_lines[k], across, above, HEAD_SIZE, weight="bold")
            made = sheet.axes(across, over, panel, height)
            made.spines[["top", "right"]].set_visible(False)
            made.tick_params(axis="y", labelleft=column == 0)
            panels.append(made)
            places.append((across, over))
    return Frame(sheet, panels, places, panel)


def head(point: Mapping[str, Any]) -> str:
    """Return a moderator point in the words asked for."""
    return point_text({style().named(name): value for name, value in point.items()})


def minus(axes: "Axes", *, x: int = 5, y: int = 5) -> None:
    """Show few ticks, with true minus signs and no zeros that say nothing."""
    from matplotlib.ticker import FuncFormatter, MaxNLocator

    shown = FuncFormatter(lambda value, _: f"{round(value, 9):.4g}".replace("-", "−"))
    for axis, most in ((axes.xaxis, x), (axes.yaxis, y)):
        axis.set_major_locator(MaxNLocator(most, steps=[1, 2, 4, 5, 10]))
        axis.set_major_formatter(shown)


def some_rows(table: "pd.DataFrame", most: int = 9) -> "pd.DataFrame":
    """Return a few rows of a table at about equal distances, the first and the last among them, to be told in words."""
    places = np.linspace(0, len(table) - 1, min(len(table), most)).round().astype(int)
    return table.iloc[np.unique(places)]


def line_sign(**options: Any) -> Sign:
    """Return a sign: a level line."""
    return lambda axes, x, y: _quiet(axes.plot([x, x + 0.26], [y, y], **{"color": colours().ink, **options}))


def mark_sign(**options: Any) -> Sign:
    """Return a sign: a marker."""
    return lambda axes, x, y: _quiet(axes.plot([x + 0.13], [y], **{"color": colours().ink, "linestyle": "", **options}))


def area_sign(**options: Any) -> Sign:
    """Return a sign: a filled box."""

    def drawn(axes: "Axes", x: float, y: float) -> None:
        from matplotlib.patches import Rectangle

        usual = {"facecolor": colours().wash, "edgecolor": colours().ink, "linewidth": 0.8}
        axes.add_patch(Rectangle((x, y - 0.07), 0.26, 0.14, **{**usual, **options}))

    return drawn


def _quiet(_: object) -> None:
    return None


def _placed(key: Sequence[tuple[Sign, str]], width: float) -> tuple[list[tuple[Sign, list[str], float, float]], float]:
    """Return each sign with its lines of words and its place, and the height of all, in inches."""
    placed, left, top, tallest = [], EDGE, 0.0, 0.0
    for sign, words in key:
        lines = broken(words, SIZE, width - 2 * EDGE - GLYPH)
        across = GLYPH + max(text_width(line, SIZE) for line in lines)
        if left > EDGE and left + across > width - EDGE:
            left, top, tallest = EDGE, top + tallest, 0.0
        placed.append((sign, lines, left, top))
        left += across + 0.3
        tallest = max(tallest, len(lines) * line_height(SIZE) + 0.06)
    return placed, top + tallest


def _draw_key(sheet: Sheet, placed: list[tuple[Sign, list[str], float, float]], top: float, height: float) -> None:
    if not placed:
        return
    axes = sheet.axes(0, top, sheet.width, height)
    axes.set_xlim(0, sheet.width)
    axes.set_ylim(height, 0)
    axes.set_axis_off()
    for sign, lines, left, down in placed:
        sign(axes, left, down + line_height(SIZE) / 2)
        sheet.write(lines, left + GLYPH, top + down, SIZE)
