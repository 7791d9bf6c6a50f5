"""The tipping correlation as what a common cause must explain of mediator and outcome."""

from collections.abc import Sequence

import numpy as np
import pandas as pd

from bayesmed.conclusions.tipping import TippingResult
from bayesmed.core.errors import ArgumentError
from bayesmed.core.shares import share_given_mediator, share_needed

TAIL = 0.025


def shares(tips: TippingResult, r2_mediator: Sequence[float]) -> pd.DataFrame:
    """Return the shares of residual variance that one common cause must explain for a claim to tip.

    Parameters
    ----------
    tips : TippingResult
    r2_mediator : sequence of float
        Shares of the mediator's residual variance, above 0 and up to 1.

    Returns
    -------
    pandas.DataFrame
        One row per moderator point and share of the mediator's variance. sign: that of the correlation which
        overturns; r2_outcome, lower, upper: the share of the outcome's structural residual variance that the cause
        must explain beside it, median and central 95 % over draws, infinite where it would be more than all;
        given_mediator: the median as a regression that also holds the mediator would show it.

    Raises
    ------
    ArgumentError
        If a share is not a number above 0 and at most 1.
    """
    allowed = [_checked(value) for value in r2_mediator]
    if not allowed:
        raise ArgumentError("r2_mediator=[]: give at least one share")
    parts = []
    for value in allowed:
        needed = share_needed(np.abs(tips.crossings), np.asarray(value))
        # A share of more than all does not exist; nan marks draws that no correlation tips.
        possible = np.where(needed <= 1, needed, np.inf)
        middle, lower, upper = np.quantile(possible, [0.5, TAIL, 1 - TAIL], axis=1, method="inverted_cdf")
        exists = np.isfinite(middle)
        seen = np.where(exists, share_given_mediator(np.where(exists, middle, 0.0), np.asarray(value)), np.inf)
        columns = {
            **tips.points.columns,
            "r2_mediator": value,
            "sign": np.sign(np.nanmedian(np.where(np.isnan(tips.crossings), 0.0, tips.crossings), axis=1)),
            "r2_outcome": middle,
            "lower": lower,
            "upper": upper,
            "given_mediator": seen,
        }
        parts.append(pd.DataFrame(columns))
    return pd.concat(parts, ignore_index=True)


def _checked(value: float) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float | np.number) or not 0 < value <= 1:
        raise ArgumentError(f"r2_mediator holds {value!r}; shares of variance lie above 0 and at most at 1")
    return float(value)
