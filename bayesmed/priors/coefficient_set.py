"""Which coefficients and scales of the two equations have a prior of their own, and on which scale."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from difflib import get_close_matches
from typing import Any

from bayesmed.core.errors import ArgumentError
from bayesmed.priors.coefficients import (
    CoefficientPrior,
    Exponential,
    HalfNormal,
    HalfStudentT,
    LogNormal,
    Normal,
    StudentT,
)

__all__ = ["Coefficients", "TermPriors", "coerce_coefficient"]

SCALES = ("identified", "structural")


class TermPriors(Mapping[str, CoefficientPrior]):
    """A mapping of term name to prior that cannot be changed, so that it can be hashed and pickled."""

    __slots__ = ("_items",)

    def __init__(self, terms: Mapping[str, CoefficientPrior]) -> None:
        self._items = dict(terms)

    def __getitem__(self, term: str) -> CoefficientPrior:
        return self._items[term]

    def __iter__(self) -> Iterator[str]:
        return iter(self._items)

    def __len__(self) -> int:
        return len(self._items)

    def __hash__(self) -> int:
        return hash(frozenset(self._items.items()))

    def __repr__(self) -> str:
        return repr(self._items)


@dataclass(frozen=True)
class Coefficients:
    """Priors of named coefficients and of the two residual SDs; all others keep their default.

    Parameters
    ----------
    mediator, outcome : mapping of str to CoefficientPrior
        Term name to prior, in either equation. A frozen distribution of `scipy.stats` of a known family is
        taken too. A coefficient's prior covers the whole line (`Normal`, `StudentT`).
    sigma_mediator, sigma_outcome : CoefficientPrior, optional
        Priors of the residual standard deviations, on positive numbers.
    scale : {"identified", "structural"}
        Whether the outcome's priors are about the regression of the outcome on the mediator as it is seen, or
        about the equation freed of confounding. On the structural scale they inform ρ.

    Raises
    ------
    ArgumentError
        If a prior is none, or is on the wrong range, or `scale` is another word.

    Examples
    --------
    >>> Coefficients(outcome={"exercise": Normal(0, 1)}, sigma_mediator=HalfNormal(2))
    Coefficients(mediator={}, outcome={'exercise': Normal(mean=0.0, sd=1.0)}, \
sigma_mediator=HalfNormal(scale=2.0), sigma_outcome=None, scale='identified')
    """

    mediator: Mapping[str, CoefficientPrior] = field(default_factory=dict)
    outcome: Mapping[str, CoefficientPrior] = field(default_factory=dict)
    sigma_mediator: CoefficientPrior | None = None
    sigma_outcome: CoefficientPrior | None = None
    scale: str = "identified"

    def __post_init__(self) -> None:
        for equation in ("mediator", "outcome"):
            object.__setattr__(self, equation, _term_priors(equation, getattr(self, equation)))
        for argument in ("sigma_mediator", "sigma_outcome"):
            value = getattr(self, argument)
            if value is not None:
                prior = coerce_coefficient(value, argument)
                if prior.on_whole_line:
                    raise ArgumentError(
                        f"Coefficients: {argument} is {prior!r}, which allows negative values; a residual"
                        " standard deviation needs HalfNormal, HalfStudentT, LogNormal or Exponential"
                    )
                object.__setattr__(self, argument, prior)
        if self.scale not in SCALES:
            raise ArgumentError(f"Coefficients: scale is {self.scale!r}; it must be 'identified' or 'structural'")

    @property
    def informs_rho(self) -> bool:
        """True if a prior is about the structural outcome equation, through which ρ learns from the data."""
        return self.scale == "structural" and bool(self.outcome or self.sigma_outcome)

    def check(self, mediator_terms: Iterable[str], outcome_terms: Iterable[str]) -> None:
        """Raise ArgumentError if a prior is given for a term that its equation does not have."""
        for equation, priors, terms in (
            ("mediator", self.mediator, mediator_terms),
            ("outcome", self.outcome, outcome_terms),
        ):
            valid = sorted(terms)
            for term in priors:
                if term not in valid:
                    near = get_close_matches(term, valid, n=1)
                    hint = f"; did you mean {near[0]!r}?" if near else ""
                    raise ArgumentError(
                        f"Coefficients: {equation} has a prior for {term!r}, which is not a term of the"
                        f" {equation} equation; its terms are {', '.join(map(repr, valid))}{hint}"
                    )


def coerce_coefficient(value: Any, place: str) -> CoefficientPrior:
    """Return the coefficient prior that `value` stands for; `place` names it in errors.

    A frozen `scipy.stats` distribution is converted where it is one of norm, t, cauchy, halfnorm, halfcauchy,
    lognorm and expon (the positive ones with loc 0).
    """
    if isinstance(value, CoefficientPrior):
        return value
    family = getattr(getattr(value, "dist", None), "name", None)
    if isinstance(family, str) and hasattr(value, "kwds"):
        converted = _from_scipy(family, value)
        if converted is not None:
            return converted
        raise ArgumentError(
            f"{place}: a frozen scipy distribution {family}{value.args or ''}{value.kwds or ''} cannot be"
            " used; norm, t and cauchy can, and halfnorm, halfcauchy, lognorm and expon with loc 0"
        )
    raise ArgumentError(
        f"{place} is {value!r}; a prior such as Normal(0, 1) or HalfNormal(2) is needed"
        " (Normal, StudentT, HalfNormal, HalfStudentT, LogNormal, Exponential)"
    )


def _term_priors(equation: str, terms: Any) -> TermPriors:
    if not isinstance(terms, Mapping):
        raise ArgumentError(f"Coefficients: {equation} is {terms!r}; a dict of term name to prior is needed")
    priors: dict[str, CoefficientPrior] = {}
    for term, value in terms.items():
        if not isinstance(term, str):
            raise ArgumentError(f"Coefficients: {equation} has the key {term!r}; a term's name is needed")
        prior = coerce_coefficient(value, f"Coefficients: {equation}[{term!r}]")
        if not prior.on_whole_line:
            raise ArgumentError(
                f"Coefficients: {equation}[{term!r}] is {prior!r}, which allows positive values only; a"
                " coefficient needs Normal or StudentT"
            )
        priors[term] = prior
    return TermPriors(priors)


def _from_scipy(family: str, frozen: Any) -> CoefficientPrior | None:
    shapes, location, scale = frozen.dist._parse_args(*frozen.args, **frozen.kwds)
    if family == "norm":
        return Normal(location, scale)
    if family == "t":
        return StudentT(shapes[0], location, scale)
    if family == "cauchy":
        return StudentT(1, location, scale)
    if location != 0:
        return None
    if family == "halfnorm":
        return HalfNormal(scale)
    if family == "halfcauchy":
        return HalfStudentT(1, scale)
    if family == "expon":
        return Exponential(scale)
    if family == "lognorm":
        import math

        return LogNormal(math.log(scale), shapes[0])
    return None
