"""The dual simplex in lockstep: one chunk of programs, all pivoting side by side.

Each program keeps its own inverse (m × m) of its basis; with shared rows the priced rows of all
programs come from one matrix product.  Every column is boxed (rows get the bounds that their columns
imply), so each basis can be made dual feasible by resting columns at the right bound, and there is no
first phase: the dual simplex runs from the best single column to the optimum, or to a row that no
column can mend, which is the proof that the program is infeasible.

Methods: dual simplex for bounded variables (Lemke 1954; Koberstein 2005, chapters 3 and 6), exact
steepest-edge weights (Forrest and Goldfarb 1992), which the explicit inverse gives for nothing,
costs perturbed against cycling and put right at the end.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from generator.geometry.batched import (
    basis_columns,
    fractions_of_gold,
    inverses,
    polished,
    rows_times,
    times,
    times_columns,
)
from generator.geometry.stack import FAR, Flags, Floats, Indices, Stack

OPTIMAL, INFEASIBLE, UNFINISHED = 0, 1, 2

#: A bound counts as broken beyond this, in units in which rows and shares are about 1: six digits above
#: rounding, so that the solver doesn't chase noise; what lies nearer is decided exactly, elsewhere.
_BROKEN = 1e-10
#: Pivots below this are noise of an inverse of about 10 rows scaled to 1.
_PIVOT = 1e-9
#: Costs are raised by one to two times this, against cycling; the end is checked with the true costs.
_PERTURB = 1e-8
#: A reduced cost may be wrong by this at the end; whether the basis is best is decided elsewhere.
_DUAL = 1e-9
#: Rounds of "put the true costs back and go on" before a program is left unfinished.
_ROUNDS = 4


@dataclass(frozen=True, slots=True)
class Start:
    """Where to begin: ``basic`` (K, m) sorted or not, ``at_upper`` (K, n + m), as in :class:`Solved`.

    ``inverse`` (K, m, m) saves the work of inverting, where the rows are the same as those it came from.
    """

    basic: Indices
    at_upper: Flags
    inverse: Floats | None = None

    def some(self, which: Indices) -> Start:
        """The starts of ``which``, in that order."""
        inverse = None if self.inverse is None else self.inverse[which]
        return Start(self.basic[which], self.at_upper[which], inverse)


@dataclass(frozen=True, slots=True, kw_only=True)
class Solved:
    """What the floats say of K programs with m rows and n columns; columns n…n+m−1 are the row slacks.

    ``status`` (K,) is OPTIMAL, INFEASIBLE or UNFINISHED; ``x`` (K, n) and ``value`` (K,) are NaN unless
    optimal; ``multipliers`` (K, m) have the signs of ``program`` (an optimum's, or the infeasibility's
    proof); ``basic`` (K, m) and ``at_upper`` (K, n + m) name the ending basis, ``inverse`` (K, m, m) is
    the inverse of its columns in the scaled program, ``iterations`` (K,) counts pivots.  ``blocked``
    (K,) is the basic column or slack whose bounds can't be kept where infeasible, else −1.
    """

    status: NDArray[np.int8]
    x: Floats
    value: Floats
    multipliers: Floats
    basic: Indices
    at_upper: Flags
    inverse: Floats
    iterations: Indices
    blocked: Indices

    @property
    def start(self) -> Start:
        """The ending basis, to begin a neighbouring question from."""
        return Start(self.basic, self.at_upper)


@dataclass(slots=True)
class _Work:
    """The programs still at work (k of them, N = n + m columns with the slacks).

    ``matrix`` is [rows | −1], (m, N) or (k, m, N).  ``side`` (k, N) is +1 for a column at its low bound, −1 at its
    high, 0 for basic or fixed ones; ``gap`` (k, N) = side × reduced cost ≥ 0, infinite where side is 0.
    ``columns`` (4, k, N) holds low, high, side, gap; ``basics`` (3, k, m) the basic values and their bounds: few
    arrays, since dropping a finished program copies each of them.
    """

    ids: Indices
    matrix: Floats
    columns: Floats
    basics: Floats
    basic: Indices
    inverse: Floats

    def keep(self, which: Flags) -> None:
        """Drop the programs that are done."""
        rows = np.flatnonzero(which)
        self.ids, self.basic = self.ids.take(rows), self.basic.take(rows, axis=0)
        self.columns = self.columns.take(rows, axis=1)
        self.basics = self.basics.take(rows, axis=1)
        self.inverse = self.inverse.take(rows, axis=0)
        if self.matrix.ndim == 3:
            self.matrix = self.matrix.take(rows, axis=0)


@dataclass(slots=True)
class _Ends:
    """Where finished programs are written; the index is the program's place in the chunk."""

    status: NDArray[np.int8]
    basic: Indices
    side: Floats
    inverse: Floats
    x_basic: Floats
    ray: Floats
    iterations: Indices
    blocked: Indices


def solve_chunk(stack: Stack, start: Start | None) -> Solved:
    """Solve programs whose rows, bounds and costs are about 1, from ``start`` where given."""
    count, (m, n) = stack.count, stack.shape
    ends = _Ends(
        status=np.full(count, UNFINISHED, dtype=np.int8),
        basic=np.zeros((count, m), dtype=np.int64),
        side=np.zeros((count, n + m)),
        inverse=np.zeros((count, m, m)),
        x_basic=np.zeros((count, m)),
        ray=np.zeros((count, m)),
        iterations=np.zeros(count, dtype=np.int64),
        blocked=np.full(count, -1, dtype=np.int64),
    )
    full = boxed(stack)
    work = _begin(stack, full, start)
    crossed = np.asarray((full.low > full.high).any(axis=1), dtype=np.bool_)
    if crossed.any():
        ends.status[work.ids[crossed]] = INFEASIBLE
        ends.basic[work.ids[crossed]] = work.basic[crossed]
        work.keep(~crossed)
    for _ in range(_ROUNDS):
        _pivot_all(work, ends)
        work = _check_ends(full, ends)
        if not work.ids.size:
            break
    ends.status[work.ids] = UNFINISHED
    return _read_out(stack, full, ends)


@dataclass(frozen=True, slots=True)
class _Box:
    """The whole chunk's matrix, finite bounds and costs, columns and slacks together."""

    matrix: Floats
    low: Floats
    high: Floats
    cost: Floats


def boxed(stack: Stack) -> _Box:
    """Columns and slacks together, every infinite bound replaced by one that can't be reached."""
    m = stack.shape[0]
    eye = np.broadcast_to(-np.eye(m), (*stack.rows.shape[:-2], m, m))
    lower, upper = np.maximum(stack.lower, -FAR), np.minimum(stack.upper, FAR)
    least, most = _activity(stack.rows, lower, upper)
    low = np.concatenate([lower, np.maximum(stack.row_low, least)], axis=1)
    high = np.concatenate([upper, np.minimum(stack.row_high, most)], axis=1)
    _mind_crossing(stack, low, high)
    return _Box(
        matrix=np.concatenate([stack.rows, eye], axis=-1),
        low=low,
        high=high,
        cost=np.concatenate([stack.cost, np.zeros((stack.count, m))], axis=1),
    )


def _begin(stack: Stack, box: _Box, start: Start | None) -> _Work:
    """All programs at a dual feasible basis: the given one, or all slacks but for the best single column."""
    ids = np.arange(stack.count)
    if start is None:
        basic, inverse = _first_basis(stack, box.matrix)
        return _placed(box, ids, basic, inverse, np.ones(box.low.shape), _PERTURB)
    basic = start.basic.copy()
    inverse = start.inverse if start.inverse is not None else inverses(basis_columns(box.matrix, basic))
    lost = np.asarray(~np.isfinite(inverse).all(axis=(1, 2)), dtype=np.bool_)
    if lost.any():
        cold = _first_basis(stack.some(lost), box.matrix if stack.is_shared else box.matrix[lost])
        basic[lost], inverse[lost] = cold
    return _placed(box, ids, basic, inverse, np.where(start.at_upper, -1.0, 1.0), _PERTURB)


def _activity(rows: Floats, lower: Floats, upper: Floats) -> tuple[Floats, Floats]:
    """Bounds just beyond what each row can reach within the columns' bounds, (K, m) each."""
    up, down = np.maximum(rows, 0.0), np.minimum(rows, 0.0)
    least = rows_times(up, lower) + rows_times(down, upper)
    most = rows_times(up, upper) + rows_times(down, lower)
    return least - 1.0 - 1e-6 * np.abs(least), most + 1.0 + 1e-6 * np.abs(most)


def _mind_crossing(stack: Stack, low: Floats, high: Floats) -> None:
    """Where a row's bound lies outside what the row can reach, let the box follow: the dual simplex finds it."""
    n = stack.shape[1]
    tops, bottoms = high[:, n:], low[:, n:]
    over = (bottoms > tops) & (stack.row_low <= stack.row_high)
    if over.any():
        needs_more = over & (stack.row_low >= bottoms)
        tops[needs_more] = np.minimum(stack.row_high, np.maximum(tops, bottoms) + 1.0)[needs_more]
        needs_less = over & ~needs_more
        bottoms[needs_less] = np.maximum(stack.row_low, np.minimum(tops, bottoms) - 1.0)[needs_less]


def _first_basis(stack: Stack, matrix: Floats) -> tuple[Indices, Floats]:
    """All slacks, save that the row of shares (an equality of equal entries), if any, holds the best column."""
    count, (m, n) = stack.count, stack.shape
    basic = np.broadcast_to(np.arange(n, n + m), (count, m)).copy()
    inverse = np.broadcast_to(-np.eye(m), (count, m, m)).copy()
    if not m or not n:
        return basic, inverse
    level = (stack.rows > 0).all(axis=-1) & (stack.rows == stack.rows[..., :1]).all(axis=-1)
    holds = level & (stack.row_low == stack.row_high)
    each, row = np.flatnonzero(holds.any(axis=1)), holds.argmax(axis=1)
    row = row[each]
    best = np.where(stack.upper > stack.lower, stack.cost, np.inf)[each].argmin(axis=1)
    column = matrix.T[best] if matrix.ndim == 2 else matrix[each, :, best]
    pivot = column[np.arange(each.size), row]
    basic[each, row] = best
    inverse[each, :, row] = column / pivot[:, None]
    inverse[each, row, row] = 1.0 / pivot
    return basic, inverse


def _placed(box: _Box, ids: Indices, basic: Indices, inverse: Floats, side: Floats, perturb: float) -> _Work:
    """Programs ``ids`` at the given bases, each non-basic column at the bound that its reduced cost asks for."""
    matrix = box.matrix if box.matrix.ndim == 2 else box.matrix[ids]
    low, high, cost = box.low[ids], box.high[ids], box.cost[ids]
    multipliers = np.matmul(np.take_along_axis(cost, basic, axis=1)[:, None, :], inverse)[:, 0]
    reduced = cost - times_columns(multipliers, matrix)
    # a zero reduced cost stays where it is
    side = np.where(reduced > _DUAL, 1.0, np.where(reduced < -_DUAL, -1.0, side))
    side[low == high] = 0.0
    np.put_along_axis(side, basic, 0.0, axis=1)
    gap = np.where(side == 0.0, np.inf, np.maximum(side * reduced, 0.0))
    if perturb:
        gap += perturb * (1.0 + fractions_of_gold(gap.shape[1]))
    x = np.where(side < 0.0, high, low)
    np.put_along_axis(x, basic, 0.0, axis=1)
    x_basic = -times(inverse, rows_times(matrix, x))
    bounds = np.take_along_axis(low, basic, axis=1), np.take_along_axis(high, basic, axis=1)
    return _Work(
        ids=ids,
        matrix=matrix,
        columns=np.stack([low, high, side, gap]),
        basics=np.stack([x_basic, *bounds]),
        basic=basic,
        inverse=inverse,
    )


def _pivot_all(work: _Work, ends: _Ends) -> None:
    """Dual simplex steps until every program is done (written to ``ends``) or out of steps."""
    m, total = work.basic.shape[1], work.columns.shape[2]
    limit = 50 + 10 * (m + total)
    for step in range(limit):
        row, short = _leaving(work)
        done = short <= _BROKEN
        if done.any():
            _write(work, ends, done, OPTIMAL)
            work.keep(~done)
            row, short = row[~done], short[~done]
        if not work.ids.size:
            return
        pivot, rises = _entering(work, row)
        stuck = pivot.column < 0
        if stuck.any():
            ends.ray[work.ids[stuck]] = pivot.ray[stuck]
            ends.blocked[work.ids[stuck]] = work.basic[stuck, row[stuck]]
            _write(work, ends, stuck, INFEASIBLE)
            work.keep(~stuck)
            pivot, row, rises = pivot.some(~stuck), row[~stuck], rises[~stuck]
            if not work.ids.size:
                return
        _step(work, row, rises, pivot)
        ends.iterations[work.ids] += 1
        if step % 64 == 63:
            _refresh(work)
    _write(work, ends, np.ones(work.ids.size, dtype=np.bool_), UNFINISHED)


@dataclass(frozen=True, slots=True)
class _Pivot:
    """The column that enters (−1: none can), the priced row over all columns, and the multipliers behind it."""

    column: Indices
    priced: Floats
    ray: Floats

    def some(self, which: Flags) -> _Pivot:
        return _Pivot(self.column[which], self.priced[which], self.ray[which])


def _leaving(work: _Work) -> tuple[Indices, Floats]:
    """The row whose basic column breaks its bounds most (steepest edge), and by how much; 0 where none does."""
    x, low, high = work.basics
    short = np.maximum(low - x, x - high)
    if not short.shape[1]:
        return np.zeros(short.shape[0], dtype=np.int64), np.zeros(short.shape[0])
    np.maximum(short, 0.0, out=short)
    score = short * short
    score /= np.einsum("kij,kij->ki", work.inverse, work.inverse)
    # rows that tie are told apart by more than rounding, which may differ with the number of programs
    score *= 1.0 + 1e-7 * fractions_of_gold(score.shape[1])
    row = score.argmax(axis=1)
    return row, short[np.arange(row.size), row]


def _entering(work: _Work, row: Indices) -> tuple[_Pivot, Flags]:
    """Ratio test: the first column whose reduced cost would turn; and whether the leaving one must rise."""
    count, m = work.basic.shape
    place = np.arange(count) * m + row
    rises = work.basics[0].take(place) < work.basics[1].take(place)
    ray = work.inverse.reshape(count * m, m).take(place, axis=0)
    ray *= np.where(rises, -1.0, 1.0)[:, None]
    priced = times_columns(ray, work.matrix)
    priced *= work.columns[2]
    ratio = np.full(priced.shape, np.inf)
    np.divide(work.columns[3], priced, out=ratio, where=priced > _PIVOT)
    column = ratio.argmin(axis=1)
    least = ratio.take(np.arange(count) * priced.shape[1] + column)
    return _Pivot(np.where(np.isfinite(least), column, -1), priced, ray), rises


def _step(work: _Work, row: Indices, rises: Flags, pivot: _Pivot) -> None:
    """Exchange the leaving and the entering column; all arrays of ``work`` follow."""
    (count, m), column = work.basic.shape, pivot.column
    each, place = np.arange(count), np.arange(count) * m + row
    low, high, side, gap = work.columns
    x, low_basic, high_basic = work.basics
    spot = each * low.shape[1] + column
    length = gap.take(spot) / pivot.priced.take(spot)
    # a basic or fixed column's gap is infinite and its priced entry 0 (side 0)
    gap -= length[:, None] * pivot.priced
    np.maximum(gap, 0.0, out=gap)
    entering = work.matrix.T.take(column, axis=0) if work.matrix.ndim == 2 else work.matrix[each, :, column]
    direction = times(work.inverse, entering)
    bound = np.where(rises, low_basic.take(place), high_basic.take(place))
    pivots = direction.take(place)
    move = (x.take(place) - bound) / pivots
    new_low, new_high = low.take(spot), high.take(spot)
    x -= move[:, None] * direction
    x.put(place, np.where(side.take(spot) < 0, new_high, new_low) + move)
    old = each * low.shape[1] + work.basic.take(place)
    free = low.take(old) < high.take(old)
    side.put(old, np.where(free, np.where(rises, 1.0, -1.0), 0.0))
    gap.put(old, np.where(free, length, np.inf))
    side.put(spot, 0.0)
    gap.put(spot, np.inf)
    work.basic.put(place, column)
    low_basic.put(place, new_low)
    high_basic.put(place, new_high)
    lines = work.inverse.reshape(count * m, m).take(place, axis=0)
    lines /= pivots[:, None]
    work.inverse -= direction[:, :, None] * lines[:, None, :]
    work.inverse[each, row] = lines


def _refresh(work: _Work) -> None:
    """One Newton step on each inverse (Schulz 1933) against drift, and the basic values anew."""
    work.inverse = polished(work.inverse, basis_columns(work.matrix, work.basic))
    low, high, side, _ = work.columns
    x = np.where(side < 0.0, high, low)
    np.put_along_axis(x, work.basic, 0.0, axis=1)
    work.basics[0] = -times(work.inverse, rows_times(work.matrix, x))


def _write(work: _Work, ends: _Ends, which: Flags, status: int) -> None:
    ids = work.ids[which]
    ends.status[ids] = status
    ends.basic[ids] = work.basic[which]
    ends.side[ids] = work.columns[2, which]
    ends.inverse[ids] = work.inverse[which]
    ends.x_basic[ids] = work.basics[0, which]


def _check_ends(box: _Box, ends: _Ends) -> _Work:
    """The programs that are not yet at rest with true costs and fresh inverses, ready to go on."""
    ids = np.flatnonzero(ends.status == OPTIMAL)
    matrix = box.matrix if box.matrix.ndim == 2 else box.matrix[ids]
    inverse = polished(ends.inverse[ids], basis_columns(matrix, ends.basic[ids]))
    work = _placed(box, ids, ends.basic[ids], inverse, ends.side[ids], 0.0)
    _write(work, ends, np.ones(ids.size, dtype=np.bool_), OPTIMAL)
    x, low, high = work.basics
    short = np.maximum(low - x, x - high)
    work.keep(short.max(axis=1, initial=0.0) > 8 * _BROKEN)
    return work


def _read_out(stack: Stack, box: _Box, ends: _Ends) -> Solved:
    """The public record of a chunk."""
    n = stack.shape[1]
    optimal = ends.status == OPTIMAL
    x = np.where(ends.side < 0.0, box.high, box.low)
    np.put_along_axis(x, ends.basic, ends.x_basic, axis=1)
    on_far = (optimal[:, None] & (np.abs(x[:, :n]) >= FAR) & ~_has_bound(stack, x[:, :n])).any(axis=1)
    ends.status[on_far] = UNFINISHED
    optimal &= ~on_far
    basic_cost = np.take_along_axis(box.cost, ends.basic, axis=1)
    multipliers = np.matmul(basic_cost[:, None, :], ends.inverse)[:, 0]
    multipliers = np.where(optimal[:, None], multipliers, ends.ray)
    x = np.where(optimal[:, None], x[:, :n], np.nan)
    return Solved(
        status=ends.status,
        x=x,
        value=np.einsum("kn,kn->k", stack.cost, x),
        multipliers=multipliers,
        basic=ends.basic,
        at_upper=ends.side < 0.0,
        inverse=ends.inverse,
        iterations=ends.iterations,
        blocked=ends.blocked,
    )


def _has_bound(stack: Stack, x: Floats) -> Flags:
    """Whether a column's own bound on the side where x lies is finite."""
    return np.asarray(np.where(x > 0, np.isfinite(stack.upper), np.isfinite(stack.lower)), dtype=np.bool_)
