"""Tables of a study file read strictly: known keys, values of the right kind, errors with their place."""

from collections.abc import Iterable, Mapping
from datetime import date, datetime, time
from difflib import get_close_matches
from typing import Any

from bayesmed.core.errors import StudyFileError


class StrictTable:
    """A table of a study file, whose keys must be known and whose values are taken by kind.

    Parameters
    ----------
    values : mapping
        As ``tomllib`` gives it.
    place : str
        Where it stands, "" for the file itself, "fit" for the table ``[fit]``.
    known : iterable of str
        Every key it may have.

    Raises
    ------
    StudyFileError
        If a key is not known; it names the place and the nearest key that is.
    """

    def __init__(self, values: Mapping[str, Any], place: str, known: Iterable[str]) -> None:
        self._values, self._place = values, place
        allowed = list(known)
        for key in values:
            if key not in allowed:
                raise StudyFileError(
                    f"{self.where(key)} is not known; allowed {'here' if place else 'at the top'} are "
                    f"{', '.join(allowed)}{nearest(key, allowed)}"
                )

    def __contains__(self, key: str) -> bool:
        return key in self._values

    def where(self, key: str) -> str:
        """Return the place of a key, such as ``fit.draws``."""
        return f"{self._place}.{key}" if self._place else key

    def text(self, key: str) -> str:
        """Return text that must be there and not be blank."""
        if key not in self._values:
            raise StudyFileError(f"{self.where(key)} is missing; it must be text")
        value = self._values[key]
        if not isinstance(value, str) or not value.strip():
            raise self.wrong(key, "text that is not blank")
        return value

    def number(self, key: str, default: float | None = None) -> float | None:
        """Return a number, or `default` where there is none."""
        value = self._values.get(key, default)
        if value is not None and (isinstance(value, bool) or not isinstance(value, int | float)):
            raise self.wrong(key, "a number")
        return value

    def whole(self, key: str, default: int | None, least: int) -> int | None:
        """Return a whole number of at least `least`, or `default` where there is none."""
        value = self._values.get(key, default)
        if value is not None and (isinstance(value, bool) or not isinstance(value, int) or value < least):
            raise self.wrong(key, f"a whole number of at least {least}")
        return value

    def truth(self, key: str, default: bool) -> bool:
        """Return a truth value, or `default` where there is none."""
        value = self._values.get(key, default)
        if not isinstance(value, bool):
            raise self.wrong(key, "true or false")
        return value

    def one_of(self, key: str, allowed: tuple[str, ...], default: str) -> str:
        """Return one of several words, or `default` where there is none."""
        value = self._values.get(key, default)
        if not isinstance(value, str) or value not in allowed:
            raise self.wrong(key, " or ".join(f'"{word}"' for word in allowed))
        return value

    def table(self, key: str) -> Mapping[str, Any] | None:
        """Return a table as it is, or None where there is none."""
        value = self._values.get(key)
        if value is not None and not isinstance(value, Mapping):
            raise self.wrong(key, f"a table, as in [{self.where(key)}]")
        return value

    def pair(self, key: str) -> tuple[Any, Any] | None:
        """Return a list of two single values as a pair, or None where there is none."""
        value = self._values.get(key)
        if value is None:
            return None
        if not isinstance(value, list) or len(value) != 2 or not all(is_single(each) for each in value):
            raise self.wrong(key, "a list of two values, from and to, as in [0, 1]")
        return value[0], value[1]

    def texts(self, key: str) -> tuple[str, ...] | None:
        """Return a list of texts, or None where there is none."""
        value = self._values.get(key)
        if value is None:
            return None
        if not isinstance(value, list) or not all(isinstance(each, str) for each in value):
            raise self.wrong(key, 'a list of names, as in ["age", "site"]')
        return tuple(value)

    def wrong(self, key: str, allowed: str) -> StudyFileError:
        """Return the error for a value that is not allowed."""
        return StudyFileError(f"{self.where(key)} is {described(self._values[key])}; it must be {allowed}")


def is_single(value: Any) -> bool:
    """True for text, a number or a truth value: what a moderator or an exposure can have as its value."""
    return isinstance(value, str | int | float)


def described(value: Any) -> str:
    """Return the kind of a value and, where short, the value, in the words of a study file."""
    match value:
        case bool():
            return f"the truth value {str(value).lower()}"
        case str():
            return f'the text "{value}"' if len(value) <= 60 else f'the text "{value[:57]}…"'
        case int() | float():
            return f"the number {value}"
        case Mapping():
            return "a table"
        case list():
            return f"a list of {len(value)}" if len(repr(value)) > 60 else f"the list {value}"
        case datetime() | date() | time():
            return f"the date or time {value}"
    return repr(value)


def nearest(word: str, valid: Iterable[str]) -> str:
    """Return "; did you mean 'x'?" for the nearest valid word, or nothing."""
    near = get_close_matches(word, list(valid), n=1, cutoff=0.5)
    return f"; did you mean {near[0]!r}?" if near else ""
