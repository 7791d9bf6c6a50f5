"""Beliefs that are objects of other libraries: distributions with a cdf, and makers of PyMC variables."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np

from bayesmed.core.errors import PriorError
from bayesmed.priors import numeric_moments
from bayesmed.priors.arguments import real, refusal
from bayesmed.priors.prior import Floats, Prior

__all__ = ["FromScipy", "Wrapped"]


class _ByItsFunctions(Prior):
    """A belief whose functions are those of another object, and whose moments are by quadrature over them."""

    def _distribution(self) -> Any:
        raise NotImplementedError

    def odds_moments(self) -> tuple[float, float]:
        """Return E[r] and E[r²] by quadrature; how the tails end is estimated from the density near ±1."""
        return numeric_moments.odds_moments(self)

    def rho_mean(self) -> float:
        """Return the mean of ρ, by quadrature."""
        return numeric_moments.rho_mean(self)

    def rho_sd(self) -> float:
        """Return the standard deviation of ρ, by quadrature."""
        return numeric_moments.rho_sd(self)

    def _logpdf(self, x: Floats) -> Floats:
        distribution = self._distribution()
        if x.size == 0:
            return x
        with np.errstate(divide="ignore"):
            if hasattr(distribution, "logpdf"):
                return np.asarray(distribution.logpdf(x), dtype=float)
            log_density: Floats = np.log(np.asarray(distribution.pdf(x), dtype=float))
            return log_density

    def _cdf(self, x: Floats) -> Floats:
        return np.asarray(self._distribution().cdf(x), dtype=float) if x.size else x

    def _ppf(self, q: Floats) -> Floats:
        distribution = self._distribution()
        quantile = distribution.ppf if hasattr(distribution, "ppf") else distribution.icdf
        return np.asarray(quantile(q), dtype=float) if q.size else q


@dataclass(frozen=True)
class FromScipy(_ByItsFunctions):
    """A continuous distribution of `scipy.stats` on (−1, 1), named as it is there.

    Parameters
    ----------
    name : str
        Its name in `scipy.stats`.
    shapes : sequence of float
        Its shape parameters.
    loc, scale : float
        Its location and scale.

    Examples
    --------
    >>> FromScipy("triang", [0.5], loc=-0.2, scale=0.6).rho_mean().__round__(9)
    0.1
    """

    name: str
    shapes: tuple[float, ...]
    loc: float
    scale: float

    def __init__(self, name: str, shapes: Any = (), loc: Any = 0.0, scale: Any = 1.0) -> None:
        numbers = tuple(real("FromScipy", f"shapes[{i}]", shape) for i, shape in enumerate(shapes))
        object.__setattr__(self, "name", name)
        object.__setattr__(self, "shapes", numbers)
        object.__setattr__(self, "loc", real("FromScipy", "loc", loc))
        object.__setattr__(self, "scale", real("FromScipy", "scale", scale))
        checked_support(self.name, _frozen(self).support())

    def support(self) -> tuple[float, float]:
        """Return the distribution's support."""
        lower, upper = _frozen(self).support()
        return float(lower), float(upper)

    def _distribution(self) -> Any:
        return _frozen(self)


@dataclass(frozen=True, eq=False)
class Wrapped(_ByItsFunctions):
    """Any distribution on (−1, 1) with `cdf`, `ppf` (or `icdf`) and `logpdf` (or `pdf`).

    In a PyMC model its own `to_pymc(name)` or `create_variable(name)` is used if that works. Values
    of this type are compared by identity, and cannot be written in a file.

    Examples
    --------
    >>> from scipy.stats import uniform
    >>> Wrapped(uniform(-0.2, 0.4)).cdf(0.1).round(3)
    np.float64(0.75)
    """

    distribution: Any

    def __post_init__(self) -> None:
        checked_support(repr(self.distribution), self.support())
        refuse_atoms(repr(self.distribution), self)

    def support(self) -> tuple[float, float]:
        """Return the support it states, by a method or attribute of that name, else its extreme quantiles."""
        support = getattr(self.distribution, "support", None)
        ends = support() if callable(support) else support
        if ends is None:
            ends = np.asarray(self._ppf(np.array([0.0, 1.0])))
        lower, upper = ends
        return float(lower), float(upper)

    def to_pymc(self, name: str) -> Any:
        """Register a variable called `name` by the distribution's own method, or by its quantiles."""
        if is_maker(self.distribution):
            try:
                return made_by(self.distribution, name)
            except (AttributeError, NotImplementedError):
                pass  # a family that its library knows and PyMC does not
        return super().to_pymc(name)

    def _distribution(self) -> Any:
        return self.distribution


def checked_support(label: str, support: Any) -> None:
    """Raise PriorError unless `support` is two numbers, −1 ≤ lower < upper ≤ 1."""
    lower, upper = (float(end) for end in support)
    if not -1 <= lower < upper <= 1:
        raise PriorError(
            f"a belief about rho cannot be made from {label}: its support is ({lower:g}, {upper:g}), and a"
            " residual correlation lies between -1 and 1; truncate it or move it with loc and scale"
        )


def refuse_atoms(label: str, prior: Prior) -> None:
    """Raise PriorError if the cdf steps, or does not undo the quantile function."""
    q = np.linspace(0.005, 0.995, 100)
    if not np.allclose(prior.cdf(prior.ppf(q)), q, rtol=0, atol=1e-5):
        raise PriorError(
            f"a belief about rho cannot be made from {label}: its cdf does not undo its quantiles, so it is"
            " not continuous; use Mixture for a belief that gives single values a probability of their own"
        )


def is_maker(value: Any) -> bool:
    """Return whether `value` can register a PyMC variable under a name it is given."""
    return callable(getattr(value, "to_pymc", None)) or callable(getattr(value, "create_variable", None))


def made_by(maker: Any, name: str) -> Any:
    """Return the variable that `maker` registers as `name` in the current model."""
    make = maker.to_pymc if callable(getattr(maker, "to_pymc", None)) else maker.create_variable
    return make(name)


@lru_cache(maxsize=64)
def _frozen(prior: FromScipy) -> Any:
    import scipy.stats

    family = getattr(scipy.stats, prior.name, None) if isinstance(prior.name, str) else None
    if not isinstance(family, scipy.stats.rv_continuous):
        raise refusal("FromScipy", "name", prior.name, "a continuous distribution of scipy.stats is needed")
    frozen = family(*prior.shapes, loc=prior.loc, scale=prior.scale)
    if not math.isfinite(frozen.median()):
        raise PriorError(f"FromScipy: scipy.stats.{prior.name} has no quantiles at {prior!r}")
    return frozen
