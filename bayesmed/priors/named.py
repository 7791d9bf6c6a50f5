"""Beliefs and coefficient priors written as plain tables, as a study file holds them."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import MISSING, fields
from difflib import get_close_matches
from typing import Any

from bayesmed.core.errors import PriorError, StudyFileError
from bayesmed.priors.accept import coerce
from bayesmed.priors.adapters import FromScipy
from bayesmed.priors.arguments import plain
from bayesmed.priors.coefficients import (
    CoefficientPrior,
    Exponential,
    HalfNormal,
    HalfStudentT,
    LogNormal,
    Normal,
    StudentT,
)
from bayesmed.priors.fisher_normal import FisherNormal
from bayesmed.priors.mixture import Mixture
from bayesmed.priors.point import PointMass
from bayesmed.priors.prior import Prior
from bayesmed.priors.shared_cause import SharedCause
from bayesmed.priors.shared_size import BetaShare
from bayesmed.priors.stretched_beta import LKJ, StretchedBeta
from bayesmed.priors.tabulated import Tabulated
from bayesmed.priors.truncated_normal import TruncatedNormal
from bayesmed.priors.uniform import Uniform

__all__ = ["coefficient_from_spec", "from_spec", "to_spec"]

BELIEFS: dict[str, type] = {
    family.__name__: family
    for family in (
        PointMass,
        Uniform,
        TruncatedNormal,
        StretchedBeta,
        FisherNormal,
        LKJ,
        Mixture,
        SharedCause,
        Tabulated,
        FromScipy,
    )
}
NUMBER_OR_TABLE = 'a number or a table such as {family = "LKJ", eta = 2}'
COEFFICIENTS: dict[str, type] = {
    family.__name__: family for family in (Normal, StudentT, HalfNormal, HalfStudentT, LogNormal, Exponential)
}


def from_spec(spec: Mapping[str, Any] | float, place: str = "belief") -> Prior:
    """Return the belief about ρ that a plain table describes.

    Parameters
    ----------
    spec : mapping or float
        ``{"family": "TruncatedNormal", "mean": 0.3, "sd": 0.15}``; a number alone is certainty in it.
    place : str
        Where the table stands in its file, for errors: ``"beliefs.sceptic"``.

    Raises
    ------
    StudyFileError
        If the family or a key is unknown, a key is missing, or a value is not allowed; it names the place.

    Examples
    --------
    >>> from_spec({"family": "LKJ", "eta": 2})
    LKJ(eta=2.0)
    """
    spec = plain(spec)
    if isinstance(spec, int | float) and not isinstance(spec, bool):
        belief: Prior = _built(lambda: coerce(spec), place)
        return belief
    prior: Prior = _from_table(spec, place, BELIEFS, NUMBER_OR_TABLE)
    return prior


def coefficient_from_spec(spec: Mapping[str, Any], place: str = "coefficient") -> CoefficientPrior:
    """Return the prior of a coefficient or a scale that a plain table describes; errors as in `from_spec`.

    Examples
    --------
    >>> coefficient_from_spec({"family": "Normal", "mean": 0, "sd": 1})
    Normal(mean=0.0, sd=1.0)
    """
    prior: CoefficientPrior = _from_table(
        spec, place, COEFFICIENTS, 'a table such as {family = "Normal", mean = 0, sd = 1}'
    )
    return prior


def to_spec(prior: Prior | CoefficientPrior) -> dict[str, Any]:
    """Return the plain table from which `from_spec` or `coefficient_from_spec` builds `prior` again.

    Examples
    --------
    >>> to_spec(LKJ(2))
    {'family': 'LKJ', 'eta': 2.0}
    """
    family = type(prior).__name__
    if type(prior) not in (BELIEFS | COEFFICIENTS).values():
        raise PriorError(
            f"{prior!r} cannot be written in a study file: it is not a family of bayesmed.priors"
            " (Tabulated(values, prior.cdf(values)) can stand for it)"
        )
    return {"family": family} | {each.name: _plain(getattr(prior, each.name)) for each in fields(prior)}  # type: ignore[arg-type]


def _plain(value: Any) -> Any:
    """Numbers and words as they are; priors as tables, shares as tables of their shapes, tuples as lists."""
    if isinstance(value, Prior):
        return to_spec(value)
    if isinstance(value, BetaShare):
        return {"alpha": value.alpha, "beta": value.beta}
    if isinstance(value, tuple):
        return [_plain(each) for each in value]
    return value


def _from_table(spec: Any, place: str, families: dict[str, type], needed: str) -> Any:
    if not isinstance(spec, Mapping):
        raise StudyFileError(f"{place} is {spec!r}; {needed} is needed")
    if "family" not in spec:
        raise StudyFileError(f"{place} has no key 'family'; it is one of {', '.join(families)}")
    name = spec["family"]
    if not isinstance(name, str) or name not in families:
        raise StudyFileError(f"{place}.family is {name!r}; it is one of {', '.join(families)}{_near(name, families)}")
    family = families[name]
    known = {each.name: each for each in fields(family)}
    for key in spec:
        if key != "family" and key not in known:
            raise StudyFileError(
                f"{place}.{key} is {spec[key]!r}, but {name} has no {key!r}; its keys are {', '.join(known)}"
                f"{_near(key, known)}"
            )
    missing = [key for key, each in known.items() if key not in spec and each.default is MISSING]
    if missing:
        raise StudyFileError(f"{place} lacks {', '.join(map(repr, missing))}, which {name} needs")
    arguments = {key: _argument(family, key, spec[key], f"{place}.{key}") for key in spec if key != "family"}
    return _built(lambda: family(**arguments), place)


def _argument(family: type, key: str, value: Any, place: str) -> Any:
    """Build the beliefs and shares that a table holds within it."""
    if family is Mixture and key == "priors" and isinstance(value, list | tuple):
        return [from_spec(each, f"{place}[{i}]") for i, each in enumerate(value)]
    if family is SharedCause and isinstance(value, Mapping):
        table = {"family": "BetaShare", **value}
        return _from_table(table, place, {"BetaShare": BetaShare}, "a number or {alpha = 1, beta = 9}")
    return value


def _built(build: Callable[[], Any], place: str) -> Any:
    """Build, and let an error speak of the place: "LKJ: eta is -1" becomes "beliefs.wide.eta is -1"."""
    try:
        return build()
    except PriorError as error:
        _, _, said = str(error).partition(": ")
        argument, _, rest = said.partition(" is ")
        if not re.fullmatch(r"[a-z0-9_]+(\[\d+\])?", argument):
            raise StudyFileError(f"{place}: {said or error}") from None
        where = place if argument == "value" else f"{place}.{argument}"
        raise StudyFileError(f"{where} is {rest}") from None


def _near(word: object, valid: Mapping[str, Any]) -> str:
    near = get_close_matches(str(word), list(valid), n=1, cutoff=0.5)
    return f"; did you mean {near[0]!r}?" if near else ""
