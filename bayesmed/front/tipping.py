"""Tipping: at which residual correlation the draws cross the claim's limit."""

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import pandas as pd
import xarray as xr

from bayesmed.conclusions.claim import Claim
from bayesmed.conclusions.shares import shares
from bayesmed.conclusions.tipping import CAUTION, TippingResult
from bayesmed.front.shown import Shown

if TYPE_CHECKING:
    from bayesmed.plots.picture import Picture


class Tipping(Shown):
    """The tipping distribution of a claim; made by ``Fit.tipping``.

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
    >>> tipping = fit.tipping()
    >>> tipping.draws.dims
    ('chain', 'draw')
    >>> bool(tipping.table["median"].item() > 0)
    True
    """

    def __init__(self, result: TippingResult) -> None:
        self._result = result

    @property
    def claim(self) -> Claim:
        """The claim that tips."""
        return self._result.claim

    @property
    def draws(self) -> xr.DataArray:
        """Draws of the correlation at which each posterior draw crosses the claim's limit.

        Dims chain, draw and one per moderator; nan where no correlation matters to a draw.
        """
        return self._result.draws

    @property
    def table(self) -> pd.DataFrame:
        """One row per moderator point.

        Columns: median, lower and upper of the tipping correlation; outside, the share of draws that do not cross
        within ±0.9; toward_minus_one and toward_plus_one, the probability of the claim as rho tends to -1 and +1;
        interval_down and interval_up, the fixed rho nearest zero at which the effect's interval takes in the limit;
        required_down and required_up, those at which the probability falls under what the claim requires (0 where it
        is so at zero already, nan where not as far as ±0.98).
        """
        return self._result.table

    def probability(self, prior: Any) -> pd.DataFrame:
        """Return the probability of the claim under a prior or a distribution function, per moderator point.

        Columns: probability, mcse, and unlimited, the probability with unlimited data, so that ignorance of rho and
        imprecision of the study are told apart.
        """
        return self._result.probability(prior)

    def curve(self, moderator: str, values: Sequence[Any] | None = None) -> pd.DataFrame:
        """Return the tipping correlation along a moderator, at `values` or over its observed range."""
        return self._result.curve(moderator, values)

    def shares(self, r2_mediator: Sequence[float] = (0.05, 0.1, 0.2, 0.4)) -> pd.DataFrame:
        """Return the shares of residual variance that one common cause must explain for the claim to tip.

        Columns: r2_mediator as given; sign of the correlation that overturns; r2_outcome with lower and upper, the
        share of the outcome's structural residual variance needed beside it, infinite where none is enough;
        given_mediator, the same as a regression that holds the mediator shows it.
        """
        return shares(self._result, r2_mediator)

    def plot(self, beliefs: Mapping[str, Any], **options: Any) -> "Picture":
        """Draw where the claim tips above what is believed about rho; see ``bayesmed.plots.plot_tipping``."""
        from bayesmed.plots.tipping import plot_tipping

        return plot_tipping(self._result, beliefs, **options)

    def _parts(self) -> tuple[str, pd.DataFrame, Sequence[str]]:
        return self._heading(), self.table, [CAUTION]

    def _heading(self) -> str:
        return (
            f"Tipping correlation of the claim {self.claim}: the rho at which a posterior draw crosses the limit "
            f"(median and {100 * self._result.ci_prob:g} % interval)."
        )
