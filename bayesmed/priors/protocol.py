"""What a belief asks of a fit."""

from __future__ import annotations

from typing import Protocol

from numpy.typing import ArrayLike

__all__ = ["HasDirection"]


class HasDirection(Protocol):
    """Posterior draws that know which way the exposure moves the mediator."""

    def direction(self) -> ArrayLike:
        """Return, one to a posterior draw, numbers with the sign of the exposure's effect on the mediator."""
        ...
