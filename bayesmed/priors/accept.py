"""What may stand for a belief about the residual correlation, and how it becomes one."""

from __future__ import annotations

from typing import Any

from bayesmed.core.errors import PriorError
from bayesmed.priors.arguments import plain
from bayesmed.priors.point import PointMass
from bayesmed.priors.prior import Prior

__all__ = ["coerce"]


def coerce(value: Any) -> Prior:
    """Return the belief that `value` stands for.

    Parameters
    ----------
    value : Prior, float, distribution or maker of a PyMC variable
        A prior is returned as it is, and a number becomes `PointMass`. A frozen continuous distribution of
        `scipy.stats`, a distribution of preliz with its parameters set, or any object with `cdf`, `ppf` (or
        `icdf`) and `logpdf` (or `pdf`) is taken if its support lies in (−1, 1). So is an object with
        `to_pymc(name)` or `create_variable(name)` only, whose cdf is computed from the density of the
        variable it registers, or from draws of it.

    Raises
    ------
    PriorError
        For anything else, for a number that is not strictly between −1 and 1, and for a distribution that
        reaches beyond ±1.

    Examples
    --------
    >>> coerce(0.2)
    PointMass(value=0.2)
    """
    if isinstance(value, Prior):
        return value
    value = plain(value)
    if isinstance(value, int | float) and not isinstance(value, bool):
        return PointMass(value)
    if isinstance(value, type):
        raise PriorError(f"a belief about rho cannot be made from the class {value.__name__}; give an instance of it")
    if _lacks_parameters(value):
        raise PriorError(
            f"a belief about rho cannot be made from {type(value).__name__} without its parameters; give them"
        )
    return _adapted(value)


def _lacks_parameters(value: Any) -> bool:
    """Return whether `value` is a distribution of scipy or preliz that has not been given its parameters."""
    if getattr(value, "is_frozen", True) is False:
        return True
    # scipy's own families lack theirs; a histogram or a user's distribution without shapes is complete
    ready_made = getattr(value, "__module__", "").startswith("scipy.stats") and not hasattr(value, "_histogram")
    return callable(getattr(value, "freeze", None)) and (ready_made or bool(getattr(value, "numargs", 0)))


def _adapted(value: Any) -> Prior:
    if hasattr(value, "dist") and hasattr(value, "kwds"):
        from bayesmed.priors.recognised import from_scipy

        return from_scipy(value)
    quantile = callable(getattr(value, "ppf", None)) or callable(getattr(value, "icdf", None))
    density = callable(getattr(value, "logpdf", None)) or callable(getattr(value, "pdf", None))
    if quantile and density and callable(getattr(value, "cdf", None)):
        from bayesmed.priors.recognised import from_preliz

        return from_preliz(value)
    if callable(getattr(value, "to_pymc", None)) or callable(getattr(value, "create_variable", None)):
        from bayesmed.priors.from_pymc import FromMaker

        return FromMaker(value)
    raise PriorError(
        f"a belief about rho cannot be made from {value!r}; give a number strictly between -1 and 1, a"
        " prior of bayesmed.priors such as TruncatedNormal(0.3, 0.15), a frozen distribution, or an object"
        " with to_pymc(name)"
    )
