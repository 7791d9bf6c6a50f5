"""Study: data, roles and two formulas."""

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any, Literal

from bayesmed.core.errors import DataWarning, InformedWarning
from bayesmed.study.audit import Audit, audit
from bayesmed.study.observe import Observed, observe

if TYPE_CHECKING:
    import xarray as xr

    from bayesmed.front.fit import Fit
    from bayesmed.priors import Coefficients


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

    def audit(self) -> Audit:
        """Return what a careful reader would check before fitting: rows, arms, spread, rank, what informs rho."""
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
        import warnings

        from bayesmed.fit.informants import informed_message
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
        if result.statistics.informed and learn:
            message = informed_message(result.observed, result.statistics, result.coefficients)
            warnings.warn(InformedWarning(message), stacklevel=2)
        for identifier in result.observed.identifiers:
            message = (
                f"column {identifier.name!r} looks like an identifier and repeats (a value in up to {identifier.most} "
                "rows); rows are taken as independent, and intervals are too narrow if they are not"
            )
            warnings.warn(DataWarning(message), stacklevel=2)
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
        o = self.observed
        found = ", ".join(m.name for m in o.moderators) or "none"
        low, high = o.contrast
        return (
            f"Study of {o.exposure} ({low} → {high}) through {o.mediator_name} on {o.outcome_name}\n"
            f"  mediator equation  {o.mediator_formula}\n"
            f"  outcome equation   {o.outcome_formula}\n"
            f"  moderators         {found}\n"
            f"  rows               {o.rows.used} used of {o.rows.given}"
        )

    def _repr_html_(self) -> str:
        from html import escape

        return f"<pre>{escape(repr(self))}</pre>"
