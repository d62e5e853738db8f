"""Least cost, and greatest probability, where rows must hold with a given probability; proven on both sides.

Method: supporting hyperplanes at the boundary between an interior point and the relaxation's optimum
(Veinott 1967; Kelley 1960 where there is no interior point yet).  Every tangent is an exact row that is
proven to hold for all allowed x ≥ 0 (its coefficients are rounded the safe way), so a lower bound of a
relaxation, proven in floats, proves the low side; the point returned is exactly feasible: the high side.
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
from generator.geometry.nearby import feasible_near
from generator.geometry.program import Infeasible, Optimum, Program, Unbounded, Vector
from generator.geometry.rigour import solve_certified
from generator.geometry.simplex import INFEASIBLE, OPTIMAL, Start, solve
from generator.geometry.stack import Floats, make_stack, stack_of

_ZERO, _ONE = Fraction(0), Fraction(1)
#: Rounds of tangents before the gap that is left is reported as it stands.
_ROUNDS = 200
#: An interior point may use this much less deviation than allowed: more is not looked for.
_AMPLE = 0.2
#: Rounds that are spent on a more interior point than the first one found.
_PATIENCE = 5
#: Tangents kept at once; when more come, those that don't bind are dropped.
_MOST_TANGENTS = 60
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
    inner = _Search(linear, chances).inside(wanted, patience=_PATIENCE)
    if not inner:
        return Assured(status="undecided" if inner is None else "impossible")
    return _between(linear, chances, wanted, inner, gap)


def surest(program: Program, chances: Sequence[Chance], precision: float = 1e-6) -> Surest | None:
    """The greatest common probability, to ``precision`` in quantiles (standard deviations).

    Each point found raises the level that the next must pass; tangents of a lower level hold at a
    higher one, so none is lost.  None where not even ½ can be had.  ``at_most`` is proven (1 where it is
    not, or where more than 1 − 10⁻⁹ can be had).
    """
    linear = replace(
        _with_rows(program, [side for chance in chances for side in chance.sides]), cost=(_ZERO,) * len(program.cost)
    )
    first = decide(linear)
    if not isinstance(first, Optimum):
        return None
    best, search = first.x, _Search(linear, chances)
    at_most, step = 1.0, precision
    while (level := _common(chances, best)) < _SURE and step < _SURE:
        wanted = float(ndtr(max(level, 0.0) + step))
        found = search.inside(wanted, patience=0)
        if found:
            best = found
        elif found is None:
            step *= 10  # so near to the top that nothing can be told: a coarser claim can be proven
        else:
            at_most = wanted
            break
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
        self.stack = stack_of([program])
        self.own = len(program.rows)
        self.start: Start | None = None

    def add(self, rows: Sequence[Vector]) -> None:
        """Further rows; their slacks join the basis.  Too many: those that don't bind now are dropped first."""
        more = len(rows)
        if self.stack.shape[0] + more > self.own + _MOST_TANGENTS:
            self._drop_loose()
        m, n = self.stack.shape
        self._set(
            np.vstack([self.stack.rows, [[float(value) for value in row] for row in rows]]),
            np.append(self.stack.row_low, [[-np.inf] * more], axis=1),
            np.append(self.stack.row_high, [[0.0] * more], axis=1),
        )
        if self.start is not None:
            self.start = Start(
                np.append(self.start.basic, [np.arange(n + m, n + m + more)], axis=1),
                np.append(self.start.at_upper, [[False] * more], axis=1),
            )

    def _drop_loose(self) -> None:
        m, n = self.stack.shape
        if self.start is None:
            return
        loose = set(self.start.basic[0].tolist())
        kept = [k for k in range(m) if k < self.own or n + k not in loose]
        self._set(self.stack.rows[kept], self.stack.row_low[:, kept], self.stack.row_high[:, kept])
        self.start = None

    def _set(self, rows: Floats, low: Floats, high: Floats) -> None:
        stack = self.stack
        self.stack = make_stack(rows, low, high, lower=stack.lower, upper=stack.upper, cost=stack.cost)

    def solve(self) -> Floats | None:
        """The optimum in floats; None where they find none."""
        solved = solve(self.stack, self.start)
        if solved.status[0] != OPTIMAL:
            return None
        self.start = Start(solved.basic, solved.at_upper)
        return np.asarray(solved.x[0], dtype=np.float64)

    def least(self) -> float:
        """A proven lower bound of the value: +inf where there is provably no feasible point."""
        certified = solve_certified(self.stack, self.start)
        if certified.solved.status[0] == INFEASIBLE and certified.decided[0]:
            return math.inf
        return float(certified.least[0])


class _Search:
    """For points at which all chances hold: greatest t with every tangent + t·size ≤ 0, −1 ≤ t ≤ 1.

    Size is about the tangent's largest term.  Tangents stay for the next search, at no lower probability.
    """

    def __init__(self, linear: Program, chances: Sequence[Chance]) -> None:
        sizes = [max(map(abs, side)) or _ONE for chance in chances for side in chance.sides]
        rows = len(linear.rows) - len(sizes)
        self.linear, self.chances = linear, chances
        self.images = [Image.of(chance) for chance in chances]
        self.relaxation = _Relaxation(
            replace(
                linear,
                rows=(
                    *((*row, _ZERO) for row in linear.rows[:rows]),
                    *((*row, size) for row, size in zip(linear.rows[rows:], sizes, strict=True)),
                ),
                lower=(*linear.lower, -_ONE),
                upper=(*linear.upper, _ONE),
                cost=(*(_ZERO,) * len(linear.cost), -_ONE),
            )
        )

    def inside(self, wanted: float, patience: int) -> Vector | None:
        """An exact point where all chances hold; empty where there is provably none; None where none is found.

        After the first one found, ``patience`` more rounds look for one with more to spare.
        """
        best, most, rounds = None, 0.0, 0
        for _ in range(_ROUNDS):
            x = self.relaxation.solve()
            if x is None or x[-1] < 1e-12:
                return best or (_IMPOSSIBLE if self.relaxation.least() > 0 else None)
            shares = np.maximum(x[:-1], 0.0)
            spare = _spare(self.images, shares, wanted)
            if spare > most:
                exact = feasible_near(self.linear, shares)
                if exact is not None and _all_hold(self.chances, exact, wanted):
                    best, most = exact, spare
            rounds += best is not None
            if best is not None and (rounds > patience or most > _AMPLE):
                return best
            cuts = [cut for image in self.images if (cut := tangent(image, shares, wanted)) is not None]
            self.relaxation.add([(*cut, _size(cut)) for cut in cuts])
        return best


def _size(terms: Vector) -> Fraction:
    """About the largest term, as a power of two."""
    return Fraction(2) ** math.frexp(float(max(map(abs, terms))) or 1.0)[1]


def _between(linear: Program, chances: Sequence[Chance], wanted: float, inner: Vector, gap: float) -> Assured:
    """Tangents where the way from the interior point to the relaxation's optimum leaves the allowed set."""
    relaxation, images = _Relaxation(linear), [Image.of(chance) for chance in chances]
    inside = np.array([float(value) for value in inner])
    cost = np.array([float(value) for value in linear.cost])
    tolerance = gap * float(np.abs(cost).max(initial=0.0))
    edge = inside
    for _ in range(_ROUNDS):
        x = relaxation.solve()
        if x is None:
            break
        edge = _edge(images, wanted, inside, x)
        if float(cost @ (edge - x)) <= tolerance / 2:
            break
        # No tangent of a row that x meets can cut x off.
        broken = [image for image in images if spare(image, x, wanted) < 0]
        cuts = [cut for image in broken for at in (edge, x) if (cut := _cutting(image, at, x, wanted))]
        if not cuts:
            break
        relaxation.add(cuts)
    least = relaxation.least()
    best = _pulled_in(linear, chances, wanted, inner, edge)
    value = _value(linear, best)
    return Assured(status="solved", x=best, value=value, least=Fraction(least) if math.isfinite(least) else None)


def _pulled_in(linear: Program, chances: Sequence[Chance], wanted: float, inner: Vector, edge: Floats) -> Vector:
    """An exact point at which all chances hold, as near to ``edge`` as rounding lets it be."""
    inside = np.array([float(value) for value in inner])
    for step in 2.0 ** np.arange(-44, 0):
        exact = feasible_near(linear, edge + step * (inside - edge))
        if exact is not None and _all_hold(chances, exact, wanted):
            return exact
    return inner


def _value(program: Program, x: Vector) -> Fraction:
    return sum((c * share for c, share in zip(program.cost, x, strict=True)), _ZERO)


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
