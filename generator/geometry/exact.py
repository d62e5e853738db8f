"""Exact answers from a basis that somebody proposes; nothing here searches, rounds or trusts.

A basis (which columns and row slacks are basic, where the others rest) fixes a point and its
multipliers: two small systems in whole numbers.  The answer counts only if its checker agrees.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import frexp, isfinite

from generator.geometry.bland import exact_simplex
from generator.geometry.checks import proves_infeasible, proves_optimum, proves_unbounded
from generator.geometry.elimination import cleared, solve_square
from generator.geometry.integral import Integral, integral, rest
from generator.geometry.program import Basis, Infeasible, Optimum, Program, Vector

__all__ = [
    "exact_simplex",
    "farkas_on_basis",
    "point_on_basis",
    "proves_infeasible",
    "proves_optimum",
    "proves_unbounded",
    "rounded_farkas",
    "solve_on_basis",
    "vertex_on_basis",
]

#: Bits kept of a proposed weight: powers of two, the usual row scales, pass unchanged.
WEIGHT_BITS = 24


def solve_on_basis(program: Program, basis: Basis, form: Integral | None = None) -> Optimum | None:
    """The optimum that the basis stands for, checked; None where it is singular or not optimal.

    ``form`` is ``integral(program)`` where the caller has it already.
    """
    optimum = vertex_on_basis(program, basis, form)
    return optimum if optimum is not None and proves_optimum(program, optimum) else None


def vertex_on_basis(
    program: Program, basis: Basis, form: Integral | None = None, *, is_best: bool = False
) -> Optimum | None:
    """The feasible point and the multipliers that the basis stands for; None where it is singular or not feasible.

    With ``is_best`` None as well where a multiplier or reduced cost has the wrong sign, so that the point is
    an optimum; else that is for whoever has proven it already.
    """
    form = form or integral(program)
    layout = _layout(form, basis)
    point = layout and _basic_point(form, basis, *layout)
    if layout is None or point is None or not all(_is_within(form, column, *point) for column in basis.basic):
        return None
    inside, tight = layout
    solved = solve_square([[form.rows[k][j] for k in tight] for j in inside], [form.cost[j] for j in inside])
    if solved is None:
        return None
    weights = [0] * len(form.rows)
    for k, weight in zip(tight, solved[0], strict=True):
        weights[k] = weight
    if is_best and not _has_right_signs(form, basis, weights, solved[1]):
        return None
    x = form.shares(*point)
    value = sum((c * v for c, v in zip(program.cost, x, strict=True) if c and v), Fraction(0))
    return Optimum(x, value, form.multipliers(weights, solved[1]), basis)


def _has_right_signs(form: Integral, basis: Basis, weights: list[int], denominator: int) -> bool:
    """Whether no column or slack off the basis would gain by leaving the bound that it rests at."""
    n = len(form.cost)
    basic = set(basis.basic)
    held = [(weight, row) for weight, row in zip(weights, form.rows, strict=True) if weight]
    for column in range(n + len(form.rows)):
        floor, ceiling = form.floor[column], form.ceiling[column]
        if column in basic or (floor is not None and floor == ceiling):
            continue
        if column < n:
            price = form.cost[column] * denominator - sum(weight * row[column] for weight, row in held)
        else:
            price = weights[column - n]
        at_ceiling = ceiling is not None and (column in basis.at_upper or floor is None)
        if price > 0 if at_ceiling else price < 0 or (price > 0 and floor is None):
            return False
    return True


def point_on_basis(program: Program, basis: Basis, form: Integral | None = None) -> tuple[Vector, Fraction] | None:
    """The feasible point that the basis stands for, and its value; None where it is singular or not feasible.

    Whether the point is a best one is not asked: that is for whoever has proven it already.
    """
    form = form or integral(program)
    layout = _layout(form, basis)
    point = layout and _basic_point(form, basis, *layout)
    if point is None or not all(_is_within(form, column, *point) for column in basis.basic):
        return None
    values, denominator = point
    value = sum(c * v for c, v in zip(form.cost, values, strict=False) if c and v)
    return form.shares(values, denominator), Fraction(value, denominator * form.unit * form.cost_scale)


def farkas_on_basis(
    program: Program, basis: Basis, weights: Sequence[float] | None = None, form: Integral | None = None
) -> Infeasible | None:
    """The blocking multipliers that the last basis of a first phase stands for, checked; else None.

    The first phase minimises the weighted sum by which basic columns and slacks break their bounds.
    ``weights`` (m floats, any positive multiple of the row multipliers found) say how it weighed
    them; without weights each row of the program counts alike.  Basic columns that keep their
    bounds get a reduced cost of exactly 0, which rounding floats could not do.
    """
    form = form or integral(program)
    layout = _layout(form, basis)
    point = layout and _basic_point(form, basis, *layout)
    if layout is None or point is None or not all(map(isfinite, weights or ())):
        return None
    inside, tight = layout
    prices = [Fraction(0)] * (len(form.cost) + len(form.rows))
    for column in basis.basic:
        prices[column] = _price(program, form, column, point, weights)
    whole_prices, _ = cleared(prices)
    slack_prices = whole_prices[len(form.cost) :]
    right = [
        whole_prices[j] + sum(price * form.rows[k][j] for k, price in enumerate(slack_prices) if price) for j in inside
    ]
    solved = solve_square([[form.rows[k][j] for k in tight] for j in inside], right)
    if solved is None:
        return None
    multipliers = [-price * solved[1] for price in slack_prices]
    for k, weight in zip(tight, solved[0], strict=True):
        multipliers[k] = weight
    infeasible = Infeasible(tuple(Fraction(y * s) for y, s in zip(multipliers, form.row_scale, strict=True)))
    return infeasible if proves_infeasible(program, infeasible) else None


def rounded_farkas(program: Program, weights: Sequence[float]) -> Infeasible | None:
    """The floating-point multipliers themselves, shortened to a few bits, if they are a proof as they stand."""
    greatest = max(map(abs, weights), default=0.0)
    if not greatest or not isfinite(greatest):
        return None
    kept = (weight if abs(weight) > 1e-9 * greatest else 0.0 for weight in weights)
    infeasible = Infeasible(tuple(map(_shortened, kept)))
    return infeasible if proves_infeasible(program, infeasible) else None


def _layout(form: Integral, basis: Basis) -> tuple[list[int], list[int]] | None:
    """The basic columns and the rows whose slack is not basic; None unless equally many."""
    n, m = len(form.cost), len(form.rows)
    basic = set(basis.basic)
    if len(basic) != m or not all(0 <= column < n + m for column in basic):
        return None
    inside = sorted(column for column in basic if column < n)
    return inside, [k for k in range(m) if n + k not in basic]


def _basic_point(form: Integral, basis: Basis, inside: list[int], tight: list[int]) -> tuple[list[int], int] | None:
    """Values of all columns and slacks as numerators over one positive denominator; None if singular."""
    n = len(form.cost)
    basic = set(inside)
    resting = [(j, z) for j in range(n) if j not in basic and (z := rest(form, j, j in basis.at_upper))]
    held = [rest(form, n + k, n + k in basis.at_upper) for k in tight]
    right = [bound - sum(form.rows[k][j] * z for j, z in resting) for k, bound in zip(tight, held, strict=True)]
    solved = solve_square([[form.rows[k][j] for j in inside] for k in tight], right)
    if solved is None:
        return None
    numerators, denominator = solved
    values = [0] * n
    for j, z in resting:
        values[j] = z * denominator
    for j, numerator in zip(inside, numerators, strict=True):
        values[j] = numerator
    used = [(j, value) for j, value in enumerate(values) if value]
    values += [sum(row[j] * value for j, value in used) for row in form.rows]
    return values, denominator


def _is_within(form: Integral, column: int, values: list[int], denominator: int) -> bool:
    return not _breach(form, column, values, denominator)


def _breach(form: Integral, column: int, values: list[int], denominator: int) -> int:
    """−1 where a value is below its floor, 1 where it is above its ceiling, else 0."""
    floor, ceiling = form.floor[column], form.ceiling[column]
    if floor is not None and values[column] < floor * denominator:
        return -1
    return int(ceiling is not None and values[column] > ceiling * denominator)


def _price(
    program: Program, form: Integral, column: int, point: tuple[list[int], int], weights: Sequence[float] | None
) -> Fraction:
    """What the first phase charges for one more unit of a basic column or slack, in whole-number rows."""
    breach = _breach(form, column, *point)
    if not breach:
        return Fraction(0)
    n = len(form.cost)
    if column >= n:
        k = column - n
        size = Fraction(1) if weights is None else abs(_shortened(weights[k]))
        return breach * size / form.row_scale[k]
    if weights is None:
        return Fraction(breach)
    price = sum((row[column] * _shortened(y) for row, y in zip(program.rows, weights, strict=True)), Fraction(0))
    return breach * abs(price)


def _shortened(weight: float) -> Fraction:
    mantissa, exponent = frexp(weight)
    return Fraction(round(mantissa * 2**WEIGHT_BITS), 2**WEIGHT_BITS) * Fraction(2) ** exponent
