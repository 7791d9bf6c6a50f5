"""What a belief asks of a fit."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Protocol

from numpy.typing import ArrayLike

__all__ = ["HasDirection", "HasYardsticks"]


class HasDirection(Protocol):
    """Posterior draws that know which way the exposure moves the mediator.

    Examples
    --------
    >>> from bayesmed.front.fit import Fit
    >>> hasattr(Fit, "direction")
    True
    """

    def direction(self) -> ArrayLike:
        """Return, one to a posterior draw, numbers with the sign of the exposure's effect on the mediator."""
        ...


class HasYardsticks(Protocol):
    """Posterior draws that can compare an unmeasured cause with measured covariates."""

    def strength_draws(self, covariates: str | Sequence[str], multiple: float) -> ArrayLike:
        """Return, one to a draw, the ρ left by a cause `multiple` times as strong as the covariates."""
        ...
