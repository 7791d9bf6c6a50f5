"""Study: data, roles and two formulas."""

from collections.abc import Callable, Mapping, Sequence
from typing import TYPE_CHECKING, Any, Literal

from bayesmed.study.observe import Observed, observe

if TYPE_CHECKING:
    import xarray as xr

    from bayesmed.front.fit import Fit
    from bayesmed.priors import Coefficients
    from bayesmed.study.audit import Audit


class Study:
    """What was observed: rows, which column is the exposure, and the two equations.

    Parameters
    ----------
    data : pandas.DataFrame, or any frame or dict of columns that converts to one
        One row per independent unit. Or batches of rows, read twice and never held at once: the path of a Parquet
        file, a list of frames, or a function that returns a new iterator of frames.
    exposure : str
        Column whose effect is asked.
    contrast : pair, optional
        The two values of the exposure that are compared, from the first to the second. May be left out for an
        exposure of 0 and 1, a boolean, or a categorical column with two levels.
    mediator : str
        Formula of the mediator equation, ``"exercise ~ coaching + confidence + age"``.
    outcome : str
        Formula of the outcome equation, ``"function ~ exercise * confidence + coaching + age"``.
    moderators : sequence of str, optional
        Which of the moderators found get a default grid of values; all of them if left out.
    executor : concurrent.futures.Executor, optional
        Summarises batches side by side; Dask's ``Client.get_executor()`` is one.

    Raises
    ------
    DataError, FormulaError, ArgumentError
        With the column, formula or argument at fault and what to do.

    Notes
    -----
    Assumed, and not testable here: the exposure is free of unmeasured causes of mediator and outcome given the
    covariates; moderators and covariates precede the exposure; no cause of both mediator and outcome is itself
    an effect of the exposure; rows are independent.

    Examples
    --------
    >>> import bayesmed as bm
    >>> study = bm.Study(
    ...     bm.load_example("knee_rehab"),
    ...     exposure="coaching",
    ...     mediator="exercise ~ coaching + confidence",
    ...     outcome="function ~ exercise + coaching + confidence",
    ... )
    >>> study
    Study of coaching (0 → 1) through exercise on function
      mediator equation  exercise ~ coaching + confidence
      outcome equation   function ~ exercise + coaching + confidence
      moderators         none
      rows               232 used of 240
    """

    def __init__(
        self,
        data: Any,
        *,
        exposure: str,
        mediator: str,
        outcome: str,
        contrast: Sequence[Any] | None = None,
        moderators: Sequence[str] | None = None,
        executor: Any = None,
    ) -> None:
        self.observed: Observed = observe(
            data,
            exposure=exposure,
            contrast=contrast,
            mediator=mediator,
            outcome=outcome,
            moderators=moderators,
            executor=executor,
        )

    @classmethod
    def of(cls, observed: Observed) -> "Study":
        """Return the study of what was observed, checked before."""
        study = cls.__new__(cls)
        study.observed = observed
        return study

    @classmethod
    def from_moments(
        cls,
        *,
        mean: Any,
        cov: Any = None,
        corr: Any = None,
        sd: Any = None,
        n: int,
        exposure: str,
        contrast: Sequence[Any] | None = None,
        mediator: str,
        outcome: str,
        moderators: Sequence[str] | None = None,
        decimals: int | None = None,
    ) -> "Study":
        """Return a study from published means and covariances, or correlations and SDs, without its rows.

        Formulas may hold columns, and products of exposure, mediator and one other column whose own moments are given
        under the product's name, ``"m:z"``. What looks at single rows is left out, and :meth:`audit` says so.

        Parameters
        ----------
        mean, sd : dict of name → figure
            Means (None if none are printed) and, with `corr`, standard deviations. A figure is a number, or text that
            keeps its last zeros, ``"0.50"``.
        cov, corr : DataFrame, nested dict, or square array in the order of the names
            Covariances with divisor n - 1, or correlations; the lower triangle is enough.
        n : int
            Number of rows.
        exposure, contrast, mediator, outcome, moderators :
            As for rows. The contrast may be left out if mean and variance are those of a 0/1 column.
        decimals : int, optional
            Decimals printed; as many as each figure shows if left out. See :meth:`rounding`.

        Raises
        ------
        ArgumentError, DataError, FormulaError
            Naming the figure, the covariances or the term at fault.
        """
        from bayesmed.study.moments import from_moments
        from bayesmed.study.published import observe_published

        return cls.of(
            observe_published(
                from_moments(mean=mean, cov=cov, corr=corr, sd=sd, n=n, decimals=decimals),
                exposure=exposure,
                contrast=contrast,
                mediator=mediator,
                outcome=outcome,
                moderators=moderators,
            )
        )

    @classmethod
    def from_regressions(
        cls,
        *,
        exposure: str,
        mediator: str,
        outcome: str,
        mediator_on: Mapping[str, Any],
        outcome_on: Mapping[str, Any],
        total_on: Mapping[str, Any] | None = None,
        n: int,
        contrast: Sequence[Any] | None = None,
        arms: Sequence[int] | None = None,
        unprinted_covariates: int = 0,
        decimals: int | None = None,
    ) -> "Study":
        """Return a study from its printed regressions: the mediator's, the outcome's, and the total effect's if any.

        Parameters
        ----------
        exposure, mediator, outcome : str
            Their names.
        mediator_on, outcome_on, total_on : dict of term → (estimate, standard error)
            In place of the pair, ``{"estimate": "0.466", "se": "0.100", "t": "4.646"}`` with either or both of the last
            two. Terms are "Intercept", the exposure, in `outcome_on` the mediator, and covariates; "residual" gives
            the residual SD. `total_on` is the outcome without the mediator. More figures than needed are weighed by
            their rounding, and refused if they contradict each other.
        n : int
            Number of rows.
        contrast : pair, optional
            The exposure is coded 0/1 if left out.
        arms : pair of int, optional
            Rows without and with a 0/1 exposure.
        unprinted_covariates : int
            How many covariates were adjusted for and not printed.
        decimals : int, optional
            Decimals printed; as many as each figure shows if left out. See :meth:`rounding`.

        Raises
        ------
        ArgumentError, DataError
            Naming the figure that is missing, no number, or not compatible with the others.
        """
        from bayesmed.study.printed_regressions import from_regressions
        from bayesmed.study.published import observe_published

        published = from_regressions(
            exposure=exposure,
            mediator=mediator,
            outcome=outcome,
            mediator_on=mediator_on,
            outcome_on=outcome_on,
            total_on=total_on,
            n=n,
            arms=arms,
            unprinted_covariates=unprinted_covariates,
            decimals=decimals,
            binary=contrast is None,
        )
        equations = published.equations(exposure, mediator, outcome)
        pair = (0, 1) if contrast is None else contrast
        return cls.of(observe_published(published, exposure=exposure, contrast=pair, **equations))

    def rounding(
        self,
        ask: Callable[["Fit"], Any],
        *,
        draws: int = 1000,
        chains: int = 4,
        random_seed: int = 0,
    ) -> Any:
        """Return how far the rounding of published figures leaves an answer open.

        Parameters
        ----------
        ask : callable
            Takes a Fit and returns a number, a table, or what has one, such as
            ``lambda fit: fit.summary(at={}, rho=bm.Uniform(-0.3, 0.3))``. It is asked of exact fits with the same
            random numbers while each figure moves within half a unit of its last digit.
        draws, chains, random_seed : int
            Of those fits.

        Returns
        -------
        pandas.DataFrame
            The answer's table; beside each column that moves, its smallest and largest value as ``…_from`` and
            ``…_to``. To first order in the rounding.

        Raises
        ------
        ArgumentError
            If the study has rows of its own.
        """
        from bayesmed.front.rounding import rounding

        return rounding(self, ask, draws=draws, chains=chains, random_seed=random_seed)

    def audit(self) -> "Audit":
        """Return what a careful reader would check before fitting: rows, arms, spread, rank, what informs rho."""
        from bayesmed.study.audit import audit

        return audit(self.observed)

    def model(self, rho: Any = None, coefficients: "Coefficients | None" = None) -> Any:
        """Return the PyMC model, with named dims, to read or to extend.

        Parameters
        ----------
        rho : prior or number, optional
            A belief about the residual correlation; without it ``rho``, ``beta`` and ``sigma_y`` are left out.
        coefficients : Coefficients, optional
            Priors by term name in place of the default.

        Returns
        -------
        pymc.Model
        """
        from bayesmed.fit.make import checked_coefficients
        from bayesmed.fit.model import build_model
        from bayesmed.fit.statistics import reduce_study
        from bayesmed.priors import coerce

        return build_model(
            reduce_study(self.observed),
            self.observed.mediator_terms,
            self.observed.outcome_terms,
            None if rho is None else coerce(rho),
            checked_coefficients(coefficients, self.observed),
        )

    def fit(
        self,
        rho: Any = None,
        method: Literal["nuts", "exact"] = "nuts",
        *,
        draws: int = 1000,
        tune: int = 1000,
        chains: int = 4,
        random_seed: int | None = None,
        coefficients: "Coefficients | None" = None,
        learn: bool = True,
        progressbar: bool = True,
    ) -> "Fit":
        """Sample what the data identify.

        Parameters
        ----------
        rho : prior or number, optional
            A belief about the residual correlation of mediator and outcome. It may wait until a conclusion asks.
        method : {"nuts", "exact"}
            "nuts" samples the PyMC model. "exact" makes independent draws under the reference prior
            ``∝ 1/sigma²`` without PyMC.
        draws, tune, chains : int
            Draws kept and draws to adapt per chain; number of chains.
        random_seed : int, optional
            The same seed gives the same draws; a new one is made and recorded if left out.
        coefficients : Coefficients, optional
            Priors by term name in place of the default. On the structural scale they inform rho.
        learn : bool
            False holds the posterior of rho at its prior where formulas or priors would inform it.
        progressbar : bool
            False is quiet.

        Returns
        -------
        Fit

        Warns
        -----
        InformedWarning
            If the formulas let the data inform rho; the terms are named.
        SamplingWarning
            If a diagnostic is outside its bound.
        """
        from bayesmed.fit.make import fit_study
        from bayesmed.front.fit import Fit
        from bayesmed.priors import as_belief

        result = fit_study(
            self.observed,
            rho=None if rho is None else as_belief(rho),
            method=method,
            draws=draws,
            tune=tune,
            chains=chains,
            random_seed=random_seed,
            coefficients=coefficients,
            learn=learn,
            progressbar=progressbar,
        )
        fit = Fit(result)
        if progressbar:
            print(fit.how)
        return fit

    def adopt(
        self, tree: "xr.DataTree", rho: Literal["informed", "unidentified"] = "informed", belief: Any = None
    ) -> "Fit":
        """Return a Fit from draws of a model that extends :meth:`model`.

        Parameters
        ----------
        tree : xarray.DataTree
            What ``pm.sample`` returned; its posterior holds alpha, gamma, sigma_m, tau, and rho if the model has it.
        rho : {"informed", "unidentified"}
            Whether your extension may have told the model something about rho. "informed" keeps rho with the
            other draws and allows no other belief; "unidentified" says that it does not, and allows any.
        belief : prior, optional
            With "unidentified", the fit's own belief.

        Returns
        -------
        Fit
        """
        from bayesmed.fit.adopt import adopt
        from bayesmed.front.fit import Fit
        from bayesmed.priors import coerce

        return Fit(adopt(self.observed, tree, rho=rho, belief=None if belief is None else coerce(belief)))

    def __repr__(self) -> str:
        sentence, facts = self._facts()
        return "\n".join([sentence, *(f"  {name:<18} {value}" for name, value in facts.items())])

    def _repr_html_(self) -> str:
        from html import escape

        sentence, facts = self._facts()
        left = "style='text-align:left'"
        rows = "".join(f"<tr><th {left}>{k}</th><td {left}>{escape(v)}</td></tr>" for k, v in facts.items())
        return f"<div><p>{escape(sentence)}</p><table>{rows}</table></div>"

    def _facts(self) -> tuple[str, dict[str, str]]:
        o = self.observed
        low, high = o.contrast
        published = o.published is not None
        return (
            f"Study of {o.exposure} ({low} → {high}) through {o.mediator_name} on {o.outcome_name}",
            {
                "mediator equation": o.mediator_formula,
                "outcome equation": o.outcome_formula,
                "moderators": ", ".join(m.name for m in o.moderators) or "none",
                "rows": f"none; published figures, n = {o.rows.given}"
                if published
                else f"{o.rows.used} used of {o.rows.given}",
            },
        )
