"""One factor of a formula: checked piece by piece against what is allowed, then rewritten for evaluation."""

import ast
from collections.abc import Callable
from dataclasses import dataclass

from bayesmed.core.errors import FormulaError
from bayesmed.study.options import OptionReader, brief, is_number_literal
from bayesmed.study.transforms import TRANSFORMS, allowed_names
from bayesmed.study.vocabulary import Vocabulary

LARGEST_EXPONENT = 20

GIVEN = "_given"
"""What follows the placeholder of a column where its values are needed as they were given, inside C()."""

_ARITHMETIC = (ast.Add, ast.Sub, ast.Mult, ast.Div, ast.FloorDiv, ast.Mod)
_COMPARISONS = (ast.Lt, ast.LtE, ast.Gt, ast.GtE, ast.Eq, ast.NotEq)
_LOGIC = {ast.BitAnd: "both", ast.BitOr: "either"}


@dataclass(frozen=True)
class Expression:
    """A factor that passed the check.

    Attributes
    ----------
    label : str
        As the user would write it.
    code : str
        What is evaluated: placeholders, numbers, allowed functions and nothing else.
    columns : frozenset of str
        Columns of the data in it, without those inside the mediator's own expression.
    has_mediator : bool
        True if the mediator's expression is in it.
    coded : frozenset of str
        Columns that stand as they are inside ``C()``.
    width : int or None
        How many columns of a design the factor makes at most, apart from the levels of categoricals; None
        for a ``C()`` round something computed, which may have as many as there are rows.
    """

    label: str
    code: str
    columns: frozenset[str]
    has_mediator: bool
    coded: frozenset[str]
    width: int | None

    @property
    def is_plain(self) -> bool:
        """True if the factor is one column, or the mediator, and nothing else."""
        return self.code.isidentifier()


def parsed(code: str, complain: Callable[[str], FormulaError], words: Vocabulary) -> ast.expr:
    """Return the Python expression in `code`, not yet checked."""
    try:
        return ast.parse(code.strip(), mode="eval").body
    except (SyntaxError, ValueError, MemoryError, RecursionError):
        raise complain(f"{brief(words.restore(code))} cannot be read as an expression") from None


def checked(
    node: ast.expr, mediator: tuple[ast.expr, ...], complain: Callable[[str], FormulaError], words: Vocabulary
) -> Expression:
    """Return the expression if every piece of it is allowed.

    Parameters
    ----------
    node : ast.expr
        In placeholders.
    mediator : tuple of ast.expr
        The forms of the mediator's expression, to be replaced wherever they stand; empty to replace none.
    complain : callable
        Makes the error from its text.
    words : Vocabulary

    Raises
    ------
    FormulaError
        Naming the offending piece.
    """
    checker = _Checker({ast.dump(form) for form in mediator}, complain, words)
    label = words.restore(ast.unparse(node))
    rewritten = checker.value(node, outermost=True)
    if not checker.columns and not checker.has_mediator:
        raise complain(f"{brief(label)} has no column in it")
    return Expression(
        label,
        ast.unparse(ast.fix_missing_locations(rewritten)),
        frozenset(checker.columns),
        checker.has_mediator,
        frozenset(checker.coded),
        _width(rewritten),
    )


class _Checker:
    """Walks one expression. Only node types named here pass; all others are refused."""

    def __init__(self, mediator: set[str], complain: Callable[[str], FormulaError], words: Vocabulary) -> None:
        self.mediator, self.complain, self.words = mediator, complain, words
        self.columns: set[str] = set()
        self.coded: set[str] = set()
        self.has_mediator = False

    def value(self, node: ast.expr, *, outermost: bool = False) -> ast.expr:
        """Return the rewritten node of an expression that is evaluated row by row."""
        if self.mediator and ast.dump(node) in self.mediator:
            self.has_mediator = True
            return ast.Name(self.words.mediator, ast.Load())
        match node:
            case ast.Name(id=name) if name in self.words.columns:
                self.columns.add(self.words.columns[name])
                return node
            case ast.Constant(value=int() | float() as number) if is_number_literal(number):
                # Whole numbers too large for a float would be counted exactly, at any length.
                return ast.Constant(float(number)) if abs(number) > 2**53 else node
            case ast.UnaryOp(op=ast.UAdd() | ast.USub() as sign, operand=operand):
                return ast.UnaryOp(sign, self._number(operand))
            case ast.UnaryOp(op=ast.Invert(), operand=operand):
                return _call("opposite", [self._logical(operand)])
            case ast.BinOp(left=left, op=ast.Pow(), right=right):
                return self._power(node, left, right)
            case ast.BinOp(left=left, op=op, right=right) if isinstance(op, _ARITHMETIC):
                return ast.BinOp(self._number(left), op, self._number(right))
            case ast.BinOp(left=left, op=op, right=right) if type(op) in _LOGIC:
                return _call(_LOGIC[type(op)], [self._logical(left), self._logical(right)])
            case ast.Compare(left=left, ops=[op], comparators=[right]) if isinstance(op, _COMPARISONS):
                return ast.Compare(self._compared(left), [op], [self._compared(right)])
            case ast.Call():
                return self._function(node, outermost=outermost)
        raise self._refused(node)

    def _number(self, node: ast.expr) -> ast.expr:
        rewritten = self.value(node)
        # True + True must be 2, not True.
        return _call("as_number", [rewritten]) if _is_truth(rewritten) else rewritten

    def _logical(self, node: ast.expr) -> ast.expr:
        return self.value(node)

    def _compared(self, node: ast.expr) -> ast.expr:
        if isinstance(node, ast.Name) and node.id in self.words.strings:
            return node
        if isinstance(node, ast.Name) and node.id in self.words.columns:
            # Compared as it is: a number, or a level of a categorical.
            return self.value(node)
        return self._number(node)

    def _power(self, node: ast.expr, left: ast.expr, right: ast.expr) -> ast.expr:
        exponent = right.operand if isinstance(right, ast.UnaryOp) else right
        is_number = isinstance(exponent, ast.Constant) and type(exponent.value) in (int, float)
        if not is_number or abs(exponent.value) > LARGEST_EXPONENT:  # type: ignore[attr-defined]
            raise self.complain(
                f"in {self._shown(node)} the exponent must be a number between -{LARGEST_EXPONENT} and "
                f"{LARGEST_EXPONENT}"
            )
        if isinstance(right, ast.UnaryOp) and not isinstance(right.op, ast.UAdd | ast.USub):
            raise self._refused(right)
        base = self._number(left)
        if not self._columns_in(base):
            raise self.complain(f"{self._shown(node)} is a power of numbers alone; write its value")
        return ast.BinOp(base, ast.Pow(), right)

    def _function(self, node: ast.Call, *, outermost: bool) -> ast.expr:
        if not isinstance(node.func, ast.Name) or node.func.id not in TRANSFORMS:
            raise self.complain(f"{self._shown(node.func)} cannot be called here. Allowed functions: {allowed_names()}")
        name = node.func.id
        transform = TRANSFORMS[name]
        if transform.several_columns and not outermost:
            raise self.complain(
                f"{self._shown(node)} has several columns and must be a factor of its own, not part of another"
            )
        if len(node.args) < transform.expressions:
            raise self.complain(f"{self._shown(node)} needs {transform.expressions} argument(s)")
        inside = node.args[: transform.expressions]
        arguments = self._category(node, inside) if name == "C" else [self._number(a) for a in inside]
        options = OptionReader(self.complain, self.words).options(node, name, transform)
        return ast.Call(node.func, arguments, options)

    def _category(self, node: ast.Call, inside: list[ast.expr]) -> list[ast.expr]:
        if self.mediator and ast.dump(inside[0]) in self.mediator:
            raise self.complain(
                f"{self._shown(node)} makes a categorical of the mediator, which is a number that the model draws"
            )
        rewritten = self.value(inside[0])
        if isinstance(rewritten, ast.Name):
            self.coded.add(self.words.columns[rewritten.id])
            # As it was given, so that whole numbers keep their labels.
            rewritten = ast.Name(rewritten.id + GIVEN, ast.Load())
        return [rewritten]

    def _columns_in(self, node: ast.expr) -> bool:
        columns = {*self.words.columns, self.words.mediator}
        return any(isinstance(part, ast.Name) and part.id in columns for part in ast.walk(node))

    def _refused(self, node: ast.expr) -> FormulaError:
        shown = self._shown(node)
        match node:
            case ast.BoolOp() | ast.UnaryOp(op=ast.Not()):
                return self.complain(f"{shown} uses and, or, not; write &, | and ~ with brackets round comparisons")
            case ast.Compare(ops=[_, _, *_]):
                return self.complain(f"{shown} compares more than two things; join comparisons with &")
            case ast.Name(id=name) if name in self.words.strings:
                return self.complain(f"the string {shown} can only be compared with == or != or be an option")
            case ast.Name(id=name) if name in self.words.codings:
                return self.complain(f"{shown} only stands inside C()")
        return self.complain(
            f"{shown} is not allowed in a formula: columns, numbers, arithmetic, comparisons, &, |, ~ and "
            f"these functions are: {allowed_names()}"
        )

    def _shown(self, node: ast.AST) -> str:
        return brief(self.words.restore(ast.unparse(node)))


def _width(node: ast.expr) -> int | None:
    match node:
        case ast.Call(func=ast.Name(id="C"), args=[ast.Name()]):
            return 1
        case ast.Call(func=ast.Name(id="C"), args=[inside]):
            return 2 if _is_truth(inside) else None
        case ast.Call(func=ast.Name(id=name)) if TRANSFORMS[name].several_columns:
            options = {option.arg: option.value for option in node.keywords}
            numbers = [v.value for v in options.values() if isinstance(v, ast.Constant) and type(v.value) is int]
            knots = options.get("knots")
            # Degree and ends at most on top of the knots.
            return max([4, *numbers]) + (len(knots.elts) if isinstance(knots, ast.List) else 0) + 2
    return 1


def _call(function: str, arguments: list[ast.expr]) -> ast.Call:
    return ast.Call(ast.Name(function, ast.Load()), arguments, [])


def _is_truth(node: ast.expr) -> bool:
    logical = ("both", "either", "opposite")
    return isinstance(node, ast.Compare) or (
        isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id in logical
    )
