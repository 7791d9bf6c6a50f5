"""What a fit writes into its tree, so that the draws can be understood and made again."""

import json
from functools import lru_cache
from importlib.metadata import version

from bayesmed.fit.result import FitResult


def describe(result: FitResult) -> None:
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
        learn=int(settings.learn),
        rho_prior="none" if result.belief is None else repr(result.belief),
        coefficient_priors=repr(result.coefficients) if settings.method == "nuts" else "reference prior ∝ 1/sigma²",
        versions=json.dumps({name: _installed(name) for name in packages}),
    )


@lru_cache
def _installed(package: str) -> str:
    # Read from a file each time it is asked for.
    return version(package)
