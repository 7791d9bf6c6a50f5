"""The options of a function in a formula: literal values of the right kind, and nothing that is evaluated."""

import ast
import math
from collections.abc import Callable
from dataclasses import dataclass

from bayesmed.core.errors import FormulaError
from bayesmed.study.transforms import CONTRASTS, MOST_COLUMNS, Option, Transform
from bayesmed.study.vocabulary import Vocabulary


@dataclass(frozen=True)
class OptionReader:
    """Checks options; `complain` makes the error from its text."""

    complain: Callable[[str], FormulaError]
    words: Vocabulary

    def options(self, node: ast.Call, name: str, transform: Transform) -> list[ast.keyword]:
        """Return the options of a call by name.

        Raises
        ------
        FormulaError
            If one is unknown, given twice or of the wrong kind.
        """
        extra = node.args[transform.expressions :]
        if len(extra) > len(transform.options):
            raise self.complain(f"{self._shown(node)} has too many arguments")
        given = list(zip(transform.options, extra, strict=False))
        for option in node.keywords:
            if option.arg is None or option.arg not in transform.options:
                known = ", ".join(transform.options) or "none"
                raise self.complain(
                    f"{option.arg or '**'}= is not an option of {self.words.restore(name)}(); its options: {known}"
                )
            given.append((option.arg, option.value))
        if len({key for key, _ in given}) < len(given):
            raise self.complain(f"an option of {self._shown(node)} is given twice")
        return [
            ast.keyword(key, self._option(f"{self.words.restore(name)}({key}=)", value, transform.options[key]))
            for key, value in given
        ]

    def _option(self, place: str, node: ast.expr, option: Option) -> ast.expr:
        if option.kind == "contrast":
            return self._contrast(place, node)
        if option.kind in ("numbers", "values"):
            if not isinstance(node, ast.List | ast.Tuple):
                raise self.complain(f"{place} takes a list, got {self._shown(node)}")
            part = Option("number" if option.kind == "numbers" else "value")
            return ast.List([self._option(place, element, part) for element in node.elts], ast.Load())
        inner, sign = node, 1.0
        if isinstance(node, ast.UnaryOp) and isinstance(node.op, ast.UAdd | ast.USub):
            inner, sign = node.operand, -1.0 if isinstance(node.op, ast.USub) else 1.0
        value = inner.value if isinstance(inner, ast.Constant) else None
        is_number = is_number_literal(value)
        is_truth = type(value) is bool and inner is node
        text = self.words.strings.get(node.id) if isinstance(node, ast.Name) else None
        match option.kind:
            case "count":
                allowed = type(value) is int and inner is node and value <= MOST_COLUMNS
                wanted = f"a whole number up to {MOST_COLUMNS}"
            case "number":
                allowed, wanted = is_number, "a number"
            case "truth":
                allowed, wanted = is_truth, "True or False"
            case "truth or number":
                allowed, wanted = is_truth or is_number, "True, False or a number"
            case "word":
                allowed, wanted = text in option.words, " or ".join(repr(w) for w in option.words)
            case _:
                allowed = is_truth or is_number or text is not None
                wanted = "a number, a string, True or False"
        if not allowed:
            raise self.complain(f"{place} takes {wanted}, got {self._shown(node)}")
        return ast.Constant(sign * value) if inner is not node else node  # type: ignore[operator]

    def _contrast(self, place: str, node: ast.expr) -> ast.expr:
        match node:
            case ast.Call(func=ast.Name(id=placeholder) as function) if placeholder in self.words.codings:
                transform = CONTRASTS[self.words.codings[placeholder]]
                return ast.Call(function, [], self.options(node, placeholder, transform))
        raise self.complain(f"{place} takes one of {', '.join(CONTRASTS)}, got {self._shown(node)}")

    def _shown(self, node: ast.AST) -> str:
        return brief(self.words.restore(ast.unparse(node)))


def is_number_literal(value: object) -> bool:
    """Return whether the value of a constant is a finite number and no truth value."""
    return type(value) in (int, float) and math.isfinite(value)  # type: ignore[arg-type]


def brief(text: str) -> str:
    """Return a piece of a formula for use in an error, cut where it is long."""
    text = text.strip()
    return text if len(text) <= 80 else text[:77] + "…"
