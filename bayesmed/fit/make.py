"""From an observed study to a fit, and from a fit to one under another belief."""

import secrets
from typing import Any, Literal

import numpy as np
import xarray as xr

from bayesmed.core.errors import ArgumentError, BeliefNeededError, DataWarning, FitError, InformedWarning, warn
from bayesmed.fit.cut import cut_draws
from bayesmed.fit.diagnose import warn_if_wrong
from bayesmed.fit.grouped import fit_groups
from bayesmed.fit.informants import informants, informed_message
from bayesmed.fit.model import build_model
from bayesmed.fit.movable import MovableBelief, belief_data, movable
from bayesmed.fit.record import describe
from bayesmed.fit.result import FitResult, Settings, with_structural
from bayesmed.fit.sample import compile_model, sample_exact, sample_nuts
from bayesmed.fit.shared import sample_shared, shares_a_model
from bayesmed.fit.statistics import Statistics, reduce_study
from bayesmed.priors.by_group import ByGroup
from bayesmed.priors.coefficient_set import Coefficients
from bayesmed.study.observe import Observed

Method = Literal["nuts", "exact"]


def fit_study(
    observed: Observed,
    *,
    rho: Any,
    method: Method,
    draws: int,
    tune: int,
    chains: int,
    random_seed: int | None,
    coefficients: Coefficients | None,
    learn: bool,
    progressbar: bool,
) -> FitResult:
    """Fit both regressions of a study; see ``Study.fit`` for the arguments.

    Raises
    ------
    ArgumentError
        If an argument has a value that is not allowed, or ``exact`` is asked where it does not apply.
    BeliefNeededError
        If rho is informed and no belief is given.

    Warns
    -----
    InformedWarning
        If the formulas leave out terms that inform rho.
    DataWarning
        If a column looks like an identifier and repeats.
    """
    if method not in ("nuts", "exact"):
        raise ArgumentError(f"method={method!r} is not known; allowed are 'nuts' and 'exact'")
    _check_counts(draws=(draws, 4), tune=(tune, 1 if method == "nuts" else 0), chains=(chains, 1))
    if not isinstance(learn, bool):
        raise ArgumentError(f"learn={learn!r} must be True or False")
    seed = _checked_seed(random_seed)
    chosen = checked_coefficients(coefficients, observed)
    statistics = reduce_study(observed)
    informed = informants(observed, statistics, chosen)
    _check_informed(informed, rho, method)
    settings = Settings(method, draws, tune if method == "nuts" else 0, chains, seed, learn)
    base = FitResult(observed, statistics, xr.DataTree(), rho, bool(informed), chosen, settings)
    if isinstance(rho, ByGroup):
        result = _grouped(base, rho, progressbar)
    elif informed:
        result = _joint(base, rho, progressbar)
    else:
        # The likelihood is silent on rho: a belief about it needs no sampler.
        result = _silent(base, progressbar)
        result = result if rho is None else result.with_belief(rho)
    if statistics.informed and learn:
        warn(InformedWarning(informed_message(observed, statistics, chosen)))
    for identifier in observed.identifiers:
        message = (
            f"column {identifier.name!r} looks like an identifier and repeats (a value in up to {identifier.most} "
            "rows); rows are taken as independent, and intervals are too narrow if they are not"
        )
        warn(DataWarning(message))
    return result


def refit(result: FitResult, belief: Any, progressbar: bool = False) -> FitResult:
    """Sample again under another belief, for a fit in which rho is informed; kept for the next call."""
    key = ("refit", repr(belief))
    if key not in result.memory:
        if result.settings.method == "adopted":
            raise FitError(
                "this fit was adopted from draws of an extended model in which rho may be informed; another belief "
                "about rho needs new draws of that model, or adopt(tree, rho='unidentified') if your extension does "
                "not involve rho"
            )
        result.memory[key] = _joint(result, belief, progressbar)
    found: FitResult = result.memory[key]
    return found


def checked_coefficients(coefficients: Any, observed: Observed) -> Coefficients:
    """Return the coefficient priors, or the default for None, if every term named is in the study."""
    chosen = Coefficients() if coefficients is None else coefficients
    if not isinstance(chosen, Coefficients):
        raise ArgumentError(
            f"coefficients={coefficients!r} must be bm.Coefficients(mediator={{term: prior}}, outcome={{term: prior}})"
        )
    chosen.check(observed.mediator_terms, observed.outcome_terms)
    return chosen


def _joint(base: FitResult, belief: Any, progressbar: bool) -> FitResult:
    """Sample rho with the rest, or hold it at its prior where the fit must not learn."""
    if base.settings.learn:
        tree = sample_nuts(_compiled(base, belief), base.settings, progressbar)
        return _finished(base.replaced(tree=tree, belief=belief))

    def sample_fixed(fixed: Any, settings: Settings) -> xr.DataTree:
        return sample_nuts(_compiled(base, fixed), settings, progressbar)

    posterior, rho = cut_draws(sample_fixed, belief, base.settings)
    posterior = with_structural(posterior, base.statistics, rho)
    return _finished(base.replaced(tree=xr.DataTree.from_dict({"posterior": posterior}), belief=belief))


def _compiled(base: FitResult, belief: Any) -> Any:
    """Return a compiled model under a belief; one that was compiled before takes it as data if it can."""
    terms = base.observed.mediator_terms, base.observed.outcome_terms
    if not movable(belief):
        return compile_model(build_model(base.statistics, *terms, belief, base.coefficients))
    if "movable" not in base.memory:
        model = build_model(base.statistics, *terms, MovableBelief(belief), base.coefficients)
        base.memory["movable"] = compile_model(model)
    return base.memory["movable"].with_data(**belief_data(belief))


def _silent(base: FitResult, progressbar: bool) -> FitResult:
    terms = base.observed.mediator_terms, base.observed.outcome_terms
    if base.settings.method == "exact" and base.coefficients != Coefficients():
        raise ArgumentError(
            "method='exact' draws under the reference prior and takes no coefficients=; use method='nuts'"
        )
    tree = _sampled(base.statistics, *terms, base.settings, base.coefficients, progressbar)
    return _finished(base.replaced(tree=tree, belief=None))


def _sampled(
    statistics: Statistics,
    mediator_terms: tuple[str, ...],
    outcome_terms: tuple[str, ...],
    settings: Settings,
    coefficients: Coefficients,
    progressbar: bool,
) -> xr.DataTree:
    """Draw what the data identify where they are silent on rho, by the compiled model that most studies share."""
    if settings.method == "exact":
        return sample_exact(mediator_terms, outcome_terms, statistics, settings)
    if shares_a_model(statistics, coefficients):
        return sample_shared(statistics, mediator_terms, outcome_terms, settings, progressbar)
    compiled = compile_model(build_model(statistics, mediator_terms, outcome_terms, None, coefficients))
    return sample_nuts(compiled, settings, progressbar)


def _grouped(base: FitResult, belief: ByGroup, progressbar: bool) -> FitResult:
    if base.coefficients != Coefficients():
        raise ArgumentError(
            "rho: ByGroup fits each group under the default coefficient priors; leave out coefficients="
        )

    def sample(part: Statistics, m_terms: tuple[str, ...], y_terms: tuple[str, ...], own: Settings) -> xr.DataTree:
        return _sampled(part, m_terms, y_terms, own, base.coefficients, progressbar)

    result = fit_groups(base.observed, base.statistics, belief, base.settings, sample)
    for part in result.parts.values():
        warn_if_wrong(part)
    describe(result)
    return result


def _finished(result: FitResult) -> FitResult:
    describe(result)
    warn_if_wrong(result)
    return result


def _check_informed(informed: str, rho: Any, method: str) -> None:
    if informed and method == "exact":
        raise ArgumentError(
            f"method='exact' does not apply: rho is informed through {informed}, so it must be sampled with the rest; "
            "use method='nuts', or change formulas and priors so that nothing informs rho"
        )
    if informed and rho is None:
        raise BeliefNeededError(
            f"rho is informed through {informed}, so it is sampled with the rest and needs a prior from the start; "
            "give rho=, for example rho=bm.Uniform(-0.9, 0.9)"
        )


def _checked_seed(random_seed: int | None) -> int:
    if random_seed is None:
        return secrets.randbits(31)
    if isinstance(random_seed, bool) or not isinstance(random_seed, int | np.integer) or random_seed < 0:
        raise ArgumentError(f"random_seed={random_seed!r} must be a whole number, zero or larger, or None")
    return int(random_seed)


def _check_counts(**counts: tuple[Any, int]) -> None:
    for name, (value, least) in counts.items():
        if isinstance(value, bool) or not isinstance(value, int | np.integer) or value < least:
            raise ArgumentError(f"{name}={value!r} must be a whole number of at least {least}")
