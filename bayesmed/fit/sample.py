"""From an observed study to a fit: by NUTS, or by exact draws under the reference prior."""

import json
import secrets
from importlib.metadata import version
from typing import Any, Literal

import numpy as np
import xarray as xr

from bayesmed.core.errors import ArgumentError, BeliefNeededError, FitError
from bayesmed.core.regression import exact_draws
from bayesmed.fit.diagnose import warn_if_wrong
from bayesmed.fit.model import build_model
from bayesmed.fit.result import FitResult, Settings, with_structural
from bayesmed.fit.statistics import Statistics, reduce_study
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
    progressbar: bool,
) -> FitResult:
    """Fit both regressions of a study; see ``Study.fit`` for the arguments.

    Raises
    ------
    ArgumentError
        If an argument has a value that is not allowed, or ``exact`` is asked where it does not apply.
    BeliefNeededError
        If the data inform rho and no belief is given.
    """
    _check_counts(draws=(draws, 4), tune=(tune, 0), chains=(chains, 1))
    if method not in ("nuts", "exact"):
        raise ArgumentError(f"method={method!r} is not known; allowed are 'nuts' and 'exact'")
    seed = _checked_seed(random_seed)
    chosen = checked_coefficients(coefficients, observed)
    statistics = reduce_study(observed)
    if statistics.informed:
        if method == "exact":
            raise ArgumentError(
                f"method='exact' does not apply: the data inform rho through {named_informants(observed, statistics)}, "
                "so rho must be sampled with the rest; use method='nuts', or change the formulas so that every "
                "mediator-equation term and the mediator itself also stand in the outcome equation"
            )
        if rho is None:
            raise BeliefNeededError(
                f"the data inform rho through {named_informants(observed, statistics)}, so it is sampled with the "
                "rest and needs a prior from the start; give rho=, for example rho=bm.Uniform(-0.9, 0.9)"
            )
    settings = Settings(method, draws, tune if method == "nuts" else 0, chains, seed)
    if method == "exact":
        if chosen != Coefficients():
            raise ArgumentError(
                "method='exact' draws under the reference prior and takes no coefficients=; use method='nuts'"
            )
        tree = _sample_exact(observed, statistics, settings)
        result = FitResult(observed, statistics, tree, None, False, chosen, settings)
        _describe(result, rho)
        return result if rho is None else result.with_belief(rho)
    model = build_model(statistics, observed.mediator_terms, observed.outcome_terms, rho, chosen)
    tree = sample_nuts(compile_model(model), settings, progressbar)
    result = FitResult(observed, statistics, tree, rho, statistics.informed, chosen, settings)
    _describe(result, rho)
    warn_if_wrong(result)
    return result


def refit(result: FitResult, belief: Any, progressbar: bool = False) -> FitResult:
    """Sample again under another belief, for a fit whose likelihood informs rho; kept for the next call."""
    key = ("refit", repr(belief))
    if key not in result.memory:
        observed, statistics, settings = result.observed, result.statistics, result.settings
        if settings.method == "adopted":
            raise FitError(
                "this fit was adopted from draws of an extended model in which rho may be informed; another belief "
                "about rho needs new draws of that model, or adopt(tree, rho='unidentified') if your extension does "
                "not involve rho"
            )
        terms = observed.mediator_terms, observed.outcome_terms
        value = _fixed_value(belief)
        if value is None:
            compiled = compile_model(build_model(statistics, *terms, belief, result.coefficients))
        else:
            if "fixed" not in result.memory:
                model = build_model(statistics, *terms, _MovableCorrelation(), result.coefficients)
                result.memory["fixed"] = compile_model(model)
            compiled = result.memory["fixed"].with_data(rho_value=np.asarray(value))
        tree = sample_nuts(compiled, settings, progressbar)
        refitted = FitResult(observed, statistics, tree, belief, True, result.coefficients, settings)
        _describe(refitted, belief)
        warn_if_wrong(refitted)
        result.memory[key] = refitted
    found: FitResult = result.memory[key]
    return found


def adopt(observed: Observed, tree: xr.DataTree, *, rho: Literal["informed", "unidentified"], belief: Any) -> FitResult:
    """Return a fit from draws of an extended model; see ``Study.adopt``."""
    if rho not in ("informed", "unidentified"):
        raise ArgumentError(f"rho={rho!r} is not known; allowed are 'informed' and 'unidentified'")
    try:
        posterior = tree["posterior"].to_dataset()
    except (KeyError, TypeError, AttributeError) as error:
        raise ArgumentError("tree: expected a DataTree with a group 'posterior', as pm.sample returns") from error
    sizes = {"mediator_term": observed.mediator_terms, "outcome_term": observed.outcome_terms}
    for name, dims in {
        "alpha": ["mediator_term"],
        "gamma": ["outcome_term"],
        "sigma_m": [],
        "tau": [],
    }.items():
        expected = ("chain", "draw", *dims)
        if name not in posterior or posterior[name].dims != expected:
            raise ArgumentError(f"tree: posterior must hold {name!r} with dims {expected}; build on study.model(rho=…)")
        for dim in dims:
            if tuple(posterior[name][dim].to_numpy()) != sizes[dim]:
                raise ArgumentError(f"tree: {name!r} has other {dim}s than this study: expected {list(sizes[dim])}")
    statistics = reduce_study(observed)
    joint = "rho" in posterior and (rho == "informed" or statistics.informed)
    chains, draws = posterior.sizes["chain"], posterior.sizes["draw"]
    settings = Settings("adopted", draws, 0, chains, 0)
    result = FitResult(observed, statistics, tree.copy(), None, joint, Coefficients(), settings)
    if "rho" in posterior and joint:
        values = np.asarray(posterior["rho"])
        result.tree["posterior"] = xr.DataTree(with_structural(posterior, statistics, values))
    _describe(result, belief)
    return result.with_belief(belief) if belief is not None and not joint else result


def compile_model(model: Any) -> Any:
    """Compile a PyMC model for nutpie."""
    import nutpie

    return nutpie.compile_pymc_model(model)


def sample_nuts(compiled: Any, settings: Settings, progressbar: bool) -> xr.DataTree:
    """Sample a compiled model, as many chains as asked, and return the tree."""
    import nutpie

    tree: xr.DataTree = nutpie.sample(
        compiled,
        draws=settings.draws,
        tune=settings.tune,
        chains=settings.chains,
        seed=settings.random_seed,
        progress_bar=progressbar,
    )
    posterior = tree["posterior"].to_dataset()
    if "rho" in posterior and posterior["rho"].dims != ("chain", "draw"):
        raise FitError("rho was not sampled as one number per draw; a prior's to_pymc must return a scalar variable")
    return tree


def checked_coefficients(coefficients: Any, observed: Observed) -> Coefficients:
    """Return the coefficient priors, or the default for None, if every term named is in the study."""
    chosen = Coefficients() if coefficients is None else coefficients
    if not isinstance(chosen, Coefficients):
        raise ArgumentError(
            f"coefficients={coefficients!r} must be bm.Coefficients(mediator={{term: prior}}, outcome={{term: prior}})"
        )
    chosen.check(observed.mediator_terms, observed.outcome_terms)
    if chosen.scale != "identified":
        raise ArgumentError("coefficients: scale='structural' is not available yet; use scale='identified'")
    return chosen


def informed_message(result: FitResult) -> str:
    """Return the warning for a fit whose data inform rho."""
    return (
        f"the data inform rho through {named_informants(result.observed, result.statistics)}; rho was sampled jointly "
        "with the rest. That is an assumption of yours and not a fact of the data: see study.audit() for how strong "
        "it is, and add the terms to the outcome equation if you do not believe it"
    )


def named_informants(observed: Observed, statistics: Statistics) -> str:
    """Return in words what lets the data inform rho."""
    names = [repr(observed.mediator_terms[i]) for i in statistics.informing]
    words = []
    if names:
        words.append(
            f"the mediator-equation term{'s' * (len(names) > 1)} {', '.join(names)} (absent from the outcome equation)"
        )
    if statistics.functional_form:
        words.append(f"functional form (the outcome equation does not hold {observed.mediator_name!r} itself)")
    return " and ".join(words)


class _MovableCorrelation:
    """A fixed correlation whose value can be changed without compiling again."""

    def to_pymc(self, name: str) -> Any:
        import pymc as pm

        return pm.Deterministic(name, pm.Data(f"{name}_value", np.asarray(0.0)))


def _fixed_value(belief: Any) -> float | None:
    atoms = belief.atoms()
    return float(atoms[0][0]) if len(atoms) == 1 and atoms[0][1] == 1.0 else None


def _sample_exact(observed: Observed, statistics: Statistics, settings: Settings) -> xr.DataTree:
    random = np.random.default_rng([settings.random_seed, 0])
    chains, draws = settings.chains, settings.draws
    alpha, sigma_m = exact_draws(statistics.mediator, chains * draws, random)
    gamma, tau = exact_draws(statistics.outcome, chains * draws, random)
    posterior = xr.Dataset(
        {
            "alpha": (("chain", "draw", "mediator_term"), alpha.reshape(chains, draws, -1)),
            "gamma": (("chain", "draw", "outcome_term"), gamma.reshape(chains, draws, -1)),
            "sigma_m": (("chain", "draw"), sigma_m.reshape(chains, draws)),
            "tau": (("chain", "draw"), tau.reshape(chains, draws)),
        },
        coords={
            "chain": np.arange(chains),
            "draw": np.arange(draws),
            "mediator_term": list(observed.mediator_terms),
            "outcome_term": list(observed.outcome_terms),
        },
    )
    return xr.DataTree.from_dict({"posterior": posterior})


def _describe(result: FitResult, rho: Any) -> None:
    """Write into the tree what is needed to understand the draws and to make them again."""
    settings, observed = result.settings, result.observed
    packages = ["bayesmed", "numpy", "scipy", "pandas", "xarray", "formulaic"]
    if settings.method == "nuts":
        packages += ["pymc", "pytensor", "nutpie"]
    result.tree.attrs.update(
        method=settings.method,
        random_seed=settings.random_seed,
        draws=settings.draws,
        tune=settings.tune,
        chains=settings.chains,
        mediator_formula=observed.mediator_formula,
        outcome_formula=observed.outcome_formula,
        exposure=observed.exposure,
        contrast=json.dumps(list(observed.contrast)),
        rows_used=observed.rows.used,
        rho_prior="none" if rho is None else repr(rho),
        coefficient_priors=repr(result.coefficients) if settings.method == "nuts" else "reference prior ∝ 1/sigma²",
        versions=json.dumps({name: version(name) for name in packages}),
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
