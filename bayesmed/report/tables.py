"""The tables that a report writes, as CSV for machines and spreadsheets and as LaTeX for papers."""

from collections.abc import Mapping
from typing import Any

import pandas as pd

from bayesmed.priors import ByGroup
from bayesmed.report.findings import Findings
from bayesmed.report.latex import latex_table

FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r", "\n", "＝", "＋", "－", "＠")
"""What a spreadsheet takes for a formula at the start of a cell (OWASP, CSV injection)."""


def tables(findings: Findings) -> dict[str, pd.DataFrame]:
    """Return name → table.

    ``comparison`` holds every effect under every belief, ``rho_grid`` every effect at fixed correlations, ``beliefs``
    what was believed. Where there are any: ``tipping``, the correlation at which draws cross the limit; ``yardsticks``
    and ``overturning``, unmeasured causes beside measured covariates; ``any_belief``, the smallest and largest
    probability over all beliefs within a range.
    """
    found = {"comparison": findings.comparison.table, "rho_grid": findings.grid}
    if findings.tipping is not None:
        found["tipping"] = findings.tipping.table
    if findings.yardsticks is not None:
        found["yardsticks"] = findings.yardsticks.table
        found["overturning"] = findings.yardsticks.overturning
    if findings.envelope is not None:
        found["any_belief"] = findings.envelope
    found["beliefs"] = _beliefs(findings)
    return found


def csv_tables(findings: Findings) -> dict[str, str]:
    """Return file name → text of a CSV file, in UTF-8 and with Unix line ends.

    An infinite moment is written ``inf``. Text that a spreadsheet would take for a formula stands behind an apostrophe.
    """
    return {f"{name}.csv": as_csv(harmless(table), float_format="%.8g") for name, table in tables(findings).items()}


def latex_tables(findings: Findings) -> dict[str, str]:
    """Return file name → text of a LaTeX table, numbers rounded as in the report."""
    return {f"{name}.tex": latex_table(table, name) for name, table in tables(findings).items()}


def as_csv(table: pd.DataFrame, float_format: str | None = None) -> str:
    """Return a table as the text of a CSV file."""
    return str(table.to_csv(index=False, float_format=float_format, lineterminator="\n"))


def harmless(table: pd.DataFrame) -> pd.DataFrame:
    """Return a table in which no text, nor the name of a column, would be taken for a formula by a spreadsheet."""
    changed = {
        _harmless(str(name)): column.map(_harmless) if column.dtype.kind not in "biuf" else column
        for name, column in table.items()
    }
    return pd.DataFrame(changed, columns=list(changed))


def _harmless(value: Any) -> Any:
    return f"'{value}" if isinstance(value, str) and value.startswith(FORMULA_STARTS) else value


def _beliefs(findings: Findings) -> pd.DataFrame:
    beliefs = one_by_one(findings.comparison.beliefs)
    quantiles = {q: [float(b.ppf(q)) for b in beliefs.values()] for q in (0.05, 0.5, 0.95)}
    return pd.DataFrame(
        {
            "prior": list(beliefs),
            "stated_as": [repr(b) for b in beliefs.values()],
            "quantile_5": quantiles[0.05],
            "median": quantiles[0.5],
            "quantile_95": quantiles[0.95],
        }
    )


def one_by_one(beliefs: Mapping[str, Any]) -> dict[str, Any]:
    """Return label → belief, with a belief for each group taken apart into its groups'."""
    apart: dict[str, Any] = {}
    for label, belief in beliefs.items():
        if isinstance(belief, ByGroup):
            apart.update({f"{label}: {level}": prior for level, prior in belief.items})
        else:
            apart[label] = belief
    return apart
