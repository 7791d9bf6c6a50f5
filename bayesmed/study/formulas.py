"""The two formulas of a study: parsed, roles checked, the mediator's expression replaced by one column."""

import ast
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import Any

from formulaic.errors import FormulaicError
from formulaic.parser import DefaultFormulaParser
from formulaic.parser.types import ASTNode, Factor, Term

from bayesmed.core.errors import DataError, FormulaError
from bayesmed.study.expressions import Expression, checked, parsed
from bayesmed.study.lexing import Skeleton, in_formula, skeleton
from bayesmed.study.vocabulary import Vocabulary, vocabulary, written_name

MOST_TERMS = 300
"""Most terms of one formula after ``*`` and ``**`` are written out."""

Terms = tuple[tuple[Expression, ...], ...]


@dataclass(frozen=True)
class Formula:
    """One formula in checked pieces.

    Attributes
    ----------
    text : str
        As given.
    left : Expression
        What stands left of ``~``.
    terms : tuple of tuple of Expression
        The factors of each term in order of degree; no factors for the intercept.
    """

    text: str
    left: Expression
    terms: Terms

    @property
    def columns(self) -> frozenset[str]:
        """The columns right of ``~``, without those inside the mediator's own expression."""
        return frozenset().union(*(factor.columns for term in self.terms for factor in term))

    @property
    def has_mediator(self) -> bool:
        """True if the mediator stands on the right."""
        return any(factor.has_mediator for term in self.terms for factor in term)


@dataclass(frozen=True)
class Formulas:
    """Both formulas and the vocabulary that they share."""

    mediator: Formula
    outcome: Formula
    words: Vocabulary

    @property
    def columns(self) -> tuple[str, ...]:
        """Every column that either formula uses, in order of first use."""
        return tuple(self.words.columns.values())


def read(mediator: str, outcome: str, exposure: str, names: Sequence[str], avoid: Iterable[str] = ()) -> Formulas:
    """Read the two formulas of a study.

    Parameters
    ----------
    mediator, outcome : str
        As the user gave them.
    exposure : str
        The exposure's column.
    names : sequence of str
        The columns there are.
    avoid : iterable of str
        Further texts in which no placeholder may occur.

    Raises
    ------
    FormulaError
        If a formula cannot be read, holds what is not allowed, or does not fit the roles.
    """
    words = vocabulary(names, [*avoid, *(text for text in (mediator, outcome) if isinstance(text, str))])
    if exposure not in names:
        raise DataError(f"exposure: there is no column '{exposure}'. {words.nearest(exposure)}")
    words.column(exposure)
    sides = {
        argument: skeleton(text, argument, words) for argument, text in (("mediator", mediator), ("outcome", outcome))
    }
    reader = _Reader(words)
    for_mediator, for_outcome = _complaint("mediator", mediator), _complaint("outcome", outcome)
    left_node = reader.left_node(sides["mediator"], for_mediator)
    left_mediator = checked(left_node, (), for_mediator, words)
    words.mediator_label = left_mediator.label
    left_outcome = checked(reader.left_node(sides["outcome"], for_outcome), (), for_outcome, words)
    _refuse_left(left_mediator, left_outcome, exposure, for_mediator, for_outcome)
    forms = _forms(left_node)
    equations = Formulas(
        Formula(mediator, left_mediator, reader.terms(sides["mediator"], forms, for_mediator)),
        Formula(outcome, left_outcome, reader.terms(sides["outcome"], forms, for_outcome)),
        words,
    )
    _check_roles(equations, exposure, for_mediator, for_outcome)
    return equations


def _complaint(argument: str, text: str) -> Callable[[str], FormulaError]:
    return lambda what: FormulaError(in_formula(argument, what, text))


def _forms(node: ast.expr) -> tuple[ast.expr, ...]:
    """The expressions that mean the mediator: its own, and what stands inside an outermost I()."""
    forms = [node]
    if isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id == "I":
        forms.append(node.args[0])
    return tuple(forms)


@dataclass(frozen=True)
class _Reader:
    words: Vocabulary

    def left_node(self, sides: Skeleton, complain: Callable[[str], FormulaError]) -> ast.expr:
        node = parsed(sides.left, complain, self.words)
        if not isinstance(node, ast.Name | ast.Call):
            shown = self.words.restore(ast.unparse(node))
            raise complain(f"left of '~' stands one column or one function, got {shown}; write I({shown})")
        if isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id == "C":
            raise complain("left of '~' stands a number, not a categorical")
        return node

    def terms(self, sides: Skeleton, mediator: tuple[ast.expr, ...], complain: Callable[[str], FormulaError]) -> Terms:
        known: dict[str, Expression] = {}
        terms: dict[tuple[str, ...], tuple[Expression, ...]] = {}
        for term in self._expanded(sides.right, complain):
            factors = []
            for factor in term.factors:
                if factor.eval_method is Factor.EvalMethod.LITERAL:
                    if factor.expr != "1":
                        raise complain(f"the number {factor.expr} is not a term; write I({factor.expr} * …)")
                    continue
                if factor.expr not in known:
                    node = parsed(factor.expr, complain, self.words)
                    known[factor.expr] = checked(node, mediator, complain, self.words)
                factors.append(known[factor.expr])
            terms.setdefault(tuple(sorted(f.code for f in factors)), tuple(factors))
        if not terms:
            raise complain("no term is left right of '~'")
        return tuple(sorted(terms.values(), key=len))

    def _expanded(self, right: str, complain: Callable[[str], FormulaError]) -> Iterable[Term]:
        parser = DefaultFormulaParser(feature_flags=set())
        try:
            tree = parser.get_ast(right, context={})
            self._check_algebra(tree, complain)
            return list(parser.get_terms_from_ast(tree, context={}))
        except FormulaError:
            raise
        except FormulaicError as error:
            raise complain(self._plain(error)) from None
        except (SyntaxError, ValueError, MemoryError, RecursionError):
            raise complain("the right side cannot be read") from None

    def _plain(self, error: Exception) -> str:
        # The first paragraph says what is wrong; the rest shows the place, in terminal colours.
        text = self.words.restore(str(error).split("\n")[0])
        return " ".join(text.split()).rstrip(".")

    def _check_algebra(self, tree: Any, complain: Callable[[str], FormulaError]) -> None:
        """Refuse powers of one term, and more terms than can be meant, before any of them is written out."""
        sizes: dict[int, int] = {}
        pending: list[tuple[Any, bool]] = [(tree, False)]
        while pending:
            node, ready = pending.pop()
            if not isinstance(node, ASTNode):
                sizes[id(node)] = 1
            elif not ready:
                pending.append((node, True))
                pending.extend((argument, False) for argument in node.args)
            else:
                sizes[id(node)] = self._size(node, [sizes[id(a)] for a in node.args], complain)
                if sizes[id(node)] > MOST_TERMS:
                    raise complain(f"'{node.operator.symbol}' makes more than {MOST_TERMS} terms")

    def _size(self, node: ASTNode[Any], sizes: list[int], complain: Callable[[str], FormulaError]) -> int:
        match node.operator.symbol:
            case "*" | ":" as symbol if _same_column(node):
                name = self.words.restore(str(node.args[0])).strip()
                raise complain(f"{name}{symbol}{name} means {name} alone in a formula; write I({name}**2)")
            case "*":
                return sum(sizes) + sizes[0] * sizes[-1]
            case ":":
                return sizes[0] * sizes[-1]
            case "/" | "in":
                return sum(sizes)
            case "**" | "^":
                base = self.words.restore(" ".join(str(node.args[0]).split()))
                power = self.words.restore(str(node.args[1]).strip())
                if sizes[0] == 1:
                    raise complain(
                        f"{base}{node.operator.symbol}{power} means {base} alone in a formula; for the "
                        f"power write I({base}**{power})"
                    )
                if not power.isdecimal() or not 1 <= int(power) <= 5:
                    raise complain(f"a power of terms must be a whole number from 1 to 5, got {power}")
                return int(sizes[0] ** int(power))
        return sum(sizes)


def _same_column(node: ASTNode[Any]) -> bool:
    first, *others = node.args
    return not isinstance(first, ASTNode) and any(str(first) == str(other) for other in others)


def _refuse_left(
    mediator: Expression,
    outcome: Expression,
    exposure: str,
    for_mediator: Callable[[str], FormulaError],
    for_outcome: Callable[[str], FormulaError],
) -> None:
    if exposure in mediator.columns:
        raise for_mediator(f"the exposure '{exposure}' stands left of '~'; the mediator must be another variable")
    if exposure in outcome.columns:
        raise for_outcome(f"the exposure '{exposure}' stands left of '~'; the outcome must be another variable")
    shared = mediator.columns & outcome.columns
    if shared:
        raise for_outcome(
            f"{_list(shared)} stands left of '~' in both formulas; mediator and outcome must not share a column"
        )


def _check_roles(
    formulas: Formulas,
    exposure: str,
    for_mediator: Callable[[str], FormulaError],
    for_outcome: Callable[[str], FormulaError],
) -> None:
    own, out = formulas.mediator.left, formulas.outcome.left
    for formula, complain in ((formulas.mediator, for_mediator), (formulas.outcome, for_outcome)):
        found = formula.columns & out.columns
        if found:
            raise complain(f"the outcome's {_list(found)} stands right of '~'; an outcome explains nothing")
    found = formulas.mediator.columns & own.columns
    if formulas.mediator.has_mediator or found:
        raise for_mediator(
            f"the mediator {own.label} stands on both sides of '~' ({_list(found or own.columns)}); it "
            "cannot explain itself"
        )
    found = formulas.outcome.columns & own.columns
    if found:
        raise for_outcome(
            f"{_list(found)} is used outside {own.label}, which is the mediator; the mediator can only be "
            f"changed as a whole. Use {own.label} wherever it stands, or make a column of it and use that "
            "in both formulas"
        )
    if not formulas.outcome.has_mediator:
        raise for_outcome(f"the mediator {own.label} does not stand right of '~'; without it there is no path")
    if exposure not in formulas.mediator.columns:
        raise for_mediator(
            f"the exposure '{exposure}' does not stand right of '~'; without it nothing moves the mediator"
        )


def _list(names: Iterable[str]) -> str:
    return ", ".join(written_name(name) for name in sorted(names))
