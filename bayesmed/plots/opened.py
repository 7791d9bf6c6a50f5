"""What a picture is drawn from: a fit, comparison, tipping distribution or yardsticks, as users hold them."""

from typing import Any

from bayesmed.core.errors import ArgumentError


def opened[Kind](value: Any, kind: type[Kind], asked: str) -> Kind:
    """Return the result inside what a user holds, or the result itself.

    Raises
    ------
    ArgumentError
        If there is none of that kind; `asked` says in words what is needed.
    """
    for inner in (value, getattr(value, "result", None), getattr(value, "_result", None)):
        if isinstance(inner, kind):
            return inner
    raise ArgumentError(f"{asked}; found {type(value).__name__}")
