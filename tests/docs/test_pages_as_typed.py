"""Whoever types the visible cells of a page from top to bottom never meets a name that was not made."""

import ast
import builtins
import re
from importlib.metadata import version
from pathlib import Path

import pytest

PAGES = Path(__file__).parents[2] / "docs"
CELL = re.compile(r"^```\{code-cell\}\n((?::[^\n]*\n)*)(.*?)^```", re.DOTALL | re.MULTILINE)
WITH_CODE = sorted(
    path.relative_to(PAGES).as_posix()
    for path in PAGES.rglob("*.md")
    if "_build" not in path.parts and "{code-cell}" in path.read_text(encoding="utf-8")
)


def cells(page):
    """Return the code of a page's cells, and whether each is seen."""
    text = (PAGES / page).read_text(encoding="utf-8")
    return [(code, "remove-input" not in options) for options, code in CELL.findall(text)]


def test_there_are_pages():
    assert len(WITH_CODE) > 15


@pytest.mark.parametrize("page", WITH_CODE)
def test_visible_cells_stand_by_themselves(page):
    known = set(dir(builtins))
    for code, seen in cells(page):
        if seen:
            tree = ast.parse(code)
            known |= _made(tree)
            assert _used(tree) <= known, f"{page}: {sorted(_used(tree) - known)} was not made before this cell\n{code}"


@pytest.mark.parametrize("page", WITH_CODE)
def test_numbers_told_in_a_sentence_are_made_by_a_cell_before_it(page):
    text = (PAGES / page).read_text(encoding="utf-8")
    for told in re.finditer(r"\{eval\}`(\w+)`", text):
        before = "\n".join(match.group(2) for match in CELL.finditer(text[: told.start()]))
        assert told.group(1) in _made(ast.parse(before)), f"{page}: {told.group(1)}"


def test_the_entry_to_cite_is_of_this_version():
    entry = (PAGES / "CITATION.cff").read_text(encoding="utf-8")
    told = dict(re.findall(r"^([a-z-]+): ?\"?(.*?)\"?$", entry, re.MULTILINE))
    assert told["cff-version"] == "1.2.0"
    assert told["license"] == "Apache-2.0"
    assert version("bayesmed").startswith(told["version"])
    assert {"message", "title", "authors"} <= told.keys()


def _made(tree):
    made = {node.id for node in ast.walk(tree) if isinstance(node, ast.Name) and isinstance(node.ctx, ast.Store)}
    for node in ast.walk(tree):
        if isinstance(node, ast.Import | ast.ImportFrom):
            made |= {(alias.asname or alias.name).split(".")[0] for alias in node.names}
        elif isinstance(node, ast.FunctionDef):
            made.add(node.name)
        elif isinstance(node, ast.arg):
            made.add(node.arg)
    return made


def _used(tree):
    return {node.id for node in ast.walk(tree) if isinstance(node, ast.Name) and isinstance(node.ctx, ast.Load)}
