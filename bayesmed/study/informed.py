"""Whether the data inform the residual correlation, by which terms, and how strongly."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import stats

from bayesmed.core.mapping import INFORMING_RESIDUAL, Array
from bayesmed.study.rank import DEPENDENT

if TYPE_CHECKING:
    from bayesmed.study.observe import Observed

__all__ = ["WEAK_F", "Informed", "first_stage_p", "informed"]

WEAK_F = 10.0
"""Below this first-stage F an instrument is called weak: Staiger & Stock 1997 (doi:10.2307/2171753), a rule
of thumb that Stock & Yogo 2005 (doi:10.1017/CBO9780511614491.006) refine and later work finds lenient."""


@dataclass(frozen=True)
class Informed:
    """What the likelihood knows of the residual correlation.

    Attributes
    ----------
    terms : tuple of str
        Terms of the mediator equation that the outcome equation cannot express.
    functional_form : bool
        True if the outcome equation cannot express the mediator itself.
    restrictions : int
        How many restrictions the missing terms amount to.
    first_stage_f : float or None
        F of those restrictions in the mediator equation; None without missing terms.
    first_stage_df : tuple of two ints or None
        Its degrees of freedom.
    r_standard_error : float
        Standard error with which the data alone would tell ``r = rho / sqrt(1 - rho²)``, were it near zero;
        infinite where the data are silent.

    Notes
    -----
    With ``theta = r tau / sigma_m`` the likelihood of Y given M is normal about

        W gamma + theta [(M - W u) - (V - W L) alpha],

    and the bracket is what is left of ``M - V alpha`` outside the span of W, call it xi. As the columns of W
    have coefficients of their own, theta has the standard error ``tau / |xi|`` and r has ``sigma_m / |xi|``.
    That alpha is estimated too adds nothing at r = 0, where the mean does not depend on it; away from zero
    the standard error is larger. For k missing terms and M in the span of W it equals
    ``sqrt(1 / (k F) + 1 / (n - p))`` with F the first-stage F.
    """

    terms: tuple[str, ...]
    functional_form: bool
    restrictions: int
    first_stage_f: float | None
    first_stage_df: tuple[int, int] | None
    r_standard_error: float

    def __bool__(self) -> bool:
        return self.functional_form or bool(self.terms)

    @property
    def weak(self) -> bool | None:
        """True if the first-stage F is below :data:`WEAK_F`, None where there is no F."""
        return None if self.first_stage_f is None else self.first_stage_f < WEAK_F

    def words(self, mediator: str = "the mediator") -> tuple[str, ...]:
        """Return what a reader should know, a sentence or two each."""
        if not self:
            return (
                "The data are silent on rho: its distribution after seeing them is whatever was believed "
                "before, and every conclusion rests on that belief.",
            )
        said = []
        if self.terms:
            one = len(self.terms) == 1
            said.append(
                f"The data inform rho because {', '.join(self.terms)} {'stands' if one else 'stand'} in the "
                "mediator equation and not in the outcome equation: the model takes "
                f"{'it' if one else 'them'} to have no effect on the outcome but through the mediator. If "
                f"you do not believe that, add {'it' if one else 'them'} to the outcome formula. "
                f"{self._f_words()}"
            )
        if self.functional_form:
            said.append(
                f"The data inform rho because the outcome equation does not hold {mediator} itself as a "
                "term, only functions of it: the shape of the formula is trusted as evidence. If you do "
                f"not trust it, add {mediator} to the outcome formula."
            )
        low, high = (math.sin(math.atan(1.96 * sign * self.r_standard_error)) for sign in (-1, 1))
        said.append(
            "Were rho 0, the data alone would tell r = rho / sqrt(1 - rho²) with a standard error of "
            f"{self.r_standard_error:.2g}, so rho to within about {low:.2f} to {high:.2f}; a belief that is "
            "narrower than this hardly moves."
        )
        return tuple(said)

    def _f_words(self) -> str:
        if self.first_stage_f is None:
            return ""
        f = f"F = {self.first_stage_f:.1f}"
        if self.weak:
            return (
                f"The evidence is weak: {f} < {WEAK_F:.0f} (rule of thumb of Staiger & Stock 1997), so the "
                "posterior of rho leans on the prior all the same."
            )
        return f"The evidence is not weak by the rule of thumb F ≥ {WEAK_F:.0f} of Staiger & Stock 1997: {f}."


def informed(observed: Observed) -> Informed:
    """Return what the data tell of the residual correlation.

    Parameters
    ----------
    observed : Observed
    """
    alignment = observed.alignment
    functional_form = alignment.mediator_residual > INFORMING_RESIDUAL
    informing = np.flatnonzero(alignment.term_residuals > INFORMING_RESIDUAL)
    terms = tuple(observed.mediator_terms[j] for j in informing)
    if not terms and not functional_form:
        return Informed((), False, 0, None, None, math.inf)
    compressed = observed.compressed
    v, w, m = compressed.mediator_design, compressed.outcome_design, compressed.mediator
    residual = _split(v, m)[1]
    df = observed.rows.used - _rank(v)
    sigma_m = math.sqrt(residual @ residual / df)
    beyond = _split(w, residual)[1]
    error = sigma_m / float(np.linalg.norm(beyond))
    if not terms:
        return Informed((), functional_form, 0, None, None, error)
    inside, restrictions = _inside(v, w, informing, alignment.terms)
    smaller = _split(inside, m)[1]
    explained = smaller @ smaller - residual @ residual
    f = float(explained / restrictions / sigma_m**2)
    return Informed(terms, functional_form, restrictions, f, (restrictions, df), error)


def first_stage_p(value: Informed) -> float | None:
    """Return the p value of the first-stage F, or None where there is none."""
    if value.first_stage_f is None or value.first_stage_df is None:
        return None
    return float(stats.f.sf(value.first_stage_f, *value.first_stage_df))


def _inside(v: Array, w: Array, informing: np.ndarray, placed: Array) -> tuple[Array, int]:
    """Return columns that span what the outcome design can express of the mediator design, and how much it cannot.

    The combinations ``V a`` in the span of W are those with ``(V - W L) a = 0``; the rank of ``V - W L`` counts
    the others.
    """
    size = np.linalg.norm(v, axis=0)
    size[size == 0] = 1.0
    outside = np.zeros_like(v)
    outside[:, informing] = (v - w @ placed)[:, informing] / size[informing]
    triangle = np.linalg.qr(outside, mode="r")
    singular, directions = np.linalg.svd(triangle)[1:]
    rank = int(np.sum(singular > INFORMING_RESIDUAL))
    inside = (v / size) @ directions[rank:].T
    # A combination of columns that are dependent themselves is rounding and no column.
    return inside[:, np.linalg.norm(inside, axis=0) > DEPENDENT], rank


def _split(design: Array, values: Array) -> tuple[Array, Array]:
    """Return the least-squares fit of `values` on a design of any rank, and the rest."""
    if design.shape[1] == 0:
        return np.zeros_like(values), values
    size = np.linalg.norm(design, axis=0)
    size[size == 0] = 1.0
    scaled = design / size
    fitted = scaled @ np.linalg.lstsq(scaled, values, rcond=DEPENDENT)[0]
    return fitted, values - fitted


def _rank(design: Array) -> int:
    if design.shape[1] == 0:
        return 0
    size = np.linalg.norm(design, axis=0)
    size[size == 0] = 1.0
    return int(np.linalg.matrix_rank(design / size, rtol=DEPENDENT))
