"""Which variables moderate which path: those that share a term with the exposure or the mediator."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import pandas as pd

from bayesmed.core.contrasts import EFFECTS
from bayesmed.core.errors import ArgumentError, DataError
from bayesmed.study.formulas import Formulas

TO_MEDIATOR = "exposure → mediator"
TO_OUTCOME = "mediator → outcome"
PAST_MEDIATOR = "exposure → outcome"

RESERVED = frozenset(
    (
        *EFFECTS,
        "mediator_term",
        "outcome_term",
        "chain",
        "draw",
        "rho",
        "prior",
        "effect",
        "mean",
        "sd",
        "lower",
        "upper",
        "probability",
        "mcse",
        "verdict",
    )
)
"""Names that tables and arrays of results use themselves."""


@dataclass(frozen=True)
class Moderator:
    """A variable on which an effect may depend.

    Attributes
    ----------
    name : str
        Its column.
    kind : str
        "numeric" or "categorical"; truth values and what stands inside ``C()`` are categorical.
    paths : tuple of str
        The paths it moderates.
    """

    name: str
    kind: str
    paths: tuple[str, ...]


def moderators_found(formulas: Formulas, exposure: str, frame: pd.DataFrame) -> tuple[Moderator, ...]:
    """Return every variable that shares a term with the exposure, or with the mediator in the outcome.

    Raises
    ------
    DataError
        If one of them has a reserved name.
    """
    found: dict[str, list[str]] = {}
    for formula, from_exposure in ((formulas.mediator, TO_MEDIATOR), (formulas.outcome, PAST_MEDIATOR)):
        for term in formula.terms:
            columns = frozenset().union(*(factor.columns for factor in term))
            paths = [from_exposure] if exposure in columns else []
            paths += [TO_OUTCOME] if any(factor.has_mediator for factor in term) else []
            # In the order of the formula, not of a set.
            for name in (n for n in formulas.columns if n in columns and n != exposure):
                known = found.setdefault(name, []) if paths else []
                known += [path for path in paths if path not in known]
    coded = _coded(formulas)
    for name in found:
        if (problem := reserved(name)) is not None:
            raise DataError(f"data: the moderator {problem}")
    return tuple(
        Moderator(name, kind_of(frame[name], coded=name in coded), tuple(p for p in _PATHS if p in paths))
        for name, paths in found.items()
    )


_PATHS = (TO_MEDIATOR, TO_OUTCOME, PAST_MEDIATOR)


def kind_of(column: pd.Series[Any], *, coded: bool) -> str:
    """Return "categorical" or "numeric" for a column; `coded` says that it stands inside ``C()``."""
    categorical = coded or isinstance(column.dtype, pd.CategoricalDtype) or column.dtype == bool
    return "categorical" if categorical else "numeric"


def reserved(name: str) -> str | None:
    """Return what is wrong with a name as that of a dimension of the results, or None."""
    if name in RESERVED or "/" in name:
        why = "holds a slash" if "/" in name else "is a name that results use themselves"
        return f"'{name}' {why}; rename the column, for example to '{name.replace('/', '_')}_value'."
    return None


def default_moderators(found: Sequence[Moderator], chosen: Sequence[str] | str | None) -> tuple[str, ...]:
    """Return the moderators that get a default grid.

    Raises
    ------
    ArgumentError
        If `chosen` holds what is not a moderator.
    """
    names = tuple(moderator.name for moderator in found)
    if chosen is None:
        return names
    chosen = (chosen,) if isinstance(chosen, str) else chosen
    if not isinstance(chosen, list | tuple):
        raise ArgumentError(f"moderators: expected a list of names, got {type(chosen).__name__}.")
    for name in chosen:
        if name not in names:
            listed = ", ".join(f"'{n}'" for n in names) or "none"
            raise ArgumentError(
                f"moderators: {name!r} shares no term with the exposure or the mediator, so nothing depends "
                f"on it. Moderators found: {listed}."
            )
    if len(set(chosen)) < len(chosen):
        raise ArgumentError(f"moderators: a name is given twice in {list(chosen)!r}.")
    return tuple(chosen)


def coded_columns(formulas: Formulas) -> frozenset[str]:
    """Return the columns that stand inside ``C()`` in either formula."""
    return _coded(formulas)


def _coded(formulas: Formulas) -> frozenset[str]:
    return frozenset().union(
        *(f.coded for formula in (formulas.mediator, formulas.outcome) for term in formula.terms for f in term)
    )
