"""Reading the arguments of priors: plain finite numbers, within stated bounds, or an error that says so."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from bayesmed.core.errors import PriorError

__all__ = ["correlation", "doubles", "plain", "positive", "probabilities", "real", "refusal"]


def refusal(owner: str, argument: str, value: object, allowed: str) -> PriorError:
    """Build the error for one argument: whose it is, its name, the value found and what is allowed."""
    return PriorError(f"{owner}: {argument} is {plain(value)!r}; {allowed}")


def real(owner: str, argument: str, value: object, allowed: str = "a finite number is needed") -> float:
    """Return `value` as a Python float, refusing anything but one finite number."""
    value = plain(value)
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise refusal(owner, argument, value, allowed)
    try:
        number = float(value)
    except OverflowError:
        raise refusal(owner, argument, value, allowed) from None
    if not math.isfinite(number):
        raise refusal(owner, argument, value, allowed)
    return number + 0.0  # -0.0 becomes 0.0, so that equal priors have equal reprs


def positive(owner: str, argument: str, value: object) -> float:
    """Return `value` as a float that is finite and above 0."""
    number = real(owner, argument, value, "a finite number above 0 is needed")
    if number <= 0:
        raise refusal(owner, argument, value, "it must be above 0")
    return number


def correlation(owner: str, argument: str, value: object) -> float:
    """Return `value` as a float from -1 to 1, both included."""
    allowed = "a residual correlation lies between -1 and 1"
    number = real(owner, argument, value, allowed)
    if abs(number) > 1:
        raise refusal(owner, argument, value, allowed)
    return number


def probabilities(owner: str, value: ArrayLike) -> NDArray[np.float64]:
    """Return `value` as an array of probabilities, refusing any outside [0, 1] and any NaN."""
    array = np.asarray(value, dtype=float)
    wrong = ~((array >= 0) & (array <= 1))
    if wrong.any():
        found = float(array[wrong].flat[0])
        raise refusal(owner, "a probability", found, "probabilities lie between 0 and 1")
    return array


def doubles(*numbers: float) -> tuple[np.float64, ...]:
    """Return numbers as numpy doubles: PyTensor would store a Python 2.0 in single precision."""
    return tuple(np.float64(number) for number in numbers)


def plain(value: Any) -> Any:
    """Return a numpy scalar or an array of no dimensions as the Python object it holds."""
    if isinstance(value, np.generic) or (isinstance(value, np.ndarray) and value.ndim == 0):
        return value.item()
    return value
