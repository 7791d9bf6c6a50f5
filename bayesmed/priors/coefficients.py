"""Priors of coefficients and of residual standard deviations, as frozen values."""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import betaln, ndtri, stdtrit, xlogy

from bayesmed.priors.arguments import doubles, positive, real
from bayesmed.priors.prior import Floats, Seed

__all__ = [
    "CoefficientPrior",
    "Exponential",
    "HalfNormal",
    "HalfStudentT",
    "LogNormal",
    "Normal",
    "StudentT",
]

HALF_LOG_TWO_PI = 0.5 * math.log(2 * math.pi)


class CoefficientPrior(ABC):
    """A univariate prior of a coefficient or a scale, in the units of the model it is given to.

    Examples
    --------
    >>> isinstance(Normal(0, 1), CoefficientPrior)
    True
    """

    on_whole_line: ClassVar[bool] = True
    """Whether the density is above 0 for every real number, as a coefficient needs, or for positive ones."""

    def logpdf(self, x: ArrayLike) -> Floats:
        """Return the log density at `x`, an array of any shape; −inf outside the support, NaN for NaN."""
        x = np.asarray(x, dtype=float)
        inside = np.isfinite(x) & (self.on_whole_line | (x > 0))
        result = np.where(np.isnan(x), np.nan, -np.inf)
        result[inside] = self._logpdf(x[inside])
        return result[()]

    def draw(self, size: int | tuple[int, ...] | None = None, random_seed: Seed = None) -> Floats:
        """Return independent draws of shape `size`; one number if it is None."""
        uniforms = np.asarray(np.random.default_rng(random_seed).random(size))
        return self._ppf(np.where(uniforms == 0, np.finfo(float).tiny, uniforms))[()]

    def median(self) -> float:
        """Return the median."""
        return float(self._ppf(np.asarray(0.5)))

    @abstractmethod
    def to_pymc_dist(self) -> Any:
        """Return a new PyMC distribution that is not registered in any model."""

    @abstractmethod
    def precision(self) -> float:
        """Return 1/variance, or 1/scale² where the variance is infinite: for scaling a sampler."""

    @abstractmethod
    def _logpdf(self, x: Floats) -> Floats:
        """Log density at finite points of the support."""

    @abstractmethod
    def _ppf(self, q: Floats) -> Floats:
        """Quantiles for probabilities strictly between 0 and 1."""


@dataclass(frozen=True)
class Normal(CoefficientPrior):
    """Normal with `mean` and `sd`.

    Examples
    --------
    >>> Normal(0.03, 0.01).median()
    0.03
    """

    mean: float
    sd: float

    def __post_init__(self) -> None:
        object.__setattr__(self, "mean", real("Normal", "mean", self.mean))
        object.__setattr__(self, "sd", positive("Normal", "sd", self.sd))

    def to_pymc_dist(self) -> Any:
        """Return `pymc.Normal.dist`."""
        import pymc as pm

        return pm.Normal.dist(*doubles(self.mean, self.sd))

    def precision(self) -> float:
        """Return 1/sd²."""
        return self.sd**-2

    def _logpdf(self, x: Floats) -> Floats:
        log_density: Floats = -0.5 * ((x - self.mean) / self.sd) ** 2 - math.log(self.sd) - HALF_LOG_TWO_PI
        return log_density

    def _ppf(self, q: Floats) -> Floats:
        ppf: Floats = self.mean + self.sd * ndtri(q)
        return ppf


@dataclass(frozen=True)
class StudentT(CoefficientPrior):
    """Student t with `df` degrees of freedom, moved to `location` and stretched by `scale` (not its SD).

    Examples
    --------
    >>> StudentT(4, 0, 2.5).logpdf(0.0).round(3)
    np.float64(-1.897)
    """

    df: float
    location: float
    scale: float

    def __post_init__(self) -> None:
        object.__setattr__(self, "df", positive("StudentT", "df", self.df))
        object.__setattr__(self, "location", real("StudentT", "location", self.location))
        object.__setattr__(self, "scale", positive("StudentT", "scale", self.scale))

    def to_pymc_dist(self) -> Any:
        """Return `pymc.StudentT.dist`."""
        import pymc as pm

        df, location, scale = doubles(self.df, self.location, self.scale)
        return pm.StudentT.dist(nu=df, mu=location, sigma=scale)

    def precision(self) -> float:
        """Return (df − 2)/(df·scale²) if df > 2, else 1/scale²."""
        return (1 - 2 / self.df if self.df > 2 else 1.0) / self.scale**2

    def _logpdf(self, x: Floats) -> Floats:
        return _student_t(np.asarray((x - self.location) / self.scale), self.df) - math.log(self.scale)

    def _ppf(self, q: Floats) -> Floats:
        ppf: Floats = self.location + self.scale * stdtrit(self.df, q)
        return ppf


@dataclass(frozen=True)
class HalfNormal(CoefficientPrior):
    """The size of a normal with mean 0 and SD `scale`: for positive quantities.

    Examples
    --------
    >>> HalfNormal(2).median().__round__(3)
    1.349
    """

    scale: float
    on_whole_line: ClassVar[bool] = False

    def __post_init__(self) -> None:
        object.__setattr__(self, "scale", positive("HalfNormal", "scale", self.scale))

    def to_pymc_dist(self) -> Any:
        """Return `pymc.HalfNormal.dist`."""
        import pymc as pm

        return pm.HalfNormal.dist(*doubles(self.scale))

    def precision(self) -> float:
        """Return 1/(scale²(1 − 2/π))."""
        return 1 / (self.scale**2 * (1 - 2 / math.pi))

    def _logpdf(self, x: Floats) -> Floats:
        log_density: Floats = -0.5 * (x / self.scale) ** 2 - math.log(self.scale) - HALF_LOG_TWO_PI + math.log(2)
        return log_density

    def _ppf(self, q: Floats) -> Floats:
        ppf: Floats = -self.scale * ndtri((1 - q) / 2)
        return ppf


@dataclass(frozen=True)
class HalfStudentT(CoefficientPrior):
    """The size of a Student t with `df` degrees of freedom stretched by `scale`: for positive quantities.

    Examples
    --------
    >>> HalfStudentT(4, 2).median().__round__(3)
    1.481
    """

    df: float
    scale: float
    on_whole_line: ClassVar[bool] = False

    def __post_init__(self) -> None:
        object.__setattr__(self, "df", positive("HalfStudentT", "df", self.df))
        object.__setattr__(self, "scale", positive("HalfStudentT", "scale", self.scale))

    def to_pymc_dist(self) -> Any:
        """Return `pymc.HalfStudentT.dist`."""
        import pymc as pm

        df, scale = doubles(self.df, self.scale)
        return pm.HalfStudentT.dist(nu=df, sigma=scale)

    def precision(self) -> float:
        """Return 1/scale², of the order of 1/variance whatever df is."""
        return self.scale**-2

    def _logpdf(self, x: Floats) -> Floats:
        return _student_t(np.asarray(x / self.scale), self.df) - math.log(self.scale) + math.log(2)

    def _ppf(self, q: Floats) -> Floats:
        ppf: Floats = -self.scale * stdtrit(self.df, (1 - q) / 2)
        return ppf


@dataclass(frozen=True)
class LogNormal(CoefficientPrior):
    """A positive quantity whose logarithm is normal with `log_mean` and `log_sd`.

    Examples
    --------
    >>> LogNormal(0, 0.5).median()
    1.0
    """

    log_mean: float
    log_sd: float
    on_whole_line: ClassVar[bool] = False

    def __post_init__(self) -> None:
        object.__setattr__(self, "log_mean", real("LogNormal", "log_mean", self.log_mean))
        object.__setattr__(self, "log_sd", positive("LogNormal", "log_sd", self.log_sd))

    def to_pymc_dist(self) -> Any:
        """Return `pymc.LogNormal.dist`."""
        import pymc as pm

        return pm.LogNormal.dist(*doubles(self.log_mean, self.log_sd))

    def precision(self) -> float:
        """Return 1/variance, the variance being (e^{s²} − 1)e^{2m + s²}."""
        return math.exp(-2 * self.log_mean - self.log_sd**2) / math.expm1(self.log_sd**2)

    def _logpdf(self, x: Floats) -> Floats:
        log_x = np.log(x)
        z = (log_x - self.log_mean) / self.log_sd
        log_density: Floats = -0.5 * z**2 - log_x - math.log(self.log_sd) - HALF_LOG_TWO_PI
        return log_density

    def _ppf(self, q: Floats) -> Floats:
        ppf: Floats = np.exp(self.log_mean + self.log_sd * ndtri(q))
        return ppf


@dataclass(frozen=True)
class Exponential(CoefficientPrior):
    """A positive quantity, exponential with `mean`.

    Examples
    --------
    >>> Exponential(10).median().__round__(3)
    6.931
    """

    mean: float
    on_whole_line: ClassVar[bool] = False

    def __post_init__(self) -> None:
        object.__setattr__(self, "mean", positive("Exponential", "mean", self.mean))

    def to_pymc_dist(self) -> Any:
        """Return `pymc.Exponential.dist`."""
        import pymc as pm

        (mean,) = doubles(self.mean)
        return pm.Exponential.dist(scale=mean)

    def precision(self) -> float:
        """Return 1/mean²."""
        return self.mean**-2

    def _logpdf(self, x: Floats) -> Floats:
        log_density: Floats = -x / self.mean - math.log(self.mean)
        return log_density

    def _ppf(self, q: Floats) -> Floats:
        ppf: Floats = -self.mean * np.log1p(-q)
        return ppf


def _student_t(t: Floats, df: float) -> Floats:
    """Log density of the standard Student t."""
    log_constant = -float(betaln(0.5, df / 2)) - 0.5 * math.log(df)
    log_density: Floats = log_constant - xlogy((df + 1) / 2, 1 + t**2 / df)
    return log_density
