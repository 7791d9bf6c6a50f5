"""Figures as journals print them: a value, and how far the rounding of its last digit leaves it open."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal, InvalidOperation
from typing import Any

import numpy as np

from bayesmed.core.errors import ArgumentError


@dataclass(frozen=True)
class Figure:
    """A printed number.

    Attributes
    ----------
    name : str
        What it is, for errors.
    printed : float, int or str
        As given.
    value : float
    half : float
        Half a unit of its last digit: the number lies within ``value ± half``.
    """

    name: str
    printed: float | int | str
    value: float
    half: float


def figure(name: str, printed: Any, decimals: int | None = None) -> Figure:
    """Return a printed number; text keeps its last zeros, ``"0.100"``, which a float loses.

    Raises
    ------
    ArgumentError
        If it is not a finite number, or `decimals` is not a whole number.
    """
    plain = printed.item() if isinstance(printed, np.generic) else printed
    try:
        if isinstance(plain, bool) or not isinstance(plain, int | float | str | Decimal):
            raise InvalidOperation
        exact = Decimal(str(plain).strip().replace("−", "-"))
    except InvalidOperation:
        exact = Decimal("nan")
    if not exact.is_finite():
        raise ArgumentError(f"{name}: expected a printed number such as '0.466' or 0.466, got {printed!r}")
    if decimals is None:
        exponent = exact.as_tuple().exponent
        places = -exponent if isinstance(exponent, int) else 0
        # A whole number without a point says nothing of its rounding but that it is whole.
        places = max(places, 0)
    elif isinstance(decimals, bool) or not isinstance(decimals, int) or not 0 <= decimals <= 17:
        raise ArgumentError(f"decimals={decimals!r} must be a whole number from 0 to 17")
    else:
        places = decimals
    shown = plain if isinstance(plain, float | int) else str(plain)
    return Figure(name, shown, float(exact), 0.5 * 10.0**-places)
