"""Numbers and lists as words: no digit that the draws do not warrant, no probability of exactly one."""

import re
from collections.abc import Iterable, Mapping
from typing import Any

import numpy as np

STEERING = re.compile(r"[\x00-\x08\x0b-\x1f\x7f-\x9f\u202a-\u202e\u2066-\u2069]")


def probability_text(probability: float, mcse: float = 0.0) -> str:
    """Return a probability with as many decimals as its Monte Carlo error warrants, two to three.

    >>> probability_text(0.99983), probability_text(0.8731, 0.012), probability_text(0.8731, 0.001)
    ('>0.999', '0.87', '0.873')
    """
    if np.isnan(probability):
        return "not defined"
    if probability > 0.999:
        return ">0.999"
    if probability < 0.001:
        return "<0.001"
    return f"{probability:.2f}" if mcse > 0.005 else f"{probability:.3f}"


def number_text(value: float, digits: int = 3) -> str:
    """Return a number in `digits` significant digits; infinite and undefined ones in words.

    >>> number_text(1234.5), number_text(0.012345), number_text(float("inf"))
    ('1230', '0.0123', 'infinite')
    """
    if np.isnan(value):
        return "not defined"
    if np.isinf(value):
        return "infinite" if value > 0 else "-infinite"
    if value == 0:
        return "0"
    rounded = float(f"{value:.{digits - 1}e}")
    decimals = digits - 1 - int(np.floor(np.log10(abs(rounded))))
    return f"{rounded:.{max(decimals, 0)}f}"


def value_text(value: Any) -> str:
    """Return a moderator value: numbers in four significant digits, the rest as they are."""
    if isinstance(value, bool | np.bool_) or not isinstance(value, int | float | np.number):
        return str(value)
    number = float(value)
    return f"{number:.4g}" if abs(number) < 1e5 or not number.is_integer() else f"{int(number)}"


def point_text(point: Mapping[str, Any]) -> str:
    """Return a moderator point, "confidence = 4, site = north", or "averaged over all rows"."""
    return ", ".join(f"{name} = {value_text(v)}" for name, v in point.items()) or "averaged over all rows"


def listed(items: Iterable[str]) -> str:
    """Return "a", "a and b", or "a, b and c"."""
    found = list(items)
    return found[0] if len(found) == 1 else ", ".join(found[:-1]) + " and " + found[-1] if found else ""


def harmless(text: str) -> str:
    """Return text in which what would command a terminal, or turn the direction of writing, is spelt out."""
    return STEERING.sub(lambda found: ascii(found.group())[1:-1], text)
