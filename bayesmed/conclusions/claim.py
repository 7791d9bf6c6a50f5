"""The claim that a study is asked to support: an effect, the least that matters, and how sure is sure."""

from dataclasses import dataclass
from typing import Any

import numpy as np

from bayesmed.core.contrasts import EFFECTS
from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array
from bayesmed.core.tipping import Direction

HOLDS, FAILS, CLOSE = "holds", "fails", "too close to call"
LEAST_REQUIRED = 0.5


@dataclass(frozen=True)
class Claim:
    """A statement about one effect and the probability it must reach.

    Parameters
    ----------
    effect : str
        "indirect", "direct", "total", "pure_indirect" or "total_direct".
    above, below : float, optional
        The limit, in units of the outcome. Give one; neither means ``above=0``.
    required : float
        Probability from which the claim is said to hold, between 0.5 and 1.

    Examples
    --------
    >>> Claim("indirect", above=2.0, required=0.9)
    Claim('indirect', above=2.0, required=0.9)
    >>> print(Claim())
    indirect effect > 0
    """

    effect: str = "indirect"
    above: float | None = None
    below: float | None = None
    required: float = 0.95

    def __post_init__(self) -> None:
        if self.effect not in EFFECTS:
            raise ArgumentError(f"Claim: effect={self.effect!r} is not known; allowed are {', '.join(EFFECTS)}")
        if self.above is not None and self.below is not None:
            raise ArgumentError(
                f"Claim: above={self.above!r} and below={self.below!r} were both given; give one of them"
            )
        if self.above is None and self.below is None:
            object.__setattr__(self, "above", 0.0)
        for name in ("above", "below"):
            value = getattr(self, name)
            if value is not None:
                object.__setattr__(self, name, _finite(name, value))
        required = _finite("required", self.required)
        if not LEAST_REQUIRED <= required < 1:
            raise ArgumentError(f"Claim: required={self.required!r} must be a probability from 0.5 to below 1")
        object.__setattr__(self, "required", required)

    @property
    def limit(self) -> float:
        """The value that the effect must be above, or below."""
        value = self.above if self.above is not None else self.below
        assert value is not None
        return value

    @property
    def direction(self) -> Direction:
        """On which side of the limit the claim puts the effect."""
        return "above" if self.above is not None else "below"

    def true_of(self, values: Array) -> Array:
        """Return 1 where an effect of this value makes the claim true and 0 where it does not."""
        return (values > self.limit if self.direction == "above" else values < self.limit).astype(float)

    def verdict(self, probability: float, mcse: float) -> str:
        """Return whether the claim holds, fails, or is within two Monte Carlo errors of what it requires."""
        if abs(probability - self.required) <= 2 * mcse:
            return CLOSE
        return HOLDS if probability > self.required else FAILS

    def statement(self, effect: str | None = None) -> str:
        """Return the claim in symbols, for another effect if named."""
        sign = ">" if self.direction == "above" else "<"
        return f"{(effect or self.effect).replace('_', ' ')} effect {sign} {self.limit:g}"

    def __str__(self) -> str:
        return self.statement()

    def __repr__(self) -> str:
        return f"Claim({self.effect!r}, {self.direction}={self.limit!r}, required={self.required!r})"


def as_claim(claim: Any) -> Claim:
    """Return `claim`, or the default for None."""
    if claim is None:
        return Claim()
    if not isinstance(claim, Claim):
        raise ArgumentError(f"claim={claim!r} must be a bm.Claim, for example bm.Claim('indirect', above=0)")
    return claim


def _finite(name: str, value: Any) -> float:
    try:
        number = float(value)
    except (TypeError, ValueError) as error:
        raise ArgumentError(f"Claim: {name}={value!r} must be a number") from error
    if not np.isfinite(number):
        raise ArgumentError(f"Claim: {name}={value!r} must be finite")
    return number
