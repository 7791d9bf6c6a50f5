"""The text of a formula, with every column, string and contrast coding replaced by a name of our own.

What follows the lexer sees neither quotes nor backticks nor dots, only operators, numbers, placeholders and
the names of functions. So a column may have any name, may be called like a function or a Python keyword, and
no text from a formula is ever evaluated as a string.
"""

import keyword
import re
from dataclasses import dataclass, field

import numpy as np

from bayesmed.core.errors import FormulaError
from bayesmed.study.transforms import CONTRASTS, TRANSFORMS, allowed_names
from bayesmed.study.vocabulary import Vocabulary

LONGEST = 20_000
"""Most characters of a formula."""

DEEPEST = 20
"""Most brackets inside each other."""

LONGEST_CALL = 200
"""Most tokens inside one call of a function."""

_TOKEN = re.compile(
    r"""
    (?P<space>\s+)
  | (?P<string>'[^'\\\n]*'|"[^"\\\n]*")
  | (?P<quoted>`[^`\n]*`)
  | (?P<number>(?:\d{1,40}\.?\d{0,40}|\.\d{1,40})(?:[eE][+-]?\d{1,3})?(?![\w.]))
  | (?P<name>[^\W\d]\w*(?:\.\w+)*)
  | (?P<operator>\*\*|==|!=|<=|>=|//|:=|<<|>>|->|[-+*/:^()\[\],<>=&|~%.@])
    """,
    re.VERBOSE,
)
_INSTEAD = {"and": "&", "or": "|", "not": "~"}


@dataclass(frozen=True)
class Skeleton:
    """A formula in placeholders, in the two parts left and right of its ``~``."""

    left: str
    right: str


def skeleton(text: str, argument: str, words: Vocabulary) -> Skeleton:
    """Return `text` in placeholders.

    Parameters
    ----------
    text : str
        A formula with two sides.
    argument : str
        The argument it was given as, for errors.
    words : Vocabulary
        Taken from and added to.

    Raises
    ------
    FormulaError
        For a character, name, call, nesting or length that is not allowed.
    """
    if not isinstance(text, str):
        raise FormulaError(
            f"{argument}: a formula is a string such as 'outcome ~ mediator + exposure', got {type(text).__name__}."
        )
    if len(text) > LONGEST:
        raise FormulaError(f"{argument}: the formula has {len(text)} characters; at most {LONGEST} are allowed.")
    return _Lexer(text, argument, words).run()


@dataclass
class _Lexer:
    text: str
    argument: str
    words: Vocabulary
    sides: list[list[str]] = field(default_factory=lambda: [[]])
    # One entry a bracket: True where it opens a call, whose inside is Python and not formula algebra.
    brackets: list[bool] = field(default_factory=list)
    in_call: int = 0
    calls: bool = False

    def run(self) -> Skeleton:
        position, before = 0, ""
        while position < len(self.text):
            match = _TOKEN.match(self.text, position)
            if match is None:
                raise self._stray(position)
            kind, piece = str(match.lastgroup), match.group()
            position = match.end()
            if kind == "space":
                before = " "
                continue
            if kind in ("string", "quoted") and before and (before[-1].isalnum() or before[-1] in "_'\"`"):
                raise self._error(f"{piece} follows {before!r} directly, which is not allowed here")
            self._count()
            self.sides[-1].append(self._token(kind, piece, self.text[position:]))
            before = piece
        if self.brackets:
            raise self._error("a bracket is opened and not closed")
        if len(self.sides) == 1:
            raise self._error("there is no '~'; write 'left ~ right', such as 'exercise ~ coaching + age'")
        left, right = ("".join(side) for side in self.sides)
        if not left.strip():
            raise self._error("there is nothing left of '~'")
        if not right.strip():
            raise self._error("there is nothing right of '~'; write '~ 1' for an intercept alone")
        return Skeleton(left, right)

    def _token(self, kind: str, piece: str, after: str) -> str:
        if kind == "string":
            if not any(self.brackets):
                raise self._error(f"the string {piece} stands where a column or a function should be")
            return self.words.string(piece[1:-1])
        if kind == "quoted":
            name = piece[1:-1]
            if self.words.find(name) is None:
                raise self._error(f"there is no column {piece}. {self.words.nearest(name)}")
            return " " + self.words.column(str(self.words.find(name))) + " "
        if kind == "number":
            return " " + piece + " "
        if kind == "name":
            self.calls = re.match(r"\s*\(", after) is not None
            # The bracket of a call must follow its name directly to be read as one.
            return " " + self._name(piece, after) + ("" if self.calls else " ")
        return self._operator(piece)

    def _name(self, piece: str, after: str) -> str:
        if self.calls:
            name = piece.removeprefix("np.").removeprefix("numpy.")
            if name in CONTRASTS:
                return self.words.coding(name)
            # `np.` is a courtesy for functions that are numpy's own.
            if name in TRANSFORMS and (name == piece or isinstance(TRANSFORMS[name].function, np.ufunc)):
                return name
            raise self._error(f"{piece}() is not among the functions allowed: {allowed_names()}")
        if any(self.brackets) and re.match(r"\s*=(?!=)", after):
            if keyword.iskeyword(piece) or "." in piece:
                raise self._error(f"{piece}= is not an option of any function")
            return piece
        if any(self.brackets) and piece in ("True", "False", "None"):
            return piece
        column = self.words.find(piece)
        if column is not None:
            return self.words.column(column)
        if "." in piece:
            raise self._error(
                f"{piece} is neither a column nor a function called; a dot reaches into nothing here. "
                f"Allowed functions: {allowed_names()}"
            )
        if piece in _INSTEAD:
            raise self._error(f"write '{_INSTEAD[piece]}' for '{piece}', with brackets round comparisons")
        if keyword.iskeyword(piece):
            raise self._error(f"'{piece}' is a word of Python that formulas do not take")
        raise self._error(f"there is no column '{piece}'. {self.words.nearest(piece)}")

    def _operator(self, piece: str) -> str:
        in_call = any(self.brackets)
        if piece in "([":
            if piece == "[" and not in_call:
                raise self._error("'[' can only hold a list among the options of a function")
            self.brackets.append(in_call or self.calls)
            self.calls = False
            if len(self.brackets) > DEEPEST:
                raise self._error(f"brackets are nested more than {DEEPEST} deep")
        elif piece in ")]":
            if not self.brackets:
                raise self._error(f"'{piece}' closes a bracket that was not opened")
            self.brackets.pop()
        elif not in_call:
            return self._algebra(piece)
        elif piece in (":=", "->", "@", ":", "<<", ">>", "."):
            raise self._error(f"'{piece}' is not allowed inside a function")
        elif piece == "^":
            raise self._error("'^' inside a function is not a power; write '**'")
        return piece

    def _algebra(self, piece: str) -> str:
        if piece == "~":
            if self.brackets:
                raise self._error("'~' stands inside brackets")
            if len(self.sides) == 2:
                raise self._error("there are two '~'; a formula has one")
            self.sides.append([])
            return ""
        if piece == "|":
            raise self._error(
                "'|' (several parts) is not allowed; inside a function such as I() it means 'or', and "
                "terms are added with '+'"
            )
        if piece == ".":
            raise self._error("'.' (all other columns) is not allowed; name the columns")
        if piece in ("==", "!=", "<", "<=", ">", ">=", "&", "%", "//", "="):
            raise self._error(f"'{piece}' is only allowed inside a function, such as I(age >= 65)")
        if piece not in ("+", "-", "*", "/", ":", "**", "^"):
            raise self._error(f"'{piece}' is not allowed")
        return piece

    def _count(self) -> None:
        self.in_call = self.in_call + 1 if any(self.brackets) else 0
        if self.in_call > LONGEST_CALL:
            raise self._error(f"a function holds more than {LONGEST_CALL} pieces; make a column of it first")

    def _stray(self, position: int) -> FormulaError:
        piece = self.text[position : position + 12]
        character = piece[0]
        if character in "'\"`":
            return self._error(
                f"the quoted text at {piece!r} is not closed, or holds a backslash or a line break, which "
                "are not allowed"
            )
        if character in "{}":
            return self._error("braces are not allowed; write I(…) around arithmetic")
        if character.isdigit():
            return self._error(f"the number at {piece!r} cannot be read")
        return self._error(f"the character {character!r} is not allowed")

    def _error(self, what: str) -> FormulaError:
        return FormulaError(in_formula(self.argument, what, self.text))


def in_formula(argument: str, what: str, text: str) -> str:
    """Return the text of an error: the argument, what is wrong, and the formula, cut where it is long."""
    text = " ".join(text.split())
    shown = text if len(text) <= 120 else text[:117] + "…"
    return f"{argument}: {what}{'' if what.endswith(('.', '?')) else '.'} In the formula {shown!r}."
