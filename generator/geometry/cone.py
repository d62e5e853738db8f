"""Least cost, and greatest probability, where rows must hold with a given probability; proven on both sides.

Method: supporting hyperplanes at the boundary between an interior point and the relaxation's optimum
(Veinott 1967; Kelley 1960 where there is no interior point yet).  Every tangent is an exact row that is
proven to hold for all allowed x ≥ 0 (its coefficients are rounded the safe way), so a lower bound of a
relaxation, proven in floats, proves the low side; the point returned is exactly feasible: the high side.
Quantiles and Φ are scipy's, widened by 2⁻³⁶ for the proof (see ``chance``).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Literal

import numpy as np
from scipy.special import ndtr, ndtri

from generator.geometry.chance import Chance, Image, Images, holds, probability
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
#: A column or row this near to its bound counts as at it; so does a chance with so little to spare.
_AT_BOUND, _AT_END = 1e-9, 1e-6
#: A way that needs more than this of itself to be sure is not worth going on.
_FAR_IN = 2.0**-28
#: Stands for a proof that no point will do.
_IMPOSSIBLE: Vector = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Assured:
    """The least cost at which all chances hold.

    ``status`` "solved": ``x`` is exactly feasible and costs ``value``, and nothing costs less than
    ``least`` (proven).  "impossible": proven (``least``, ``x`` None).  "undecided": neither a point nor a
    proof within the rounds allowed: the chances can at best just hold.  ``tangents``: rows ≤ 0 met on the way, which
    every x ≥ 0 keeps at which all chances hold.
    """

    status: Literal["solved", "impossible", "undecided"]
    x: Vector | None = None
    value: Fraction | None = None
    least: Fraction | None = None
    tangents: tuple[Vector, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Surest:
    """The greatest probability that all chances can have at once: ``x`` has ``probability`` for each, and
    more than ``at_most`` is impossible.  ``tangents``: rows ≤ 0 that every x ≥ 0 keeps at which all have more than
    ``probability`` by the precision asked for."""

    x: Vector
    probability: float
    at_most: float
    tangents: tuple[Vector, ...] = ()


def assured(
    program: Program, chances: Sequence[Chance], wanted: float, gap: float = 1e-9, plain: Vector | None = None
) -> Assured:
    """The least cost of ``program`` at which every chance holds with probability ``wanted``, ½ ≤ p < 1.

    ``gap``: how far value may lie above ``least``, relative to the largest cost.  ``plain``: the best point of
    the program with all sides met on their means, where the caller has it already.  Raises ValueError for
    columns that may be negative, a p outside its range, and a cost without a least value.
    """
    if not 0.5 <= wanted < 1.0:
        raise ValueError(f"a probability from 0.5 up to, not including, 1 is needed, found {wanted}")
    if any(low is None or low < 0 for low in program.lower):
        raise ValueError("columns must be ≥ 0")
    linear = program.at_most([side for chance in chances for side in chance.sides], _ZERO)
    if plain is None:
        first = decide(linear)
        if isinstance(first, Infeasible):
            return Assured(status="impossible")
        if isinstance(first, Unbounded):
            raise ValueError("the cost has no least value")
        plain = first.x
    if _all_hold(chances, plain, wanted):
        value = _value(linear, plain)
        return Assured(status="solved", x=plain, value=value, least=value)
    search = _Search(linear, chances)
    inner = search.inside(wanted, patience=_PATIENCE)
    if not inner:
        tangents = search.relaxation.further(len(linear.cost))
        return Assured(status="undecided" if inner is None else "impossible", tangents=tangents)
    return _between(linear, chances, wanted, inner, gap)


def surest(program: Program, chances: Sequence[Chance], precision: float = 1e-6) -> Surest | None:
    """The greatest common probability, to ``precision`` in quantiles (standard deviations).

    Each point found raises the level that the next must pass; tangents of a lower level hold at a
    higher one, so none is lost.  None where not even ½ can be had.  ``at_most`` is proven (1 where it is
    not, or where more than 1 − 10⁻⁹ can be had).
    """
    linear = replace(
        program.at_most([side for chance in chances for side in chance.sides], _ZERO), cost=(_ZERO,) * len(program.cost)
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
    return Surest(
        x=best,
        probability=min(probability(chance, best) for chance in chances),
        at_most=at_most,
        tangents=search.relaxation.further(len(linear.cost)),
    )


def _common(chances: Sequence[Chance], x: Vector) -> float:
    """The quantile of the least probability."""
    return min(_SURE, float(ndtri(min(probability(chance, x) for chance in chances))))


def _all_hold(chances: Sequence[Chance], x: Vector, wanted: float) -> bool:
    return all(holds(chance, x, wanted) for chance in chances)


class _Relaxation:
    """A program that grows by rows ≤ 0 and is solved in floats, each time from the basis before."""

    def __init__(self, program: Program) -> None:
        self.stack = stack_of([program])
        self.own = len(program.rows)
        self.start: Start | None = None

    def add(self, rows: Floats) -> None:
        """Further rows; their slacks join the basis.  Too many: those that don't bind now are dropped first."""
        more = len(rows)
        if self.stack.shape[0] + more > self.own + _MOST_TANGENTS:
            self._drop_loose()
        m, n = self.stack.shape
        self._set(
            np.vstack([self.stack.rows, rows]),
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

    def further(self, n: int) -> tuple[Vector, ...]:
        """The rows that were added and bind, their first n terms."""
        m, width = self.stack.shape
        loose = set() if self.start is None else set(self.start.basic[0].tolist())
        return tuple(
            tuple(Fraction(float(term)) for term in self.stack.rows[k, :n])
            for k in range(self.own, m)
            if width + k not in loose
        )

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
        self.images = Images.of([Image.of(chance) for chance in chances])
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
        found: list[Vector] = []
        ampler, most, rounds = None, 0.0, 0
        for _ in range(_ROUNDS):
            x = self.relaxation.solve()
            if x is None or x[-1] < 1e-12:
                if found:
                    break
                return _IMPOSSIBLE if self.relaxation.least() > 0 else None
            shares = np.maximum(x[:-1], 0.0)
            spare = float(self.images.spares(shares, wanted).min(initial=1.0))
            if spare > most and found:
                ampler, most = shares, spare
            elif spare > most:
                found = self._exact(shares, wanted)
                most = spare if found else most
            rounds += bool(found)
            if found and (rounds > patience or most > _AMPLE):
                break
            cuts = _real(self.images.tangents(shares, wanted))
            # the last column's term is about the largest of its row
            self.relaxation.add(np.column_stack([cuts, 2.0 ** np.frexp(np.abs(cuts).max(axis=1))[1]]))
        if ampler is not None:
            found = self._exact(ampler, wanted) or found
        return found[0] if found else None

    def _exact(self, shares: Floats, wanted: float) -> list[Vector]:
        """The exact point near the shares, if all chances hold there."""
        exact = feasible_near(self.linear, shares)
        return [exact] if exact is not None and _all_hold(self.chances, exact, wanted) else []


def _real(cuts: Floats) -> Floats:
    """The tangents that there are."""
    return cuts[~np.isnan(cuts).any(axis=1)]


def _between(linear: Program, chances: Sequence[Chance], wanted: float, inner: Vector, gap: float) -> Assured:
    """Tangents where the way from the interior point to the relaxation's optimum leaves the allowed set."""
    relaxation, images = _Relaxation(linear), Images.of([Image.of(chance) for chance in chances])
    inside = np.array([float(value) for value in inner])
    cost = np.array([float(value) for value in linear.cost])
    tolerance = gap * float(np.abs(cost).max(initial=0.0))
    edge = outside = inside
    for _ in range(_ROUNDS):
        x = relaxation.solve()
        if x is None:
            break
        outside, edge = x, inside + images.last(inside, x, wanted) * (x - inside)
        if float(cost @ (edge - x)) <= tolerance / 2:
            break
        # No tangent of a row that x meets can cut x off.
        broken = images.some(images.spares(x, wanted) < 0)
        cuts = _real(np.vstack([broken.tangents(np.maximum(at, 0.0), wanted) for at in (edge, x)]))
        cuts = cuts[cuts @ x > 1e-14 * np.abs(cuts).max(axis=1, initial=0.0)]
        if not cuts.size:
            break
        relaxation.add(cuts)
    least = relaxation.least()
    best = _pulled_in(linear, chances, images, wanted, outside, (inner, edge))
    value = _value(linear, best)
    return Assured(
        status="solved",
        x=best,
        value=value,
        least=Fraction(least) if math.isfinite(least) else None,
        tangents=relaxation.further(len(linear.cost)),
    )


def _pulled_in(
    linear: Program,
    chances: Sequence[Chance],
    images: Images,
    wanted: float,
    outside: Floats,
    ends: tuple[Vector, Floats],
) -> Vector:
    """An exact point at which all chances hold, as near to the best one as rounding lets it be.

    Where it goes, from the relaxation's optimum ``outside`` with all columns and rows kept that are at a bound;
    else from the last point on the way from the inner point, back to it (``ends``: inner point, last point).
    """
    inner, edge = ends
    inside = np.array([float(value) for value in inner])
    along = _inward(linear, images, wanted, outside)
    ways = [(edge, inside - edge, 1.0)] if along is None else [(outside, along, _FAR_IN), (edge, inside - edge, 1.0)]
    for begin, way, most in ways:
        for step in 2.0 ** np.arange(-44, 0):
            point = begin + step * way
            if step > most or not images.seem_held(point, wanted):
                continue
            exact = feasible_near(linear, point)
            if exact is not None and _all_hold(chances, exact, wanted):
                return exact
    return inner


def _inward(linear: Program, images: Images, wanted: float, begin: Floats) -> Floats | None:
    """A way that makes all chances near their end surer and moves no column or row off its bound."""
    stack = stack_of([linear])
    values = stack.rows @ begin
    size = np.abs(stack.rows) @ np.abs(begin)
    held = stack.rows[np.minimum(abs(values - stack.row_low[0]), abs(stack.row_high[0] - values)) <= _AT_BOUND * size]
    moving = np.minimum(begin - stack.lower[0], stack.upper[0] - begin) > _AT_BOUND
    near = _real(images.some(images.spares(begin, wanted) < _AT_END).tangents(np.maximum(begin, 0.0), wanted))
    rows = np.vstack([held, near])[:, moving]
    rows = rows / np.maximum(np.abs(rows).max(axis=1, initial=0.0, keepdims=True), 1e-300)
    target = np.concatenate([np.zeros(len(held)), -np.ones(len(near))])
    way = np.zeros(begin.size)
    way[moving] = np.linalg.lstsq(rows, target, rcond=None)[0]
    return way if np.abs(rows @ way[moving] - target).max(initial=0.0) < 1e-6 else None


def _value(program: Program, x: Vector) -> Fraction:
    return sum((c * share for c, share in zip(program.cost, x, strict=True)), _ZERO)
