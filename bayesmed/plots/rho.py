"""What was believed about rho before the data, and what is believed after them."""

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from bayesmed.conclusions.comparison import ComparisonResult
from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array
from bayesmed.plots.layout import broken, line_height, sheet_width
from bayesmed.plots.opened import opened
from bayesmed.plots.panels import SIZE, area_sign, frame, line_sign, minus
from bayesmed.plots.picture import Picture, colours, drawing, style
from bayesmed.plots.strokes import shape
from bayesmed.priors.by_group import ByGroup

if TYPE_CHECKING:
    from matplotlib.axes import Axes

STRIP = 0.5
"""Inches of a belief's strip."""
BINS = np.linspace(-1, 1, 81)


def plot_rho(
    comparison: Any,
    title: str | None = None,
    theme: Any = "blue",
    labels: Mapping[str, str] | None = None,
    ax: Any = None,
) -> Picture:
    """Draw each belief about rho and what the data made of it; where they are silent the two are the same, exactly.

    Parameters
    ----------
    comparison : Comparison
        Of ``fit.compare``.
    title : str, optional
        In place of the usual one.
    theme : {"blue", "black", "dark"} or Theme
    labels : dict of str to str, optional
        Words in place of names of beliefs.
    ax : matplotlib.axes.Axes, optional
        Whose place the picture takes; it says how large it must be.

    Returns
    -------
    Picture
    """
    result = opened(comparison, ComparisonResult, "plot_rho: comparison= must be what fit.compare() returned")
    if any(isinstance(belief, ByGroup) for belief in result.beliefs.values()):
        raise ArgumentError("plot_rho: beliefs that differ by group have no one rho; comparison.rho has the table")
    informed = result.result.joint and result.result.settings.learn
    words = title or "ρ before the data and after them"
    with drawing(theme, labels, ax):
        left = min(2.2, 0.35 * sheet_width(7.5))
        named = [broken(style().named(label), SIZE, left - 0.35) for label in result.beliefs]
        heights = [max(STRIP, len(lines) * line_height(SIZE) + 0.08) for lines in named]
        key = [(area_sign(), "belief before the data")]
        after = "belief after them" if informed else "after them: the same, as these data are silent on ρ"
        key.append((line_sign(linewidth=1.8), after))
        made = frame(words, [""], key, height=sum(heights), left=left, along="ρ, residual correlation", usual=7.5)
        (axes,) = made.panels
        axes.set_ylim(sum(heights), 0)
        axes.set_xlim(-1, 1)
        down = 0.0
        for (label, belief), lines, high in zip(result.beliefs.items(), named, heights, strict=True):
            made.name_row(lines, 0, down, high)
            down += high
            seen = result.views[label]
            drawn = (seen.rho, seen.weights) if informed and seen.rho is not None else None
            _strip(axes, belief, drawn, down)
        minus(axes)
        axes.set_yticks([])
        axes.spines["left"].set_visible(False)
        return Picture(made.sheet.figure, words, _text(result, informed), colours().paper)


def _strip(axes: "Axes", belief: Any, drawn: tuple[Array, Array | None] | None, foot: float) -> None:
    edges, height, atoms = shape(belief, -1.0, 1.0)
    after: tuple[Array, Array] = (height, edges)
    if drawn is not None:
        after = np.histogram(drawn[0], BINS, weights=drawn[1], density=True)
        # On one scale: the belief's own density is what its height stands for.
        middle = (edges[1:] + edges[:-1]) / 2
        peak = float(np.max(belief.pdf(middle), where=np.isfinite(belief.pdf(middle)), initial=0.0))
        height, after = height * peak, (after[0], BINS)
    most = max(height.max(initial=0.0), after[0].max(initial=0.0)) or 1.0
    scale = 0.85 * STRIP / most
    if height.any():
        axes.stairs(foot - scale * height, edges, baseline=foot, fill=True, facecolor=colours().wash,
                    edgecolor=colours().wash, linewidth=0.8)  # fmt: skip
        axes.stairs(foot - scale * after[0], after[1], baseline=foot, color=colours().ink, linewidth=1.8)
    for value, probability in atoms:
        axes.plot([value, value], [foot, foot - 0.75 * STRIP * probability], color=colours().ink, linewidth=1.8)
    axes.axhline(foot, color=colours().faint, linewidth=0.5)


def _text(result: ComparisonResult, informed: bool) -> str:
    lines = ["Mean and SD of ρ before the data" + (" and after them." if informed else "; the data are silent on it.")]
    for _, row in result.rho.iterrows():
        line = f"  {style().named(row['prior'])}: {row['prior_mean']:.2f} and {row['prior_sd']:.2f}"
        after = f", then {row['posterior_mean']:.2f} and {row['posterior_sd']:.2f}" if informed else ""
        lines.append(line + after)
    return "\n".join(lines)
