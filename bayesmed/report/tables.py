"""The tables that a report writes as CSV files."""

import pandas as pd

from bayesmed.report.findings import Findings


def csv_tables(findings: Findings) -> dict[str, str]:
    """Return file name → text of a CSV file, in UTF-8 and with Unix line ends.

    ``comparison.csv`` holds every effect under every belief, ``rho_grid.csv`` every effect at fixed
    correlations, ``tipping.csv`` (where there is one) the correlation at which draws cross the limit, and
    ``beliefs.csv`` what was believed. An infinite moment is written ``inf``.
    """
    tables = {"comparison.csv": findings.comparison.table, "rho_grid.csv": findings.grid}
    if findings.tipping is not None:
        tables["tipping.csv"] = findings.tipping.table
    tables["beliefs.csv"] = _beliefs(findings)
    return {name: table.to_csv(index=False, float_format="%.8g", lineterminator="\n") for name, table in tables.items()}


def _beliefs(findings: Findings) -> pd.DataFrame:
    beliefs = findings.comparison.beliefs
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
