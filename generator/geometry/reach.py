"""What windows over a set of points can be reached: many windows asked at once.

A :class:`Window` asks for shares x of n points: low ≤ rows·x ≤ high, lower ≤ x ≤ upper, Σx = 1.  Each
function here takes K windows over equally many points and answers all in one stack.  Windows that
share their ``rows`` (the same object, or equal) cost least.

Every verdict is proven: by floats with an error bound, or exactly.  Numbers are floats; ``answer``
writes the exact answer and proof of one window.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from generator.geometry.program import Answer, Bound, Infeasible, Optimum, Program, Vector
from generator.geometry.rigour import Certified, solve_certified
from generator.geometry.settle import Tally, answer_many, publish, settle
from generator.geometry.simplex import OPTIMAL
from generator.geometry.stack import Flags, Floats, Stack, differ, doubtful, float_table, stack_of

_ZERO, _ONE = Fraction(0), Fraction(1)


@dataclass(frozen=True, slots=True, kw_only=True)
class Window:
    """The shares asked for: d ``rows`` of n entries with d bounds ``low`` and ``high``, and n share bounds each.

    The row Σx = ``total`` is added by :meth:`program`, as the last one.  Share bounds of None are
    0 and ``total``.
    """

    rows: tuple[Vector, ...]
    low: tuple[Bound, ...]
    high: tuple[Bound, ...]
    lower: Vector | None = None
    upper: Vector | None = None
    total: Fraction = _ONE

    def program(self, cost: Vector) -> Program:
        """The cheapest shares as a program of d + 1 rows and n columns."""
        n = len(cost)
        return Program(
            rows=(*self.rows, (_ONE,) * n),
            row_low=(*self.low, self.total),
            row_high=(*self.high, self.total),
            lower=self.lower or (_ZERO,) * n,
            upper=self.upper or (self.total,) * n,
            cost=cost,
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Reached:
    """The answers to K programs with n columns, each verdict proven.

    ``is_feasible`` (K,); ``value`` (K,) and ``x`` (K, n) are NaN where infeasible; the true optimum lies
    between ``least`` and ``most`` (K,).  ``settled`` holds the exact answers that proving took.
    """

    is_feasible: Flags
    value: Floats
    x: Floats
    least: Floats
    most: Floats
    certified: Certified
    program_of: Callable[[int], Program]
    settled: dict[int, Answer]
    tally: Tally

    def answer(self, k: int) -> Answer:
        """The exact answer and proof of program k."""
        return self.answers([k])[0]

    def answers(self, which: Sequence[int] | None = None) -> list[Answer]:
        """The exact answers and proofs of some programs, or of all; the same whatever other programs were asked."""
        asked = range(self.value.size) if which is None else which
        known = dict(self.settled)
        for k in asked:
            # a proven best basis is the only one; elsewhere the stack's end may depend on its company
            if k not in known and self.certified.best[k]:
                known[k] = publish(self.certified.solved, k, self.program_of(k))[0]
        left = [k for k in asked if k not in known]
        known.update(zip(left, answer_many([self.program_of(k) for k in left])[0], strict=True))
        return [known[k] for k in asked]


def reach(programs: Sequence[Program], *, ask_best: bool = True) -> Reached:
    """Answer programs of one shape side by side.

    ``ask_best`` false: the verdict is proven, and the value known within ``least`` and ``most``, but
    where several bases tie none is proven best.  Raises ValueError where the shapes differ, and
    where a program has no least value.
    """
    stack = stack_of(programs)
    return _reached(stack, lambda k: programs[k], doubtful(programs, stack), ask_best)


def _reached(stack: Stack, program_of: Callable[[int], Program], unsure: Flags, ask_best: bool) -> Reached:
    """Solve, certify, settle exactly what is left, and lay the answers out as arrays."""
    certified = solve_certified(stack)
    settled, tally = settle(certified, program_of, ask_best=ask_best, doubtful=unsure)
    solved = certified.solved
    is_feasible = solved.status == OPTIMAL
    value, x = solved.value.copy(), solved.x.copy()
    least, most = certified.least.copy(), certified.most.copy()
    for k, answer in settled.items():
        is_feasible[k] = isinstance(answer, Optimum)
        if isinstance(answer, Optimum):
            value[k] = float(answer.value)
            x[k] = [float(share) for share in answer.x]
            least[k], most[k] = np.nextafter(value[k], -np.inf), np.nextafter(value[k], np.inf)
        elif isinstance(answer, Infeasible):
            value[k], x[k], least[k], most[k] = np.nan, np.nan, -np.inf, np.inf
        else:
            raise ValueError(f"program {k} has no least value")
    return Reached(
        is_feasible=is_feasible,
        value=value,
        x=x,
        least=least,
        most=most,
        certified=certified,
        program_of=program_of,
        settled=settled,
        tally=tally,
    )


def cheapest_many(windows: Sequence[Window], cost: Vector | Sequence[Vector], *, ask_best: bool = True) -> Reached:
    """The cheapest shares in each of K windows; ``cost`` is one vector for all, or K of them."""
    costs = _each(cost, len(windows))
    stack, unsure = _stacked(windows, costs)
    return _reached(stack, lambda k: windows[k].program(costs[k]), unsure, ask_best)


def without_many(windows: Sequence[Window], cost: Vector | Sequence[Vector], points: Sequence[int]) -> Reached:
    """The cheapest shares in window k without point ``points[k]``: its share is held at 0.

    A window whose share bound forces the point in becomes infeasible.
    """
    return cheapest_many([without(window, point) for window, point in zip(windows, points, strict=True)], cost)


def without(window: Window, point: int) -> Window:
    """The window with the share of one point at most 0."""
    upper = window.upper or (window.total,) * len(window.rows[0])
    return replace(window, upper=(*upper[:point], _ZERO, *upper[point + 1 :]))


@dataclass(frozen=True, slots=True, kw_only=True)
class Ranges:
    """Attainable ranges of d rows in K windows, each with its own bounds aside and all other bounds kept.

    ``exists`` (K, d) is False where the other bounds alone block (proven); ``least`` and ``greatest``
    (K, d) are NaN there, else right to within ``error`` (K, d), proven as well.
    """

    exists: Flags
    least: Floats
    greatest: Floats
    error: Floats
    tally: Tally


def ranges_many(windows: Sequence[Window]) -> Ranges:
    """The attainable range of every row in every window, in two stacks: all least ends, then all greatest."""
    count, d = len(windows), len(windows[0].rows)
    nothing = (_ZERO,) * len(windows[0].rows[0])
    base, unsure = _stacked(windows, [nothing] * count)
    stack = _each_row_free(base, d)
    places = [(k, row) for k in range(count) for row in range(d)]

    def least_of(k: int) -> Program:
        window, row = windows[places[k][0]], places[k][1]
        return free(window, row).program(window.rows[row])

    bottom = _reached(stack, least_of, np.repeat(unsure, d), ask_best=False)
    there = np.flatnonzero(bottom.is_feasible)
    greatest, error = np.full(count * d, np.nan), np.where(bottom.is_feasible, bottom.most - bottom.least, np.nan)
    tally = bottom.tally
    if there.size:

        def greatest_of(k: int) -> Program:
            window, row = windows[places[there[k]][0]], places[there[k]][1]
            return free(window, row).program(tuple(-value for value in window.rows[row]))

        upside = replace(stack.some(there), cost=-stack.cost[there])
        top = _reached(upside, greatest_of, np.repeat(unsure, d)[there], ask_best=False)
        greatest[there] = -top.value
        error[there] = np.maximum(error[there], top.most - top.least)
        tally = tally + top.tally
    return Ranges(
        exists=bottom.is_feasible.reshape(count, d),
        least=bottom.value.reshape(count, d),
        greatest=greatest.reshape(count, d),
        error=error.reshape(count, d),
        tally=tally,
    )


def _each_row_free(stack: Stack, d: int) -> Stack:
    """K·d programs: of each program d copies, copy k minimising row k with that row's own bounds gone."""
    each, row = np.arange(stack.count * d), np.tile(np.arange(d), stack.count)
    low, high = np.repeat(stack.row_low, d, axis=0), np.repeat(stack.row_high, d, axis=0)
    low[each, row], high[each, row] = -np.inf, np.inf
    rows = stack.rows if stack.is_shared else np.repeat(stack.rows, d, axis=0)
    return Stack(
        rows=rows,
        row_low=low,
        row_high=high,
        lower=np.repeat(stack.lower, d, axis=0),
        upper=np.repeat(stack.upper, d, axis=0),
        cost=rows[row] if stack.is_shared else rows[each, row],
    )


def free(window: Window, row: int) -> Window:
    """The window without the bounds of one row."""
    low = (*window.low[:row], None, *window.low[row + 1 :])
    high = (*window.high[:row], None, *window.high[row + 1 :])
    return replace(window, low=low, high=high)


def _each(cost: Vector | Sequence[Vector], count: int) -> Sequence[Vector]:
    """One cost vector for each of ``count`` windows."""
    if cost and isinstance(cost[0], Fraction):
        return [cost] * count  # type: ignore[list-item]
    return cost  # type: ignore[return-value]


def _stacked(windows: Sequence[Window], costs: Sequence[Vector]) -> tuple[Stack, Flags]:
    """The windows as a stack, and where floats can't tell equal bounds from unequal ones (K,)."""
    first = windows[0]
    d, n = len(first.rows), len(first.rows[0])
    none, full = (_ZERO,) * n, (first.total,) * n
    lowers = [window.lower or none for window in windows]
    uppers = [window.upper or (full if window.total is first.total else (window.total,) * n) for window in windows]
    lows, highs = [window.low for window in windows], [window.high for window in windows]
    low, high = float_table(lows, d, -np.inf), float_table(highs, d, np.inf)
    lower, upper = float_table(lowers, n), float_table(uppers, n)
    total = float_table([(window.total,) for window in windows], 1)
    shared = all(window.rows is first.rows or window.rows == first.rows for window in windows)
    matrices = [float_table((*window.rows, (_ONE,) * n), n) for window in (windows[:1] if shared else windows)]
    unsure = differ(lows, highs, low == high) | differ(lowers, uppers, lower == upper)
    stack = Stack(
        rows=matrices[0] if shared else np.array(matrices),
        row_low=np.concatenate([low, total], axis=1),
        row_high=np.concatenate([high, total], axis=1),
        lower=lower,
        upper=upper,
        cost=float_table(costs, n),
    )
    return stack, unsure
