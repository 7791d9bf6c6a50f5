"""Yardsticks: unmeasured causes beside measured covariates."""

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import pandas as pd

from bayesmed.conclusions.yardsticks import YardsticksResult
from bayesmed.front.shown import Shown

if TYPE_CHECKING:
    from bayesmed.plots.picture import Picture

HEADING = (
    "The rho that an unmeasured cause would leave, were it so many times as strong as a measured covariate (median and "
    "95 % of draws); left_out is another question: the rho that leaving the covariate itself out would have left."
)


class Yardsticks(Shown):
    """Unmeasured causes compared with measured covariates; made by ``Fit.yardsticks``.

    Examples
    --------
    >>> import bayesmed as bm
    >>> study = bm.Study(
    ...     bm.load_example("knee_rehab"),
    ...     exposure="coaching",
    ...     mediator="exercise ~ coaching + confidence",
    ...     outcome="function ~ exercise + coaching + confidence",
    ... )
    >>> fit = study.fit(method="exact", draws=250, random_seed=1, progressbar=False)
    >>> fit.yardsticks(strength=[1, 2]).table["covariate"].to_list()
    ['confidence', 'confidence']
    """

    def __init__(self, result: YardsticksResult) -> None:
        self._result = result

    @property
    def table(self) -> pd.DataFrame:
        """One row per covariate and strength: covariate, strength, rho, lower, upper, left_out.

        ``rho`` with its central 95 % is the correlation that a cause so many times as strong would leave, nan where
        no such cause can exist. ``left_out`` is the correlation that leaving the covariate itself out would have left.
        """
        return self._result.table

    @property
    def overturning(self) -> pd.DataFrame:
        """One row per covariate and moderator point: how many times as strong a cause must be to tip the claim."""
        return self._result.overturning

    @property
    def sentences(self) -> tuple[str, ...]:
        """The overturning strengths in words."""
        return self._result.sentences

    def plot(self, tipping: Any = None, **options: Any) -> "Picture":
        """Draw the causes beside where the claim tips, if given; see ``bayesmed.plots.plot_yardsticks``."""
        from bayesmed.plots.yardsticks import plot_yardsticks

        return plot_yardsticks(self._result, tipping, **options)

    def _parts(self) -> tuple[str, pd.DataFrame, Sequence[str]]:
        return HEADING, self.table, self.sentences
