"""One belief applied to a fit: effects, probabilities, intervals and moments at each moderator point."""

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np

from bayesmed.conclusions.accuracy import mean_with_error
from bayesmed.conclusions.claim import Claim
from bayesmed.core.contrasts import Contrasts
from bayesmed.core.errors import ArgumentError, BeliefNeededError
from bayesmed.core.mapping import Array
from bayesmed.core.quantiles import effect_quantiles, ordered_quantiles
from bayesmed.core.tipping import lines_probability
from bayesmed.fit.grouped import GroupedResult, chosen_points
from bayesmed.fit.make import refit
from bayesmed.fit.result import FitResult
from bayesmed.fit.reweight import reweight
from bayesmed.priors.accept import coerce
from bayesmed.priors.by_group import ByGroup, as_belief
from bayesmed.study.points import Points


@dataclass(frozen=True, eq=False)
class View:
    """A fit seen under one belief.

    Attributes
    ----------
    result : FitResult
    contrasts : Contrasts
    belief : prior
    rho : array of shape (draw,), or None
        Draws that go with the contrasts one by one, where rho is informed; None where the belief is integrated
        out through its distribution function.
    weights : array of shape (draw,), or None
        Importance weights that turn the draws into those under the belief; None where all weigh the same.
    route : str
        How the belief was brought to the draws, in words; empty where nothing had to be done.
    """

    result: FitResult
    contrasts: Contrasts
    belief: Any
    rho: Array | None
    weights: Array | None = None
    route: str = ""

    @property
    def integrates(self) -> bool:
        """True if the belief is integrated out rather than drawn from."""
        return self.rho is None and not is_fixed(self.belief)

    def draws(self, effect: str) -> Array:
        """Return draws of an effect, shape (point, draw), one correlation per draw."""
        return self.contrasts.effect(effect, self._rho())

    def statistics(self, effect: str, claim: Claim, levels: Array) -> list[Array]:
        """Return mean, SD, quantiles, probability of the claim and its Monte Carlo error, each of shape (point,)."""
        if self.integrates:
            return [*self.moments(effect), *self.quantiles(effect, levels).T, *self.probability(effect, claim)]
        draws = self.draws(effect)
        probability = mean_with_error(claim.true_of(draws), self.result, self.weights)
        return [*self.moments(effect), *self._quantiles_of(draws, levels).T, *probability]

    def depends_on_rho(self, effect: str) -> bool:
        """False if an effect's draws are the same whatever is believed about rho."""
        return self.weights is not None or bool(np.any(self.contrasts.lines(effect).moments.signs != 0))

    def probability(self, effect: str, claim: Claim) -> tuple[Array, Array]:
        """Return the probability that an effect is beyond the claim's limit, and its Monte Carlo error.

        Both of shape (point,).
        """
        return mean_with_error(self.probability_by_draw(effect, claim), self.result, self.weights)

    def probability_by_draw(self, effect: str, claim: Claim) -> Array:
        """Return, per point and draw, the belief's probability that the claim's statement is true."""
        if self.integrates:
            return lines_probability(self.contrasts.lines(effect), claim.limit, claim.direction, self.belief)
        return claim.true_of(self.draws(effect))

    @property
    def draws_of(self) -> FitResult:
        """The fit whose draws these are; views of one fit share them."""
        return self.result

    def mean_by_draw(self, effect: str) -> Array:
        """Return, per point and draw, the mean of an effect over the belief, which may be infinite."""
        if self.rho is not None:
            return self.draws(effect)
        constant, slope = self.contrasts.line(effect)
        with np.errstate(invalid="ignore"):
            return np.where(slope == 0, constant, constant - slope * self.belief.odds_moments()[0])

    def moments(self, effect: str) -> tuple[Array, Array]:
        """Return posterior mean and SD, each of shape (point,); infinite where they are."""
        if self.rho is None:
            return self.contrasts.lines(effect).moments.under(self.belief)
        values = self.draws(effect)
        mean = np.average(values, axis=1, weights=self.weights)
        return mean, np.sqrt(np.average((values - mean[:, None]) ** 2, axis=1, weights=self.weights))

    def quantiles(self, effect: str, probabilities: Array) -> Array:
        """Return posterior quantiles, shape (point, quantile)."""
        if self.integrates and self.depends_on_rho(effect):
            return effect_quantiles(self.contrasts.lines(effect), self.belief, probabilities, self.result.uniforms)
        return self._quantiles_of(self.draws(effect), probabilities)

    def _rho(self) -> Array | float:
        if self.rho is not None:
            return self.rho
        if is_fixed(self.belief):
            return float(self.belief.atoms()[0][0])
        if self.belief is self.result.belief and "rho" in self.result.tree["posterior"]:
            return self.result.flat("rho")
        return np.asarray(self.belief.ppf(self.result.uniforms))

    def _quantiles_of(self, draws: Array, probabilities: Array) -> Array:
        if self.weights is None:
            return ordered_quantiles(np.sort(draws, axis=1), probabilities)
        rows = [np.quantile(d, probabilities, weights=self.weights, method="inverted_cdf") for d in draws]
        return np.stack(rows)


def view(result: FitResult, points: Points, rho: Any = None) -> View:
    """Return the fit seen under a belief.

    Parameters
    ----------
    result : FitResult
    points : Points
    rho : prior, number or None
        None is the fit's own belief.

    Raises
    ------
    BeliefNeededError
        If `rho` is None and the fit has no belief.
    """
    if isinstance(result, GroupedResult):
        return grouped_view(result, points, rho)
    if rho is None:
        if result.joint:
            return View(result, result.contrasts(points), result.belief, result.flat("rho"))
        if result.belief is None:
            raise BeliefNeededError(
                "this fit has no belief about rho, the correlation that unmeasured causes of mediator and outcome "
                "leave; give rho=, for example rho=bm.Uniform(-0.3, 0.3) or rho=0.0, or use fit.under(prior)"
            )
        return View(result, result.contrasts(points), result.belief, None)
    belief = _single(rho)
    if not result.joint:
        return View(result, result.contrasts(points), belief, None)
    if belief == result.belief:
        return view(result, points)
    weighing = reweight(result, belief) if result.settings.learn else None
    if weighing is not None and weighing.usable:
        route = f"draws reweighted (Pareto k = {weighing.shape:.2f}, worth {weighing.effective:.0f} draws)"
        return View(result, result.contrasts(points), belief, result.flat("rho"), weighing.weights, route)
    return _resampled(result, points, belief, weighing)


def view_by_draw(result: FitResult, points: Points, rho: Any = None) -> View:
    """Return the same as :func:`view` with draws that all weigh the same, sampled again if need be."""
    if rho is None or not result.joint:
        return view(result, points, rho)
    belief = _single(rho)
    return view(result, points) if belief == result.belief else _resampled(result, points, belief, None)


@dataclass(frozen=True, eq=False)
class GroupedView(View):
    """A fit with a rho for each group: every point is seen in its own group's fit.

    Attributes
    ----------
    pieces : tuple of (list of int, View)
        Places of the points, and the view of the group they belong to.
    """

    pieces: tuple[tuple[list[int], View], ...] = ()

    @property
    def integrates(self) -> bool:
        """True: every group's view sees to that."""
        return True

    def draws(self, effect: str) -> Array:
        """Return draws of an effect, shape (point, draw); between groups they are tied as the belief says."""
        return self._gathered(lambda seen: seen.draws(effect))

    def probability_by_draw(self, effect: str, claim: Claim) -> Array:
        """Return, per point and draw, the belief's probability that the claim's statement is true."""
        return self._gathered(lambda seen: seen.probability_by_draw(effect, claim))

    def mean_by_draw(self, effect: str) -> Array:
        """Return, per point and draw, the mean of an effect over its group's belief."""
        return self._gathered(lambda seen: seen.mean_by_draw(effect))

    @property
    def draws_of(self) -> FitResult:
        """The fit whose draws these are: the first group's, as those of all groups come together."""
        return self.pieces[0][1].result

    def moments(self, effect: str) -> tuple[Array, Array]:
        """Return posterior mean and SD, each of shape (point,)."""
        both = self._gathered(lambda seen: np.column_stack(seen.moments(effect)))
        return both[:, 0], both[:, 1]

    def quantiles(self, effect: str, probabilities: Array) -> Array:
        """Return posterior quantiles, shape (point, quantile)."""
        return self._gathered(lambda seen: seen.quantiles(effect, probabilities))

    def _gathered(self, ask: Callable[[View], Array]) -> Array:
        answers = [(places, ask(seen)) for places, seen in self.pieces]
        first = answers[0][1]
        gathered = np.empty((sum(len(places) for places, _ in answers), *first.shape[1:]))
        for places, answer in answers:
            gathered[places] = answer
        return gathered


def grouped_view(result: GroupedResult, points: Points, rho: Any) -> GroupedView:
    """Return a fit with a rho for each group, seen under its own belief or another."""
    seen_result = result if rho is None else result.with_belief(as_belief(rho))
    pieces = []
    for level, places in seen_result.groups_of(points).items():
        pieces.append((places, view(seen_result.parts[level], chosen_points(points, places))))
    contrasts = seen_result.contrasts(points)
    return GroupedView(seen_result, contrasts, seen_result.belief, None, pieces=tuple(pieces))


def _single(rho: Any) -> Any:
    if isinstance(rho, ByGroup):
        raise ArgumentError(
            "rho: a ByGroup needs a fit in which each group has its own sigma_m and tau; fit with rho=ByGroup(…)"
        )
    return coerce(rho)


def _resampled(result: FitResult, points: Points, belief: Any, weighing: Any) -> View:
    refitted = refit(result, belief)
    why = "" if weighing is None else f" (weights could not be trusted: Pareto k = {weighing.shape:.2f})"
    rho = refitted.flat("rho")
    return View(refitted, refitted.contrasts(points), belief, rho, route=f"sampled again{why}")


def beliefs_along_rho(rho: Any) -> list[float] | None:
    """Return the fixed correlations of a list-like `rho`, or None if it is not a list of numbers."""
    if not isinstance(rho, Iterable) or isinstance(rho, str | dict) or np.ndim(np.asarray(rho, dtype=object)) == 0:
        return None
    try:
        values = np.asarray(list(rho), dtype=float)
    except (TypeError, ValueError) as error:
        raise ArgumentError(
            f"rho={rho!r}: a list must hold numbers; use fit.compare({{label: prior}}) for several beliefs"
        ) from error
    if values.ndim != 1 or len(values) == 0 or not np.all(np.abs(values) < 1):
        raise ArgumentError(f"rho={list(rho)!r} must be a list of numbers between -1 and 1, both excluded")
    if len(set(values.tolist())) < len(values):
        raise ArgumentError(f"rho={list(rho)!r} holds a value twice")
    return [float(v) for v in values]


def is_fixed(belief: Any) -> bool:
    """True if the belief is a single value of rho."""
    atoms = belief.atoms()
    return len(atoms) == 1 and float(atoms[0][1]) == 1.0
