"""Fit: draws of what the data identify, from which every conclusion follows under any belief."""

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

import pandas as pd
import xarray as xr

from bayesmed.conclusions.breaking_point import breaking_point
from bayesmed.conclusions.claim import Claim
from bayesmed.conclusions.comparison import compare
from bayesmed.conclusions.direction import direction
from bayesmed.conclusions.effects import effects
from bayesmed.conclusions.envelope import envelope, worst_case
from bayesmed.conclusions.implied_prior import implied_prior
from bayesmed.conclusions.leaning import leaning
from bayesmed.conclusions.moderation_index import moderation_index
from bayesmed.conclusions.movement import Movement, movement
from bayesmed.conclusions.prior_map import prior_map
from bayesmed.conclusions.regions import regions
from bayesmed.conclusions.summary import rho_grid, summary
from bayesmed.conclusions.tipping import tipping
from bayesmed.conclusions.varying import covariance_tipping, with_covariance
from bayesmed.conclusions.yardsticks import Covariates, strength_draws, yardsticks
from bayesmed.fit.result import FitResult
from bayesmed.front.comparison import Comparison
from bayesmed.front.shown import Shown, as_html
from bayesmed.front.study import Study
from bayesmed.front.tipping import Tipping
from bayesmed.front.yardsticks import Yardsticks

if TYPE_CHECKING:
    from bayesmed.priors import Prior
    from bayesmed.report.page import Page


class Fit(Shown):
    """Posterior draws of a study; made by ``Study.fit``, ``Study.adopt`` or ``bayesmed.load``.

    Where the likelihood is silent on rho, the same draws serve every belief about rho. In all conclusions:

    at : dict, optional
        Moderator values: a list becomes a dimension, a scalar a coordinate, ``{}`` averages over all rows, None
        takes each moderator's default values.
    rho : prior, number or list of numbers, optional
        The belief to conclude under; None is the fit's own.
    claim : Claim, optional
        ``Claim("indirect", above=0)`` if left out.

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
    >>> fit.summary(rho=bm.LKJ(2))["effect"].to_list()
    ['indirect', 'direct', 'total']
    >>> fit.under(bm.LKJ(2)).rho
    LKJ(eta=2.0)
    """

    def __init__(self, result: FitResult) -> None:
        self.result = result

    @property
    def study(self) -> Study:
        """The study that was fitted."""
        return Study.of(self.result.observed)

    @property
    def posterior(self) -> xr.Dataset:
        """Draws of alpha, gamma, sigma_m, tau and, with a belief, of rho, beta, sigma_y."""
        return self.result.posterior

    @property
    def tree(self) -> xr.DataTree:
        """The whole DataTree, with sampler statistics and, as attributes, seed, versions, formulas and priors."""
        return self.result.tree

    @property
    def rho(self) -> "Prior | None":
        """The fit's own belief about rho."""
        belief: Prior | None = self.result.belief
        return belief

    @property
    def how(self) -> str:
        """How the draws were made, in one sentence."""
        s = self.result.settings
        kept = f"{s.chains} × {s.draws} draws"
        if s.method == "exact":
            return f"exact: {kept}, independent, under the reference prior (seed {s.random_seed})"
        if s.method == "adopted":
            return f"adopted: {kept} of a model of your own"
        joint = ""
        if self.result.joint:
            joint = "; rho is informed and " + ("was sampled jointly" if s.learn else "was held at its prior")
        return f"NUTS: {kept} after {s.tune} to adapt (seed {s.random_seed}){joint}"

    def under(self, prior: Any) -> "Fit":
        """Return a Fit under another belief about rho.

        Where the data are silent on rho nothing is sampled. Where they inform it the model is sampled again, which
        is said in :attr:`how`.
        """
        from bayesmed.core.errors import ArgumentError
        from bayesmed.fit.grouped import GroupedResult
        from bayesmed.fit.make import refit
        from bayesmed.priors import ByGroup, as_belief

        belief = as_belief(prior)
        if isinstance(belief, ByGroup) and not isinstance(self.result, GroupedResult):
            raise ArgumentError("under: a ByGroup needs a fit made with rho=ByGroup(…), study.fit(rho=…)")
        if self.result.joint:
            return Fit(refit(self.result, belief))
        return Fit(self.result.with_belief(belief))

    def effects(self, at: Any = None, rho: Any = None) -> xr.Dataset:
        """Return draws of the effects, in units of the outcome.

        Returns
        -------
        xarray.Dataset
            indirect, direct, total, and pure_indirect and total_direct where exposure and mediator interact. Dims
            chain, draw, then rho if a list was given, then one per listed moderator.
        """
        return effects(self.result, at, rho)

    def summary(
        self, at: Any = None, rho: Any = None, claim: Claim | None = None, ci_prob: float = 0.95
    ) -> pd.DataFrame:
        """Return a long table: effect, moderators, mean, sd, lower, upper, probability, mcse.

        Means and SDs are exact over the belief and infinite where they are; intervals are equal-tailed;
        probability is that of the claim's limit for each effect, and mcse its Monte Carlo error.
        """
        return summary(self.result, at, rho, claim, ci_prob)

    def rho_grid(
        self, rho: Any = None, at: Any = None, claim: Claim | None = None, ci_prob: float = 0.95
    ) -> pd.DataFrame:
        """Return the summary at each of a list of fixed rho, by default -0.9, -0.8, …, 0.9."""
        return rho_grid(self.result, rho, at, claim, ci_prob)

    def compare(
        self,
        beliefs: Mapping[str, Any],
        at: Any = None,
        claim: Claim | None = None,
        ci_prob: float = 0.95,
    ) -> Comparison:
        """Compare beliefs about rho, given as a dict of label → prior, on the same draws."""
        return Comparison(compare(self.result, beliefs, at, claim, ci_prob))

    def tipping(self, at: Any = None, claim: Claim | None = None, ci_prob: float = 0.95) -> Tipping:
        """Return the distribution of the rho at which the claim tips."""
        return Tipping(tipping(self.result, at, claim, ci_prob))

    def regions(
        self,
        prior: Any,
        moderator: str,
        claim: Claim | None = None,
        reading: Literal["pointwise", "simultaneous"] = "pointwise",
        at: Mapping[str, Any] | None = None,
    ) -> pd.DataFrame:
        """Return the moderator values where a claim holds under a prior, with the error of the edges.

        The simultaneous reading keeps the values at which the claim is true of all at once with the required
        probability; `at` holds other moderators at a value.
        """
        return regions(self.result, prior, moderator, claim, reading, at)

    def moderation_index(
        self,
        moderator: str,
        values: Sequence[Any] | None = None,
        rho: Any = None,
        at: Mapping[str, Any] | None = None,
    ) -> pd.DataFrame:
        """Return contrasts of the indirect effect between moderator values, and its slope where there is one.

        Where the exposure moves the mediator alike at all values no belief about rho is needed, and it is said.
        """
        return moderation_index(self.result, moderator, values, rho, at)

    def with_covariance(
        self,
        covariance: Any,
        at: Any = None,
        rho: Any = None,
        claim: Claim | None = None,
        ci_prob: float = 0.95,
    ) -> pd.DataFrame:
        """Return the summary when the two paths vary between people and covary: a number, belief or Covariance."""
        return with_covariance(self.result, covariance, at, rho, claim, ci_prob)

    def covariance_tipping(self, rho: Any, at: Any = None, claim: Claim | None = None) -> pd.DataFrame:
        """Return the covariance between people's paths that overturns a claim, at each given rho."""
        return covariance_tipping(self.result, rho, at, claim)

    def envelope(self, set_of_priors: Any, at: Any = None, claim: Claim | None = None) -> pd.DataFrame:
        """Return the smallest and largest probability of a claim, and mean of its effect, over a set of priors.

        ``all_rho`` beside them is another thing: the probability that the claim is true at every rho of the set.
        """
        return envelope(self.result, set_of_priors, at, claim)

    def worst_case(self, set_of_priors: Any, at: Any = None, claim: Claim | None = None) -> pd.DataFrame:
        """Return the prior of a set under which a claim is least probable, per moderator point."""
        return worst_case(self.result, set_of_priors, at, claim)

    def breaking_point(
        self, sets: Any, largest: float = 1.0, at: Any = None, claim: Claim | None = None
    ) -> pd.DataFrame:
        """Return how far a set of priors must grow, as in ``lambda e: Contaminated(prior, e)``, to overturn a claim."""
        return breaking_point(self.result, sets, largest, at, claim)

    def prior_map(
        self,
        family: str = "StretchedBeta",
        mean: Any = None,
        sd: Any = None,
        at: Any = None,
        claim: Claim | None = None,
        bounds: tuple[float, float] | None = None,
    ) -> xr.DataArray:
        """Return the probability of a claim over the plane of a belief's mean and SD of rho."""
        return prior_map(self.result, family, mean, sd, at, claim, bounds)

    def yardsticks(
        self,
        covariates: Covariates = None,
        strength: Sequence[float] = (0.5, 1, 2),
        at: Any = None,
        claim: Claim | None = None,
    ) -> Yardsticks:
        """Compare unmeasured causes with measured covariates.

        Parameters
        ----------
        covariates : str, list of str, or dict of label → covariate or list, optional
            Covariates, and blocks of them under a label; every covariate that stands in terms of its own if left out.
        strength : sequence of float
            How many times as strong as the covariate the unmeasured cause is.

        Returns
        -------
        Yardsticks
            ``.table``, the rho such a cause would leave; ``.overturning``, how strong it must be for the claim to tip.
        """
        return Yardsticks(yardsticks(self.result, covariates, strength, at, claim))

    def strength_draws(self, covariates: str | Sequence[str], multiple: float = 1.0) -> Any:
        """Return, per draw, the rho left by a cause `multiple` times as strong as a covariate or block."""
        return strength_draws(self.result, covariates, multiple)

    def movement(self) -> Movement:
        """Return how far rho moved from prior to posterior, with a distance and what moved it."""
        return movement(self.result)

    def implied_prior(self, at: Any = None, claim: Claim | None = None, draws: int = 20_000) -> pd.DataFrame:
        """Return quantiles of the indirect effect, and the claim's probability, under the prior alone.

        Drawn from the priors of coefficients, residual SDs and rho, with nothing of the data but its scale.
        """
        return implied_prior(self.result, at, claim, draws)

    def leaning(self, at: Any = None, rho: Any = None) -> pd.DataFrame:
        """Return whether effects lean on the coefficient priors, by power-scaling (not a verdict on rho).

        Columns: effect; coefficient_priors and rows, the sensitivity to each; leans_on_prior.
        """
        return leaning(self.result, at, rho)

    def direction(self) -> Any:
        """Return the sign of the exposure's effect on the mediator per draw: an array of -1, 0 and 1."""
        return direction(self.result)

    def report(
        self,
        folder: str | Path,
        beliefs: Mapping[str, Any] | None = None,
        at: Any = None,
        claim: Claim | None = None,
        ci_prob: float = 0.95,
        title: str | None = None,
        *,
        rows: bool = True,
    ) -> Path:
        """Write a folder with the report as a page and as Markdown, tables, pictures, fit and study file; return it.

        Beliefs are those of ``bayesmed.priors.panel()`` if left out. A folder that bayesmed wrote is replaced, any
        other that is not empty is refused. ``fit.nc`` and ``rows.csv`` hold the rows used (the study's columns only);
        ``rows=False`` leaves them out.
        """
        from bayesmed.report.folder import write_report

        return write_report(
            self.result, folder, beliefs=beliefs, at=at, claim=claim, ci_prob=ci_prob, title=title, rows=rows
        )

    def explore(
        self,
        beliefs: Mapping[str, Any] | None = None,
        at: Any = None,
        claim: Claim | None = None,
        ci_prob: float = 0.95,
        title: str | None = None,
    ) -> "Page":
        """Return the report's page, which answers to a reader's own belief, and which a notebook shows.

        The page holds draws of the effects and no row. Arguments are those of :meth:`report`.
        """
        from bayesmed.report.findings import find
        from bayesmed.report.page import explore

        return explore(find(self.result, beliefs, at, claim, ci_prob, title))

    def save(self, path: str | Path, *, rows: bool = True) -> Path:
        """Write the fit to a NetCDF file, whole or not at all, and return its path.

        The file holds the rows used (the study's columns only), since other moderator values need them: treat it as
        you treat the data. With ``rows=False`` it holds the draws and no row; then it cannot be loaded as a fit.
        """
        from bayesmed.fit.store import save

        return save(self.result, path, rows=rows)

    def _parts(self) -> tuple[str, pd.DataFrame, Sequence[str]]:
        sentence, table = self._answer()
        return "\n".join([repr(self.study), f"  draws              {self.how}", "", sentence]), table, ()

    def _repr_html_(self) -> str:
        sentence, table = self._answer()
        return as_html(f"{sentence}\n{self.how}", table)

    def _answer(self) -> tuple[str, pd.DataFrame]:
        if self.result.belief is None:
            return (
                "No belief about rho yet: the total effect does not depend on it, and every other effect does. "
                "Effects at rho = 0, that is with nothing left out:",
                self.summary(rho=0.0),
            )
        return (
            f"Effects under the belief {self.result.belief!r}, probability of an effect > 0:",
            self.summary(),
        )


def load(path: str | Path) -> Fit:
    """Return a fit that ``Fit.save`` wrote.

    Examples
    --------
    >>> import tempfile
    >>> import bayesmed as bm
    >>> study = bm.Study(
    ...     {"x": [0, 0, 1, 1, 0, 1], "m": [1, 2, 3, 3, 2, 4], "y": [2, 1, 4, 5, 2, 4]},
    ...     exposure="x",
    ...     mediator="m ~ x",
    ...     outcome="y ~ m + x",
    ... )
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = study.fit(method="exact", draws=10, random_seed=1, progressbar=False).save(f"{folder}/fit.nc")
    ...     bm.load(path).how
    'exact: 4 × 10 draws, independent, under the reference prior (seed 1)'
    """
    from bayesmed.fit import store

    return Fit(store.load(path))
