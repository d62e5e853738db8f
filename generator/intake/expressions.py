"""Derived quantities: text to a linear form, or one linear form over another, with exact coefficients.

The text is parsed by Python's own ``ast`` and walked here; nothing of it is ever run.
"""

from __future__ import annotations

import ast
import warnings
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction

from generator.intake.cells import parse_number
from generator.intake.records import LinearForm

#: Longer expressions are refused: parsing nests one call for each bracket.
LONGEST_EXPRESSION = 2000

NOT_LINEAR = "is not linear nor linear over linear"
_LINEAR_REMEDY = "write a sum of constants times components, or one such sum over another"

#: The component that a name of the expression stands for; None: unknown.
Lookup = Callable[[str], str | None]


@dataclass(frozen=True, slots=True)
class Ratio:
    """A parsed expression; ``denominator`` None: linear."""

    numerator: LinearForm
    denominator: LinearForm | None = None


class ExpressionError(ValueError):
    """Why an expression is refused: ``message`` and ``remedy`` of the problem, and the part ``found``."""

    def __init__(self, message: str, remedy: str, found: str | None = None) -> None:
        super().__init__(message)
        self.message, self.remedy, self.found = message, remedy, found


@dataclass(frozen=True, slots=True)
class _Form:
    """A value on the way up the tree: Σ terms + constant, over ``under`` (a linear form, or None for 1)."""

    terms: dict[str, Fraction]
    constant: Fraction
    under: tuple[tuple[tuple[str, Fraction], ...], Fraction] | None = None

    @property
    def is_constant(self) -> bool:
        return not self.terms and self.under is None

    def times(self, factor: Fraction) -> _Form:
        return _Form({name: value * factor for name, value in self.terms.items()}, self.constant * factor, self.under)


def parse_expression(text: str, lookup: Lookup) -> Ratio:
    """The linear form, or linear form over linear form, that an expression means.

    ``lookup`` gives the component's name for a name as written, or None.  Coefficients are the decimals as typed.
    Raises ExpressionError for anything else.
    """
    if len(text) > LONGEST_EXPRESSION:
        raise ExpressionError("is too long", f"write at most {LONGEST_EXPRESSION} characters")
    try:
        with warnings.catch_warnings():
            # Python warns of odd literals (1or 2); what matters of it is refused below.
            warnings.simplefilter("ignore")
            tree = ast.parse(text.strip(), mode="eval")
        form = _Walk(text.strip(), lookup).form(tree.body)
    except (SyntaxError, MemoryError, RecursionError, ValueError) as error:
        if isinstance(error, ExpressionError):
            raise
        raise ExpressionError(
            "can't be read as an expression",
            'write it such as "Na2O + 0.658*K2O", names that are not plain words in quotes',
        ) from None
    numerator = _linear(form.terms, form.constant)
    if form.under is None:
        if not numerator.terms:
            raise ExpressionError("names no component", "write at least one component's name")
        return Ratio(numerator)
    return Ratio(numerator, LinearForm(*form.under))


def _linear(terms: dict[str, Fraction], constant: Fraction) -> LinearForm:
    return LinearForm(tuple((name, value) for name, value in terms.items() if value), constant)


@dataclass(frozen=True, slots=True)
class _Walk:
    """The walk over a parsed expression."""

    text: str
    lookup: Lookup

    def refuse(self, node: ast.expr) -> ExpressionError:
        return ExpressionError(NOT_LINEAR, _LINEAR_REMEDY, ast.get_source_segment(self.text, node))

    def form(self, node: ast.expr) -> _Form:
        if isinstance(node, ast.Name):
            return self.component(ast.get_source_segment(self.text, node) or node.id)
        if isinstance(node, ast.Constant):
            return self.constant(node)
        if isinstance(node, ast.UnaryOp) and isinstance(node.op, ast.USub | ast.UAdd):
            inner = self.form(node.operand)
            return inner.times(Fraction(-1)) if isinstance(node.op, ast.USub) else inner
        if isinstance(node, ast.BinOp):
            return self.operation(node)
        raise self.refuse(node)

    def component(self, written: str) -> _Form:
        name = self.lookup(written)
        if name is None:
            raise ExpressionError("names no component", "", written)
        return _Form({name: Fraction(1)}, Fraction(0))

    def constant(self, node: ast.Constant) -> _Form:
        if isinstance(node.value, str):
            return self.component(node.value)
        # ast holds 0.658 as the nearest binary number; the text holds what was meant.
        value = parse_number(ast.get_source_segment(self.text, node) or "")
        if value is None:
            raise ExpressionError("is not a number", "write a plain decimal number such as 0.658", repr(node.value))
        return _Form({}, value)

    def operation(self, node: ast.BinOp) -> _Form:
        left, right = self.form(node.left), self.form(node.right)
        if isinstance(node.op, ast.Add | ast.Sub):
            return self.total(node, left, right if isinstance(node.op, ast.Add) else right.times(Fraction(-1)))
        if isinstance(node.op, ast.Mult) and (left.is_constant or right.is_constant):
            return right.times(left.constant) if left.is_constant else left.times(right.constant)
        if isinstance(node.op, ast.Div):
            return self.quotient(node, left, right)
        raise self.refuse(node)

    def total(self, node: ast.BinOp, left: _Form, right: _Form) -> _Form:
        if left.under != right.under:
            raise self.refuse(node)
        terms = dict(left.terms)
        for name, value in right.terms.items():
            terms[name] = terms.get(name, Fraction(0)) + value
        return _Form(terms, left.constant + right.constant, left.under)

    def quotient(self, node: ast.BinOp, left: _Form, right: _Form) -> _Form:
        if right.is_constant:
            if right.constant == 0:
                raise ExpressionError(
                    "divides by zero", "write a divisor other than 0", ast.get_source_segment(self.text, node)
                )
            return left.times(1 / right.constant)
        below = _linear(right.terms, right.constant)
        if left.under is not None or right.under is not None or not below.terms:
            raise self.refuse(node)
        return _Form(left.terms, left.constant, (below.terms, below.constant))
