"""Tables as people read them: rounded to what the draws warrant, in text, in a notebook and in a rich terminal."""

from abc import ABC, abstractmethod
from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.words import harmless, number_text, probability_text, value_text

NUMBERS = ("mean", "sd", "lower", "upper", "median", "rho", "left_out")
CORRELATIONS = ("interval_down", "interval_up", "required_down", "required_up")
SHARES = ("outside", "toward_minus_one", "toward_plus_one")


def shown(table: pd.DataFrame) -> pd.DataFrame:
    """Return a table of text: numbers in three digits, a probability with its Monte Carlo error beside it."""
    columns: dict[str, Any] = {}
    for name in table.columns:
        column = table[name]
        if name == "probability":
            columns[name] = [probability_text(p, e) for p, e in zip(column, table["mcse"], strict=True)]
        elif name == "mcse":
            columns[name] = [_error_text(e) for e in column]
        elif name in SHARES:
            columns[name] = [probability_text(float(v)) for v in column]
        elif name in CORRELATIONS:
            columns[name] = ["none" if np.isnan(v) else f"{v:.2f}" for v in column]
        elif name in NUMBERS:
            columns[name] = [number_text(float(v)) for v in column]
        else:
            columns[name] = [value_text(v) for v in column]
    return pd.DataFrame(columns, columns=table.columns)


def as_text(table: pd.DataFrame) -> str:
    """Return a table as aligned plain text."""
    return harmless(shown(table).to_string(index=False))


def as_html(sentence: str, table: pd.DataFrame) -> str:
    """Return a sentence and under it a table, everything escaped, in colours taken from the notebook."""
    from html import escape

    body = harmless(shown(table).to_html(index=False, escape=True, border=0, justify="left"))
    paragraphs = "".join(f"<p>{escape(harmless(line))}</p>" for line in sentence.splitlines() if line)
    return f"<div>{paragraphs}{body}</div>"


class Shown(ABC):
    """What shows itself by sentences and a table: as text, in a notebook, and in a terminal through rich."""

    @abstractmethod
    def _parts(self) -> tuple[str, pd.DataFrame, Sequence[str]]:
        """Return the sentence before the table, the table, and sentences after it."""

    def __repr__(self) -> str:
        before, table, after = self._parts()
        return "\n".join([harmless(before), "", as_text(table), *(["", *map(harmless, after)] if after else [])])

    def _repr_html_(self) -> str:
        before, table, after = self._parts()
        return as_html("\n".join([before, *after]), table)

    def __rich__(self) -> Any:
        from rich.console import Group
        from rich.table import Table
        from rich.text import Text

        before, table, after = self._parts()
        made = Table(box=None, pad_edge=False, header_style="bold", padding=(0, 2, 0, 0))
        words = shown(table)
        for name in words.columns:
            numbers = pd.api.types.is_numeric_dtype(table[name])
            made.add_column(Text(str(name)), justify="right" if numbers else "left", overflow="fold")
        for row in words.itertuples(index=False):
            made.add_row(*(Text(harmless(str(cell))) for cell in row))
        told = [Text(harmless(line)) for line in after]
        return Group(Text(harmless(before)), Text(), made, *([Text()] if told else []), *told)


def _error_text(error: float) -> str:
    if np.isnan(error):
        return ""
    return "<0.001" if error < 0.001 else f"{error:.3f}"
