"""How an effect moves with the residual correlation, each value drawn with the ink that beliefs give."""

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from bayesmed.conclusions.claim import Claim, as_claim
from bayesmed.conclusions.summary import checked_width
from bayesmed.conclusions.words import number_text, probability_text
from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array
from bayesmed.fit.result import FitResult
from bayesmed.plots.layout import Sheet, broken, line_height, sheet_width, text_width
from bayesmed.plots.opened import opened
from bayesmed.plots.panels import head
from bayesmed.plots.picture import Picture, colours, drawing, style
from bayesmed.plots.strokes import Strokes, shape, strokes
from bayesmed.priors.accept import coerce
from bayesmed.study.points import Points, points

if TYPE_CHECKING:
    from matplotlib.axes import Axes

WIDTH = 9.0
PANEL_HEIGHT, STRIP_HEIGHT = 2.6, 0.34
LEFT, RIGHT, GAP = 2.0, 0.25, 0.3
"""Inches: the margin that holds beliefs' labels, the right margin, the gap between columns."""
TITLE_SIZE, HEAD_SIZE, SIZE, SMALL = 11.0, 9.0, 8.0, 7.5
LEAST_WEIGHT_SHOWN_WHOLE = 0.12
"""Strokes with less weight than this may run out of the frame: they do not set its height."""


def plot_effect_by_rho(
    fit: Any,
    beliefs: Mapping[str, Any],
    at: Any = None,
    claim: Claim | None = None,
    ci_prob: float = 0.95,
    rho: Sequence[float] | None = None,
    title: str | None = None,
    theme: Any = "blue",
    labels: Mapping[str, str] | None = None,
    ax: Any = None,
) -> Picture:
    """Draw how the claim's effect moves with rho at each moderator point, above the beliefs about rho.

    Each stroke is the effect at one rho: a thin line for the interval, a block for its middle half, a notch
    at the median. Its width is what the beliefs together make of that rho. A filled block says that at this
    rho the claim reaches the probability it requires; an open one that it does not.

    Parameters
    ----------
    fit : Fit
    beliefs : dict of str to prior
    at : dict, optional
        Moderator points; their defaults if left out.
    claim : Claim, optional
    ci_prob : float
        Probability of the interval.
    rho : list of numbers, optional
        Where the strokes stand; -0.9, -0.8, …, 0.9 if left out.
    title : str, optional
        In place of the usual one.
    theme : {"blue", "black", "dark"} or Theme
    labels : dict of str to str, optional
        Words in place of names of beliefs, moderators, mediator and outcome.
    ax : matplotlib.axes.Axes, optional
        Whose place the picture takes; it says how large it must be.

    Returns
    -------
    Picture
    """
    result = opened(fit, FitResult, "plot_effect_by_rho: fit= must be a Fit")
    if not isinstance(beliefs, Mapping) or not beliefs:
        raise ArgumentError(f"beliefs={beliefs!r} must be a dict of label → prior with at least one belief")
    accepted = {str(label): coerce(belief) for label, belief in beliefs.items()}
    chosen, stated, width = points(result.observed, at), as_claim(claim), checked_width(ci_prob)
    made = strokes(result, accepted, chosen, stated, width, rho)
    observed = result.observed
    usual = (
        f"{stated.effect.replace('_', ' ').capitalize()} effect of {observed.exposure} "
        f"({observed.contrast[0]} → {observed.contrast[1]}) on {observed.outcome_name}, by what is believed "
        "about ρ"
    )
    with drawing(theme, labels, ax):
        named = style().named
        mediator, outcome = named(observed.mediator_name), named(observed.outcome_name)
        axis, unit = f"ρ, residual correlation of {mediator} and {outcome}", f"effect, units of {outcome}"
        figure = _draw(made, accepted, chosen, stated, width, title or usual, axis, unit)
        return Picture(figure, title or usual, _text(made, accepted, chosen, stated, width), colours().paper)


def _draw(
    made: Strokes,
    beliefs: Mapping[str, Any],
    chosen: Points,
    claim: Claim,
    ci_prob: float,
    title: str,
    axis: str,
    unit: str,
) -> Any:
    count = len(chosen.values)
    columns = count if count <= 3 else 2 if count == 4 else 3
    rows = -(-count // columns)
    sheet_across = sheet_width(WIDTH, WIDTH)
    column_width = (sheet_across - LEFT - RIGHT - GAP * (columns - 1)) / columns
    title_lines = broken(title, TITLE_SIZE, sheet_across - 0.4, "bold")
    heads = [broken(head(point), HEAD_SIZE, column_width, "bold") for point in chosen.values]
    head_rows = [max(len(h) for h in heads[r * columns : (r + 1) * columns]) for r in range(rows)]
    labels = [broken(style().named(label), SIZE, LEFT - 0.35) for label in beliefs]
    strip_heights = [max(STRIP_HEIGHT, len(lines) * line_height(SIZE) + 0.1) for lines in labels]
    axis_lines = broken(axis, SIZE, sheet_across - LEFT - RIGHT)

    title_top = 0.15
    key_top = title_top + len(title_lines) * line_height(TITLE_SIZE) + 0.1
    panel_tops, top = [], key_top + 2 * 0.24 + 0.1
    for deepest in head_rows:
        top += deepest * line_height(HEAD_SIZE) + 0.06
        panel_tops.append(top)
        top += PANEL_HEIGHT + 0.3
    strip_top = top + line_height(SIZE)
    bottom = strip_top + sum(strip_heights)
    sheet = Sheet(sheet_across, bottom + 0.28 + len(axis_lines) * line_height(SIZE) + 0.12)

    sheet.write(title_lines, 0.2, title_top, TITLE_SIZE, weight="bold")
    _key(sheet, key_top, claim, ci_prob)
    lefts = [LEFT + c * (column_width + GAP) for c in range(columns)]
    limits = _vertical_limits(made, claim)
    for k, lines in enumerate(heads):
        row, column = divmod(k, columns)
        over = panel_tops[row] - len(lines) * line_height(HEAD_SIZE) - 0.05
        sheet.write(lines, lefts[column], over, HEAD_SIZE, weight="bold")
        panel = sheet.axes(lefts[column], panel_tops[row], column_width, PANEL_HEIGHT)
        _panel(panel, made, k, claim, limits, show_values=column == 0)
        if column == 0:
            panel.set_ylabel(
                unit if text_width(unit, SMALL) < PANEL_HEIGHT else "effect", fontsize=SMALL, color=colours().ink
            )
    beside = LEFT - 0.12
    sheet.write("beliefs about ρ", beside, strip_top - line_height(SIZE), SIZE, style="italic", ha="right")
    top = strip_top
    for lines, height, belief in zip(labels, strip_heights, beliefs.values(), strict=True):
        middle = top + (height - len(lines) * line_height(SIZE)) / 2
        sheet.write(lines, beside, middle, SIZE, ha="right")
        for left in lefts:
            _belief(sheet.axes(left, top + height - STRIP_HEIGHT, column_width, STRIP_HEIGHT), belief, made)
        top += height
    for left in lefts:
        scale = sheet.axes(left, bottom, column_width, 0.01)
        _rho_axis(scale, made)
        scale.spines[["left", "right", "bottom"]].set_visible(False)
        scale.set_yticks([])
    sheet.write(axis_lines, LEFT, bottom + 0.28, SIZE)
    return sheet.figure


def _panel(
    axes: "Axes", made: Strokes, k: int, claim: Claim, limits: tuple[float, float], *, show_values: bool
) -> None:
    """Draw the strokes of one moderator point."""
    from matplotlib.ticker import FuncFormatter, MaxNLocator

    axes.set_ylim(*limits)
    axes.axhline(claim.limit, color=colours().ink, linewidth=0.8, linestyle=(0, (5, 3)), zorder=1)
    inches = axes.get_window_extent().width / axes.figure.dpi
    per_unit = inches / (made.edges[-1] - made.edges[0])
    for j, rho in enumerate(made.rho):
        low, quarter, median, three_quarters, high = made.quantiles[k, j]
        weight, room = made.weight[j], 0.82 * (made.edges[j + 1] - made.edges[j])
        reached = made.probability[k, j] >= claim.required
        axes.plot([rho, rho], [low, high], color=colours().shade(2 * weight), linewidth=0.5 + 1.3 * weight, zorder=2,
                  solid_capstyle="butt")  # fmt: skip
        wide = room * weight
        if wide * per_unit * 72 < 1.0:
            continue
        ink, paper = colours().ink, colours().paper
        axes.bar(rho, three_quarters - quarter, wide, bottom=quarter, facecolor=ink if reached else paper,
                 edgecolor=ink, linewidth=0.8, zorder=3)  # fmt: skip
        axes.plot([rho - wide / 2, rho + wide / 2], [median, median], color=paper if reached else ink,
                  linewidth=1.1, zorder=4, solid_capstyle="butt")  # fmt: skip
    _rho_axis(axes, made)
    axes.spines[["top", "right"]].set_visible(False)
    axes.yaxis.set_major_locator(MaxNLocator(5))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:.4g}".replace("-", "−")))
    axes.tick_params(axis="y", labelleft=show_values)


def _belief(axes: "Axes", belief: Any, made: Strokes) -> None:
    """Draw one belief's shape: a hatched hill, and a stem with a dot for a value of its own."""
    edges, height, atoms = shape(belief, made.edges[0], made.edges[-1])
    axes.stairs(
        0.8 * height, edges, fill=True, facecolor=colours().wash, edgecolor=colours().ink, linewidth=0.8, hatch="////"
    )
    for value, probability in atoms:
        axes.plot([value, value], [0, 0.75 * probability], color=colours().ink, linewidth=1.6)
        axes.plot([value], [0.75 * probability], marker="o", markersize=3.5, color=colours().ink)
    axes.axvline(0, color=colours().faint, linewidth=0.5, zorder=0)
    axes.set_xlim(made.edges[0], made.edges[-1])
    axes.set_ylim(0, 1)
    axes.set_xticks([])
    axes.set_yticks([])
    axes.spines[["left", "right", "top"]].set_visible(False)


def _rho_axis(axes: "Axes", made: Strokes) -> None:
    from matplotlib.ticker import FuncFormatter, MaxNLocator

    axes.set_xlim(made.edges[0], made.edges[-1])
    axes.xaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 4, 5, 10]))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{round(value, 6):g}".replace("-", "−")))


def _key(sheet: Sheet, top: float, claim: Claim, ci_prob: float) -> None:
    """Draw in two lines what the strokes mean."""
    glyph, step = 0.3, 0.24
    axes = sheet.axes(0, top, sheet.width, 2 * step)
    axes.set_xlim(0, sheet.width)
    axes.set_ylim(2 * step, 0)
    axes.axis("off")
    verdicts = (
        (colours().ink, colours().paper, f"filled: at this ρ, {claim} has probability {claim.required:g} or more"),
        (colours().paper, colours().ink, "open: less than that"),
    )
    left = 0.2
    for face, notch, words in verdicts:
        axes.add_patch(_block(left, 0.06, 0.16, 0.14, face))
        axes.plot([left, left + 0.16], [0.13, 0.13], color=notch, linewidth=1.1)
        sheet.write(words, left + glyph, top + 0.06, SIZE)
        left += glyph + text_width(words, SIZE) + 0.35
    axes.plot([left, left + 0.3], [0.13, 0.13], color=colours().ink, linewidth=0.8, linestyle=(0, (5, 3)))
    sheet.write(f"limit {claim.limit:g}", left + 0.38, top + 0.06, SIZE)
    left = 0.2
    for k, wide in enumerate((0.03, 0.08, 0.14)):
        axes.add_patch(_block(left + 0.17 * k, step + 0.06, wide, 0.14, colours().faint))
    words = (
        f"width: how much the beliefs together make of this ρ; line {100 * ci_prob:g} %, block 50 % "
        "interval, notch median"
    )
    sheet.write(words, left + 0.6, top + step + 0.06, SIZE)


def _block(left: float, top: float, width: float, height: float, face: str) -> Any:
    from matplotlib.patches import Rectangle

    return Rectangle((left, top), width, height, facecolor=face, edgecolor=colours().ink, linewidth=0.8)


def _vertical_limits(made: Strokes, claim: Claim) -> tuple[float, float]:
    """Return limits that hold every stroke with some belief behind it, and the claim's limit."""
    seen: Array = made.quantiles[:, made.weight >= LEAST_WEIGHT_SHOWN_WHOLE]
    low, high = min(seen.min(), claim.limit), max(seen.max(), claim.limit)
    margin = 0.05 * (high - low) or 1.0
    return float(low - margin), float(high + margin)


def _text(made: Strokes, beliefs: Mapping[str, Any], chosen: Points, claim: Claim, ci_prob: float) -> str:
    """Return the picture in words and numbers."""
    lines = [
        f"The {claim.effect.replace('_', ' ')} effect at fixed ρ: median, {100 * ci_prob:g} % interval, "
        f"probability of {claim} (the claim requires {claim.required:g}), and the weight of that ρ, which is "
        "how much the beliefs together make of it (1 at the most). Strokes of less than "
        f"{LEAST_WEIGHT_SHOWN_WHOLE:g} in weight may leave the frame."
    ]
    for k, point in enumerate(chosen.values):
        lines += ["", f"{head(point)}:"]
        for j, rho in enumerate(made.rho):
            low, _, median, _, high = (number_text(float(v)) for v in made.quantiles[k, j])
            lines.append(
                f"  ρ = {rho:g}: {median} [{low}, {high}], probability "
                f"{probability_text(float(made.probability[k, j]))}, weight {made.weight[j]:.2f}"
            )
    lines += ["", "Beliefs about ρ: median and 90 % interval:"]
    lines += [f"  {style().named(label)}: {_in_numbers(belief)}" for label, belief in beliefs.items()]
    return "\n".join(lines)


def _in_numbers(belief: Any) -> str:
    low, median, high = (float(v) for v in belief.ppf(np.array([0.05, 0.5, 0.95])))
    return f"{median:.2f} [{low:.2f}, {high:.2f}]" if low < high else f"exactly {median:g}"
