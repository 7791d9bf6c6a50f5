"""The belief that one unmeasured cause of mediator and outcome is behind their residual correlation."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import betaln

from bayesmed.priors.arguments import plain, real, refusal
from bayesmed.priors.prior import Floats, Prior
from bayesmed.priors.protocol import HasYardsticks
from bayesmed.priors.shared_size import BetaShare, Size, size_of

__all__ = ["SharedCause"]

# Work on the ends' own values: a quantile of 0 or 1 within a side is its end.
TINY = float(np.finfo(float).tiny)


@dataclass(frozen=True)
class SharedCause(Prior):
    """One common cause that explains shares of both residual variances: the size of ρ is √(R²_M · R²_Y).

    Parameters
    ----------
    r2_mediator, r2_outcome : float or BetaShare
        The shares of the structural residual variances of mediator and outcome that the cause explains, each
        a number from 0 up to but not including 1, or a `BetaShare`. Uncertain shares are independent of each
        other.
    positive : float
        The probability that ρ is positive: that the cause moves mediator and outcome the same way.

    Notes
    -----
    The shares are of what the exposure, moderators and covariates leave over, not of total variances. With
    several causes √(R²_M · R²_Y) bounds the size of ρ. With both shares uncertain, an effect has a mean
    if the two `beta` shapes add up to more than ½ and an SD if to more than 1; otherwise it has both. The cdf
    is within 1e-8.

    Examples
    --------
    >>> SharedCause(0.16, 0.25, positive=1).rho_mean()
    0.2
    >>> float(SharedCause(BetaShare(1, 9), BetaShare(1, 9), positive=0.8).above(0))
    0.8
    """

    r2_mediator: float | BetaShare
    r2_outcome: float | BetaShare
    positive: float = 0.5

    def __post_init__(self) -> None:
        for argument in ("r2_mediator", "r2_outcome"):
            object.__setattr__(self, argument, _share(argument, getattr(self, argument)))
        allowed = "it is the probability of a positive correlation, between 0 and 1"
        positive = real("SharedCause", "positive", self.positive, allowed)
        if not 0 <= positive <= 1:
            raise refusal("SharedCause", "positive", positive, allowed)
        object.__setattr__(self, "positive", positive)
        self._size()  # refuses shapes it cannot compute with, at once

    @staticmethod
    def like(
        fit: HasYardsticks, covariates: str | Sequence[str], multiple: float = 1.0, positive: float | None = None
    ) -> Prior:
        """Return the belief in a cause `multiple` times as strong as measured covariates.

        Parameters
        ----------
        fit : Fit
            Whose posterior tells how strong the covariates are, and how surely.
        covariates : str or sequence of str
            A covariate, or several taken together as one block.
        multiple : float
            How many times as strong.
        positive : float, optional
            The probability that ρ is positive. If left out the cause pushes mediator and outcome as the covariates do.

        Returns
        -------
        Prior
            The posterior of that ρ, or with `positive` of its size, as `from_draws` makes it.
        """
        from bayesmed.priors.mixture import Mixture
        from bayesmed.priors.tabulated import from_draws

        rho = np.asarray(fit.strength_draws(covariates, multiple), dtype=float)
        if positive is None:
            return from_draws(rho)
        share = real("SharedCause.like", "positive", positive)
        if not 0 <= share <= 1:
            raise refusal("SharedCause.like", "positive", positive, "it is a probability between 0 and 1")
        both = [from_draws(np.abs(rho)), from_draws(-np.abs(rho))]
        if share in (0.0, 1.0):
            return both[0] if share == 1 else both[1]
        return Mixture(both, [share, 1 - share])

    def support(self) -> tuple[float, float]:
        """Return the ends: ±√(R²_M · R²_Y) at its largest, or 0 on a side that is excluded."""
        size = self._size()
        smallest, largest = (size, size) if isinstance(size, float) else (0.0, size.largest)
        lower = -largest if self.positive < 1 else smallest
        upper = largest if self.positive > 0 else -smallest
        return lower + 0.0, upper + 0.0

    def atoms(self) -> tuple[tuple[float, float], ...]:
        """Return ±√(R²_M · R²_Y) if both shares are fixed."""
        size = self._size()
        if not isinstance(size, float):
            return ()
        if size == 0:
            return ((0.0, 1.0),)
        both = ((-size, 1 - self.positive), (size, self.positive))
        return tuple((value, weight) for value, weight in both if weight > 0)

    def odds_moments(self) -> tuple[float, float]:
        """Return E[r] = (2·positive − 1)·E|r| and E[r²]."""
        size = self._size()
        if isinstance(size, float):
            squared = size**2 / (1 - size**2)
            return (2 * self.positive - 1) * math.sqrt(squared), squared
        absolute, squared = size.odds_moments()
        if math.isinf(absolute):
            return {0.0: -math.inf, 1.0: math.inf}.get(self.positive, math.nan), squared
        return (2 * self.positive - 1) * absolute, squared

    def rho_mean(self) -> float:
        """Return (2·positive − 1)·E√R²_M·E√R²_Y."""
        return (2 * self.positive - 1) * _moment(self.r2_mediator, 0.5) * _moment(self.r2_outcome, 0.5)

    def rho_sd(self) -> float:
        """Return √(E[R²_M]·E[R²_Y] − mean²)."""
        square = _moment(self.r2_mediator, 1) * _moment(self.r2_outcome, 1)
        return math.sqrt(max(square - self.rho_mean() ** 2, 0.0))

    def below(self, x: ArrayLike) -> Floats:
        """Return P(ρ < x), which leaves out an atom at `x` itself."""
        result = np.array(self.cdf(x), dtype=float)
        for value, weight in self.atoms():
            result[np.asarray(x) == value] -= weight
        return np.asarray(np.clip(result, 0.0, 1.0))[()]

    def _size(self) -> float | Size:
        """Return |ρ| if it is one number, else its distribution."""
        if self.r2_mediator == 0 or self.r2_outcome == 0:
            return 0.0
        if isinstance(self.r2_mediator, float) and isinstance(self.r2_outcome, float):
            return math.sqrt(self.r2_mediator * self.r2_outcome)
        return size_of(self.r2_mediator, self.r2_outcome)

    def _bends(self) -> tuple[float, ...]:
        return *super()._bends(), 0.0

    def _logpdf(self, x: Floats) -> Floats:
        size = self._size()
        if isinstance(size, float):
            return np.full(x.shape, -np.inf)  # atoms only
        with np.errstate(divide="ignore"):
            weight = np.log(np.where(x < 0, 1 - self.positive, self.positive if self.positive > 0 else 1.0))
        # at 0 exactly the density may be 0, finite or infinite: take it just beside
        return weight + size.logpdf(np.maximum(np.abs(x), TINY))

    def _cdf(self, x: Floats) -> Floats:
        size = self._size()
        negative = 1 - self.positive
        if isinstance(size, float):
            return np.sum([np.where(x >= value, weight, 0.0) for value, weight in self.atoms()], axis=0)
        within = size.cdf(np.abs(x))
        return np.where(x < 0, negative * (1 - within), negative + self.positive * within)

    def _ppf(self, q: Floats) -> Floats:
        size = self._size()
        negative = 1 - self.positive
        if isinstance(size, float):
            return np.where(q <= negative, -size, size) + 0.0
        left = q < negative
        share = np.where(left, negative, self.positive)
        within = np.abs(q - negative) / np.where(share > 0, share, 1.0)
        sizes = size.ppf(np.clip(within, TINY, 1.0))
        return np.where(left, -sizes, sizes)


def _share(argument: str, value: Any) -> float | BetaShare:
    if isinstance(value, BetaShare):
        return value
    allowed = "a share of variance from 0 up to but not including 1, or a BetaShare, is needed"
    value = plain(value)
    share = real("SharedCause", argument, value, allowed)
    if not 0 <= share < 1:
        raise refusal("SharedCause", argument, value, allowed)
    return share


def _moment(share: float | BetaShare, power: float) -> float:
    """E[share^power]."""
    if isinstance(share, BetaShare):
        return math.exp(float(betaln(share.alpha + power, share.beta) - betaln(share.alpha, share.beta)))
    return float(share**power)
