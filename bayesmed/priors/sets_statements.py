"""The set of all beliefs that meet statements about ρ: probabilities, quantiles, means."""

from __future__ import annotations

import math
from dataclasses import dataclass, fields
from functools import lru_cache

from bayesmed.core.errors import PriorError
from bayesmed.core.programme import Bound, conflict, mirrored, smallest_odds, smallest_under
from bayesmed.core.steps import Steps
from bayesmed.priors.arguments import correlation, real, refusal
from bayesmed.priors.mixture import Mixture
from bayesmed.priors.point import PointMass
from bayesmed.priors.prior import Prior
from bayesmed.priors.prior_set import PriorSet, bounds

__all__ = ["Mean", "Probability", "Quantile", "Statement", "Statements"]

SHARE = "a probability lies between 0 and 1"


@dataclass(frozen=True, repr=False)
class Probability:
    """The statement that ρ lies above a value, below one, or between two, with a probability in given limits.

    Parameters
    ----------
    above, below : float, optional
        The event: ρ > above, ρ < below, or both. The values themselves do not belong to it.
    at_least, at_most : float, optional
        Limits of its probability; give one or both.
    exactly : float, optional
        Its probability, in place of limits.

    Examples
    --------
    >>> print(Probability(above=0.3, at_most=0.1))
    P(rho > 0.3) <= 0.1
    >>> print(Probability(above=-0.1, below=0.1, at_least=0.5))
    P(-0.1 < rho < 0.1) >= 0.5
    """

    above: float | None = None
    below: float | None = None
    at_least: float | None = None
    at_most: float | None = None
    exactly: float | None = None

    def __post_init__(self) -> None:
        for name in ("above", "below"):
            if (end := getattr(self, name)) is not None:
                object.__setattr__(self, name, correlation("Probability", name, end))
        if self.above is None and self.below is None:
            raise PriorError("Probability: neither above nor below is given; give the end or ends of an event")
        if self.above is not None and self.below is not None and not self.above < self.below:
            raise refusal("Probability", "above", self.above, f"it must be less than below, which is {self.below!r}")
        for name in ("at_least", "at_most", "exactly"):
            if (share := getattr(self, name)) is not None:
                object.__setattr__(self, name, _share("Probability", name, share))
        limits = [name for name in ("at_least", "at_most") if getattr(self, name) is not None]
        if (self.exactly is None) == (not limits):
            raise PriorError(
                f"Probability: {'exactly, ' if limits else ''}{', '.join(limits) or 'no probability'}"
                " given; give exactly, or at_least, at_most or both of these"
            )
        if len(limits) == 2 and not self.at_least <= self.at_most:  # type: ignore[operator]
            raise refusal("Probability", "at_least", self.at_least, f"it exceeds at_most, which is {self.at_most!r}")

    def _bounds(self) -> list[Bound]:
        after = -math.inf if self.above is None else self.above
        before = math.inf if self.below is None else self.below
        least, most = self._limits()
        return [Bound((after, before), least, most)]

    def _limits(self) -> tuple[float, float]:
        if self.exactly is not None:
            return self.exactly, self.exactly
        return 0.0 if self.at_least is None else self.at_least, 1.0 if self.at_most is None else self.at_most

    def __str__(self) -> str:
        if self.above is None:
            event = f"rho < {self.below:g}"
        elif self.below is None:
            event = f"rho > {self.above:g}"
        else:
            event = f"{self.above:g} < rho < {self.below:g}"
        if self.exactly is not None:
            return f"P({event}) = {self.exactly:g}"
        if self.at_least is not None and self.at_most is not None:
            return f"{self.at_least:g} <= P({event}) <= {self.at_most:g}"
        return f"P({event}) >= {self.at_least:g}" if self.at_most is None else f"P({event}) <= {self.at_most:g}"

    def __repr__(self) -> str:
        return _shown(self)


@dataclass(frozen=True, repr=False)
class Mean:
    """The statement that the mean of ρ lies between two values, or is one value.

    Parameters
    ----------
    lower : float
        Smallest mean; the mean itself if no `upper` is given.
    upper : float, optional
        Largest mean.

    Examples
    --------
    >>> print(Mean(0, 0.2))
    the mean of rho is between 0 and 0.2
    """

    lower: float
    upper: float | None = None

    def __post_init__(self) -> None:
        _order(self, "Mean")

    def _bounds(self) -> list[Bound]:
        return [Bound(None, self.lower, self.lower if self.upper is None else self.upper)]

    def __str__(self) -> str:
        return f"the mean of rho is {_span(self.lower, self.upper)}"

    def __repr__(self) -> str:
        return _shown(self)


@dataclass(frozen=True, repr=False)
class Quantile:
    """The statement that a quantile of ρ lies between two values, or is one value.

    Parameters
    ----------
    probability : float
        Which quantile; 0.5 is the median.
    lower : float
        Smallest value; the quantile itself if no `upper` is given.
    upper : float, optional
        Largest value.

    Examples
    --------
    >>> print(Quantile(0.5, 0.1))
    the 0.5 quantile of rho is 0.1
    """

    probability: float
    lower: float
    upper: float | None = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "probability", _share("Quantile", "probability", self.probability))
        _order(self, "Quantile")

    def _bounds(self) -> list[Bound]:
        # x is a q-quantile where P(ρ < x) <= q <= P(ρ <= x); some x of the span is one.
        upper = self.lower if self.upper is None else self.upper
        return [
            Bound((-math.inf, self.lower), 0.0, self.probability),
            Bound((upper, math.inf), 0.0, 1 - self.probability),
        ]

    def __str__(self) -> str:
        return f"the {self.probability:g} quantile of rho is {_span(self.lower, self.upper)}"

    def __repr__(self) -> str:
        return _shown(self)


type Statement = Probability | Mean | Quantile


@dataclass(frozen=True, init=False, repr=False)
class Statements(PriorSet):
    """Every belief about ρ that meets all the statements.

    The extreme members put all mass on a few values. Limits of such beliefs count as meeting the statements: with
    `lower` −1, mass may sit as close to −1 as one likes, and the mean of an effect is then infinite on that side
    unless the statements keep all mass away.

    Parameters
    ----------
    *statements : Probability, Mean or Quantile
        None at all leaves every belief between the bounds.
    lower, upper : float
        Bounds of ρ, −1 ≤ lower ≤ upper ≤ 1. They belong to the range, but −1 and 1.

    Raises
    ------
    PriorError
        If no belief meets all statements; it names those that contradict each other, and no others.

    Examples
    --------
    >>> doubt = Statements(Probability(above=0.3, at_most=0.1), Mean(0, 0.2), lower=-0.9, upper=0.9)
    >>> doubt.odds_range()[1].__round__(3)
    0.324
    """

    statements: tuple[Statement, ...]
    lower: float
    upper: float

    def __init__(self, *statements: Statement, lower: float = -1.0, upper: float = 1.0) -> None:
        low, high = bounds("Statements", lower, upper)
        for i, statement in enumerate(statements):
            if not isinstance(statement, Probability | Mean | Quantile):
                raise refusal(
                    "Statements",
                    f"statements[{i}]",
                    statement,
                    "a statement is needed, such as Probability(above=0.3, at_most=0.1), Mean(0, 0.2) or"
                    " Quantile(0.5, 0.1)",
                )
        clash = conflict([statement._bounds() for statement in statements], low, high)
        if clash:
            named = "; ".join(str(statements[k]) for k in clash)
            advice = "it cannot be met there" if len(clash) == 1 else "leave out or loosen one of these"
            raise PriorError(
                f"Statements: no belief on [{low:g}, {high:g}] has: {named}. {advice[0].upper()}{advice[1:]}"
            )
        object.__setattr__(self, "statements", tuple(statements))
        object.__setattr__(self, "lower", low)
        object.__setattr__(self, "upper", high)

    def support(self) -> tuple[float, float]:
        """Return the bounds."""
        return self.lower, self.upper

    def lowest(self, steps: Steps) -> Prior:
        """Return a belief on a few values, by a linear programme."""
        found = smallest_under(self._bounds(), steps, self.lower, self.upper)
        return Mixture([PointMass(place) for place in found.places], found.weights)

    def odds_range(self) -> tuple[float, float]:
        """Return the smallest and the largest E[r], by linear programmes."""
        return _odds_range(self)

    def _bounds(self) -> list[Bound]:
        return [bound for statement in self.statements for bound in statement._bounds()]

    def __repr__(self) -> str:
        shown = [repr(statement) for statement in self.statements]
        return f"Statements({', '.join([*shown, f'lower={self.lower!r}', f'upper={self.upper!r}'])})"


@lru_cache(maxsize=64)
def _odds_range(statements: Statements) -> tuple[float, float]:
    own, low, high = statements._bounds(), statements.lower, statements.upper
    return smallest_odds(own, low, high), -smallest_odds(mirrored(own), -high, -low)


def _order(statement: Mean | Quantile, owner: str) -> None:
    """Check `lower` and, if given, `upper`."""
    object.__setattr__(statement, "lower", correlation(owner, "lower", statement.lower))
    if statement.upper is None:
        return
    object.__setattr__(statement, "upper", correlation(owner, "upper", statement.upper))
    if statement.lower > statement.upper:
        raise refusal(owner, "lower", statement.lower, f"it must not exceed upper, which is {statement.upper!r}")


def _share(owner: str, argument: str, value: object) -> float:
    number = real(owner, argument, value, SHARE)
    if not 0 <= number <= 1:
        raise refusal(owner, argument, number, SHARE)
    return number


def _span(lower: float, upper: float | None) -> str:
    return f"{lower:g}" if upper is None or upper == lower else f"between {lower:g} and {upper:g}"


def _shown(statement: Statement) -> str:
    """The call that makes the statement, without what was left out."""
    given = [(each.name, getattr(statement, each.name)) for each in fields(statement)]
    return f"{type(statement).__name__}({', '.join(f'{n}={v!r}' for n, v in given if v is not None)})"
