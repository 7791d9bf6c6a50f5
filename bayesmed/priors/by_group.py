"""Beliefs about ρ that differ between groups, tied by a Gaussian copula."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import ndtr

from bayesmed.core.errors import PriorError
from bayesmed.priors.accept import coerce
from bayesmed.priors.arguments import real
from bayesmed.priors.prior import Floats, Prior

__all__ = ["ByGroup", "as_belief"]


@dataclass(frozen=True, init=False)
class ByGroup:
    """A belief about ρ for each level of a categorical moderator.

    Parameters
    ----------
    priors : mapping of level to prior or number
        Every level of the moderator, with the belief held for it.
    correlation : float
        Correlation of the groups' ρ on the normal scale (a Gaussian copula): 1 if what was left out is the same in
        all groups, 0 if knowing it for one tells nothing of another.
    moderator : str, optional
        The moderator's column; needed only where two of them have these levels.

    Notes
    -----
    Each group has its own sigma_m and tau, so both equations must be saturated in the moderator. The conditional
    effect in a group depends on that group's ρ alone.

    Examples
    --------
    >>> ByGroup({"low": 0.1, "high": 0.3}, correlation=0.8)
    ByGroup({'low': PointMass(value=0.1), 'high': PointMass(value=0.3)}, correlation=0.8)
    """

    items: tuple[tuple[Any, Prior], ...]
    correlation: float
    moderator: str | None

    def __init__(self, priors: Mapping[Any, Any], *, correlation: float, moderator: str | None = None) -> None:
        if not isinstance(priors, Mapping) or len(priors) < 2:
            raise PriorError(f"ByGroup: priors={priors!r} must be a dict of level → prior with two levels or more")
        c = real("ByGroup", "correlation", correlation)
        least = -1 / (len(priors) - 1)
        if not least <= c <= 1:
            raise PriorError(
                f"ByGroup: correlation={correlation!r} must be between {least:.3g} and 1 for {len(priors)} groups"
            )
        object.__setattr__(self, "items", tuple((level, coerce(prior)) for level, prior in priors.items()))
        object.__setattr__(self, "correlation", c)
        object.__setattr__(self, "moderator", moderator)

    @property
    def levels(self) -> tuple[Any, ...]:
        """The groups."""
        return tuple(level for level, _ in self.items)

    def of(self, level: Any) -> Prior:
        """Return the belief held for one group."""
        found: Prior = dict(self.items)[level]
        return found

    def uniforms(self, count: int, random_seed: int) -> Floats:
        """Return tied numbers in (0, 1), shape (group, count): each group's are uniform, `correlation` ties them."""
        groups = len(self.items)
        matrix = np.full((groups, groups), self.correlation)
        np.fill_diagonal(matrix, 1.0)
        values, vectors = np.linalg.eigh(matrix)
        root = vectors * np.sqrt(np.maximum(values, 0.0))
        normal = np.random.default_rng([random_seed, 4]).standard_normal((groups, count))
        tied: Floats = ndtr(root @ normal)
        return np.clip(tied, np.finfo(float).tiny, 1 - np.finfo(float).eps)

    def __repr__(self) -> str:
        named = f", moderator={self.moderator!r}" if self.moderator is not None else ""
        return f"ByGroup({dict(self.items)!r}, correlation={self.correlation!r}{named})"

    def _repr_html_(self) -> str:
        from html import escape

        from bayesmed.priors.shown import as_html

        groups = "".join(f"<p>{escape(str(level))}:</p>{as_html(belief)}" for level, belief in self.items)
        return f"<div><p>Beliefs by group, tied by a correlation of {self.correlation:g}.</p>{groups}</div>"


def as_belief(value: Any) -> Any:
    """Return a ByGroup as it is, and anything else as `coerce` takes it.

    Examples
    --------
    >>> as_belief(0.2)
    PointMass(value=0.2)
    """
    return value if isinstance(value, ByGroup) else coerce(value)
