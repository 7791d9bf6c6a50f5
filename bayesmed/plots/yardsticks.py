"""Unmeasured causes as strong as measured ones, on one scale with the correlation at which the claim tips."""

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from bayesmed.conclusions.tipping import TippingResult
from bayesmed.conclusions.yardsticks import YardsticksResult
from bayesmed.core.errors import ArgumentError
from bayesmed.plots.layout import broken, line_height, sheet_width
from bayesmed.plots.opened import opened
from bayesmed.plots.panels import SIZE, area_sign, frame, head, line_sign, mark_sign, minus
from bayesmed.plots.picture import Picture, colours, drawing, style

if TYPE_CHECKING:
    from matplotlib.axes import Axes

MARKERS = ("v", "o", "s", "D", "^", "P")


def plot_yardsticks(
    yardsticks: Any,
    tipping: Any = None,
    title: str | None = None,
    theme: Any = "blue",
    labels: Mapping[str, str] | None = None,
    ax: Any = None,
) -> Picture:
    """Draw the rho that a cause as strong as each measured covariate would leave, over where the claim tips.

    Parameters
    ----------
    yardsticks : Yardsticks
        Of ``fit.yardsticks``.
    tipping : Tipping, optional
        Of ``fit.tipping``: a line below for each of its moderator points.
    title : str, optional
        In place of the usual one.
    theme : {"blue", "black", "dark"} or Theme
    labels : dict of str to str, optional
        Words in place of names of covariates and moderators.
    ax : matplotlib.axes.Axes, optional
        Whose place the picture takes; it says how large it must be.

    Returns
    -------
    Picture
    """
    table = opened(yardsticks, YardsticksResult, "yardsticks= must be what fit.yardsticks() returned").table
    tips = None
    if tipping is not None:
        tips = opened(tipping, TippingResult, "plot_yardsticks: tipping= must be what fit.tipping() returned")
    strengths = sorted(table["strength"].unique())
    if len(strengths) > len(MARKERS):
        raise ArgumentError(
            f"yardsticks: {len(strengths)} strengths are too many to tell apart; at most {len(MARKERS)}"
        )
    marks = dict(zip(strengths, MARKERS, strict=False))
    words = title or "The ρ that an unmeasured cause would leave, were it as strong as a measured covariate"
    with drawing(theme, labels, ax):
        left = min(2.4, 0.35 * sheet_width(8.0))
        covariates = list(dict.fromkeys(table["covariate"]))
        rows = [style().named(name) for name in covariates]
        rows += [f"tips at {head(point)}" for point in tips.points.values] if tips is not None else []
        lines = [broken(row, SIZE, left - 0.35) for row in rows]
        heights = [max(0.2 * (len(strengths) if k < len(covariates) else 1) + 0.12, len(one) * line_height(SIZE) + 0.08)
                   for k, one in enumerate(lines)]  # fmt: skip
        key = [
            (mark_sign(marker=marks[k], markersize=5.5), f"{k:g} × as strong" if k != 1 else "as strong")
            for k in strengths
        ]
        key.append((line_sign(linewidth=0.9), "95 % of the draws"))
        if tips is not None:
            key.append((area_sign(), f"where draws tip the claim, {tips.claim}: median and {100 * tips.ci_prob:g} %"))
        made = frame(words, [""], key, height=sum(heights), left=left, along="ρ, residual correlation", usual=8.0)
        (axes,) = made.panels
        axes.set_ylim(sum(heights), 0)
        axes.set_xlim(-1, 1)
        down = 0.0
        for k, (one, height) in enumerate(zip(lines, heights, strict=True)):
            made.name_row(one, 0, down, height)
            if k < len(covariates):
                _causes(axes, table[table["covariate"] == covariates[k]], marks, down, height)
            elif tips is not None:
                _tips(axes, tips.table.iloc[k - len(covariates)], down, height)
            down += height
            axes.axhline(down, color=colours().faint, linewidth=0.4)
        axes.axvline(0, color=colours().ink, linewidth=0.6)
        minus(axes)
        axes.set_yticks([])
        axes.spines["left"].set_visible(False)
        return Picture(made.sheet.figure, words, _text(table, tips), colours().paper)


def _causes(axes: "Axes", rows: Any, marks: dict[float, str], down: float, height: float) -> None:
    for place, (_, row) in enumerate(rows.sort_values("strength").iterrows()):
        if not np.isfinite(row["rho"]):
            continue
        y = down + height * (place + 0.75) / (len(rows) + 0.5)
        axes.plot([row["lower"], row["upper"]], [y, y], color=colours().ink, linewidth=0.9)
        axes.plot([row["rho"]], [y], marker=marks[row["strength"]], markersize=5.5, color=colours().ink, linestyle="")


def _tips(axes: "Axes", row: Any, down: float, height: float) -> None:
    if not np.isfinite(row["median"]):
        return
    box: dict[str, Any] = {"facecolor": colours().wash, "edgecolor": colours().ink, "linewidth": 0.8}
    axes.barh(down + height / 2, row["upper"] - row["lower"], 0.6 * height, left=row["lower"], **box)
    ends = [down + 0.2 * height, down + 0.8 * height]
    axes.plot([row["median"]] * 2, ends, color=colours().ink, linewidth=2.2, solid_capstyle="butt")


def _text(table: Any, tips: TippingResult | None) -> str:
    lines = ["The ρ that an unmeasured cause would leave: median, and 95 % of the draws."]
    for _, row in table.iterrows():
        found = f"{row['rho']:.2f} [{row['lower']:.2f}, {row['upper']:.2f}]"
        shown = found if np.isfinite(row["rho"]) else "no such cause can exist"
        lines.append(f"  {row['strength']:g} × as strong as {style().named(row['covariate'])}: {shown}")
    if tips is not None:
        lines.append(f"Where draws tip the claim {tips.claim}: median, and {100 * tips.ci_prob:g} % of them.")
        for point, (_, row) in zip(tips.points.values, tips.table.iterrows(), strict=True):
            lines.append(f"  {head(point)}: {row['median']:.2f} [{row['lower']:.2f}, {row['upper']:.2f}]")
    return "\n".join(lines)
