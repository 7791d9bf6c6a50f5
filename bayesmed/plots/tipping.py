"""Where the claim tips, above the beliefs: how much of each belief lies on the side where the claim is true."""

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from bayesmed.conclusions.tipping import TippingResult
from bayesmed.conclusions.words import probability_text
from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array
from bayesmed.plots.layout import broken, line_height, sheet_width
from bayesmed.plots.opened import opened
from bayesmed.plots.panels import SIZE, area_sign, frame, head, line_sign
from bayesmed.plots.picture import Picture, colours, drawing, style
from bayesmed.plots.strokes import shape
from bayesmed.priors.accept import coerce

if TYPE_CHECKING:
    from matplotlib.axes import Axes

HILL = 0.34
"""Inches of a belief's strip."""
BINS = np.linspace(-1, 1, 81)
NUMBER = 0.5
"""Inches at the right end of a strip for its probability."""


def plot_tipping(
    tipping: Any,
    beliefs: Mapping[str, Any],
    title: str | None = None,
    theme: Any = "blue",
    labels: Mapping[str, str] | None = None,
    ax: Any = None,
) -> Picture:
    """Draw at which rho the posterior draws tip the claim, and under it each belief about rho.

    Above, the tipping distribution; the line through everything is its median. Below, a belief is hatched where the
    claim is true at the median draw and blank where it is not; beside it stands the probability over all draws.

    Parameters
    ----------
    tipping : Tipping
        Of ``fit.tipping``.
    beliefs : dict of str to prior
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
    result = opened(tipping, TippingResult, "plot_tipping: tipping= must be what fit.tipping() returned")
    if not isinstance(beliefs, Mapping) or not beliefs:
        raise ArgumentError(f"beliefs={beliefs!r} must be a dict of label → prior with at least one belief")
    accepted = {str(label): coerce(belief) for label, belief in beliefs.items()}
    found = {label: result.probability(belief) for label, belief in accepted.items()}
    words = title or f"The correlation at which the claim tips, {result.claim}, and what is believed about it"
    with drawing(theme, labels, ax):
        figure = _draw(result, accepted, found, words)
        text = _text(result, found)
        return Picture(figure, words, text, colours().paper)


def _draw(result: TippingResult, beliefs: dict[str, Any], found: dict[str, Any], title: str) -> Any:
    left = min(2.2, 0.3 * sheet_width(9.0))
    named = [broken(style().named(label), SIZE, left - 0.35) for label in beliefs]
    heights = [max(HILL, len(lines) * line_height(SIZE) + 0.08) for lines in named]
    key = [
        (area_sign(), "draws that tip at this ρ"),
        (line_sign(linewidth=1.2, linestyle=(0, (4, 2))), "the median of them"),
        (area_sign(hatch="/////"), "belief in a ρ at which the claim is true at the median"),
        (area_sign(facecolor=colours().paper), "belief in a ρ at which it is false"),
    ]
    tall = 1.1 + sum(heights) + 0.1
    made = frame(
        title, [head(point) for point in result.points.values], key, height=tall, left=left,
        along=f"ρ, residual correlation of {style().named(result.result.observed.mediator_name)} and "
        f"{style().named(result.result.observed.outcome_name)}; numbers: probability of the claim",
    )  # fmt: skip
    sheet = made.sheet
    for k, (panel, (across, top)) in enumerate(zip(made.panels, made.places, strict=True)):
        # Right of ρ = 1 there is room for the probabilities.
        end = 1 + 2 * NUMBER / (made.width - NUMBER)
        _panel(panel, result, k, tall, end)
        row_top = top + 1.2
        for (label, belief), lines, high in zip(beliefs.items(), named, heights, strict=True):
            if made.leftmost(k):
                made.name_row(lines, k, row_top - top, high)
            strip = sheet.axes(across, row_top + high - HILL, made.width, HILL)
            _hill(strip, belief, result, k)
            strip.set_xlim(-1, end)
            row = found[label].iloc[k]
            shown = probability_text(row["probability"], row["mcse"])
            sheet.write(shown, across + made.width - 0.04, row_top + high - line_height(SIZE) - 0.06, SIZE, ha="right")
            row_top += high
    return sheet.figure


def _panel(axes: "Axes", result: TippingResult, k: int, tall: float, end: float) -> None:
    crossings = result.crossings[k]
    crossings = crossings[np.isfinite(crossings)]
    counts = np.histogram(crossings, BINS)[0] if len(crossings) else np.zeros(len(BINS) - 1)
    share = 1.0 / tall
    heights = 1 - share * (1 - counts / max(counts.max(), 1))
    axes.stairs(heights, BINS, baseline=1 - share, fill=True, facecolor=colours().wash, edgecolor=colours().ink,
                linewidth=0.8)  # fmt: skip
    axes.plot([-1, 1], [1 - share, 1 - share], color=colours().ink, linewidth=0.6)
    axes.axvline(0, color=colours().faint, linewidth=0.5)
    if len(crossings):
        axes.axvline(float(np.median(crossings)), color=colours().ink, linewidth=1.2, linestyle=(0, (4, 2)), zorder=5)
    axes.set_xlim(-1, end)
    axes.set_ylim(0, 1)
    axes.set_xticks([-0.8, -0.4, 0, 0.4, 0.8], ["−0.8", "−0.4", "0", "0.4", "0.8"])
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.spines["bottom"].set_bounds(-1, 1)


def _hill(axes: "Axes", belief: Any, result: TippingResult, k: int) -> None:
    """Draw a belief's shape, hatched on the side where the claim is true at the median draw."""
    edges, height, atoms = shape(belief, -1.0, 1.0)
    true = _true_at(result, k, (edges[1:] + edges[:-1]) / 2)
    ink = colours().ink
    looks: tuple[dict[str, Any], ...] = ({"facecolor": "none"}, {"facecolor": colours().wash, "hatch": "/////"})
    for side, look in enumerate(looks):
        part = np.where(true == side, 0.85 * height, 0.0)
        if part.any():
            axes.stairs(part, edges, fill=True, edgecolor=ink, linewidth=0.8, **look)
    for value, probability in atoms:
        filled = bool(_true_at(result, k, np.array([value]))[0])
        axes.plot([value, value], [0, 0.75 * probability], color=ink, linewidth=1.4)
        axes.plot([value], [0.75 * probability], marker="o", markersize=4, color=ink,
                  markerfacecolor=ink if filled else colours().paper)  # fmt: skip
    axes.set_ylim(0, 1)
    axes.set_axis_off()


def _true_at(result: TippingResult, k: int, rho: Array) -> Array:
    """Return whether the claim is true at each rho, were the median of the tipping draws the place where it tips."""
    constant, slope = (line[k] for line in result.lines)
    if not np.isfinite(result.crossings[k]).any():
        return np.full(rho.shape, bool(result.claim.true_of(np.median(constant))))
    tips = np.nanmedian(result.crossings[k])
    falls = (np.median(slope) > 0) == (result.claim.direction == "above")
    return np.asarray(rho < tips if falls else rho > tips)


def _text(result: TippingResult, found: dict[str, Any]) -> str:
    lines = [f"The claim is {result.claim}."]
    for k, point in enumerate(result.points.values):
        row = result.table.iloc[k]
        lines += [
            "",
            f"{head(point)}: tips at {row['median']:.2f} ({100 * result.ci_prob:g} % of draws between "
            f"{row['lower']:.2f} and {row['upper']:.2f}).",
        ]
        for label, table in found.items():
            one = table.iloc[k]
            lines.append(
                f"  {style().named(label)}: probability {probability_text(one['probability'], one['mcse'])}, "
                f"Monte Carlo error {one['mcse']:.1g}"
            )
    return "\n".join(lines)
