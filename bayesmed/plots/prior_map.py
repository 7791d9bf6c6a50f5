"""The plane of beliefs, by mean and SD of rho: where the claim holds, and where the named beliefs lie in it."""

from collections.abc import Mapping
from itertools import product
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr

from bayesmed.conclusions.words import probability_text
from bayesmed.core.errors import ArgumentError
from bayesmed.plots.panels import area_sign, frame, head, mark_sign, minus
from bayesmed.plots.picture import Picture, colours, drawing, style
from bayesmed.priors.accept import coerce

if TYPE_CHECKING:
    from matplotlib.axes import Axes

MARKERS = ("o", "s", "^", "D", "v", "P", "X", "<", ">", "p", "*", "d")
LEVELS = (0.5, 0.8)
"""Probabilities below what is required at which the ground changes."""


def plot_prior_map(
    mapped: xr.DataArray,
    beliefs: Mapping[str, Any] | None = None,
    title: str | None = None,
    theme: Any = "blue",
    labels: Mapping[str, str] | None = None,
    ax: Any = None,
) -> Picture:
    """Draw which beliefs, by the mean and SD of rho under them, make the claim hold.

    Parameters
    ----------
    mapped : xarray.DataArray
        Of ``fit.prior_map``.
    beliefs : dict of str to prior, optional
        Marked where their mean and SD of rho put them; the ground is that of the map's family, so a belief of another
        shape may get another probability than its place shows.
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
    if not isinstance(mapped, xr.DataArray) or not {"mean", "sd"} <= set(mapped.dims):
        raise ArgumentError("plot_prior_map: mapped= must be what fit.prior_map() returned, with dims mean and sd")
    accepted = {str(label): coerce(belief) for label, belief in (beliefs or {}).items()}
    if len(accepted) > len(MARKERS):
        raise ArgumentError(f"beliefs: {len(accepted)} were given; at most {len(MARKERS)} can be told apart")
    required = float(mapped.attrs["required"])
    words = title or f"Which beliefs about ρ make the claim hold: {mapped.attrs['claim']}"
    names = [str(name) for name in mapped.dims if name not in ("mean", "sd")]
    plane = mapped.transpose(*names, "mean", "sd")
    levels = sorted({*(level for level in LEVELS if level < required), required})
    with drawing(theme, labels, ax):
        choices = [plane[name].to_numpy().tolist() for name in names]
        points = [dict(zip(names, values, strict=True)) for values in product(*choices)]
        looks = _looks(len(levels))
        spans = [0.0, *levels, 1.0]
        key = [
            (area_sign(**look), f"probability {low:g} to {high:g}" if low else f"below {high:g}")
            for look, low, high in zip(looks, spans[:-1], spans[1:], strict=True)
        ]
        key[-1] = (area_sign(**looks[-1]), f"holds: {required:g} or more")
        for k, (label, belief) in enumerate(accepted.items()):
            place = "" if _on(plane, belief) else " (off the map, at its edge)"
            key.append((mark_sign(**_mark(k)), style().named(label) + place))
        if np.isnan(plane).any():
            key.append((area_sign(**_nowhere()), "no belief of the family"))
        made = frame(words, [head(p) if p else "" for p in points], key, height=2.4, along="mean of ρ under the belief",
                     up="SD of ρ under the belief")  # fmt: skip
        for axes, grid in zip(made.panels, plane.to_numpy().reshape(-1, *plane.shape[-2:]), strict=True):
            _plane(axes, plane["mean"].to_numpy(), plane["sd"].to_numpy(), grid, spans, looks)
            for k, belief in enumerate(accepted.values()):
                mean = np.clip(belief.rho_mean(), *plane["mean"].to_numpy()[[0, -1]])
                sd = np.clip(belief.rho_sd(), *plane["sd"].to_numpy()[[0, -1]])
                axes.plot([mean], [sd], linestyle="", zorder=6, clip_on=False, **_mark(k))
        return Picture(made.sheet.figure, words, _text(plane, points, accepted, required), colours().paper)


def _looks(count: int) -> list[dict[str, Any]]:
    """Return how each stretch of probability is filled, emptiest first: told apart by hatching, not by shade alone."""
    theme = colours()
    below: list[dict[str, Any]] = [{"facecolor": theme.paper, "hatch": hatch} for hatch in ("", "...", "////")]
    return [*below[-count:], {"facecolor": theme.wash, "hatch": ""}]


def _plane(axes: "Axes", mean: Any, sd: Any, grid: Any, spans: list[float], looks: list[dict[str, Any]]) -> None:
    known = np.ma.masked_invalid(grid.T)
    axes.patch.set(visible=True, **_nowhere())
    bounds = [-0.01, *spans[1:-1], 1.01]
    filled = axes.contourf(mean, sd, known, levels=bounds, colors=[look["facecolor"] for look in looks],
                           hatches=[look["hatch"] for look in looks])  # fmt: skip
    filled.set_edgecolor(colours().faint)
    filled.set_linewidth(0.0)
    if known.min() < spans[-2] < known.max():
        axes.contour(mean, sd, known, levels=[spans[-2]], colors=[colours().ink], linewidths=1.6)
    axes.axvline(0, color=colours().faint, linewidth=0.5)
    axes.set_xlim(mean[0], mean[-1])
    axes.set_ylim(sd[0], sd[-1])
    minus(axes)


def _on(plane: xr.DataArray, belief: Any) -> bool:
    """True if the map reaches a belief's mean and SD; a point belief lies at its foot."""
    (lowest, highest), widest = plane["mean"].to_numpy()[[0, -1]], float(plane["sd"][-1])
    return bool(lowest <= belief.rho_mean() <= highest and belief.rho_sd() <= widest)


def _mark(k: int) -> dict[str, Any]:
    """Return the look of a belief's mark: full and hollow in turns, so that two in one place are both seen."""
    look: dict[str, Any] = {"marker": MARKERS[k], "markersize": 9 if k % 2 else 5, "color": colours().ink}
    return {**look, "markerfacecolor": "none" if k % 2 else colours().ink, "markeredgewidth": 1.1}


def _nowhere() -> dict[str, Any]:
    return {"facecolor": colours().paper, "hatch": "xxxx", "edgecolor": colours().faint, "linewidth": 0.0}


def _text(plane: xr.DataArray, points: list[dict[str, Any]], beliefs: dict[str, Any], required: float) -> str:
    lines = [
        f"Probability of {plane.attrs['claim']} over beliefs of the family {plane.attrs['family']}; the claim requires "
        f"{required:g}."
    ]
    for point, grid in zip(points, plane.to_numpy().reshape(-1, *plane.shape[-2:]), strict=True):
        share = float(np.nanmean(grid[np.isfinite(grid)] >= required))
        lines += ["", f"{head(point)}: the claim holds on {100 * share:.0f} % of the plane."]
        at_point = plane.sel(point) if point else plane
        for label, belief in beliefs.items():
            mean, sd = belief.rho_mean(), belief.rho_sd()
            there = float(at_point.interp(mean=mean, sd=sd)) if sd > 0 else float("nan")
            shown = f"{probability_text(there)} at its place" if np.isfinite(there) else "off the map"
            lines.append(f"  {style().named(label)} (mean {mean:.2f}, SD {sd:.2f}): {shown}")
    return "\n".join(lines)
