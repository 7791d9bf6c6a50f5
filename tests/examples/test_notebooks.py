"""The notebooks run, and say again what they said when they were written, within about Monte Carlo error."""

import re
from pathlib import Path

import nbformat
import numpy as np
import pytest
from nbclient import NotebookClient

NOTEBOOKS = sorted((Path(__file__).parents[2] / "examples").glob("*.ipynb"))
NUMBER = re.compile(r"(?<![\w.])-?\d+\.\d+(?:e-?\d+)?(?![\w.])")


def said(notebook: nbformat.NotebookNode) -> list[str]:
    """Return the text of every output, by cell."""
    return [
        "".join(out.get("text") or out.get("data", {}).get("text/plain", "") for out in cell.get("outputs", []))
        for cell in notebook.cells
        if cell.cell_type == "code"
    ]


def test_there_are_three() -> None:
    assert [path.stem for path in NOTEBOOKS] == ["knee_trial", "published_table", "tutoring_programme"]


@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda path: path.stem)
def test_a_notebook_runs_and_says_the_same_again(path: Path, tmp_path: Path) -> None:
    stored = nbformat.read(path, as_version=4)
    assert "invented" in "".join(cell.source for cell in stored.cells if cell.cell_type == "markdown").lower()
    before = said(stored)
    assert all(any(word) for word in before), "a cell of the notebook holds no output: run it before it is kept"
    again = nbformat.from_dict(stored)
    NotebookClient(again, timeout=300, kernel_name="python3", resources={"metadata": {"path": str(tmp_path)}}).execute()
    for was, now in zip(before, said(again), strict=True):
        assert NUMBER.sub("#", was).split() == NUMBER.sub("#", now).split()
        numbers = ([float(n) for n in NUMBER.findall(words)] for words in (was, now))
        # The same seeds: what another version of a library may change is of the order of the Monte Carlo error.
        np.testing.assert_allclose(*numbers, rtol=0.1, atol=0.02)
