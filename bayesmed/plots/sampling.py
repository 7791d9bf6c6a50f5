"""Whether the sampler can be trusted: effective draws and r-hat of everything that is watched."""

from collections.abc import Mapping
from typing import Any

from bayesmed.core.errors import ArgumentError
from bayesmed.fit.diagnose import LARGEST_RHAT, LEAST_ESS, rank_diagnostics
from bayesmed.fit.result import FitResult
from bayesmed.plots.layout import broken, line_height, sheet_width
from bayesmed.plots.opened import opened
from bayesmed.plots.panels import SIZE, frame, line_sign, mark_sign, minus
from bayesmed.plots.picture import Picture, colours, drawing


def plot_sampling(
    fit: Any,
    title: str | None = None,
    theme: Any = "blue",
    labels: Mapping[str, str] | None = None,
    ax: Any = None,
) -> Picture:
    """Draw how many independent draws each quantity is worth, in its middle and its tails, and its r-hat.

    Rank-normalised, by Vehtari et al. 2021 (doi:10.1214/20-BA1221), as ArviZ computes them.

    Parameters
    ----------
    fit : Fit
        By NUTS, with two chains or more.
    title : str, optional
        In place of the usual one.
    theme : {"blue", "black", "dark"} or Theme
    labels : dict of str to str, optional
        Not used: quantities keep the names they have in ``fit.posterior``.
    ax : matplotlib.axes.Axes, optional
        Whose place the picture takes; it says how large it must be.

    Returns
    -------
    Picture
    """
    result = opened(fit, FitResult, "plot_sampling: fit= must be a Fit")
    table = rank_diagnostics(result)
    if table is None:
        raise ArgumentError(
            "plot_sampling: independent draws, those of one chain and those by group have no diagnostics"
        )
    words = title or "How many independent draws each quantity is worth"
    with drawing(theme, labels, ax):
        left = min(2.6, 0.4 * sheet_width(8.0))
        lines = [broken(name, SIZE, left - 0.35) for name in table["quantity"]]
        heights = [len(one) * line_height(SIZE) + 0.08 for one in lines]
        key = [
            (mark_sign(marker="o", markersize=5), "in the middle"),
            (mark_sign(marker="D", markersize=4.5, markerfacecolor=colours().paper), "in the tails"),
            (line_sign(linewidth=1.0, linestyle=(0, (5, 3))), f"least that is advised, {LEAST_ESS}"),
        ]
        along = "effective draws; numbers: r-hat"
        made = frame(words, [""], key, height=sum(heights), left=left, along=along, usual=8.0)
        (axes,), ((across, top),) = made.panels, made.places
        most = float(table[["bulk", "tail"]].to_numpy().max())
        axes.set_ylim(sum(heights), 0)
        axes.set_xlim(0, 1.18 * max(most, LEAST_ESS))
        axes.axvline(LEAST_ESS, color=colours().ink, linewidth=1.0, linestyle=(0, (5, 3)))
        down = 0.0
        for one, high, (_, row) in zip(lines, heights, table.iterrows(), strict=True):
            made.name_row(one, 0, down, high)
            y = down + high / 2
            axes.plot([0, max(row["bulk"], row["tail"])], [y, y], color=colours().faint, linewidth=0.5, zorder=0)
            axes.plot([row["bulk"]], [y], marker="o", markersize=5, color=colours().ink)
            axes.plot([row["tail"]], [y], marker="D", markersize=4.5, color=colours().ink,
                      markerfacecolor=colours().paper)  # fmt: skip
            weight = "bold" if row["rhat"] > LARGEST_RHAT else "normal"
            shown = f"{row['rhat']:.3f}" + (" !" if row["rhat"] > LARGEST_RHAT else "")
            made.sheet.write(shown, across + made.width - 0.02, top + y - line_height(SIZE) / 2, SIZE, ha="right",
                             weight=weight)  # fmt: skip
            down += high
        minus(axes)
        axes.set_yticks([])
        text = [
            f"  {row['quantity']}: {row['bulk']:.0f} in the middle, {row['tail']:.0f} in the tails, "
            f"r-hat {row['rhat']:.3f}"
            for _, row in table.iterrows()
        ]
        advised = f"Effective draws (at least {LEAST_ESS} are advised) and r-hat (at most {LARGEST_RHAT})."
        return Picture(made.sheet.figure, words, "\n".join([advised, *text]), colours().paper)
