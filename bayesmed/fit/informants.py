"""In words: what lets a fit learn about rho."""

from bayesmed.fit.statistics import Statistics
from bayesmed.priors.coefficient_set import Coefficients
from bayesmed.study.observe import Observed


def informants(observed: Observed, statistics: Statistics, coefficients: Coefficients) -> str:
    """Return what informs rho, from the data or through coefficient priors; empty if nothing does."""
    through_priors = prior_informants(coefficients)
    return " and ".join(w for w in (data_informants(observed, statistics), through_priors) if w)


def data_informants(observed: Observed, statistics: Statistics) -> str:
    """Return what lets the likelihood inform rho: exclusions and functional form."""
    names = [repr(observed.mediator_terms[i]) for i in statistics.informing]
    words = []
    if names:
        plural = "s" * (len(names) > 1)
        words.append(f"the mediator-equation term{plural} {', '.join(names)} (absent from the outcome equation)")
    if statistics.functional_form:
        words.append(f"functional form (the outcome equation does not hold {observed.mediator_name!r} itself)")
    return " and ".join(words)


def prior_informants(coefficients: Coefficients) -> str:
    """Return which structural coefficient priors inform rho, as the identified data read them."""
    if not coefficients.informs_rho:
        return ""
    named = [repr(name) for name in coefficients.outcome]
    if coefficients.sigma_outcome is not None:
        named.append("the outcome's residual SD")
    return f"the structural prior{'s' * (len(named) > 1)} of {', '.join(named)}"


def informed_message(observed: Observed, statistics: Statistics, coefficients: Coefficients) -> str:
    """Return the warning for a fit in which rho is informed."""
    message = f"rho is informed through {informants(observed, statistics, coefficients)}, and was sampled jointly."
    if statistics.informed:
        message += (
            " That the data inform rho rests on an assumption of yours: study.audit() says how strongly, and adding "
            "the terms to the outcome equation removes it."
        )
    return message
