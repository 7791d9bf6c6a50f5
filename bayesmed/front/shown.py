"""Tables as people read them: rounded to what the draws warrant, as text and as escaped HTML."""

from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.words import number_text, probability_text, value_text

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
    return shown(table).to_string(index=False)


def as_html(sentence: str, table: pd.DataFrame) -> str:
    """Return a sentence and under it a table, everything escaped, in colours taken from the notebook."""
    from html import escape

    body = shown(table).to_html(index=False, escape=True, border=0, justify="left")
    paragraphs = "".join(f"<p>{escape(line)}</p>" for line in sentence.splitlines() if line)
    return f"<div>{paragraphs}{body}</div>"


def _error_text(error: float) -> str:
    if np.isnan(error):
        return ""
    return "<0.001" if error < 0.001 else f"{error:.3f}"
