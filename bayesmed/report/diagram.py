"""The assumed causes as a drawing: exposure, mediator, outcome, covariates, and what was not measured."""

from html import escape

from bayesmed.conclusions.words import listed
from bayesmed.report.blocks import Diagram
from bayesmed.study.observe import Observed

LETTERS = 15
"""Letters of a name on one line of a box; the key under the drawing has every name whole."""
STYLE = (
    ".causes .node{fill:var(--paper,#fff);stroke:currentColor;stroke-width:1.6}.causes .unseen{stroke-dasharray:5 4}"
    ".causes .arrow{fill:none;stroke:currentColor;stroke-width:1.8}.causes .faint{stroke-dasharray:5 4;opacity:.8}"
    ".causes text{fill:currentColor;font:13px system-ui,sans-serif;text-anchor:middle}.causes .role{font-weight:700}"
)


def diagram(observed: Observed) -> Diagram:
    """Return the drawing as SVG with a title and a description, with the key to its letters.

    Boxes hold a role's letter and as much of its name as goes in; lines are drawn in the colour of the text around.
    """
    x, m, y = observed.exposure, observed.mediator_name, observed.outcome_name
    others = [name for name in observed.covariates if name != x]
    boxes = [
        _box(80, 145, "X", x),
        _box(270, 45, "M", m),
        _box(460, 145, "Y", y),
        _box(460, 45, "U", "not measured", unseen=True),
    ]
    arrows = [
        _arrow(117, 117, 211, 67),
        _arrow(329, 67, 423, 117),
        _arrow(135, 145, 402, 145),
        _arrow(405, 45, 328, 45, faint=True),
        _arrow(460, 73, 460, 114, faint=True),
    ]
    if others:
        named = others[0] if len(others) == 1 else f"{len(others)} columns"
        boxes.append(_box(270, 245, "C", named))
        arrows += [_arrow(215, 226, 121, 174), _arrow(325, 226, 419, 174), _arrow(270, 217, 270, 76)]
    text = _text(x, m, y, others)
    svg = (
        '<svg xmlns="http://www.w3.org/2000/svg" class="causes" viewBox="0 0 540 285" role="img" '
        'aria-labelledby="causes-title causes-words">'
        f"<title id='causes-title'>The assumed causes</title><desc id='causes-words'>{escape(text)}</desc>"
        f"<style>{STYLE}</style>"
        '<defs><marker id="head" viewBox="0 0 8 8" refX="7" refY="4" markerWidth="8" markerHeight="8" orient="auto">'
        '<path d="M0 0L8 4L0 8z" fill="currentColor"/></marker></defs>'
        + "".join(arrows)
        + "".join(boxes)
        + '<text class="role" x="366" y="36">ρ</text></svg>'
    )
    return Diagram("causes", svg, text, text)


def standing_alone(drawn: Diagram) -> str:
    """Return the drawing as a file of its own, dark on white."""
    start, rest = drawn.svg.split("<title", 1)
    return (
        '<?xml version="1.0" encoding="UTF-8"?>\n'
        + start.replace("<svg ", '<svg width="540" height="285" color="#16324f" ')
        + f'<rect width="540" height="285" fill="#fff"/><title{rest}\n'
    )


def _text(x: str, m: str, y: str, others: list[str]) -> str:
    columns = (
        f" C: the covariates and moderators in the equations, {listed(others)}, which point to the other three."
        if others
        else ""
    )
    return (
        f"X: {x}, the exposure. M: {m}, the mediator. Y: {y}, the outcome.{columns} X points to M and Y, and M "
        f"points to "
        "Y. U (dashed): causes of M and Y that nobody measured and X leaves alone; ρ is what they leave behind. "
        "No arrow "
        "goes from X to U, from M to C, or from Y to anything: those are assumptions."
    )


def _box(x: float, y: float, letter: str, name: str, *, unseen: bool = False) -> str:
    width, height = 110, 56
    short = name if len(name) <= LETTERS else name[: LETTERS - 1] + "…"
    kind = "node unseen" if unseen else "node"
    return (
        f'<rect class="{kind}" x="{x - width / 2:g}" y="{y - height / 2:g}" width="{width}" height="{height}" rx="9"/>'
        f'<text class="role" x="{x:g}" y="{y - 5:g}">{letter}</text>'
        f'<text x="{x:g}" y="{y + 15:g}">{escape(short)}</text>'
    )


def _arrow(x0: float, y0: float, x1: float, y1: float, *, faint: bool = False) -> str:
    kind = "arrow faint" if faint else "arrow"
    return f'<path class="{kind}" d="M{x0:g} {y0:g}L{x1:g} {y1:g}" marker-end="url(#head)"/>'
