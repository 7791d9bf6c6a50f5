"""The prior of one regression's coefficients: an equivariant default, replaceable term by term.

Default: centred fitted values have a normal prior as wide as 2.5 SDs of the response times the square root of
the number of rows, ``D_c theta ~ Normal(0, (2.5 s_y)² n)`` along each direction, and the mean fitted value is flat.
Written as a quadratic form in ``D_c theta`` it does not depend on units, origin or coding of any column. Terms
with an explicit prior leave it, and the others keep their marginal.
"""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.linalg import solve_triangular

from bayesmed.core.mapping import Array
from bayesmed.core.regression import Regression

WIDTH = 2.5
"""Width of the default prior in SDs of the response, per SD of a predictor that stands alone."""
SIGMA_LOG_SD = 2.0
"""SD of the logarithm of a residual SD under the default prior: a factor of about 50 either way."""


@dataclass(frozen=True, eq=False)
class CoefficientPrior:
    """Prior of a coefficient vector, and an affine change of variables in which its posterior is round.

    Attributes
    ----------
    root : array, shape (any, term)
        The default part of the log density is ``-½ |root theta|²``.
    explicit : tuple of (int, prior)
        Position and prior of each term with a prior of its own.
    centre, whiten : arrays, shape (term,) and (term, term)
        ``whiten (theta - centre)`` has about unit posterior covariance; `whiten` is upper triangular.
    """

    root: Array
    explicit: tuple[tuple[int, Any], ...]
    centre: Array
    whiten: Array

    @property
    def unwhiten(self) -> Array:
        """Inverse of `whiten`."""
        return np.asarray(solve_triangular(self.whiten, np.eye(len(self.centre))))


def coefficient_prior(
    regression: Regression, terms: tuple[str, ...], explicit: Mapping[str, Any], elsewhere: Iterable[str] = ()
) -> CoefficientPrior:
    """Return the prior of a regression's coefficients.

    Parameters
    ----------
    regression : Regression
    terms : tuple of str
        Names of the coefficients, in the order of the design's columns.
    explicit : mapping of str to prior
        Terms with a prior of their own, all of them in `terms`.
    elsewhere : iterable of str
        Terms that leave the default because their prior is stated on another scale, and stands elsewhere.
    """
    chosen = [(terms.index(name), prior) for name, prior in explicit.items()]
    scale = WIDTH * regression.response_sd * np.sqrt(regression.rows)
    leaving = [i for i, _ in chosen] + [terms.index(name) for name in elsewhere]
    root = _marginal_root(regression.centred_factor / scale, leaving)
    p = regression.terms
    s = regression.residual_sd
    rows = [regression.factor[:p, :p] / s, root]
    targets = [regression.factor[:p, p] / s, np.zeros(len(root))]
    for position, prior in chosen:
        row = np.zeros((1, p))
        row[0, position] = np.sqrt(prior.precision())
        rows.append(row)
        targets.append(row[0, [position]] * prior.median())
    whiten = np.linalg.qr(np.column_stack([np.vstack(rows), np.concatenate(targets)]), mode="r")[: p + 1]
    centre = solve_triangular(whiten[:p, :p], whiten[:p, p])
    return CoefficientPrior(root, tuple(chosen), np.asarray(centre), np.asarray(whiten[:p, :p]))


def _marginal_root(centred: Array, leaving: list[int]) -> Array:
    """Return a root of the precision that the terms not in `leaving` have once those are integrated out."""
    if not leaving:
        return centred
    staying = [i for i in range(centred.shape[1]) if i not in leaving]
    norms = np.linalg.norm(centred, axis=0)
    # A constant column has no part in the centred design; it must not absorb a direction.
    informative = [i for i in leaving if norms[i] > 1e-12 * norms.max(initial=0.0)]
    factor = np.linalg.qr(centred[:, informative + staying], mode="r")
    root = np.zeros((max(factor.shape[0] - len(informative), 0), centred.shape[1]))
    root[:, staying] = factor[len(informative) :, len(informative) :]
    return root
