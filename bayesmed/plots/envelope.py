"""The smallest and largest probability of the claim over a set of beliefs, along a moderator."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.claim import Claim, as_claim
from bayesmed.conclusions.envelope import envelope
from bayesmed.conclusions.words import probability_text
from bayesmed.core.errors import ArgumentError
from bayesmed.fit.result import FitResult
from bayesmed.plots.opened import opened
from bayesmed.plots.panels import area_sign, frame, line_sign, minus, some_rows
from bayesmed.plots.people import people
from bayesmed.plots.picture import Picture, colours, drawing, style


def plot_envelope(
    fit: Any,
    set_of_priors: Any,
    moderator: str,
    values: Sequence[float] | None = None,
    at: Mapping[str, Any] | None = None,
    claim: Claim | None = None,
    title: str | None = None,
    theme: Any = "blue",
    labels: Mapping[str, str] | None = None,
    ax: Any = None,
) -> Picture:
    """Draw, along a numeric moderator, how small and how large the claim's probability can be within a set of beliefs.

    Parameters
    ----------
    fit : Fit
    set_of_priors : PriorSet
        AnyOn, Statements, Contaminated, UnimodalAt or Nearby.
    moderator : str
    values : list of float, optional
        Of the moderator; 31 over its observed range if left out.
    at : dict, optional
        A single value of every other moderator.
    claim : Claim, optional
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
    result, stated = opened(fit, FitResult, "plot_envelope: fit= must be a Fit"), as_claim(claim)
    others = dict(at or {})
    if moderator in others or any(not np.isscalar(value) for value in others.values()):
        raise ArgumentError(f"at={at!r} must give one value for each moderator other than {moderator!r}")
    if values is None:
        if moderator not in result.observed.frame:
            raise ArgumentError(f"moderator={moderator!r} is not a column of this study; give values=[…]")
        values = np.linspace(*result.observed.span(moderator), 31).tolist()
    table = envelope(result, set_of_priors, {**others, moderator: list(values)}, stated)
    words = title or f"How small and how large the probability of {stated} can be over {set_of_priors!r}"
    with drawing(theme, labels, ax):
        named = style().named(moderator)
        key = [
            (line_sign(linewidth=2.0), "smallest probability"),
            (line_sign(linewidth=1.2), "largest"),
            (area_sign(linewidth=0.0), "what the set leaves open"),
            (line_sign(linewidth=1.0, linestyle=(0, (5, 3))), f"required, {stated.required:g}"),
            (area_sign(hatch="||||", facecolor="none", linewidth=0.0), "rows of the study, below"),
        ]
        made = frame(words, [""], key, height=3.0, along=named, up="probability of the claim", usual=6.5)
        axes = made.panels[0]
        x = table[moderator].to_numpy(dtype=float)
        ink = colours().ink
        axes.fill_between(x, table["lower"], table["upper"], facecolor=colours().wash, linewidth=0)
        axes.plot(x, table["lower"], color=ink, linewidth=2.0, clip_on=False)
        axes.plot(x, table["upper"], color=ink, linewidth=1.2, clip_on=False)
        axes.axhline(stated.required, color=ink, linewidth=1.0, linestyle=(0, (5, 3)))
        axes.set_ylim(-0.15, 1)
        people(axes, result.observed, moderator, -0.15, 0.12)
        minus(axes)
        axes.set_yticks([0, 0.25, 0.5, 0.75, 1], ["0", "0.25", "0.5", "0.75", "1"])
        axes.set_xlim(x.min(), x.max())
        return Picture(made.sheet.figure, words, _text(table, named, moderator, stated), colours().paper)


def _text(table: pd.DataFrame, words: str, moderator: str, claim: Claim) -> str:
    lines = [f"Smallest and largest probability of {claim} over the set; the claim requires {claim.required:g}."]
    for _, row in some_rows(table).iterrows():
        low = probability_text(row["lower"], row["lower_mcse"])
        high = probability_text(row["upper"], row["upper_mcse"])
        lines.append(f"  {words} = {row[moderator]:.4g}: {low} to {high}")
    return "\n".join(lines)
