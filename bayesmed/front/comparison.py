"""Comparison: several beliefs about rho side by side."""

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import pandas as pd

from bayesmed.conclusions.claim import Claim
from bayesmed.conclusions.comparison import ComparisonResult
from bayesmed.conclusions.differences import differences
from bayesmed.front.shown import Shown

if TYPE_CHECKING:
    from bayesmed.plots.picture import Picture


class Comparison(Shown):
    """Beliefs compared on the same draws, with verdicts on a claim; made by ``Fit.compare``.

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
    >>> comparison = fit.compare({"none left out": 0.0, "any to 0.9": bm.Uniform(-0.9, 0.9)})
    >>> comparison.table.query("effect == 'indirect'")["verdict"].to_list()
    ['holds', 'fails']
    """

    def __init__(self, result: ComparisonResult) -> None:
        self._result = result

    @property
    def table(self) -> pd.DataFrame:
        """Long table: prior, effect, moderators, mean, sd, lower, upper, probability, mcse, verdict.

        The probability is that of the claim's limit for each effect; the verdict is given for the claim's effect.
        """
        return self._result.table

    @property
    def shifts(self) -> tuple[str, ...]:
        """Sentences saying which belief changes which subgroup's verdict, the first belief being the reference."""
        return self._result.shifts

    @property
    def rho(self) -> pd.DataFrame:
        """Mean and SD of rho under each belief, before the data (``prior_…``) and after them (``posterior_…``).

        Where the data are silent on rho the two are the same, exactly.
        """
        return self._result.rho

    def differences(self, reference: str | None = None) -> pd.DataFrame:
        """Return how far each belief's answer lies from that of a reference, the first belief if left out.

        Columns: prior, moderators; probability, the difference of the claim's probability, and mcse; mean, the
        difference of the effect's mean, and mean_mcse. Errors are those of differences on the same draws.
        """
        return differences(self._result, reference)

    @property
    def claim(self) -> Claim:
        """The claim that was judged."""
        return self._result.claim

    @property
    def beliefs(self) -> dict[str, Any]:
        """The priors compared, by label."""
        return dict(self._result.beliefs)

    def plot(self, **options: Any) -> "Picture":
        """Draw the probability of the claim under every belief; see ``bayesmed.plots.plot_beliefs``."""
        from bayesmed.plots.beliefs import plot_beliefs

        return plot_beliefs(self._result, **options)

    def _parts(self) -> tuple[str, pd.DataFrame, Sequence[str]]:
        return self._heading(), self._result.claimed.drop(columns="effect"), [*self.shifts, *self._routes()]

    def _routes(self) -> list[str]:
        """Say what became of each belief about rho where the data inform it."""
        if not self._result.result.joint:
            return []
        moved = self.rho.set_index("prior")
        return [
            f"{label}: rho has mean {row['prior_mean']:.2f} and SD {row['prior_sd']:.2f} before the data, "
            f"{row['posterior_mean']:.2f} and {row['posterior_sd']:.2f} after them"
            + (f"; {self._result.routes[label]}." if label in self._result.routes else ".")
            for label, row in moved.iterrows()
        ]

    def _heading(self) -> str:
        claim = self.claim
        return (
            f"Claim: {claim}, held to require a probability of {claim.required:g}. Intervals hold "
            f"{100 * self._result.ci_prob:g} %; mcse is the Monte Carlo error of the probability."
        )
