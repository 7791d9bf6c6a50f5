"""Beliefs given as makers of a PyMC variable, with no cdf of their own."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np

from bayesmed.core.errors import PriorError
from bayesmed.priors import numeric_moments
from bayesmed.priors.adapters import made_by
from bayesmed.priors.cdf_table import CdfTable
from bayesmed.priors.prior import Floats, Prior
from bayesmed.priors.quadrature import panels
from bayesmed.priors.tabulated import from_draws

__all__ = ["FromMaker"]

FARTHEST = 15.0  # on the scale of atanh ρ
DRAWS = 20_000


@dataclass(frozen=True, eq=False)
class FromMaker(Prior):
    """A belief known by an object that registers a PyMC variable: `to_pymc(name)` or `create_variable(name)`.

    If what it registers is one free variable, the cdf is the integral of its log density (`basis` is
    "density", within 1e-6 where the density is smooth). If it is a function of others, such as a
    deterministic with hyperparameters, the cdf is the smoothed one of 20,000 draws from seed 0 (`basis` is
    "draws"; see `from_draws`). Compared by identity.

    Examples
    --------
    >>> import pymc as pm
    >>> from types import SimpleNamespace
    >>> made = FromMaker(SimpleNamespace(to_pymc=lambda name: pm.Uniform(name, -0.2, 0.2)))
    >>> made.basis, made.cdf(0.1).round(3)
    ('density', np.float64(0.75))
    """

    maker: Any
    basis: Literal["density", "draws"] = field(init=False)
    _known: Prior | _DensityOnFisherScale = field(init=False, repr=False)

    def __post_init__(self) -> None:
        import pymc as pm

        with pm.Model() as model:
            variable = made_by(self.maker, "rho")
        if getattr(variable, "ndim", None) != 0:
            raise PriorError(
                f"a belief about rho cannot be made from {self.maker!r}: it made {variable!r}, and one number is needed"
            )
        known: Prior | _DensityOnFisherScale
        if len(model.free_RVs) == 1 and variable in model.free_RVs:
            known, basis = _DensityOnFisherScale(variable, repr(self.maker)), "density"
        else:
            known, basis = from_draws(_drawn(variable, repr(self.maker))), "draws"
        object.__setattr__(self, "basis", basis)
        object.__setattr__(self, "_known", known)

    def to_pymc(self, name: str) -> Any:
        """Register the variable by the maker's own method."""
        return made_by(self.maker, name)

    def support(self) -> tuple[float, float]:
        """Return the ends beyond which the density is 0, or those of the smoothed draws."""
        return self._known.support()

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
        return self._known._logpdf(x)

    def _cdf(self, x: Floats) -> Floats:
        return self._known._cdf(x)

    def _ppf(self, q: Floats) -> Floats:
        return self._known._ppf(q)


class _DensityOnFisherScale:
    """The log density of a free variable, integrated over t = atanh ρ."""

    def __init__(self, variable: Any, label: str) -> None:
        import pymc as pm
        import pytensor
        import pytensor.tensor as pt

        x = pt.vector("x", dtype="float64")
        plain = pytensor.compile.Mode(linker="py", optimizer="fast_compile")  # called a few times: compile little
        self._log_density = pytensor.function([x], pm.logp(variable, x), mode=plain)
        scan = np.linspace(-FARTHEST, FARTHEST, 3001)
        positive = np.flatnonzero(np.isfinite(self._log_density_t(scan)))
        if positive.size < 2:
            raise PriorError(f"a belief about rho cannot be made from {label}: its density is 0 on (-1, 1)")
        first, last = scan[positive[0]], scan[positive[-1]]
        lower = self._edge(scan[max(positive[0] - 1, 0)], first)
        upper = self._edge(scan[min(positive[-1] + 1, scan.size - 1)], last)
        towards = (upper - lower) * 0.5 ** np.arange(1.0, 40.0, 0.25)
        breaks = np.unique([*np.linspace(lower, upper, 1201), *(lower + towards), *(upper - towards)])
        points, weights = panels(breaks, nodes=8)
        masses = (weights * np.exp(self._log_density_t(points))).reshape(-1, 8).sum(axis=1)
        cumulative = np.concatenate([[0.0], np.cumsum(masses)])
        total = cumulative[-1]
        if not abs(total - 1) < 1e-3:
            raise PriorError(
                f"a belief about rho cannot be made from {label}: it gives (-1, 1) the probability"
                f" {total:.4g}; all of it must lie there"
            )
        knots = np.concatenate([[True], np.diff(breaks) > 1e-9])
        with np.errstate(over="ignore"):
            slopes = np.exp(self._log_density_t(breaks)) / total
        self._table = CdfTable(breaks[knots], (cumulative / total)[knots], slopes[knots])
        self._ends = (
            -1.0 if lower == -FARTHEST else math.tanh(lower),
            1.0 if upper == FARTHEST else math.tanh(upper),
        )

    def support(self) -> tuple[float, float]:
        return self._ends

    def _logpdf(self, x: Floats) -> Floats:
        return np.asarray(self._log_density(x), dtype=float)

    def _cdf(self, x: Floats) -> Floats:
        with np.errstate(divide="ignore"):
            return self._table.cdf(np.arctanh(x))

    def _ppf(self, q: Floats) -> Floats:
        ppf: Floats = np.tanh(self._table.quantile(q))
        return ppf

    def _log_density_t(self, t: Floats) -> Floats:
        log_density: Floats = self._log_density(np.tanh(t)) - 2 * np.log(np.cosh(t))
        return log_density

    def _edge(self, without: float, within: float) -> float:
        """Where the density becomes positive, by halving; `within` itself if it is positive at both ends."""
        if np.isfinite(self._log_density_t(np.array([without])))[0]:
            return float(without)
        for _ in range(60):
            middle = (without + within) / 2
            if np.isfinite(self._log_density_t(np.array([middle])))[0]:
                within = middle
            else:
                without = middle
        return float(within)


def _drawn(variable: Any, label: str) -> Floats:
    import pymc as pm

    values = np.asarray(pm.draw(variable, DRAWS, random_seed=0, mode="FAST_COMPILE"), dtype=float)
    outside = ~(np.abs(values) < 1)
    if outside.any():
        raise PriorError(
            f"a belief about rho cannot be made from {label}: {outside.mean():.2%} of its draws are not"
            f" between -1 and 1, such as {float(values[outside][0]):g}"
        )
    return values
