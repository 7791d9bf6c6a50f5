"""Beliefs as a notebook shows them: the sentence that describes one, and its shape, in the notebook's own colours."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from bayesmed.priors.prior import Prior

__all__ = ["as_html", "shape", "short"]

LONGEST = 160
WIDTH, HEIGHT = 240, 44
BARS = 120


def short(value: Any) -> str:
    """Return the repr, or, where hundreds of numbers stand in it, its beginning and its length."""
    text = repr(value)
    return text if len(text) <= LONGEST else f"{text[: LONGEST // 2].rstrip()} … ({len(text):,} characters)"


def as_html(prior: Prior) -> str:
    """Return the sentence of ``Prior.describe`` with the shape under it."""
    sentence = prior.describe().replace(repr(prior), short(prior))
    return f"<div><p>{escape(sentence)}</p>{shape(prior)}</div>"


def shape(prior: Prior) -> str:
    """Return an SVG of the probability of each stretch of ρ from −1 to 1, and of single values as stems."""
    edges = np.linspace(-1, 1, BARS + 1)
    mass = np.diff(np.asarray(prior.below(edges), dtype=float))
    stems = []
    for value, probability in prior.atoms():
        mass[min(int(np.searchsorted(edges, value, side="right")) - 1, BARS - 1)] -= probability
        stems.append((value, probability))
    mass = np.clip(mass, 0, None)
    heights = (HEIGHT - 8) * mass / mass.max() if mass.sum() > 1e-9 else np.zeros(BARS)
    across = (edges + 1) / 2 * WIDTH
    steps = "".join(f"V{HEIGHT - 2 - h:.1f}H{right:.1f}" for h, right in zip(heights, across[1:], strict=True))
    lines = "".join(
        f'<line x1="{(v + 1) / 2 * WIDTH:.1f}" x2="{(v + 1) / 2 * WIDTH:.1f}" y1="{HEIGHT - 2}" '
        f'y2="{HEIGHT - 2 - (HEIGHT - 8) * p:.1f}" stroke="currentColor" stroke-width="2.5"/>'
        for v, p in stems
    )
    body = 'fill="currentColor" fill-opacity="0.25" stroke="currentColor"'
    return (
        f'<svg width="{WIDTH}" height="{HEIGHT + 14}" role="img" aria-label="shape of the belief from rho = -1 to 1">'
        f'<path d="M0 {HEIGHT - 2}{steps}V{HEIGHT - 2}Z" {body}/>'
        f'{lines}<line x1="0" x2="{WIDTH}" y1="{HEIGHT - 2}" y2="{HEIGHT - 2}" stroke="currentColor"/>'
        + "".join(
            f'<text x="{x}" y="{HEIGHT + 11}" text-anchor="{anchor}" font-size="11" fill="currentColor">{word}</text>'
            for x, anchor, word in ((0, "start", "−1"), (WIDTH / 2, "middle", "ρ = 0"), (WIDTH, "end", "1"))
        )
        + "</svg>"
    )
