"""A table as LaTeX: everything a user wrote is shown as it was written, never as a command."""

from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.words import number_text, probability_text, value_text

SPECIAL = {
    "\\": r"\textbackslash{}", "{": r"\{", "}": r"\}", "$": r"\$", "&": r"\&", "%": r"\%", "#": r"\#", "_": r"\_",
    "~": r"\textasciitilde{}", "^": r"\textasciicircum{}", "<": r"\textless{}", ">": r"\textgreater{}",
    "|": r"\textbar{}", '"': r"\textquotedbl{}", "`": r"\textasciigrave{}", "'": r"\textquotesingle{}",
    "[": "{[}", "]": "{]}", "*": "{*}", "-": "{-}",
}  # fmt: skip
PROBABILITIES = {"probability": "mcse", "lower": "lower_mcse", "upper": "upper_mcse", "all_rho": "all_rho_mcse"}
HEAD = (
    "% Needs \\usepackage{booktabs,textcomp}; \\usepackage[T1]{fontenc} with pdfLaTeX.\n"
    "% Letters beyond Latin need LuaLaTeX or XeLaTeX with a font that has them.\n"
)


def escaped(text: str) -> str:
    r"""Return text on one line that LaTeX shows as it is.

    >>> escaped("50 % of a_b")
    '50 \\% of a\\_b'
    """
    return "".join(SPECIAL.get(letter, letter) for letter in " ".join(text.split()))


def latex_table(table: pd.DataFrame, name: str) -> str:
    """Return a tabular environment of a table, its numbers in three digits, probabilities as their error warrants.

    Parameters
    ----------
    table : pandas.DataFrame
    name : str
        Of the table; says which columns called lower and upper are probabilities.
    """
    columns = [_column(table, str(column), name) for column in table.columns]
    aligned = "".join("r" if table[column].dtype.kind in "biuf" else "l" for column in table.columns)
    heads = " & ".join(escaped(str(column).replace("_", " ")) for column in table.columns)
    lines = [" & ".join(row) for row in zip(*columns, strict=True)]
    body = "".join(f"{line} \\\\\n" for line in lines)
    return (
        f"{HEAD}\\begin{{tabular}}{{{aligned}}}\n\\toprule\n{heads} "
        f"\\\\\n\\midrule\n{body}\\bottomrule\n\\end{{tabular}}\n"
    )


def _column(table: pd.DataFrame, column: str, name: str) -> list[str]:
    values = table[column]
    if column in PROBABILITIES and PROBABILITIES[column] in table.columns:
        pairs = zip(values, table[PROBABILITIES[column]], strict=True)
        return [_number(probability_text(float(p), float(e))) for p, e in pairs]
    if values.dtype.kind == "f":
        return [_number(_small(float(v)) if "mcse" in column else number_text(float(v))) for v in values]
    return [_cell(v) for v in values]


def _cell(value: Any) -> str:
    number = isinstance(value, int | float | np.number) and not isinstance(value, bool)
    return _number(value_text(value)) if number else escaped(value_text(value))


def _small(error: float) -> str:
    return "" if np.isnan(error) else "<0.001" if error < 0.001 else f"{error:.3f}"


def _number(text: str) -> str:
    """Return a number with a true minus sign; words of a number, such as "infinite", as they are."""
    sign = "$-$" if text.startswith("-") else ""
    return sign + escaped(text.removeprefix("-"))
