"""Every public name has a runnable example and a place in the reference; every error is in the catalogue."""

import doctest
import importlib.util
import inspect
import re
from pathlib import Path

import pytest

import bayesmed as bm

PAGES = Path(__file__).parents[2] / "docs"
NAMES = {f"bayesmed.{name}": getattr(bm, name) for name in bm.__all__}
NAMES |= {f"bayesmed.priors.{name}": getattr(bm.priors, name) for name in bm.priors.__all__ if name not in bm.__all__}
NAMES = {name: value for name, value in NAMES.items() if not inspect.ismodule(value)}


@pytest.mark.parametrize("name", NAMES)
def test_a_public_name_has_an_example_that_prints_what_it_says(name):
    value = NAMES[name]
    module = inspect.getmodule(value)
    found = [t for t in doctest.DocTestFinder().find(value, name, module=module) if t.examples]
    assert any(t.name == name for t in found), f"{name} has no example"
    runner = doctest.DocTestRunner(verbose=False)
    for each in found:
        assert runner.run(each).failed == 0, each.name


def test_every_public_name_stands_in_the_reference_once():
    pages = "\n".join(path.read_text(encoding="utf-8") for path in (PAGES / "reference").glob("*.md"))
    listed = re.findall(r"^\.\. auto(?:class|function):: (bayesmed\.(?:priors\.)?\w+)$", pages, re.MULTILINE)
    assert sorted(listed) == sorted(NAMES)


def test_every_method_and_property_of_a_fit_stands_in_the_reference():
    page = (PAGES / "reference" / "fit.md").read_text(encoding="utf-8")
    listed = re.findall(r"^\.\. auto(?:method|property):: bayesmed\.Fit\.(\w+)$", page, re.MULTILINE)
    assert sorted(listed) == sorted(name for name in vars(bm.Fit) if not name.startswith("_"))
    code = "\n".join(re.findall(r"```\{code-cell\}\n(.*?)```", page, re.DOTALL))
    assert [name for name in listed if not re.search(rf"\b\w+\.{name}\b", code) and name not in ("study", "tree")] == []


def test_the_catalogue_lists_every_error_and_warning():
    spec = importlib.util.spec_from_file_location("catalogue", PAGES / "_extensions" / "catalogue.py")
    pytest.importorskip("sphinx")
    catalogue = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(catalogue)
    defined = {n for n, o in vars(bm.errors).items() if inspect.isclass(o) and issubclass(o, Exception | Warning)}
    tables = [node.astext() for node in catalogue.tables()]
    assert all(any(f"bm.errors.{name}" in table for table in tables) for name in defined)
    assert {each.__name__ for each in catalogue.types()} == defined
