"""Every belief and subgroup at a glance: how far the claim is beyond what it requires, or short of it."""

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from bayesmed.conclusions.claim import CLOSE, FAILS, HOLDS
from bayesmed.conclusions.comparison import ComparisonResult
from bayesmed.conclusions.words import probability_text
from bayesmed.plots.layout import Sheet, broken, line_height, sheet_width, text_width
from bayesmed.plots.opened import opened
from bayesmed.plots.panels import head
from bayesmed.plots.picture import Picture, colours, drawing, style

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes

WIDTH = 9.5
LEFT, RIGHT, GAP = 2.1, 0.2, 0.2
NUMBERS = 0.5
"""Inches at the right of each cell for the probability in figures."""
TITLE_SIZE, HEAD_SIZE, SIZE, SMALL = 11.0, 9.0, 8.0, 7.0
LEAST_BRACKET = 0.025
"""Inches; narrower Monte Carlo errors are not drawn."""
CLIP = 0.0005
"""Probabilities closer to 0 or 1 are drawn at this distance."""
TICKS = (0.01, 0.1, 0.5, 0.9, 0.99)


def plot_beliefs(
    comparison: Any,
    title: str | None = None,
    theme: Any = "blue",
    labels: Mapping[str, str] | None = None,
    ax: Any = None,
) -> Picture:
    """Draw the probability of the claim under every belief and at every moderator point.

    A bar runs from the probability that the claim requires to the one it has, on a scale of log odds, so that
    0.9 and 0.99 are as far apart as 0.5 and 0.9. To the right of the line and filled: the claim holds. To the
    left and hatched: it falls short. Empty: within two Monte Carlo errors, too close to call. The bracket at
    the bar's end is two Monte Carlo errors either way.

    Parameters
    ----------
    comparison : Comparison
        Of ``fit.compare``.
    title : str, optional
        In place of the usual one.
    theme : {"blue", "black", "dark"} or Theme
    labels : dict of str to str, optional
        Words in place of names of beliefs and moderators.
    ax : matplotlib.axes.Axes, optional
        Whose place the picture takes; it says how large it must be.

    Returns
    -------
    Picture
    """
    comparison = opened(comparison, ComparisonResult, "plot_beliefs: comparison= must be what fit.compare() returned")
    claim = comparison.claim
    words = title or f"Probability of {claim} under each belief, against the {claim.required:g} it requires"
    with drawing(theme, labels, ax):
        return Picture(_draw(comparison, words), words, _text(comparison), colours().paper)


def _draw(comparison: ComparisonResult, title: str) -> Any:
    points = comparison.points.values
    count = len(points)
    columns = count if count <= 3 else 3 if count in (5, 6, 9) else 4
    bands = -(-count // columns)
    width = sheet_width(WIDTH, WIDTH)
    cell = (width - LEFT - RIGHT - GAP * (columns - 1)) / columns
    labels = [broken(style().named(label), SIZE, LEFT - 0.35) for label in comparison.beliefs]
    heights = [max(0.27, len(lines) * line_height(SIZE) + 0.08) for lines in labels]
    heads = [broken(head(point), HEAD_SIZE, cell, "bold") for point in points]
    title_lines = broken(title, TITLE_SIZE, width - 0.4, "bold")

    key_top = 0.15 + len(title_lines) * line_height(TITLE_SIZE) + 0.08
    tops, top = [], key_top + 0.24 + 0.12
    for band in range(bands):
        top += max(len(h) for h in heads[band * columns : (band + 1) * columns]) * line_height(HEAD_SIZE)
        top += line_height(SMALL) + 0.06
        tops.append(top)
        top += sum(heights) + 0.32
    sheet = Sheet(width, top + 0.05)
    sheet.write(title_lines, 0.2, 0.15, TITLE_SIZE, weight="bold")
    _key(sheet, key_top)
    for band, top in enumerate(tops):
        row_top = top
        for lines, height in zip(labels, heights, strict=True):
            middle = row_top + (height - len(lines) * line_height(SIZE)) / 2
            sheet.write(lines, LEFT - 0.12, middle, SIZE, ha="right")
            row_top += height
        for column, k in enumerate(range(band * columns, min((band + 1) * columns, count))):
            left = LEFT + column * (cell + GAP)
            over = top - line_height(SMALL) - 0.05 - len(heads[k]) * line_height(HEAD_SIZE)
            sheet.write(heads[k], left, over, HEAD_SIZE, weight="bold")
            rows = comparison.claimed.iloc[k::count]
            axes = sheet.axes(left, top, cell - NUMBERS, sum(heights))
            _cell(axes, rows, heights, comparison.claim.required)
            required = f"{comparison.claim.required:g}"
            share = (_log_odds(comparison.claim.required) + _end()) / (2 * _end())
            over = top - line_height(SMALL) - 0.02
            sheet.write(required, left + share * (cell - NUMBERS), over, SMALL, ha="center")
            middle = top
            for probability, mcse, height in zip(rows["probability"], rows["mcse"], heights, strict=True):
                shown = probability_text(probability, mcse)
                sheet.write(shown, left + cell - NUMBERS + 0.06, middle + (height - line_height(SIZE)) / 2, SIZE)
                middle += height
    return sheet.figure


def _cell(axes: "Axes", rows: "pd.DataFrame", heights: list[float], required: float) -> None:
    """Draw one moderator point: a bar for each belief."""
    total = sum(heights)
    axes.set_xlim(-_end(), _end())
    axes.set_ylim(total, 0)
    start, top = _log_odds(required), 0.0
    columns = (rows["probability"], rows["mcse"], rows["verdict"], heights)
    for p, error, verdict, height in zip(*columns, strict=True):
        middle = top + height / 2
        axes.axhline(middle, color=colours().faint, linewidth=0.4, zorder=0)
        _bar(axes, start, _log_odds(p), middle, min(0.15, 0.55 * height), verdict)
        _bracket(axes, _log_odds(p - 2 * error), _log_odds(p + 2 * error), middle)
        top += height
    axes.axvline(start, color=colours().ink, linewidth=1.2, zorder=4)
    axes.set_yticks([])
    shown = TICKS if axes.get_window_extent().width / axes.figure.dpi > 1.5 else (TICKS[0], TICKS[2], TICKS[4])
    axes.set_xticks([_log_odds(p) for p in shown], [f"{p:g}" for p in shown])
    axes.spines[["left", "right", "top"]].set_visible(False)


def _bar(axes: "Axes", start: float, end: float, middle: float, height: float, verdict: str) -> None:
    faces: dict[str, dict[str, Any]] = {
        HOLDS: {"facecolor": colours().ink},
        FAILS: {"facecolor": colours().paper, "hatch": "/////"},
        CLOSE: {"facecolor": colours().paper},
    }
    axes.barh(
        middle, end - start, height, left=start, edgecolor=colours().ink, linewidth=0.9, zorder=3, **faces[verdict]
    )


def _bracket(axes: "Axes", low: float, high: float, middle: float) -> None:
    """Draw a range, with a rim of paper so that it shows on ink; nothing where it would be a mere speck."""
    from matplotlib.patheffects import withStroke

    inches = abs(axes.transData.transform((high, 0))[0] - axes.transData.transform((low, 0))[0])
    if inches / axes.figure.dpi < LEAST_BRACKET:
        return
    rim = [withStroke(linewidth=2.4, foreground=colours().paper)]
    along = [low, low, low, high, high, high]
    across = [middle - 0.05, middle + 0.05, middle, middle, middle - 0.05, middle + 0.05]
    axes.plot(along, across, color=colours().ink, linewidth=1.0, zorder=5, path_effects=rim, clip_on=False)


def _key(sheet: Sheet, top: float) -> None:
    axes = sheet.axes(0, top, sheet.width, 0.24)
    axes.set_xlim(0, sheet.width)
    axes.set_ylim(0.24, 0)
    axes.axis("off")
    left = 0.2
    for verdict, words in (
        (HOLDS, "holds: beyond what is required"),
        (FAILS, "fails: short of it"),
        (CLOSE, "too close to call"),
    ):
        _bar(axes, left, left + 0.3, 0.12, 0.12, verdict)
        sheet.write(words, left + 0.38, top + 0.05, SIZE)
        left += 0.38 + text_width(words, SIZE) + 0.3
    _bracket(axes, left, left + 0.3, 0.12)
    sheet.write("± two Monte Carlo errors, where wide enough to see", left + 0.38, top + 0.05, SIZE)


def _log_odds(probability: float) -> float:
    p = min(max(float(probability), CLIP), 1 - CLIP)
    return float(np.log(p / (1 - p)))


def _end() -> float:
    """Return the end of the scale, a little beyond the last probability drawn."""
    return _log_odds(1 - CLIP) + 0.3


def _text(comparison: ComparisonResult) -> str:
    """Return the picture in words and numbers."""
    claim = comparison.claim
    lines = [f"The claim {claim} requires a probability of {claim.required:g}."]
    count = len(comparison.points.values)
    for k, point in enumerate(comparison.points.values):
        lines += ["", f"{head(point)}:"]
        for _, row in comparison.claimed.iloc[k::count].iterrows():
            probability = probability_text(row["probability"], row["mcse"])
            label = style().named(row["prior"])
            error = f"Monte Carlo error {row['mcse']:.1g}"
            lines.append(f"  {label}: probability {probability}, {error}, {row['verdict']}")
    return "\n".join(lines)
