"""What every set of beliefs about the residual correlation offers."""

from __future__ import annotations

from abc import ABC, abstractmethod
from typing import Any

from bayesmed.core.errors import PriorError
from bayesmed.core.steps import Steps
from bayesmed.priors.arguments import correlation, refusal
from bayesmed.priors.prior import Prior

__all__ = ["PriorSet", "as_set", "bounds"]


class PriorSet(ABC):
    """Beliefs about ρ that share what can be said of ρ with confidence, and differ in all else.

    A set is a frozen value. It answers with members of itself: the one under which a claim is least probable, and
    the one under which it is most probable.

    Examples
    --------
    >>> from bayesmed.priors import AnyOn
    >>> isinstance(AnyOn(-0.2, 0.2), PriorSet)
    True
    """

    @abstractmethod
    def support(self) -> tuple[float, float]:
        """Return the smallest and the largest value of ρ that a member allows."""

    @abstractmethod
    def lowest(self, steps: Steps) -> Prior:
        """Return the member under which the average of a step function of ρ is smallest.

        Where the smallest average is only approached within the set, the member returned has that average and is
        a limit of members.
        """

    def highest(self, steps: Steps) -> Prior:
        """Return the member under which the average of a step function of ρ is largest."""
        return self.lowest(steps.negated())

    @abstractmethod
    def odds_range(self) -> tuple[float, float]:
        """Return the smallest and the largest E[r] of the set, r = ρ/√(1−ρ²), infinite where they are.

        The mean of an effect is a line in E[r].
        """

    def _repr_html_(self) -> str:
        from html import escape

        from bayesmed.priors.shown import short

        lower, upper = self.support()
        words = f"{short(self)}: a set of beliefs about ρ, all of them between {lower:.3g} and {upper:.3g}."
        return f"<div><p>{escape(words)}</p></div>"


def as_set(value: Any) -> PriorSet:
    """Return `value` if it is a set of beliefs.

    Raises
    ------
    PriorError
        If it is not; it says what a single belief needs instead.
    """
    if isinstance(value, PriorSet):
        return value
    hint = " (that is a single prior: fit.compare gives its probability)" if isinstance(value, Prior) else ""
    raise PriorError(
        f"a set of priors cannot be made from {value!r}{hint}; give AnyOn(-0.3, 0.3), Statements(…),"
        " Contaminated(base, epsilon), UnimodalAt(mode, lower, upper) or Nearby(base, divergence)"
    )


def bounds(owner: str, lower: object, upper: object) -> tuple[float, float]:
    """Return two correlations of which the first is the smaller, or both one value strictly inside (−1, 1)."""
    low, high = correlation(owner, "lower", lower), correlation(owner, "upper", upper)
    if low > high:
        raise refusal(owner, "lower", low, f"it must not exceed upper, which is {high!r}")
    if low == high and abs(low) == 1:
        raise refusal(owner, "lower", low, "no correlation is ±1, and upper is the same")
    return low, high
