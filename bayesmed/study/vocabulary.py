"""The placeholders that the two formulas of a study share, and what each of them stands for."""

import difflib
import keyword
import re
import unicodedata
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

_PLAIN_NAME = re.compile(r"[^\W\d]\w*(?:\.\w+)*")


@dataclass(eq=False)
class Vocabulary:
    """The placeholders shared by the two formulas of a study, and what each stands for.

    Attributes
    ----------
    prefix : str
        How every placeholder begins; occurs in no formula.
    columns, strings, codings : dict of str to str
        What each placeholder stands for: a column of the data, a string, a contrast coding.
    mediator_label : str
        What the mediator's placeholder stands for.
    """

    names: Sequence[str]
    prefix: str
    columns: dict[str, str] = field(default_factory=dict)
    strings: dict[str, str] = field(default_factory=dict)
    codings: dict[str, str] = field(default_factory=dict)
    mediator_label: str = "the mediator"

    def __post_init__(self) -> None:
        self._known = {unicodedata.normalize("NFKC", name): name for name in self.names}
        # A name that is normal already wins over one that merely becomes it.
        self._known.update({name: name for name in self.names})

    @property
    def mediator(self) -> str:
        """The placeholder of the mediator, evaluated once into a column."""
        return self.prefix + "m"

    def column(self, name: str) -> str:
        """Return the placeholder of a column."""
        return self._placeholder(self.columns, "c", name)

    def string(self, text: str) -> str:
        """Return the placeholder of a string."""
        return self._placeholder(self.strings, "s", text)

    def coding(self, name: str) -> str:
        """Return the placeholder of a contrast coding."""
        return self._placeholder(self.codings, "f", name)

    def find(self, name: str) -> str | None:
        """Return the column that `name` means, or None."""
        return self._known.get(name) or self._known.get(unicodedata.normalize("NFKC", name))

    def restore(self, text: str) -> str:
        """Return `text` with every placeholder replaced by what the user wrote."""
        return re.sub(re.escape(self.prefix) + r"(?:[csf]\d+|m(?!\w))", self._written, text)

    def nearest(self, name: str) -> str:
        """Return the hint that follows an unknown column: the nearest names, or some of those there are."""
        close = difflib.get_close_matches(name, self.names, n=3)
        if close:
            return "Did you mean " + " or ".join(f"'{c}'" for c in close) + "?"
        shown = ", ".join(f"'{n}'" for n in sorted(self.names)[:12])
        return f"The data have {len(self.names)} columns: {shown}{', …' if len(self.names) > 12 else ''}."

    def _placeholder(self, table: dict[str, str], letter: str, meaning: str) -> str:
        for placeholder, known in table.items():
            if known == meaning:
                return placeholder
        placeholder = f"{self.prefix}{letter}{len(table)}"
        table[placeholder] = meaning
        return placeholder

    def _written(self, match: re.Match[str]) -> str:
        placeholder = match.group()
        if placeholder == self.mediator:
            return self.mediator_label
        if placeholder in self.columns:
            return written_name(self.columns[placeholder])
        if placeholder in self.strings:
            text = self.strings[placeholder]
            return f"'{text}'" if '"' in text else f'"{text}"'
        return self.codings.get(placeholder, placeholder)


def vocabulary(names: Sequence[str], texts: Iterable[str]) -> Vocabulary:
    """Return an empty vocabulary for data with columns `names` whose prefix occurs in none of `texts`."""
    prefix = "v_"
    everything = "\n".join(texts)
    while prefix in everything:
        prefix = "v" + prefix
    return Vocabulary(tuple(names), prefix)


def written_name(name: str) -> str:
    """Return a column's name as a formula writes it, in backticks where it must be."""
    plain = _PLAIN_NAME.fullmatch(name) and not keyword.iskeyword(name)
    return name if plain else f"`{name}`"
