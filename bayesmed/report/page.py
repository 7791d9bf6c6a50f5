"""A report as one page of HTML that holds all it needs and asks no network for anything."""

import hashlib
from base64 import b64encode
from collections.abc import Mapping
from functools import cache
from html import escape
from importlib.metadata import version
from importlib.resources import files
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import TYPE_CHECKING

from bayesmed.report.blocks import Document, Live
from bayesmed.report.document import document
from bayesmed.report.findings import Findings
from bayesmed.report.live import as_script_data
from bayesmed.report.pictures import drawn

if TYPE_CHECKING:
    from jinja2 import Template

    from bayesmed.plots.picture import Picture

SCRIPTS = ("belief.js", "page.js")


class Page:
    """A report as a page, shown in a notebook as it is in a browser; made by ``Fit.explore``.

    Attributes
    ----------
    html : str
        The whole page.
    """

    def __init__(self, html: str) -> None:
        self.html = html

    def save(self, path: str | Path) -> Path:
        """Write the page to a file and return its path."""
        Path(path).write_bytes(self.html.encode("utf-8"))
        return Path(path)

    def _repr_html_(self) -> str:
        # Scripts run without the notebook's origin: the page can neither read the notebook nor act in it.
        return (
            '<iframe title="Report" sandbox="allow-scripts" loading="lazy" '
            'style="width:100%;height:85vh;min-height:36rem;border:1px solid #8a949e;border-radius:6px" '
            f'srcdoc="{escape(self.html, quote=True)}"></iframe>'
        )

    def __repr__(self) -> str:
        return (
            f"A page of {len(self.html) // 1000} kB: the last line of a notebook's cell shows it, .save(path) writes it"
        )


def explore(findings: Findings) -> Page:
    """Return the page of findings, with its pictures drawn."""
    pictures = drawn(findings)
    return Page(as_page(document(findings, pictures), vector_images(pictures)))


def vector_images(pictures: "Mapping[str, Picture]") -> dict[str, bytes]:
    """Return name → SVG of each picture."""
    with TemporaryDirectory() as folder:
        return {name: p.savefig(Path(folder) / f"{name}.svg").read_bytes() for name, p in pictures.items()}


def as_page(made: Document, images: Mapping[str, bytes]) -> str:
    """Return a report as a page.

    Parameters
    ----------
    made : Document
    images : dict of str to bytes
        SVG by the name of its figure.
    """
    script = "\n" + "\n".join(_shipped(name) for name in SCRIPTS)
    stored = [block.stored for section in made.sections for block in section.blocks if isinstance(block, Live)]
    live = stored[0] if stored else None
    uris = {name: f"data:image/svg+xml;base64,{b64encode(data).decode('ascii')}" for name, data in images.items()}
    page = _template().render(
        document=made,
        images=uris,
        live=live,
        stored=as_script_data(live) if live else "",
        style=_shipped("page.css"),
        script=script,
        script_hash=f"sha256-{b64encode(hashlib.sha256(script.encode('utf-8')).digest()).decode('ascii')}",
        version=version("bayesmed"),
    )
    return page.lstrip()


@cache
def _template() -> "Template":
    from jinja2 import Environment, StrictUndefined

    environment = Environment(autoescape=True, undefined=StrictUndefined, keep_trailing_newline=True)
    return environment.from_string(_shipped("page.html.j2"))


def _shipped(name: str) -> str:
    return files("bayesmed.report").joinpath("web", name).read_text(encoding="utf-8")
