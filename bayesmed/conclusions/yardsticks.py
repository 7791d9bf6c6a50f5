"""Unmeasured causes as strong as measured covariates: which rho they would leave, and what would overturn a claim."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.claim import Claim, as_claim
from bayesmed.conclusions.words import number_text, point_text
from bayesmed.core.errors import ArgumentError
from bayesmed.core.mapping import Array
from bayesmed.core.strength import Strength, strength
from bayesmed.fit.grouped import refuse_grouped
from bayesmed.fit.result import FitResult
from bayesmed.study.designs import Design
from bayesmed.study.observe import Observed
from bayesmed.study.points import points

TAIL = 0.025
type Covariates = str | Sequence[str] | Mapping[str, str | Sequence[str]] | None


@dataclass(frozen=True, eq=False)
class YardsticksResult:
    """Yardsticks of a fit.

    Attributes
    ----------
    table : pandas.DataFrame
        One row per covariate or block and strength. Columns: covariate; strength, how many times as strong the
        unmeasured cause is; rho, lower, upper, the median and central 95 % of the correlation it would leave (nan
        where such a cause cannot exist); left_out, the median correlation that leaving the covariate itself out
        would have left, which is another question.
    overturning : pandas.DataFrame
        One row per covariate and moderator point. Columns: covariate, the moderators, strength, lower, upper: how
        many times as strong as the covariate a cause must be for the claim to tip, infinite where a cause that pushes
        in the covariate's direction never does.
    sentences : tuple of str
        The same in words.
    """

    table: pd.DataFrame
    overturning: pd.DataFrame
    sentences: tuple[str, ...]


def yardsticks(
    result: FitResult,
    covariates: Covariates = None,
    strength: Sequence[float] = (0.5, 1, 2),
    at: Any = None,
    claim: Claim | None = None,
) -> YardsticksResult:
    """Compare unmeasured causes with measured covariates; see ``Fit.yardsticks``."""
    refuse_grouped(result, "yardsticks")
    multiples = _checked_strength(strength)
    stated = as_claim(claim)
    blocks = _blocks(result, covariates)
    chosen = points(result.observed, at)
    constant, slope = result.contrasts(chosen).line(stated.effect)
    with np.errstate(divide="ignore", invalid="ignore"):
        odds_needed = (constant - stated.limit) / slope
    rows, overturning, sentences = [], [], []
    for label, names in blocks.items():
        found = block_strength(result, names)
        for k in multiples:
            rho = found.rho(k)
            usable = np.mean(np.isfinite(rho)) > 1 - TAIL
            middle = np.quantile(rho, [0.5, TAIL, 1 - TAIL]) if usable and np.isfinite(rho).all() else [np.nan] * 3
            if usable and not np.isfinite(rho).all():
                # Where a few draws leave no room, the correlation goes to its end in the covariate's direction.
                middle = np.quantile(np.where(np.isfinite(rho), rho, np.sign(found.product)), [0.5, TAIL, 1 - TAIL])
            rows.append([label, k, *middle, np.median(found.left_out())])
        for place, point in enumerate(chosen.values):
            needed = np.quantile(found.multiple(odds_needed[place]), [0.5, TAIL, 1 - TAIL], method="inverted_cdf")
            overturning.append(
                {"covariate": label, **point, **dict(zip(("strength", "lower", "upper"), needed, strict=True))}
            )
            sentences.append(_sentence(label, point_text(point), needed, stated))
    table = pd.DataFrame(rows, columns=["covariate", "strength", "rho", "lower", "upper", "left_out"])
    return YardsticksResult(table, pd.DataFrame(overturning), tuple(sentences))


def strength_draws(result: FitResult, covariates: str | Sequence[str], multiple: float) -> Array:
    """Return draws of the correlation left by a cause `multiple` times as strong as a covariate or block."""
    refuse_grouped(result, "yardsticks")
    (k,) = _checked_strength([multiple])
    names = (covariates,) if isinstance(covariates, str) else tuple(covariates)
    _check_names(result, names)
    rho = block_strength(result, names).rho(k)
    if not np.isfinite(rho).all():
        raise ArgumentError(
            f"multiple={multiple!r}: a cause {k:g} times as strong as {', '.join(names)} would explain more than "
            f"all of the mediator's residual variance in {np.mean(~np.isfinite(rho)):.0%} of draws; ask for less"
        )
    return rho


def block_strength(result: FitResult, names: Sequence[str]) -> Strength:
    """Return the strength of a block of columns of the data, per draw.

    Its columns of a design are those of terms that hold nothing but the block: the covariate itself, a spline or
    polynomial of it, dummies of its categories, products within the block.

    Raises
    ------
    ArgumentError
        If the block interacts with the exposure, the mediator or another variable: a cause that moderates has no
        single strength.
    """
    observed = result.observed
    v = _columns_of(observed.mediator_equation, names, "mediator")
    w = _columns_of(observed.outcome_equation, names, "outcome")
    others = np.setdiff1d(np.arange(len(observed.mediator_terms)), v)
    return strength(
        observed.compressed.mediator_design[:, v],
        observed.compressed.outcome_design[:, w],
        observed.compressed.mediator_design[:, others],
        observed.rows.used,
        result.flat("alpha")[:, v],
        result.flat("gamma")[:, w],
        result.flat("sigma_m"),
        result.flat("tau"),
    )


def _columns_of(design: Design, names: Sequence[str], equation: str) -> list[int]:
    block = set(names)
    inside = []
    for k, columns in enumerate(design.columns):
        if not columns & block:
            continue
        if columns <= block and not design.with_mediator[k]:
            inside.append(k)
            continue
        raise ArgumentError(
            f"covariates: {', '.join(sorted(columns & block))} stands in the term {design.labels[k]!r} of the "
            f"{equation} equation together with something else; a cause that moderates has no single strength. "
            "Leave it out, or name a block that holds the whole term"
        )
    return inside


def _blocks(result: FitResult, covariates: Covariates) -> dict[str, tuple[str, ...]]:
    observed = result.observed
    if covariates is None:
        found: dict[str, tuple[str, ...]] = {}
        for name in _known(observed):
            try:
                block_strength(result, (name,))
            except ArgumentError:
                # Moderators have no single strength; asked for by name they are refused with the reason.
                continue
            found[name] = (name,)
        if not found:
            raise ArgumentError(
                "covariates: no covariate of this study stands in terms of its own; none can be compared with"
            )
        return found
    if isinstance(covariates, str):
        covariates = [covariates]
    if isinstance(covariates, Mapping):
        blocks = {label: (b,) if isinstance(b, str) else tuple(b) for label, b in covariates.items()}
    else:
        blocks = {name: (name,) for name in covariates}
    for names in blocks.values():
        _check_names(result, names)
    return blocks


def _known(observed: Observed) -> tuple[str, ...]:
    """Return the covariates of which more than the number is known."""
    unprinted = () if observed.published is None else observed.published.unprinted
    return tuple(name for name in observed.covariates if name not in unprinted)


def _check_names(result: FitResult, names: Sequence[Any]) -> None:
    allowed = _known(result.observed)
    for name in names:
        if name not in allowed:
            raise ArgumentError(f"covariates: {name!r} is no covariate of the formulas; there are {', '.join(allowed)}")
    if not names:
        raise ArgumentError("covariates: a block must name at least one covariate")


def _checked_strength(strength: Sequence[float]) -> list[float]:
    values = np.atleast_1d(np.asarray(strength, dtype=float))
    if values.ndim != 1 or not np.all(np.isfinite(values)) or not np.all(values > 0):
        raise ArgumentError(f"strength={strength!r} must be numbers above 0, such as (0.5, 1, 2)")
    return [float(v) for v in values]


def _sentence(label: str, where: str, needed: Array, claim: Claim) -> str:
    start = f"At {where}" if where != "averaged over all rows" else "Averaged over all rows"
    if not np.isfinite(needed[0]):
        return (
            f"{start}, no unmeasured cause that pushes mediator and outcome as {label} does makes the claim "
            f"{claim} tip, however strong."
        )
    upper = "no limit" if not np.isfinite(needed[2]) else number_text(needed[2], 2)
    return (
        f"{start}, an unmeasured cause must be {number_text(needed[0], 2)} times as strong as {label} (95 % of draws: "
        f"{number_text(needed[1], 2)} to {upper}) for the claim {claim} to tip."
    )
