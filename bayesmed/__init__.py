"""bayesmed: causal mediation in which unmeasured confounding is a belief that can be stated and compared.

Public names are loaded on first use, so that ``import bayesmed`` costs next to nothing.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from bayesmed import plots, priors
    from bayesmed.conclusions.claim import Claim
    from bayesmed.conclusions.prior_map import contour
    from bayesmed.conclusions.varying import Covariance
    from bayesmed.core import errors
    from bayesmed.examples import load_example
    from bayesmed.front.comparison import Comparison
    from bayesmed.front.fit import Fit, load
    from bayesmed.front.study import Study
    from bayesmed.front.tipping import Tipping
    from bayesmed.front.yardsticks import Yardsticks
    from bayesmed.priors import (
        LKJ,
        AnyOn,
        BetaShare,
        ByGroup,
        Coefficients,
        Contaminated,
        Exponential,
        FisherNormal,
        HalfNormal,
        HalfStudentT,
        LogNormal,
        Mean,
        Mixture,
        Nearby,
        Normal,
        PointMass,
        Probability,
        Quantile,
        SharedCause,
        Statements,
        StretchedBeta,
        StudentT,
        Tabulated,
        TruncatedNormal,
        Uniform,
        UnimodalAt,
        from_draws,
        from_quantiles,
        with_mean_and_sd,
    )

_HOME = {
    "Claim": "bayesmed.conclusions.claim",
    "Comparison": "bayesmed.front.comparison",
    "Covariance": "bayesmed.conclusions.varying",
    "Fit": "bayesmed.front.fit",
    "Study": "bayesmed.front.study",
    "Tipping": "bayesmed.front.tipping",
    "Yardsticks": "bayesmed.front.yardsticks",
    "contour": "bayesmed.conclusions.prior_map",
    "load": "bayesmed.front.fit",
    "load_example": "bayesmed.examples",
    **dict.fromkeys(
        (
            "LKJ",
            "BetaShare",
            "ByGroup",
            "AnyOn",
            "Contaminated",
            "Mean",
            "Nearby",
            "Probability",
            "Quantile",
            "Statements",
            "UnimodalAt",
            "with_mean_and_sd",
            "Coefficients",
            "Exponential",
            "FisherNormal",
            "HalfNormal",
            "HalfStudentT",
            "LogNormal",
            "Mixture",
            "Normal",
            "PointMass",
            "SharedCause",
            "StretchedBeta",
            "StudentT",
            "Tabulated",
            "TruncatedNormal",
            "Uniform",
            "from_draws",
            "from_quantiles",
        ),
        "bayesmed.priors",
    ),
}
_MODULES = {"errors": "bayesmed.core.errors", "plots": "bayesmed.plots", "priors": "bayesmed.priors"}

__all__ = [
    "LKJ",
    "AnyOn",
    "BetaShare",
    "ByGroup",
    "Claim",
    "Coefficients",
    "Comparison",
    "Contaminated",
    "Covariance",
    "Exponential",
    "FisherNormal",
    "Fit",
    "HalfNormal",
    "HalfStudentT",
    "LogNormal",
    "Mean",
    "Mixture",
    "Nearby",
    "Normal",
    "PointMass",
    "Probability",
    "Quantile",
    "SharedCause",
    "Statements",
    "StretchedBeta",
    "StudentT",
    "Study",
    "Tabulated",
    "Tipping",
    "TruncatedNormal",
    "Uniform",
    "UnimodalAt",
    "Yardsticks",
    "contour",
    "errors",
    "from_draws",
    "from_quantiles",
    "load",
    "load_example",
    "plots",
    "priors",
    "with_mean_and_sd",
]


def __getattr__(name: str) -> Any:
    if name in _HOME:
        value = getattr(import_module(_HOME[name]), name)
    elif name in _MODULES:
        value = import_module(_MODULES[name])
    elif name == "__version__":
        from importlib.metadata import version

        value = version("bayesmed")
    else:
        raise AttributeError(f"module 'bayesmed' has no attribute {name!r}")
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
