"""Least cost, and greatest probability, where rows must hold with a given probability; proven on both sides.

Method: supporting hyperplanes at the boundary between an interior point and the relaxation's optimum
(Veinott 1967; Kelley 1960 where there is no interior point yet).  Every tangent is an exact row that is
proven to hold for all allowed x ≥ 0 (its coefficients are rounded the safe way), so the last relaxation,
decided exactly, proves the low side; the point returned is exactly feasible, which proves the high side.
Quantiles and Φ are scipy's, widened by 2⁻³⁶ for the proof (see ``chance``).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Literal

import numpy as np
from scipy.special import ndtr, ndtri

from generator.geometry.chance import Chance, Image, holds, probability, spare, tangent
from generator.geometry.decide import decide
from generator.geometry.program import Infeasible, Optimum, Program, Unbounded, Vector
from generator.geometry.simplex import OPTIMAL, Start, solve
from generator.geometry.stack import Floats, make_stack, stack_of

_ZERO, _ONE = Fraction(0), Fraction(1)
#: Rounds of tangents before the gap that is left is reported as it stands.
_ROUNDS = 200
#: Quantiles beyond this (one failure in 10⁹) are not told apart.
_SURE = 6.0
#: Stands for a proof that no point will do.
_IMPOSSIBLE: Vector = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Assured:
    """The least cost at which all chances hold.

    ``status`` "solved": ``x`` is exactly feasible and costs ``value``, and nothing costs less than
    ``least`` (proven).  "impossible": proven (``least``, ``x`` None).  "undecided": neither a point nor a
    proof within the rounds allowed: the chances can at best just hold.
    """

    status: Literal["solved", "impossible", "undecided"]
    x: Vector | None = None
    value: Fraction | None = None
    least: Fraction | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Surest:
    """The greatest probability that all chances can have at once: ``x`` has ``probability`` for each, and
    more than ``at_most`` is impossible."""

    x: Vector
    probability: float
    at_most: float


def assured(program: Program, chances: Sequence[Chance], wanted: float, gap: float = 1e-9) -> Assured:
    """The least cost of ``program`` at which every chance holds with probability ``wanted``, ½ ≤ p < 1.

    ``gap``: how far value may lie above ``least``, relative to the largest cost.  Raises ValueError for
    columns that may be negative, a p outside its range, and a cost without a least value.
    """
    if not 0.5 <= wanted < 1.0:
        raise ValueError(f"a probability from 0.5 up to, not including, 1 is needed, found {wanted}")
    if any(low is None or low < 0 for low in program.lower):
        raise ValueError("columns must be ≥ 0")
    linear = _with_rows(program, [side for chance in chances for side in chance.sides])
    first = decide(linear)
    if isinstance(first, Infeasible):
        return Assured(status="impossible")
    if isinstance(first, Unbounded):
        raise ValueError("the cost has no least value")
    if _all_hold(chances, first.x, wanted):
        return Assured(status="solved", x=first.x, value=first.value, least=first.value)
    inner = _interior(linear, chances, wanted)
    if inner is None or inner == _IMPOSSIBLE:
        return Assured(status="undecided" if inner is None else "impossible")
    return _between(linear, chances, wanted, inner, gap)


def surest(program: Program, chances: Sequence[Chance], precision: float = 1e-6) -> Surest | None:
    """The greatest common probability, to ``precision`` in quantiles (standard deviations).

    Bisection, each success lifted to what its point really has.  None where not even ½ can be had.
    ``at_most`` is proven.  What exceeds 1 − 10⁻⁹ counts as sure.
    """
    linear = replace(
        _with_rows(program, [side for chance in chances for side in chance.sides]), cost=(_ZERO,) * len(program.cost)
    )
    first = decide(linear)
    if not isinstance(first, Optimum):
        return None
    best = first.x
    low, high = max(_common(chances, best), 0.0), _SURE
    while high - low > precision:
        # a little more than is had is usually possible: try far first, then halve
        middle = (low + high) / 2
        found = _interior(linear, chances, float(ndtr(middle)))
        if found is None:
            break
        if found == _IMPOSSIBLE:
            high = middle
        else:
            best, low = found, max(_common(chances, found), middle)
    at_most = 1.0 if high == _SURE else float(ndtr(high))
    return Surest(x=best, probability=min(probability(chance, best) for chance in chances), at_most=at_most)


def _common(chances: Sequence[Chance], x: Vector) -> float:
    """The quantile of the least probability."""
    return min(_SURE, float(ndtri(min(probability(chance, x) for chance in chances))))


def _with_rows(program: Program, rows: Sequence[Vector]) -> Program:
    """The program with further rows ≤ 0."""
    more = len(rows)
    return replace(
        program,
        rows=(*program.rows, *rows),
        row_low=(*program.row_low, *(None,) * more),
        row_high=(*program.row_high, *(_ZERO,) * more),
    )


def _all_hold(chances: Sequence[Chance], x: Vector, wanted: float) -> bool:
    return all(holds(chance, x, wanted) for chance in chances)


def _spare(images: Sequence[Image], x: Floats, wanted: float) -> float:
    """The least any row has to spare."""
    return min((spare(image, x, wanted) for image in images), default=1.0)


class _Relaxation:
    """A program that grows by rows ≤ 0 and is solved in floats, each time from the basis before."""

    def __init__(self, program: Program) -> None:
        self.program = program
        self.stack = stack_of([program])
        self.start: Start | None = None

    def add(self, rows: Sequence[Vector]) -> None:
        """Further rows; their slacks join the basis."""
        m, n = self.stack.shape
        more = len(rows)
        self.program = _with_rows(self.program, rows)
        self.stack = make_stack(
            np.vstack([self.stack.rows, [[float(value) for value in row] for row in rows]]),
            np.append(self.stack.row_low, [[-np.inf] * more], axis=1),
            np.append(self.stack.row_high, [[0.0] * more], axis=1),
            lower=self.stack.lower,
            upper=self.stack.upper,
            cost=self.stack.cost,
        )
        if self.start is not None:
            self.start = Start(
                np.append(self.start.basic, [np.arange(n + m, n + m + more)], axis=1),
                np.append(self.start.at_upper, [[False] * more], axis=1),
            )

    def solve(self) -> Floats | None:
        """The optimum in floats; None where they find none."""
        solved = solve(self.stack, self.start)
        if solved.status[0] != OPTIMAL:
            return None
        self.start = solved.start
        return np.asarray(solved.x[0], dtype=np.float64)


def _interior(linear: Program, chances: Sequence[Chance], wanted: float) -> Vector | None:
    """An exact point at which all chances hold; ``_IMPOSSIBLE`` where there is none, proven; None: not found.

    Greatest t with every tangent + t·size ≤ 0, where size is about the row's own; t ≤ 1.
    """
    n = len(linear.cost)
    sizes = [max(map(abs, side)) or _ONE for chance in chances for side in chance.sides]
    rows = len(linear.rows) - len(sizes)
    program = Program(
        rows=(
            *((*row, _ZERO) for row in linear.rows[:rows]),
            *((*row, size) for row, size in zip(linear.rows[rows:], sizes, strict=True)),
        ),
        row_low=linear.row_low,
        row_high=linear.row_high,
        lower=(*linear.lower, None),
        upper=(*linear.upper, _ONE),
        cost=(*(_ZERO,) * n, -_ONE),
    )
    relaxation, images = _Relaxation(program), [Image.of(chance) for chance in chances]
    for _ in range(_ROUNDS):
        x = relaxation.solve()
        if x is None or x[n] <= 1e-13:
            break
        shares = np.maximum(x[:n], 0.0)
        if _spare(images, shares, wanted) > 0.3:
            answer = decide(relaxation.program)
            if isinstance(answer, Optimum) and _all_hold(chances, answer.x[:n], wanted):
                return answer.x[:n]
        cuts = [(*cut, _size(cut)) for image in images if (cut := tangent(image, shares, wanted)) is not None]
        relaxation.add(cuts)
    answer = decide(relaxation.program)
    if not isinstance(answer, Optimum) or answer.value > 0:
        return _IMPOSSIBLE
    return answer.x[:n] if _all_hold(chances, answer.x[:n], wanted) else None


def _size(terms: Vector) -> Fraction:
    """About the largest term, as a power of two."""
    return Fraction(2) ** math.frexp(float(max(map(abs, terms))) or 1.0)[1]


def _between(linear: Program, chances: Sequence[Chance], wanted: float, inner: Vector, gap: float) -> Assured:
    """Tangents where the way from the interior point to the relaxation's optimum leaves the allowed set."""
    relaxation, images = _Relaxation(linear), [Image.of(chance) for chance in chances]
    inside = np.array([float(value) for value in inner])
    cost = np.array([float(value) for value in linear.cost])
    tolerance = gap * float(np.abs(cost).max(initial=0.0))
    for _ in range(_ROUNDS):
        outside = relaxation.solve()
        if outside is None:
            break
        edge = _edge(images, wanted, inside, outside)
        if float(cost @ (edge - outside)) <= tolerance / 4:
            break
        cuts = [cut for image in images for x in (edge, outside) if (cut := _cutting(image, x, outside, wanted))]
        if not cuts:
            break
        relaxation.add(cuts)
    bottom = decide(relaxation.program)
    if not isinstance(bottom, Optimum):
        raise ArithmeticError(f"a relaxation of a program with a feasible point came out as {bottom!r}")
    x = _blended(chances, wanted, inner, bottom.x)
    value = sum((c * share for c, share in zip(linear.cost, x, strict=True)), _ZERO)
    return Assured(status="solved", x=x, value=value, least=bottom.value)


def _edge(images: Sequence[Image], wanted: float, inside: Floats, outside: Floats) -> Floats:
    """The last point on the way from inside to outside at which all chances hold, in floats."""
    way = outside - inside
    return inside + _last(lambda t: _spare(images, inside + t * way, wanted) >= 0) * way


def _cutting(image: Image, x: Floats, outside: Floats, wanted: float) -> Vector | None:
    """The tangent at x if it cuts off ``outside``."""
    cut = tangent(image, np.maximum(x, 0.0), wanted)
    if cut is None:
        return None
    terms = np.array([float(value) for value in cut])
    return cut if float(terms @ outside) > 1e-14 * float(np.abs(terms).max()) else None


def _last(holds: Callable[[float], bool]) -> float:
    """The greatest t in [0, 1] (to 2⁻⁴⁰) up to which a claim holds that holds at 0."""
    if holds(1.0):
        return 1.0
    low, high = 0.0, 1.0
    for _ in range(40):
        middle = (low + high) / 2
        low, high = (middle, high) if holds(middle) else (low, middle)
    return low


def _blended(chances: Sequence[Chance], wanted: float, inner: Vector, outer: Vector) -> Vector:
    """The point nearest to ``outer`` on the way from ``inner`` at which all chances hold exactly."""

    def at(t: float) -> Vector:
        part = Fraction(t)
        return tuple(a + part * (b - a) for a, b in zip(inner, outer, strict=True))

    return at(_last(lambda t: _all_hold(chances, at(t), wanted)))
