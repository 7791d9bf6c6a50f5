"""Rank deficiency by name: which column of a design is a combination of which others."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.linalg import qr

from bayesmed.core.mapping import Array

DEPENDENT = 1e-10
"""A unit-norm column of which less than this lies outside the span of the others is a combination of them."""

_NAMED = 1e-6


@dataclass(frozen=True)
class Deficiency:
    """One column of a design that adds nothing to the others.

    Attributes
    ----------
    term : str
    combines : tuple of str
        The columns it is a combination of; empty if it is zero in every row.
    """

    term: str
    combines: tuple[str, ...]

    def __str__(self) -> str:
        match self.combines:
            case ():
                return f"{self.term} is zero in every row"
            case ("Intercept",):
                return f"{self.term} is the same in every row"
            case (one,):
                return f"{self.term} is a multiple of {one}"
        return f"{self.term} is a combination of {', '.join(self.combines[:-1])} and {self.combines[-1]}"


def rank_deficiencies(design: Array, terms: Sequence[str]) -> tuple[Deficiency, ...]:
    """Return the columns of a design that are combinations of earlier ones.

    Parameters
    ----------
    design : array, shape (row, term)
    terms : sequence of str
        The name of each column.
    """
    norms = np.linalg.norm(design, axis=0)
    zero = norms == 0
    found = [Deficiency(terms[int(j)], ()) for j in np.flatnonzero(zero)]
    kept = np.flatnonzero(~zero)
    if not len(kept):
        return tuple(found)
    # The triangular factor has the geometry of the columns at a size that does not grow with the rows.
    triangle = np.linalg.qr(design[:, kept] / norms[kept], mode="r")
    pivots = np.abs(np.diag(qr(triangle, mode="r", pivoting=True)[0]))
    if pivots.min() > DEPENDENT and len(pivots) == len(kept):
        return tuple(found)
    independent: list[int] = []
    for j in range(len(kept)):
        column = triangle[:, j]
        if independent:
            others = triangle[:, independent]
            weights = np.linalg.lstsq(others, column, rcond=None)[0]
            if np.linalg.norm(column - others @ weights) <= DEPENDENT:
                named = tuple(terms[kept[i]] for i, w in zip(independent, weights, strict=True) if abs(w) > _NAMED)
                found.append(Deficiency(terms[kept[j]], named))
                continue
        independent.append(j)
    return tuple(found)
