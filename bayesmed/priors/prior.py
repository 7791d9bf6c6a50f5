"""What every belief about the residual correlation offers: the base class of the families."""

from __future__ import annotations

from abc import ABC, abstractmethod
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from bayesmed.priors.arguments import probabilities

if TYPE_CHECKING:
    from bayesmed.priors.protocol import HasDirection

__all__ = ["Floats", "Prior", "Seed"]

type Seed = int | np.random.Generator | np.random.SeedSequence | None
type Floats = NDArray[np.float64]

LAST_BELOW_ONE = float(np.nextafter(1.0, 0.0))


class Prior(ABC):
    """A probability distribution of the residual correlation ρ of mediator and outcome.

    A prior is a frozen value: it can be compared, hashed and pickled, and its repr can be evaluated. Its
    functions take arrays of any shape and return arrays of that shape. A family supplies `support`,
    `odds_moments`, `rho_mean`, `rho_sd` and, for points strictly inside its support, `_logpdf`, `_cdf` and
    `_ppf`.

    Examples
    --------
    >>> from bayesmed.priors import LKJ
    >>> isinstance(LKJ(2), Prior)
    True
    """

    # ------------------------------------------------------------------ facts

    @abstractmethod
    def support(self) -> tuple[float, float]:
        """Return the smallest and the largest value of ρ that the prior allows."""

    @abstractmethod
    def odds_moments(self) -> tuple[float, float]:
        """Return E[r] and E[r²] of r = ρ/√(1−ρ²), on which the mean and the SD of an effect depend.

        Infinite ones are `inf` or `-inf`; E[r] is `nan` where both of its tails are infinite. Whether they
        are finite is decided by the family's tails at ±1, not by quadrature, which cannot see it.
        """

    @abstractmethod
    def rho_mean(self) -> float:
        """Return the mean of ρ."""

    @abstractmethod
    def rho_sd(self) -> float:
        """Return the standard deviation of ρ."""

    def atoms(self) -> tuple[tuple[float, float], ...]:
        """Return the single values that have a probability of their own, as (value, probability) pairs."""
        return ()

    # ------------------------------------------------------------------ functions

    def logpdf(self, x: ArrayLike) -> Floats:
        """Return the log density at `x`, an array of any shape.

        It is −inf outside the support and +inf at an atom, where no density exists. NaN gives NaN.
        """
        x = np.asarray(x, dtype=float)
        lower, upper = self.support()
        inside = (x >= lower) & (x <= upper) & (np.abs(x) < 1)
        result = np.where(np.isnan(x), np.nan, -np.inf)
        result[inside] = self._logpdf(x[inside])
        for value, _ in self.atoms():
            result[x == value] = np.inf
        return result[()]

    def pdf(self, x: ArrayLike) -> Floats:
        """Return the density at `x`, an array of any shape."""
        density: Floats = np.exp(self.logpdf(x))
        return density

    def cdf(self, x: ArrayLike) -> Floats:
        """Return P(ρ ≤ x) for `x` of any shape: 0 below the support, 1 above it. NaN gives NaN."""
        x = np.asarray(x, dtype=float)
        lower, upper = self.support()
        inside = (x >= lower) & (x < upper)
        result = np.where(np.isnan(x), np.nan, np.where(x >= upper, 1.0, 0.0))
        result[inside] = np.clip(self._cdf(x[inside]), 0.0, 1.0)
        return result[()]

    def ppf(self, q: ArrayLike) -> Floats:
        """Return the quantile of each probability in `q`, an array of any shape with values in [0, 1].

        It is the smallest ρ with P(ρ' ≤ ρ) ≥ q, so an atom answers for a stretch of probabilities. For 0 and
        1 the ends of the support are returned; between, always a value strictly inside (−1, 1).

        Raises
        ------
        PriorError
            If a value of `q` is outside [0, 1] or NaN.
        """
        q = probabilities(type(self).__name__, q)
        lower, upper = self.support()
        between = (q > 0) & (q < 1)
        result = np.where(q >= 1, upper, lower)
        result[between] = np.clip(self._ppf(q[between]), max(lower, -LAST_BELOW_ONE), min(upper, LAST_BELOW_ONE))
        return result[()]

    def below(self, x: ArrayLike) -> Floats:
        """Return P(ρ < x), which leaves out an atom at `x` itself."""
        return self.cdf(x)

    def above(self, x: ArrayLike) -> Floats:
        """Return P(ρ > x), which leaves out an atom at `x` itself."""
        return np.asarray(1.0 - self.cdf(x))[()]

    def draw(self, size: int | tuple[int, ...] | None = None, random_seed: Seed = None) -> Floats:
        """Return independent draws of ρ, each strictly inside (−1, 1).

        Parameters
        ----------
        size : int or tuple of int, optional
            The shape of the result; None gives one number.
        random_seed : int, numpy.random.Generator or SeedSequence, optional
            Draws are quantiles of uniforms, so two priors given one seed get the same uniforms.
        """
        uniforms = np.asarray(np.random.default_rng(random_seed).random(size))
        return self.ppf(np.where(uniforms == 0, np.finfo(float).tiny, uniforms))

    def to_pymc(self, name: str) -> Any:
        """Register a fresh variable called `name` in the current `pymc.Model` and return it.

        A continuous family becomes a free variable with an interval transform. Where that cannot be (an atom,
        a density without a formula) a standard normal variable is registered beside it, and ρ is a
        deterministic function of that.
        """
        from bayesmed.priors.in_pymc import register

        return register(self, name)

    def describe(self, fit: HasDirection | None = None) -> str:
        """Return in one sentence what the prior says.

        It gives the central 90 % of ρ; how strong one unmeasured cause would have to be for its ends, as the
        equal shares R²_M = R²_Y, the size of ρ, of the residual variances; and whether an effect has a mean and an SD
        under it.

        Parameters
        ----------
        fit : object with `direction`, optional
            Adds the probability that confounding inflates the indirect effect. That needs to know which way
            the exposure moves the mediator: see `bayesmed.priors.protocol.HasDirection`.
        """
        from bayesmed.priors.description import describe

        return describe(self, fit)

    def _repr_html_(self) -> str:
        from bayesmed.priors.shown import as_html

        return as_html(self)

    # ------------------------------------------------------------------ what a family supplies

    @abstractmethod
    def _logpdf(self, x: Floats) -> Floats:
        """Log density at points of the support that lie strictly inside (−1, 1)."""

    @abstractmethod
    def _cdf(self, x: Floats) -> Floats:
        """P(ρ ≤ x) at points of the support below its upper end."""

    @abstractmethod
    def _ppf(self, q: Floats) -> Floats:
        """Quantiles for probabilities strictly between 0 and 1."""

    def _bends(self) -> tuple[float, ...]:
        """Values at which the cdf steps or bends: there its inverse needs closer points."""
        return *self.support(), *(value for value, _ in self.atoms())

    def _pymc_dist(self) -> Any | None:
        """Return a new unregistered PyMC distribution of ρ, or None if the density has no formula there."""
        return None
