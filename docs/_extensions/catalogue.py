"""The directive ``errors-and-warnings``: a table of every type in ``bayesmed.core.errors``, made from the module."""

import inspect

from docutils import nodes
from sphinx.application import Sphinx
from sphinx.util.docutils import SphinxDirective

from bayesmed.core import errors

HEADINGS = ("Name", "Is a", "When")


def types() -> list[type[BaseException]]:
    """Return the types in the order of their definition."""
    found = [o for _, o in inspect.getmembers(errors, inspect.isclass) if o.__module__ == errors.__name__]
    return sorted(found, key=lambda each: inspect.getsourcelines(each)[1])


class Catalogue(SphinxDirective):
    """Two tables, of errors and of warnings."""

    def run(self) -> list[nodes.Node]:
        """Return the tables with a rubric each."""
        return tables()


def tables() -> list[nodes.Node]:
    """Return a rubric and a table of the errors, then the same of the warnings."""
    made: list[nodes.Node] = []
    for title, base in (("Errors", errors.BayesmedError), ("Warnings", errors.BayesmedWarning)):
        made += [nodes.rubric("", title), _table([each for each in types() if issubclass(each, base)])]
    return made


def _table(rows: list[type[BaseException]]) -> nodes.table:
    table, group = nodes.table(), nodes.tgroup(cols=len(HEADINGS))
    table += group
    group += [nodes.colspec(colwidth=width) for width in (25, 30, 45)]
    head, body = nodes.thead(), nodes.tbody()
    group += [head, body]
    head += _row([nodes.paragraph(text=heading) for heading in HEADINGS])
    for each in rows:
        name = nodes.literal(text=f"bm.errors.{each.__name__}")
        bases = ", ".join(base.__name__ for base in each.__bases__)
        body += _row(
            [nodes.paragraph("", "", name), nodes.paragraph(text=bases), nodes.paragraph(text=inspect.getdoc(each))]
        )
    return table


def _row(cells: list[nodes.Node]) -> nodes.row:
    row = nodes.row()
    for cell in cells:
        row += nodes.entry("", cell)
    return row


def setup(app: Sphinx) -> dict[str, bool]:
    """Register the directive."""
    app.add_directive("errors-and-warnings", Catalogue)
    return {"parallel_read_safe": True, "parallel_write_safe": True}
