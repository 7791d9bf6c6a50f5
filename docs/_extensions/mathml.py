"""Formulas as MathML, which browsers draw themselves: pages need no script and no network."""

from typing import Any

from docutils import nodes
from docutils.utils.math import latex2mathml
from sphinx.application import Sphinx


def setup(app: Sphinx) -> dict[str, bool]:
    """Register the renderer under the name ``mathml``."""
    app.add_html_math_renderer("mathml", (_inline, None), (_block, None))
    return {"parallel_read_safe": True, "parallel_write_safe": True}


def _inline(self: Any, node: nodes.math) -> None:
    self.body.append(_tree(node.astext(), "inline"))
    raise nodes.SkipNode


def _block(self: Any, node: nodes.math_block) -> None:
    self.body.append(self.starttag(node, "div", CLASS="math"))
    self.body.append(_tree(node.astext(), "block") + "</div>\n")
    raise nodes.SkipNode


def _tree(source: str, display: str) -> str:
    tree: str = latex2mathml.tex2mathml(source, as_block=display == "block")
    return tree
