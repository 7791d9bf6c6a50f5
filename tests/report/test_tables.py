"""Tables as CSV and LaTeX: read back as they were, with hostile text whole and harmless."""

import io
from collections.abc import Callable

import numpy as np
import pandas as pd
import pytest
from pylatexenc.latex2text import LatexNodes2Text, MacroTextSpec, get_default_latex_context_db

import bayesmed as bm
from bayesmed.fit.result import FitResult
from bayesmed.report.findings import find
from bayesmed.report.latex import escaped, latex_table
from bayesmed.report.tables import csv_tables, harmless, latex_tables

AT = {"confidence": [4, 8]}
BELIEFS = {"none": 0.0, '<b>bold</b>, "and" | bar': bm.Uniform(0, 0.5), "=SUM(A1)": bm.LKJ(2)}
HOSTILE = (
    "=1+1",
    "+49",
    "-2 to 3",
    "@name",
    "\tx",
    "\rx",
    "＝1+1",
    'a "quoted", comma',
    "line\nbreak",
    "שלום עולם",
    "emoji 🦵",
    "x" * 300,
)


def test_csv_tables_read_back_as_they_were(knee: FitResult) -> None:
    found = find(knee, BELIEFS, AT)
    texts = csv_tables(found)
    read: Callable[[str], pd.DataFrame] = lambda name: pd.read_csv(io.StringIO(texts[name]))  # noqa: E731
    comparison = read("comparison.csv").fillna("")
    comparison["prior"] = comparison["prior"].str.removeprefix("'")
    pd.testing.assert_frame_equal(comparison, found.comparison.table.fillna(""), check_dtype=False, rtol=1e-6)
    pd.testing.assert_frame_equal(read("rho_grid.csv"), found.grid, check_dtype=False, rtol=1e-6)
    assert list(read("beliefs.csv")["prior"]) == ["none", '<b>bold</b>, "and" | bar', "'=SUM(A1)"]
    assert read("beliefs.csv")["median"].iloc[1] == 0.25


def test_an_infinite_sd_is_written_as_such(knee: FitResult) -> None:
    """LKJ(1) is uniform on (-1, 1): the odds r have no finite variance."""
    found = find(knee, {"flat": bm.LKJ(1)}, AT)
    table = pd.read_csv(io.StringIO(csv_tables(found)["comparison.csv"]))
    assert np.isinf(table.loc[table["effect"] == "indirect", "sd"]).all()


def test_no_text_is_a_formula_and_no_number_is_touched() -> None:
    """What starts a formula: OWASP, CSV injection (owasp.org/www-community/attacks/CSV_Injection)."""
    table = pd.DataFrame({"=head": list(HOSTILE), "number": np.linspace(-1, 1, len(HOSTILE))})
    made = harmless(table)
    assert list(made.columns) == ["'=head", "number"]
    assert made["number"].equals(table["number"])
    for text, cell in zip(HOSTILE, made["'=head"], strict=True):
        assert cell in (text, f"'{text}")
        assert not cell.startswith(("=", "+", "-", "@", "\t", "\r", "＝"))


@pytest.mark.parametrize("text", [*HOSTILE, r"\input{x} & %$#_{}~^", "[a] * b", "<i>|</i>", '`a\' "b" -- c'])
def test_latex_shows_what_was_written(text: str) -> None:
    """Read back by pylatexenc, a parser of LaTeX of others' making; line ends and tabs become spaces.

    It does not know the names that LaTeX gives these signs (LaTeX2e font selection, fntguide, section 7).
    """
    signs = {"textless": "<", "textgreater": ">", "textbar": "|", "textquotedbl": '"', "textasciicircum": "^"}
    known = get_default_latex_context_db()
    known.add_context_category("signs", [MacroTextSpec(name, sign) for name, sign in signs.items()], prepend=True)
    assert LatexNodes2Text(latex_context=known).latex_to_text(escaped(text)) == " ".join(text.split())


def test_a_latex_table_has_as_many_cells_in_every_line() -> None:
    table = pd.DataFrame(
        {"a_b": ["x & y", "[z]"], "mean": [-1.234567, np.inf], "probability": [0.9999, 0.5], "mcse": [1e-4, 0.01]}
    )
    lines = latex_table(table, "comparison").splitlines()
    assert [line.replace(r"\&", "").count("&") for line in lines if line.endswith(r"\\")] == [3, 3, 3]
    assert r"x \& y & $-$1.23 & \textgreater{}0.999 & \textless{}0.001 \\" in lines
    assert r"{[}z{]} & infinite & 0.50 & 0.010 \\" in lines


def test_every_csv_table_has_its_latex(knee: FitResult) -> None:
    found = find(knee, BELIEFS, AT)
    stems = {name.removesuffix(".csv") for name in csv_tables(found)}
    assert {name.removesuffix(".tex") for name in latex_tables(found)} == stems
