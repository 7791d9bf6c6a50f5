"""A belief given by points of its cdf: from a histogram, a panel of experts or the draws of another study."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import ndtr

from bayesmed.core.errors import PriorError
from bayesmed.priors.arguments import real, refusal
from bayesmed.priors.cdf_table import CdfTable
from bayesmed.priors.prior import Floats, Prior
from bayesmed.priors.quadrature import integrate

__all__ = ["Tabulated", "from_draws"]

FEWEST_DRAWS = 100
MOST_DRAWS = 20_000
POINTS = 201


@dataclass(frozen=True)
class Tabulated(Prior):
    """P(ρ ≤ values[i]) = probabilities[i], with a smooth increasing cdf between.

    The cdf is interpolated on Fisher's scale, atanh ρ, by cubics that keep it increasing. Its support ends
    with the table, inside (−1, 1), so an effect has a mean and an SD under it.

    Parameters
    ----------
    values : sequence of float
        Two or more increasing values strictly between −1 and 1.
    probabilities : sequence of float
        Their cumulative probabilities, none less than the one before it, the first 0 and the last 1.

    Examples
    --------
    >>> float(Tabulated([-0.2, 0, 0.5], [0, 0.25, 1]).above(0))
    0.75
    """

    values: tuple[float, ...]
    probabilities: tuple[float, ...]

    def __init__(self, values: Sequence[Any] | Floats, probabilities: Sequence[Any] | Floats) -> None:
        places = tuple(real("Tabulated", f"values[{i}]", value) for i, value in enumerate(values))
        shares = tuple(real("Tabulated", f"probabilities[{i}]", value) for i, value in enumerate(probabilities))
        if len(places) != len(shares) or len(places) < 2:
            raise PriorError(
                f"Tabulated: there are {len(places)} values and {len(shares)} probabilities; two or more of"
                " each are needed, as many of the one as of the other"
            )
        for i, place in enumerate(places):
            if abs(place) >= 1:
                raise refusal("Tabulated", f"values[{i}]", place, "it must lie strictly between -1 and 1")
            if i and not math.atanh(places[i - 1]) < math.atanh(place):
                raise refusal("Tabulated", f"values[{i}]", place, f"it must exceed the one before, {places[i - 1]!r}")
            if i and shares[i] < shares[i - 1]:
                raise refusal(
                    "Tabulated",
                    f"probabilities[{i}]",
                    shares[i],
                    f"it is less than the one before, {shares[i - 1]!r}",
                )
        for i, end in ((0, 0.0), (len(shares) - 1, 1.0)):
            if shares[i] != end:
                raise refusal("Tabulated", f"probabilities[{i}]", shares[i], f"it must be {end:g}")
        object.__setattr__(self, "values", places)
        object.__setattr__(self, "probabilities", shares)

    def support(self) -> tuple[float, float]:
        """Return the first and the last value."""
        return self.values[0], self.values[-1]

    def odds_moments(self) -> tuple[float, float]:
        """Return E[r] and E[r²] by quadrature; always finite, as the support ends inside (−1, 1)."""
        return self._expect(np.sinh), self._expect(lambda t: np.sinh(t) ** 2)

    def rho_mean(self) -> float:
        """Return the mean of ρ, by quadrature."""
        return self._expect(np.tanh)

    def rho_sd(self) -> float:
        """Return the standard deviation of ρ, by quadrature."""
        centre = self.rho_mean()
        return math.sqrt(self._expect(lambda t: (np.tanh(t) - centre) ** 2))

    def _expect(self, function: Callable[[Floats], Floats]) -> float:
        table = _table(self)
        return integrate(lambda t: function(t) * table.density(t), table.knots, nodes=8)

    def _logpdf(self, x: Floats) -> Floats:
        with np.errstate(divide="ignore"):
            log_density: Floats = np.log(_table(self).density(np.arctanh(x)))
        return log_density - np.log1p(-x) - np.log1p(x)

    def _cdf(self, x: Floats) -> Floats:
        return _table(self).cdf(np.arctanh(x))

    def _ppf(self, q: Floats) -> Floats:
        ppf: Floats = np.tanh(_table(self).quantile(q))
        return ppf


def from_draws(draws: ArrayLike) -> Tabulated:
    """Return the belief that draws of ρ amount to, smoothed: say, the posterior of an earlier study.

    Parameters
    ----------
    draws : array_like, any shape
        At least 100 values strictly between −1 and 1, from one distribution. Order and shape do not matter.

    Returns
    -------
    Tabulated
        201 points of the cdf of a normal kernel estimate on the scale of atanh ρ, the bandwidth that of
        Silverman (1986, section 3.4.2), the draws drawn in so that their mean and SD on that scale are kept.
        Its support ends five bandwidths beyond the outermost draws, so an effect has a mean and an SD under
        it whatever tails the draws came from. More than 20,000 draws are first reduced to that many of their
        quantiles.

    Raises
    ------
    PriorError
        If there are too few draws, if one is not strictly between −1 and 1, or if all are equal.

    Examples
    --------
    >>> import numpy as np
    >>> from_draws(np.tanh(np.random.default_rng(1).normal(0.3, 0.1, 4000))).rho_mean().__round__(2)
    0.29
    """
    flat = np.asarray(draws, dtype=float).ravel()
    if flat.size < FEWEST_DRAWS:
        raise PriorError(f"from_draws: there are {flat.size} draws; at least {FEWEST_DRAWS} are needed")
    wrong = ~(np.abs(flat) < 1)
    if wrong.any():
        raise refusal(
            "from_draws",
            f"draw {int(np.flatnonzero(wrong)[0])}",
            flat[wrong][0],
            "it must be between -1 and 1",
        )
    z = np.sort(np.arctanh(flat))
    if z.size > MOST_DRAWS:
        z = np.quantile(z, (np.arange(MOST_DRAWS) + 0.5) / MOST_DRAWS)
    centre, sd = z.mean(), z.std()
    if z[0] == z[-1]:
        raise PriorError(f"from_draws: all draws are {float(flat[0])!r}; PointMass({float(flat[0])!r}) says so")
    quartile_width = np.subtract(*np.quantile(z, [0.75, 0.25])) / 1.349
    spread = min(sd, quartile_width) if quartile_width > 0 else sd
    bandwidth = 0.9 * spread * z.size**-0.2
    drawn_in = centre + (z - centre) * np.sqrt(1 - (bandwidth / sd) ** 2)
    reach = 5 * bandwidth
    first, last = max(drawn_in[0] - reach, -17.0), min(drawn_in[-1] + reach, 17.0)
    by_rank = np.quantile(drawn_in, np.linspace(0, 1, POINTS // 2 + 1))
    grid = np.unique(np.concatenate([np.linspace(first, last, POINTS - by_rank.size), by_rank]))
    values = np.tanh(grid)
    kept = np.diff(values, prepend=-2.0) > 1e-12
    grid, values = grid[kept], values[kept]
    cdf = np.array([ndtr((place - drawn_in) / bandwidth).mean() for place in grid])
    cdf[0], cdf[-1] = 0.0, 1.0
    return Tabulated(values, np.maximum.accumulate(cdf))


@lru_cache(maxsize=64)
def _table(prior: Tabulated) -> CdfTable:
    return CdfTable(np.arctanh(prior.values), np.array(prior.probabilities))
