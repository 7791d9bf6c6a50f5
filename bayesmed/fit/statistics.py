"""The two regressions of a study reduced to sufficient statistics, with what informs the correlation."""

from dataclasses import dataclass

import numpy as np

from bayesmed.core.errors import DesignError
from bayesmed.core.mapping import INFORMING_RESIDUAL, Alignment, Array
from bayesmed.core.regression import Regression, regression_from
from bayesmed.study.observe import Observed
from bayesmed.study.rank import rank_deficiencies


@dataclass(frozen=True, eq=False)
class Statistics:
    """What the model needs of the rows.

    The outcome's conditional mean is ``W gamma + slope [(M - W u) - (V - W L) alpha]`` with ``slope`` the
    confounded slope of the map. The bracket is zero where the likelihood is silent on the correlation, and
    orthogonal to W always, so one pair of regressions serves both cases.

    Attributes
    ----------
    mediator : Regression
        M on V.
    outcome : Regression
        Y on W.
    informed_outcome : Regression
        Y on ``[W, M - W u, (V - W L) of the informing terms]``; the same as `outcome` where nothing informs.
    informing : tuple of int
        Columns of V outside the span of W.
    functional_form : bool
        True if M itself lies outside the span of W.
    alignment : Alignment
    """

    mediator: Regression
    outcome: Regression
    informed_outcome: Regression
    informing: tuple[int, ...]
    functional_form: bool
    alignment: Alignment

    @property
    def informed(self) -> bool:
        """True if the likelihood carries information on the residual correlation."""
        return self.functional_form or bool(self.informing)


def reduce_study(observed: Observed) -> Statistics:
    """Return the sufficient statistics of both regressions.

    Raises
    ------
    DesignError
        If a design is rank deficient, a fit is perfect, or fewer than three degrees of freedom remain.
    """
    compressed = observed.compressed
    pairs = (
        ("mediator", compressed.mediator_terms, observed.mediator_terms, compressed.sides[0]),
        ("outcome", compressed.outcome_terms, observed.outcome_terms, compressed.sides[1]),
    )
    regressions = []
    for name, columns, terms, response in pairs:
        deficient = rank_deficiencies(compressed.summary.columns(columns), terms)
        if deficient:
            raise DesignError(
                f"the {name} equation is rank deficient: "
                + "; ".join(str(d) for d in deficient)
                + ". Remove one of these terms."
            )
        regression = regression_from(compressed.summary, columns, response)
        if regression.degrees_of_freedom < 3:
            raise DesignError(
                f"the {name} equation has {regression.terms} coefficients for {regression.rows} complete rows; "
                "at least three more rows than coefficients are needed for the effect to have a variance"
            )
        if regression.residual_sd <= 1e-10 * regression.response_sd:
            raise DesignError(
                f"the {name} equation fits its rows perfectly, so the residual SD is zero; is one term a copy "
                "of the response?"
            )
        regressions.append(regression)
    return _with_residuals(observed, regressions[0], regressions[1])


def _with_residuals(observed: Observed, mediator: Regression, outcome: Regression) -> Statistics:
    alignment = observed.alignment
    informing = tuple(int(i) for i in np.flatnonzero(alignment.term_residuals > INFORMING_RESIDUAL))
    functional = alignment.mediator_residual > INFORMING_RESIDUAL
    if not informing and not functional:
        return Statistics(mediator, outcome, outcome, (), False, alignment)
    # Columns of the summary, as weights: those of W, then M - W u, then V - W L of the informing terms, then Y.
    own = np.eye(len(observed.compressed.summary.shift))
    w = own[:, list(observed.compressed.outcome_terms)]
    m, y = own[:, observed.compressed.sides[0]], own[:, observed.compressed.sides[1]]
    columns = [w]
    if functional:
        columns.append((m - w @ alignment.mediator)[:, None])
    if informing:
        chosen = list(informing)
        v = own[:, [observed.compressed.mediator_terms[k] for k in chosen]]
        columns.append(v - w @ alignment.terms[:, chosen])
    weights = np.column_stack([*columns, y])
    terms = weights.shape[1] - 1
    informed = regression_from(observed.compressed.summary.combined(weights), range(terms), terms)
    return Statistics(mediator, outcome, informed, informing, functional, alignment)


def residual_coefficients(statistics: Statistics, slope: Array, alpha: Array) -> list[Array]:
    """Return the coefficients of the residual columns of `informed_outcome`, given slope and alpha.

    Works on numpy scalars and PyTensor variables; the caller joins the parts.
    """
    parts = [slope[None]] if statistics.functional_form else []
    if statistics.informing:
        parts.append(-slope * alpha[list(statistics.informing)])
    return parts
