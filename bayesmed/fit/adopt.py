"""A fit from draws of a model that extends the study's own."""

from typing import Any, Literal

import numpy as np
import xarray as xr

from bayesmed.core.errors import ArgumentError
from bayesmed.fit.record import describe
from bayesmed.fit.result import FitResult, Settings, with_structural
from bayesmed.fit.statistics import reduce_study
from bayesmed.priors.coefficient_set import Coefficients
from bayesmed.study.observe import Observed


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
    describe(result)
    return result.with_belief(belief) if belief is not None and not joint else result
