"""A study known by its published figures alone: rows that have exactly its means and covariances stand in for it.

Least squares, the default prior and the averages over rows that effects need depend on the rows only through means,
covariances and the number of rows, as long as every term is a column of its own or a product whose moments are given.
Whatever looks at single rows has nothing to look at, and says so.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.core.errors import ArgumentError, DataError, FormulaError
from bayesmed.core.mapping import Array, align
from bayesmed.core.row_summary import summarised
from bayesmed.study.compressed import Compressed
from bayesmed.study.formulas import Formula, Formulas, read
from bayesmed.study.frame import RowsUsed
from bayesmed.study.observe import Observed, observe

BINARY = 0.02
"""How far, relative, the variance of a 0/1 exposure may be from that of its mean; rounding needs some room."""
SMALLEST = 1e-10
"""Smallest eigenvalue of a correlation matrix that still counts as positive."""


@dataclass(frozen=True, eq=False)
class Moments:
    """Means and covariances of named columns.

    Attributes
    ----------
    names : tuple of str
    mean : array, shape (column,)
    covariance : array, shape (column, column)
        Divisor n - 1.
    rows : int
        Number of rows n.
    """

    names: tuple[str, ...]
    mean: Array
    covariance: Array
    rows: int


@dataclass(frozen=True, eq=False)
class Published:
    """What is known of a study that was published without its rows.

    Attributes
    ----------
    source : dict
        The arguments that made it, fit for JSON.
    moments : Moments
    theta : array, shape (parameter,)
        The free numbers behind the moments.
    printed, half : array, shape (figure,)
        The figures and half a unit of the last digit of each.
    implied : callable
        theta → the figures it implies, shape (figure,).
    moments_at : callable
        theta → Moments.
    unprinted : tuple of str
        Covariates of which only the number is known.
    notes : tuple of str
        What had to be taken for granted, in words.
    """

    source: dict[str, Any]
    moments: Moments
    theta: Array
    printed: Array
    half: Array
    implied: Callable[[Array], Array] = field(repr=False)
    moments_at: Callable[[Array], Moments] = field(repr=False)
    unprinted: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()

    def at(self, theta: Array) -> Published:
        """Return the same study with other numbers behind its figures."""
        return dataclasses.replace(self, theta=theta, moments=self.moments_at(theta))

    def equations(self, exposure: str, mediator: str, outcome: str) -> dict[str, str]:
        """Return the formulas in which every other column is a covariate of both equations."""
        roles = (exposure, mediator, outcome)
        beside = [quoted(name) for name in self.moments.names if name not in roles]
        m, y, x = quoted(mediator), quoted(outcome), quoted(exposure)
        return {"mediator": " + ".join([f"{m} ~ {x}", *beside]), "outcome": " + ".join([f"{y} ~ {m} + {x}", *beside])}


def observe_published(
    published: Published,
    *,
    exposure: str,
    contrast: Sequence[Any] | None,
    mediator: str,
    outcome: str,
    moderators: Sequence[str] | None = None,
) -> Observed:
    """Return what was observed, with rows that have the published moments in place of the study's own.

    Raises
    ------
    ArgumentError, DataError, FormulaError, DesignError
        As for rows; and if a term cannot be made of the moments.
    """
    moments = published.moments
    formulas = read(mediator, outcome, exposure, moments.names)
    terms = {
        "mediator": _terms(formulas.mediator, "mediator", formulas, exposure),
        "outcome": _terms(formulas.outcome, "outcome", formulas, exposure),
    }
    if exposure in moments.names and contrast is None:
        contrast = _own_contrast(moments, exposure)
    frame = rows_with(moments)
    observed = observe(
        frame, exposure=exposure, contrast=contrast, mediator=mediator, outcome=outcome, moderators=moderators
    )
    v, w = (np.column_stack([_column(names, argument, frame) for names in made]) for argument, made in terms.items())
    p, q = v.shape[1], w.shape[1]
    summary = summarised(np.column_stack([v, w, observed.mediator, observed.outcome]))
    compressed = Compressed(summary, tuple(range(p)), tuple(range(p, p + q)), (p + q, p + q + 1))
    return dataclasses.replace(
        observed,
        compressed=compressed,
        alignment=align(compressed.mediator_design, compressed.outcome_design, compressed.mediator),
        rows=RowsUsed(moments.rows, moments.rows, 0, {}),
        published=published,
    )


def quoted(name: str) -> str:
    """Return a column's name as a formula takes it."""
    return name if name.isidentifier() else f"`{name}`"


def rows_with(moments: Moments) -> pd.DataFrame:
    """Return as many rows as the study had, with exactly its means and covariances.

    Cosines over the rows are orthogonal to each other and to the constant, so that nothing is drawn at random.

    Raises
    ------
    DataError
        If the covariances are those of no data.
    """
    n, k = moments.rows, len(moments.names)
    if n < k + 2:
        raise DataError(f"n={n!r}: {k} columns cannot have such covariances in so few rows")
    sd = np.sqrt(np.diag(moments.covariance))
    flat = [name for name, value in zip(moments.names, sd, strict=True) if not value > 0]
    if flat:
        raise DataError(f"cov: the variance of {flat[0]!r} must be above zero")
    correlation = moments.covariance / np.outer(sd, sd)
    values, vectors = np.linalg.eigh(correlation)
    if values[0] < SMALLEST:
        weights = np.abs(vectors[:, 0])
        named = ", ".join(repr(moments.names[i]) for i in np.argsort(-weights) if weights[i] > 0.2)
        raise DataError(
            f"cov: the correlations of {named} are those of no data (smallest eigenvalue {values[0]:.2g}, which must "
            "be above zero); look for a misprint, or give more decimals: rounding alone can do this"
        )
    place = np.arange(1, k + 1) * np.pi / n
    basis = np.sqrt(2 / n) * np.cos(np.outer(np.arange(n) + 0.5, place))
    scaled = np.sqrt(n - 1) * basis @ np.linalg.cholesky(correlation).T
    return pd.DataFrame(moments.mean + scaled * sd, columns=list(moments.names))


def _own_contrast(moments: Moments, exposure: str) -> tuple[int, int]:
    place = moments.names.index(exposure)
    p, n = float(moments.mean[place]), moments.rows
    variance = float(moments.covariance[place, place])
    expected = p * (1 - p) * n / (n - 1)
    if 0 < p < 1 and abs(variance - expected) <= BINARY * expected:
        return 0, 1
    raise ArgumentError(
        f"contrast: '{exposure}' has mean {p:g} and variance {variance:g}, which is not that of a 0/1 column; name two "
        "values as contrast=(from, to)"
    )


def _terms(formula: Formula, argument: str, formulas: Formulas, exposure: str) -> list[list[str]]:
    """Return the columns multiplied in each term, if their product can be one of the moments."""
    if not formula.left.is_plain:
        raise FormulaError(
            f"{argument}: {formula.left.label} left of '~' cannot be made of means and covariances; give the moments "
            "of the transformed variable under a plain name"
        )
    (mediator,) = formulas.mediator.left.columns
    found = []
    for term in formula.terms:
        if any(not factor.is_plain for factor in term):
            label = ":".join(factor.label for factor in term)
            raise FormulaError(
                f"{argument}: the term {label} cannot be made of means and covariances; give the moments of the "
                "transformed variable under a plain name"
            )
        names = [mediator if factor.has_mediator else next(iter(factor.columns)) for factor in term]
        label = ":".join(names)
        beside = [name for name in names if name not in (exposure, mediator)]
        if len(beside) > 1:
            raise FormulaError(
                f"{argument}: the term {label} multiplies {' and '.join(beside)}; with more than one variable beside "
                "exposure and mediator, averages over rows need more than means and covariances"
            )
        if len(set(names)) < len(names):
            raise FormulaError(f"{argument}: the term {label} holds a variable twice, which covariances do not tell")
        found.append(names)
    return found


def _column(names: list[str], argument: str, frame: pd.DataFrame) -> Array:
    """Return a term of a design: the column of the moments that bears its name, factors in any order."""
    if not names:
        return np.ones(len(frame))
    for column in frame.columns:
        if [column] == names or sorted(str(column).split(":")) == sorted(names):
            return frame[column].to_numpy()
    raise FormulaError(
        f"{argument}: the moments hold no column {':'.join(names)!r}; the product's own mean, variance and covariances "
        f"are needed, under that name. They hold: {', '.join(repr(str(c)) for c in frame.columns)}"
    )
