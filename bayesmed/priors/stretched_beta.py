"""Beta beliefs stretched over (−1, 1), and the LKJ belief, which is the symmetric one of them."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

from scipy.special import betainc, betaincinv, betaln, xlog1py

from bayesmed.priors.arguments import doubles, positive
from bayesmed.priors.prior import Floats, Prior

__all__ = ["LKJ", "StretchedBeta"]


class _BetaOnCorrelation(Prior):
    """What both families share: (1 + ρ)/2 ~ Beta(a, b)."""

    def _shapes(self) -> tuple[float, float]:
        raise NotImplementedError

    def support(self) -> tuple[float, float]:
        """Return (−1, 1)."""
        return -1.0, 1.0

    def odds_moments(self) -> tuple[float, float]:
        """Return E[r], finite if both shapes exceed ½, and E[r²], finite if both exceed 1.

        E[r] = B(a−½, b−½)/B(a, b) · (a−b)/(2(a+b−1)) and
        E[r²] = (a+b−1)(a+b−2)/(4(a−1)(b−1)) − 1 = (a+b−2 + (a−b)²)/(4(a−1)(b−1)).
        """
        a, b = self._shapes()
        if min(a, b) > 0.5:
            log_ratio = float(betaln(a - 0.5, b - 0.5) - betaln(a, b))
            first = math.exp(log_ratio) * (a - b) / (2 * (a + b - 1))
        elif max(a, b) <= 0.5:
            first = math.nan
        else:
            first = math.inf if b <= 0.5 else -math.inf
        second = (a + b - 2 + (a - b) ** 2) / (4 * (a - 1) * (b - 1)) if min(a, b) > 1 else math.inf
        return first, second

    def rho_mean(self) -> float:
        """Return (a − b)/(a + b)."""
        a, b = self._shapes()
        return (a - b) / (a + b)

    def rho_sd(self) -> float:
        """Return 2√(ab/(a+b+1))/(a+b)."""
        a, b = self._shapes()
        total = a + b
        return 2 * math.sqrt((a / total) * (b / total) / (total + 1))

    def _logpdf(self, x: Floats) -> Floats:
        a, b = self._shapes()
        log_constant = float(betaln(a, b)) + (a + b - 1) * math.log(2)
        log_density: Floats = xlog1py(a - 1, x) + xlog1py(b - 1, -x) - log_constant
        return log_density

    def _cdf(self, x: Floats) -> Floats:
        a, b = self._shapes()
        cdf: Floats = betainc(a, b, (1 + x) / 2)
        return cdf

    def _ppf(self, q: Floats) -> Floats:
        a, b = self._shapes()
        ppf: Floats = 2 * betaincinv(a, b, q) - 1
        return ppf

    def _pymc_dist(self) -> Any:
        import pymc as pm

        def stretch(alpha: Any, beta: Any, size: Any) -> Any:
            return 2 * pm.Beta.dist(alpha, beta, size=size) - 1

        return pm.CustomDist.dist(*doubles(*self._shapes()), dist=stretch, class_name="StretchedBeta")


@dataclass(frozen=True)
class StretchedBeta(_BetaOnCorrelation):
    """ρ = 2B − 1 with B ~ Beta(`alpha`, `beta`): the beta family on (−1, 1).

    `StretchedBeta(1, 1)` is uniform on (−1, 1). An effect's mean exists if both shapes exceed ½ and its SD
    if both exceed 1.

    Parameters
    ----------
    alpha, beta : float
        Shapes, above 0; alpha > beta leans to positive ρ.

    Examples
    --------
    >>> StretchedBeta(6, 4).rho_mean()
    0.2
    """

    alpha: float
    beta: float

    def __post_init__(self) -> None:
        object.__setattr__(self, "alpha", positive("StretchedBeta", "alpha", self.alpha))
        object.__setattr__(self, "beta", positive("StretchedBeta", "beta", self.beta))

    def _shapes(self) -> tuple[float, float]:
        return self.alpha, self.beta


@dataclass(frozen=True)
class LKJ(_BetaOnCorrelation):
    """The LKJ belief about a correlation matrix, for two variables: density ∝ (1 − ρ²)^(eta − 1).

    It is `StretchedBeta(eta, eta)`. Equivalently r = ρ/√(1−ρ²) is Student t with 2·eta degrees of freedom,
    divided by √(2·eta); the effect's mean exists if eta > ½ and its SD if eta > 1.

    Parameters
    ----------
    eta : float
        Shape, above 0; 1 is uniform, larger is closer to 0.

    Notes
    -----
    Lewandowski, Kurowicka & Joe (2009), Journal of Multivariate Analysis 100, 1989–2001,
    doi:10.1016/j.jmva.2009.04.008.

    Examples
    --------
    >>> LKJ(2).odds_moments()
    (0.0, 0.5)
    """

    eta: float

    def __post_init__(self) -> None:
        object.__setattr__(self, "eta", positive("LKJ", "eta", self.eta))

    def _shapes(self) -> tuple[float, float]:
        return self.eta, self.eta
