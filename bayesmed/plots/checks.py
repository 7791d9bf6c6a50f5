"""Whether the two regressions describe the rows: values they predict beside those seen, and spread along variables."""

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array
from bayesmed.fit.result import FitResult
from bayesmed.plots.opened import opened
from bayesmed.plots.panels import area_sign, frame, line_sign, mark_sign, minus
from bayesmed.plots.picture import Picture, colours, drawing, style
from bayesmed.study.spread import Spread, residual_spread

if TYPE_CHECKING:
    from matplotlib.axes import Axes

REPEATS = 100
MOST_ROWS = 20_000
"""Rows that predictions are made for; of more, so many at equal distances."""
BARS = 30


def plot_predictions(
    fit: Any,
    title: str | None = None,
    theme: Any = "blue",
    labels: Mapping[str, str] | None = None,
    ax: Any = None,
) -> Picture:
    """Draw the mediator and the outcome as they were seen, and as the fit predicts them for the same people.

    The prediction of the outcome is that given the mediator seen. Nothing in it depends on rho.

    Parameters
    ----------
    fit : Fit
    title : str, optional
        In place of the usual one.
    theme : {"blue", "black", "dark"} or Theme
    labels : dict of str to str, optional
        Words in place of names of mediator and outcome.
    ax : matplotlib.axes.Axes, optional
        Whose place the picture takes; it says how large it must be.

    Returns
    -------
    Picture
    """
    result = opened(fit, FitResult, "plot_predictions: fit= must be a Fit")
    observed = result.observed
    if observed.published is not None or "group" in result.posterior.dims:
        raise ArgumentError("plot_predictions: needs the rows of the study and one fit for all of them")
    names = (observed.mediator_name, observed.outcome_name)
    both = [_counted(seen, drawn) for seen, drawn in _repeats(result)]
    words = title or "Values seen, and values the fit predicts for the same people"
    with drawing(theme, labels, ax):
        key = [
            (area_sign(), "seen"),
            (line_sign(linewidth=2.2), f"predicted: 90 % of {REPEATS} repeats"),
            (mark_sign(marker="o", markersize=4.5, markerfacecolor=colours().paper), "seen, outside them"),
        ]
        heads = [f"{role}: {style().named(name)}" for role, name in zip(("mediator", "outcome"), names, strict=True)]
        made = frame(words, heads, key, height=2.3, up="rows", left=0.8)
        for axes, (edges, counts, low, high) in zip(made.panels, both, strict=True):
            axes.tick_params(axis="y", labelleft=True)
            _bars(axes, edges, counts, low, high)
        lines = [_said(head, found) for head, found in zip(heads, both, strict=True)]
        return Picture(made.sheet.figure, words, "\n".join(lines), colours().paper)


def plot_spread(
    fit: Any,
    title: str | None = None,
    theme: Any = "blue",
    labels: Mapping[str, str] | None = None,
    ax: Any = None,
) -> Picture:
    """Draw the residual SD of both regressions by exposure and along each moderator.

    One rho stands for everyone only where these do not differ.

    Parameters
    ----------
    fit : Fit
    title : str, optional
        In place of the usual one.
    theme : {"blue", "black", "dark"} or Theme
    labels : dict of str to str, optional
        Words in place of names of columns.
    ax : matplotlib.axes.Axes, optional
        Whose place the picture takes; it says how large it must be.

    Returns
    -------
    Picture
    """
    result = opened(fit, FitResult, "plot_spread: fit= must be a Fit")
    if result.observed.published is not None:
        raise ArgumentError("plot_spread: needs the rows of the study; this one is known by published figures")
    found = residual_spread(result.observed)
    if not found:
        raise ArgumentError("plot_spread: no group has rows enough to compare residuals")
    return spread_drawn(found, title, theme, labels, ax)


def spread_drawn(
    found: Sequence[Spread],
    title: str | None = None,
    theme: Any = "blue",
    labels: Mapping[str, str] | None = None,
    ax: Any = None,
) -> Picture:
    """Draw comparisons of residual spread that were made before, as an audit makes them; see :func:`plot_spread`."""
    words = title or "Residual spread of both regressions, by exposure and moderator"
    with drawing(theme, labels, ax):
        named = style().named
        heads = [f"{one.equation}, by {named(one.along)}" for one in found]
        key = [
            (mark_sign(marker="o", markersize=5), "residual SD of a group or a third of the rows"),
            (mark_sign(marker="D", markersize=6.5), "the same, where it differs beyond chance (p < 0.01)"),
        ]
        tall = 0.24 * max(len(one.sds) for one in found) + 0.25
        made = frame(words, heads, key, height=tall, left=0.3, along="residual SD")
        for axes, one in zip(made.panels, found, strict=True):
            for k, (group, sd) in enumerate(one.sds.items()):
                axes.plot([0, sd], [k, k], color=colours().faint, linewidth=0.6)
                axes.plot([sd], [k], marker="D" if one.notable else "o", markersize=6.5 if one.notable else 5,
                          color=colours().ink, linestyle="")  # fmt: skip
                axes.text(0, k - 0.16, f" {group}", fontsize=7, color=colours().ink, va="bottom", parse_math=False)
            axes.set_ylim(len(one.sds) - 0.3, -0.9)
            axes.set_xlim(0, 1.15 * max(one.sds.values()))
            minus(axes, x=4)
            axes.set_yticks([])
        return Picture(made.sheet.figure, words, "\n".join(str(one) for one in found), colours().paper)


def _repeats(result: FitResult) -> list[tuple[Array, Array]]:
    """Return values seen and predicted, shapes (row,) and (repeat, row), of mediator and outcome."""
    observed = result.observed
    random = np.random.default_rng([result.settings.random_seed, 2])
    total = result.shape[0] * result.shape[1]
    draws = np.linspace(0, total - 1, min(REPEATS, total)).round().astype(int)
    rows = np.linspace(0, len(observed.mediator) - 1, min(MOST_ROWS, len(observed.mediator))).round().astype(int)
    pairs = (
        (observed.mediator, observed.mediator_design, "alpha", "sigma_m"),
        (observed.outcome, observed.outcome_design, "gamma", "tau"),
    )
    found = []
    for seen, design, coefficients, sd in pairs:
        mean = result.flat(coefficients)[draws] @ design[rows].T
        found.append((seen[rows], mean + result.flat(sd)[draws, None] * random.standard_normal(mean.shape)))
    return found


def _counted(seen: Array, drawn: Array) -> tuple[Array, Array, Array, Array]:
    """Return edges of bars, rows seen in each, and the 5 % and 95 % quantiles of rows predicted."""
    low, high = np.quantile(drawn, [0.001, 0.999])
    edges = np.linspace(min(low, seen.min()), max(high, seen.max()), BARS + 1)
    repeats = np.stack([np.histogram(one, edges)[0] for one in drawn])
    return edges, np.histogram(seen, edges)[0], *np.quantile(repeats, [0.05, 0.95], axis=0)


def _bars(axes: "Axes", edges: Array, counts: Array, low: Array, high: Array) -> None:
    middle = (edges[1:] + edges[:-1]) / 2
    ink = colours().ink
    axes.stairs(counts, edges, fill=True, facecolor=colours().wash, edgecolor=ink, linewidth=0.6)
    axes.vlines(middle, low, high, color=ink, linewidth=2.2)
    outside = (counts < low) | (counts > high)
    axes.plot(middle[outside], counts[outside], marker="o", markersize=4.5, linestyle="", color=ink,
              markerfacecolor=colours().paper, zorder=5)  # fmt: skip
    axes.set_ylim(0, None)
    minus(axes)


def _said(head: str, found: tuple[Array, Array, Array, Array]) -> str:
    edges, counts, low, high = found
    outside = np.flatnonzero((counts < low) | (counts > high))
    expected = 0.1 * len(counts)
    text = f"{head}: in {len(outside)} of {len(counts)} bars the rows seen lie outside 90 % of the repeats"
    where = ", ".join(f"{edges[k]:.3g} to {edges[k + 1]:.3g}" for k in outside[:6])
    return f"{text} (about {expected:.0f} are to be expected)" + (f": {where}." if where else ".")
