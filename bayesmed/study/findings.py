"""One thing that the audit has to say."""

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

Level = Literal["note", "attention", "stops the fit"]


@dataclass(frozen=True)
class Finding:
    """One thing that the audit has to say.

    Attributes
    ----------
    level : {"note", "attention", "stops the fit"}
    about : str
        The subject, such as "rows".
    text : str
    """

    level: Level
    about: str
    text: str


def listed(values: Iterable[object]) -> str:
    """Return values as text joined by "or"."""
    return " or ".join(repr(value) for value in values)
