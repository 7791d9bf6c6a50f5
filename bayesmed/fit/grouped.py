"""Fits group by group, for a residual correlation that differs between the levels of a moderator.

Both equations must be saturated in the moderator. Then the rows of each group determine that group's coefficients
and its own sigma_m and tau, and the map holds within it. A common structural sigma_y would inform rho, and is not used.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr

from bayesmed.core.contrasts import Contrasts
from bayesmed.core.errors import ArgumentError, DesignError
from bayesmed.core.mapping import Array, align
from bayesmed.core.regression import reduce_rows
from bayesmed.fit.result import FitResult, Settings, stratified_uniforms, with_structural
from bayesmed.fit.statistics import Statistics
from bayesmed.priors.by_group import ByGroup
from bayesmed.priors.coefficient_set import Coefficients
from bayesmed.study.observe import Observed
from bayesmed.study.points import Points
from bayesmed.study.rank import rank_deficiencies

Sampler = Callable[[Statistics, tuple[str, ...], tuple[str, ...], Settings], xr.DataTree]


@dataclass(frozen=True, eq=False)
class GroupedResult(FitResult):
    """A fit whose groups have draws, a residual spread and a belief of their own.

    Attributes
    ----------
    moderator : str
    parts : dict of level to FitResult
        One fit a group; its coefficients stand in the places of the whole design, zero where the group has none.
    """

    moderator: str = ""
    parts: Mapping[Any, FitResult] = None  # type: ignore[assignment]

    def contrasts(self, points: Points) -> Contrasts:
        """Return the contrasts of each point from its own group's draws; kappa has shape (point, draw)."""
        groups = self.groups_of(points)
        chains, draws = self.shape
        shape = (len(points.values), chains * draws)
        found = {name: np.empty(shape) for name in ("a", "a_pure", "b", "t", "kappa")}
        for level, places in groups.items():
            part = self.parts[level].contrasts(chosen_points(points, places))
            for name, values in found.items():
                values[places] = getattr(part, name)
        return Contrasts(**found)

    def groups_of(self, points: Points) -> dict[Any, list[int]]:
        """Return the places of the points that belong to each group."""
        if self.moderator not in points.names:
            raise ArgumentError(
                f"at: this fit has a rho for each group of {self.moderator!r}, so a conclusion must name the group: "
                f"at={{{self.moderator!r}: {list(self.parts)!r}}}"
            )
        groups: dict[Any, list[int]] = {}
        for place, point in enumerate(points.values):
            groups.setdefault(point[self.moderator], []).append(place)
        return groups

    def _make_uniforms(self) -> Array:
        chains, draws = self.shape
        return stratified_uniforms(chains * draws, self.settings.random_seed)

    def with_belief(self, belief: Any) -> "GroupedResult":
        """Return the same draws under another belief, one for all groups or one for each."""
        return _believed(self, belief)


def fit_groups(
    observed: Observed, statistics: Statistics, belief: ByGroup, settings: Settings, sample: Sampler
) -> GroupedResult:
    """Fit each group of the moderator that `belief` is about.

    Parameters
    ----------
    observed : Observed
    statistics : Statistics
        Of all rows.
    belief : ByGroup
    settings : Settings
    sample : callable
        Samples one group's statistics under given term names.
    """
    moderator = _moderator(observed, belief)
    column = observed.frame[moderator]
    levels = belief.levels
    masks = {level: np.asarray(column == level) for level in levels}
    designs = observed.mediator_design, observed.outcome_design
    chosen = {level: (_independent(designs[0][m]), _independent(designs[1][m])) for level, m in masks.items()}
    _check_saturated(observed, moderator, chosen)
    parts = {}
    for number, level in enumerate(levels):
        v, w = chosen[level]
        reduced = _reduced(observed, designs, masks[level], chosen[level], level)
        names = [observed.mediator_terms[k] for k in v], [observed.outcome_terms[k] for k in w]
        own = Settings(settings.method, settings.draws, settings.tune, settings.chains, settings.random_seed + number)
        posterior = sample(reduced, tuple(names[0]), tuple(names[1]), own)["posterior"].to_dataset()
        tree = xr.DataTree.from_dict({"posterior": _in_place(posterior, observed, v, w)})
        parts[level] = FitResult(observed, statistics, tree, None, False, Coefficients(), own)
    return _joined(observed, statistics, settings, moderator, parts, belief)


def regrouped(
    observed: Observed,
    statistics: Statistics,
    settings: Settings,
    moderator: str,
    levels: list[Any],
    posterior: xr.Dataset,
    belief: Any,
) -> GroupedResult:
    """Return the fit whose groups' draws stand along the dim ``group`` of a posterior, in the order of `levels`."""
    parts = {}
    for number, level in enumerate(levels):
        own = posterior[["alpha", "gamma", "sigma_m", "tau"]].isel(group=number, drop=True)
        tree = xr.DataTree.from_dict({"posterior": own})
        parts[level] = FitResult(observed, statistics, tree, None, False, Coefficients(), settings)
    return _joined(observed, statistics, settings, moderator, parts, belief)


def refuse_grouped(result: FitResult, what: str) -> None:
    """Raise if a conclusion that speaks of one rho is asked of a fit with several."""
    if isinstance(result, GroupedResult):
        raise ArgumentError(
            f"{what}: this fit has a rho for each group of {result.moderator!r}; fit one group's rows alone to ask this"
        )


def chosen_points(points: Points, places: list[int]) -> Points:
    """Return some of the points, with the names that are set."""
    return Points(points.dims, points.scalars, tuple(points.values[k] for k in places))


def _moderator(observed: Observed, belief: ByGroup) -> str:
    matching = [
        name
        for name in observed.covariates
        if len(unique := observed.frame[name].unique()) == len(belief.levels) and set(unique) == set(belief.levels)
    ]
    if belief.moderator is not None:
        if belief.moderator not in matching:
            raise ArgumentError(
                f"rho: ByGroup names the moderator {belief.moderator!r}, which is no column of the formulas with the "
                f"levels {list(belief.levels)!r}"
            )
        return belief.moderator
    if len(matching) != 1:
        found = f"{len(matching)} columns have" if matching else "no column of the formulas has"
        raise ArgumentError(
            f"rho: {found} exactly the levels {list(belief.levels)!r} of ByGroup; name every level of one moderator, "
            "and the moderator itself with moderator= if two match"
        )
    return matching[0]


def _independent(design: Array) -> list[int]:
    """Return the columns that are not combinations of earlier ones."""
    dropped = {int(d.term) for d in rank_deficiencies(design, [str(k) for k in range(design.shape[1])])}
    return [k for k in range(design.shape[1]) if k not in dropped]


def _check_saturated(observed: Observed, moderator: str, chosen: Mapping[Any, tuple[list[int], list[int]]]) -> None:
    for k, equation in enumerate(("mediator", "outcome")):
        terms = (observed.mediator_terms, observed.outcome_terms)[k]
        needed = sum(len(columns[k]) for columns in chosen.values())
        if needed != len(terms):
            raise DesignError(
                f"rho: ByGroup needs the {equation} equation to be saturated in {moderator!r}, each group with "
                f"coefficients of its own ({needed} in all); it has {len(terms)}. Let every term interact with "
                f"{moderator}, for example `(…) * {moderator}`"
            )


def _reduced(
    observed: Observed, designs: tuple[Array, Array], mask: Array, columns: tuple[list[int], list[int]], level: Any
) -> Statistics:
    v, w = designs[0][mask][:, columns[0]], designs[1][mask][:, columns[1]]
    mediator, outcome = reduce_rows(v, observed.mediator[mask]), reduce_rows(w, observed.outcome[mask])
    for equation, regression in (("mediator", mediator), ("outcome", outcome)):
        if regression.degrees_of_freedom < 3:
            raise DesignError(
                f"rho: group {level!r} has {regression.rows} rows for {regression.terms} coefficients of the "
                f"{equation} equation; at least three more rows than coefficients are needed"
            )
    alignment = align(v, w, observed.mediator[mask])
    if alignment.informs:
        raise DesignError(
            f"rho: within group {level!r} the data inform rho, since the outcome equation does not hold every term of "
            "the mediator equation; ByGroup needs formulas in which they are silent"
        )
    return Statistics(mediator, outcome, outcome, (), False, alignment)


def _in_place(posterior: xr.Dataset, observed: Observed, v: list[int], w: list[int]) -> xr.Dataset:
    """Return the draws with coefficients in the places of the whole design."""
    chains, draws = posterior.sizes["chain"], posterior.sizes["draw"]
    alpha = np.zeros((chains, draws, len(observed.mediator_terms)))
    gamma = np.zeros((chains, draws, len(observed.outcome_terms)))
    alpha[..., v], gamma[..., w] = posterior["alpha"], posterior["gamma"]
    return xr.Dataset(
        {
            "alpha": (("chain", "draw", "mediator_term"), alpha),
            "gamma": (("chain", "draw", "outcome_term"), gamma),
            "sigma_m": (("chain", "draw"), posterior["sigma_m"].to_numpy()),
            "tau": (("chain", "draw"), posterior["tau"].to_numpy()),
        },
        coords={
            "chain": np.arange(chains),
            "draw": np.arange(draws),
            "mediator_term": list(observed.mediator_terms),
            "outcome_term": list(observed.outcome_terms),
        },
    )


def _joined(
    observed: Observed,
    statistics: Statistics,
    settings: Settings,
    moderator: str,
    parts: Mapping[Any, FitResult],
    belief: Any,
) -> GroupedResult:
    groups = xr.concat(
        [part.posterior for part in parts.values()],
        dim=xr.Variable("group", [str(level) for level in parts]),
    ).transpose("chain", "draw", "group", ...)
    tree = xr.DataTree.from_dict({"posterior": groups})
    base = GroupedResult(
        observed, statistics, tree, None, False, Coefficients(), settings, moderator=moderator, parts=parts
    )
    return _believed(base, belief)


def _believed(base: GroupedResult, belief: Any) -> GroupedResult:
    chains, draws = base.shape
    levels = list(base.parts)
    if isinstance(belief, ByGroup):
        if set(belief.levels) != set(levels):
            raise ArgumentError(f"rho: ByGroup has the levels {list(belief.levels)!r}; this fit has {levels!r}")
        tied = dict(zip(belief.levels, belief.uniforms(chains * draws, base.settings.random_seed), strict=True))
        own = {level: belief.of(level) for level in levels}
    else:
        # One belief for all groups is one rho for all of them.
        tied = dict.fromkeys(levels, base.uniforms)
        own = dict.fromkeys(levels, belief)
    parts = {}
    for level, part in base.parts.items():
        seeded = FitResult(
            part.observed, part.statistics, part.tree, None, False, part.coefficients, part.settings,
            {**{k: v for k, v in part.memory.items() if k[0] == "contrasts"}, "uniforms": tied[level]},
        )  # fmt: skip
        parts[level] = seeded.with_belief(own[level])
    tree = base.tree.copy()
    values = {level: part.tree["posterior"]["rho"].to_numpy() for level, part in parts.items()}
    rho = np.stack(list(values.values()), axis=-1)
    posterior = tree["posterior"].to_dataset().drop_vars(["rho", "beta", "sigma_y"], errors="ignore")
    structural = with_structural(posterior, base.statistics, rho, ("chain", "draw", "group"))
    tree["posterior"] = xr.DataTree(structural)
    return GroupedResult(
        base.observed, base.statistics, tree, belief, False, base.coefficients, base.settings,
        moderator=base.moderator, parts=parts,
    )  # fmt: skip
