"""Beliefs about the residual correlation ρ, and priors of coefficients: frozen values."""

from bayesmed.priors.accept import coerce
from bayesmed.priors.adapters import FromScipy, Wrapped
from bayesmed.priors.by_group import ByGroup, as_belief
from bayesmed.priors.by_moments import with_mean_and_sd
from bayesmed.priors.coefficient_set import Coefficients
from bayesmed.priors.coefficients import (
    CoefficientPrior,
    Exponential,
    HalfNormal,
    HalfStudentT,
    LogNormal,
    Normal,
    StudentT,
)
from bayesmed.priors.description import inflation_probability
from bayesmed.priors.elicitation import from_quantiles, quantile_gaps
from bayesmed.priors.fisher_normal import FisherNormal
from bayesmed.priors.from_pymc import FromMaker
from bayesmed.priors.mixture import Mixture
from bayesmed.priors.named import coefficient_from_spec, from_spec, to_spec
from bayesmed.priors.panel import panel
from bayesmed.priors.point import PointMass
from bayesmed.priors.prior import Prior
from bayesmed.priors.prior_set import PriorSet
from bayesmed.priors.protocol import HasDirection
from bayesmed.priors.reweighted import Reweighted
from bayesmed.priors.sets import AnyOn, Contaminated, UnimodalAt
from bayesmed.priors.sets_nearby import Nearby
from bayesmed.priors.sets_statements import Mean, Probability, Quantile, Statements
from bayesmed.priors.shared_cause import SharedCause
from bayesmed.priors.shared_size import BetaShare
from bayesmed.priors.stretched_beta import LKJ, StretchedBeta
from bayesmed.priors.tabulated import Tabulated, from_draws
from bayesmed.priors.truncated_normal import TruncatedNormal
from bayesmed.priors.uniform import Uniform

__all__ = [
    "LKJ",
    "AnyOn",
    "BetaShare",
    "ByGroup",
    "CoefficientPrior",
    "Coefficients",
    "Contaminated",
    "Exponential",
    "FisherNormal",
    "FromMaker",
    "FromScipy",
    "HalfNormal",
    "HalfStudentT",
    "HasDirection",
    "LogNormal",
    "Mean",
    "Mixture",
    "Nearby",
    "Normal",
    "PointMass",
    "Prior",
    "PriorSet",
    "Probability",
    "Quantile",
    "Reweighted",
    "SharedCause",
    "Statements",
    "StretchedBeta",
    "StudentT",
    "Tabulated",
    "TruncatedNormal",
    "Uniform",
    "UnimodalAt",
    "Wrapped",
    "as_belief",
    "coefficient_from_spec",
    "coerce",
    "from_draws",
    "from_quantiles",
    "from_spec",
    "inflation_probability",
    "panel",
    "quantile_gaps",
    "to_spec",
    "with_mean_and_sd",
]
