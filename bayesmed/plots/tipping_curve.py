"""The tipping correlation along a moderator, over the people it stands for."""

from collections.abc import Mapping, Sequence
from typing import Any

import pandas as pd

from bayesmed.conclusions.tipping import TippingResult
from bayesmed.plots.opened import opened
from bayesmed.plots.panels import area_sign, frame, line_sign, minus, some_rows
from bayesmed.plots.people import people
from bayesmed.plots.picture import Picture, colours, drawing, style


def plot_tipping_curve(
    tipping: Any,
    moderator: str,
    values: Sequence[float] | None = None,
    title: str | None = None,
    theme: Any = "blue",
    labels: Mapping[str, str] | None = None,
    ax: Any = None,
) -> Picture:
    """Draw the rho at which the claim tips along a numeric moderator, with how many rows there are at each value.

    Parameters
    ----------
    tipping : Tipping
        Of ``fit.tipping``; moderators that it holds at one value stay there.
    moderator : str
    values : list of float, optional
        Where the curve is found; 41 over the observed range if left out.
    title : str, optional
        In place of the usual one.
    theme : {"blue", "black", "dark"} or Theme
    labels : dict of str to str, optional
        Words in place of names.
    ax : matplotlib.axes.Axes, optional
        Whose place the picture takes; it says how large it must be.

    Returns
    -------
    Picture
    """
    result = opened(tipping, TippingResult, "plot_tipping_curve: tipping= must be what fit.tipping() returned")
    table = result.curve(moderator, values)
    words = title or f"The correlation at which the claim tips, {result.claim}, along {moderator}"
    with drawing(theme, labels, ax):
        named = style().named
        width = f"{100 * result.ci_prob:g} %"
        key = [
            (line_sign(linewidth=2.0), "median of the draws"),
            (area_sign(), f"{width} of the draws"),
            (line_sign(linewidth=1.0, linestyle=(0, (5, 3))), "ρ = 0, nothing left out"),
            (area_sign(hatch="||||", facecolor="none", linewidth=0.0), "rows of the study, below"),
        ]
        made = frame(words, [""], key, height=3.2, along=named(moderator), up="ρ at which the claim tips", usual=6.5)
        axes = made.panels[0]
        x = table[moderator].to_numpy(dtype=float)
        ink, wash = colours().ink, colours().wash
        axes.fill_between(x, table["lower"], table["upper"], facecolor=wash, edgecolor=ink, linewidth=0.8)
        axes.plot(x, table["median"], color=ink, linewidth=2.0)
        axes.axhline(0, color=ink, linewidth=1.0, linestyle=(0, (5, 3)))
        axes.set_ylim(-1.25, 1)
        people(axes, result.result.observed, moderator, -1.25, 0.2)
        minus(axes)
        axes.set_yticks([-1, -0.5, 0, 0.5, 1], ["−1", "−0.5", "0", "0.5", "1"])
        axes.set_xlim(x.min(), x.max())
        return Picture(made.sheet.figure, words, _text(table, named(moderator), moderator, width), colours().paper)


def _text(table: pd.DataFrame, words: str, moderator: str, width: str) -> str:
    lines = [f"The correlation at which the claim tips: median, and {width} of the draws."]
    lines += [
        f"  {words} = {row[moderator]:.4g}: {row['median']:.2f} [{row['lower']:.2f}, {row['upper']:.2f}]"
        for _, row in some_rows(table).iterrows()
    ]
    return "\n".join(lines)
