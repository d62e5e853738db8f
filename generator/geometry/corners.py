"""Which of many points are corners of their hull: thousands of points, any dimension, each role proven.

A point is inner if the others can imitate it (a convex combination of them equals it), else a corner.
All points are asked side by side: a first-phase primal simplex in lockstep, in which one matrix product
prices all points against all questions.  Its multipliers are a direction; as soon as the point asked
about lies further in that direction than every other, it is a corner, and the direction is the proof.
(Column pricing as in Dulá and Helgason 1996, *A new procedure for identifying the frame of the convex
hull*, but over all points rather than a growing frame.)  Floats decide with error bounds; points on a
face of the others' hull, which no float can decide, go to exact arithmetic.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from generator.geometry.batched import inverses
from generator.geometry.decide import decide
from generator.geometry.exact import solve_on_basis
from generator.geometry.program import Basis, Optimum, Program, Vector
from generator.geometry.rigour import certify, gamma
from generator.geometry.settle import Tally, search
from generator.geometry.simplex import OPTIMAL, Solved
from generator.geometry.stack import Flags, Floats, Indices, float_table, make_stack, scaled

#: Questions worked on together, so that the prices (questions × points) stay in the cache.
_CHUNK = 400_000
#: Coordinates are whitened to about 1: below this a pivot, a price or a distance is taken for rounding.
_NOISE = 1e-10
#: Rows whose part independent of the rows before is below this are left out of the search (not of the proof).
_FLAT = 1e-9


@dataclass(frozen=True, slots=True, kw_only=True)
class Corners:
    """Roles of n points.

    ``is_corner`` (n,): proven.  ``imitated_by``: for each inner point the indices of the points that
    imitate it; ``imitation`` (in ``corners.imitation``) gives exact shares.  Of equal points the
    first may be a corner, the others are inner.
    """

    points: Sequence[Vector]
    is_corner: Flags
    imitated_by: dict[int, tuple[int, ...]]
    tally: Tally

    def imitation(self, point: int) -> dict[int, Fraction]:
        """The exact shares (positive, sum 1) with which others imitate an inner point; KeyError for a corner."""
        others = self.imitated_by[point]
        answer = decide(_membership(self.points, point, others))
        if not isinstance(answer, Optimum):
            raise ArithmeticError(f"points {others} were proven to imitate point {point}, and don't")
        return {other: share for other, share in zip(others, answer.x, strict=True) if share}


def corners(points: Sequence[Vector]) -> Corners:
    """The role of each of n points of d exact values; 0 or 1 points, flat and repeated ones are fine."""
    first: dict[Vector, int] = {}
    equal = {k: first[point] for k, point in enumerate(points) if first.setdefault(point, k) != k}
    single = np.array(sorted(first.values()), dtype=np.int64)
    is_corner = np.zeros(len(points), dtype=np.bool_)
    imitated_by: dict[int, tuple[int, ...]] = {k: (other,) for k, other in equal.items()}
    if single.size <= 2 or not len(points[0]):
        is_corner[single] = True
        return Corners(points=points, is_corner=is_corner, imitated_by=imitated_by, tally=Tally(basis=len(points)))
    values = float_table([points[k] for k in single], len(points[0]))
    directions = _Search.over(values)
    found = directions.run()
    is_sure_corner = _proven_corners(values, found.direction, found.separated)
    is_sure_inner = _proven_inner(values, directions.kept, found)
    tally = Tally(floats=int((is_sure_corner | is_sure_inner).sum()), basis=len(equal))
    for place, k in enumerate(single):
        if is_sure_corner[place]:
            is_corner[k] = True
        elif is_sure_inner[place]:
            imitated_by[int(k)] = tuple(sorted(int(single[j]) for j in found.basic[place] if j < single.size))
        else:
            others, step = _exactly(points, [int(j) for j in single], directions.kept, found, place)
            tally = tally + step
            is_corner[k] = others is None
            if others is not None:
                imitated_by[int(k)] = others
    return Corners(points=points, is_corner=is_corner, imitated_by=imitated_by, tally=tally)


@dataclass(frozen=True, slots=True)
class _Found:
    """What the search says of each point: its direction in the points' own coordinates, whether that
    separates it from the others, and the basis it ended in (columns ≥ n are artificial rows)."""

    direction: Floats
    separated: Flags
    basic: Indices


@dataclass(slots=True)
class _Search:
    """Points as columns (r + 1, n) in whitened coordinates, the last row 1; ``kept`` are the r independent
    rows of the d, ``back`` (r, r) takes directions back to them."""

    columns: Floats
    kept: Indices
    back: Floats
    width: int

    @staticmethod
    def over(values: Floats) -> _Search:
        """Centre, scale and whiten the points' values (n, d)."""
        middle = values - values.mean(axis=0)
        spread = np.abs(middle).max(axis=0)
        middle = middle / np.where(spread > 0, spread, 1.0)
        kept = _independent(middle)
        middle = middle[:, kept]
        root = np.linalg.inv(np.linalg.qr(middle, mode="r")) * np.sqrt(middle.shape[0])
        columns = np.vstack([(middle @ root).T, np.ones(values.shape[0])])
        return _Search(columns, kept, root / spread[kept, None], values.shape[1])

    def run(self) -> _Found:
        """Ask for every point, chunk by chunk."""
        m, n = self.columns.shape
        found = _Found(np.zeros((n, m)), np.zeros(n, dtype=np.bool_), np.zeros((n, m), dtype=np.int64))
        size = max(16, _CHUNK // n)
        for begin in range(0, n, size):
            _ask(self.columns, np.arange(begin, min(begin + size, n)), found)
        direction = np.zeros((n, self.width))
        direction[:, self.kept] = found.direction[:, :-1] @ self.back.T
        return _Found(direction, found.separated, found.basic)


def _independent(middle: Floats) -> Indices:
    """Coordinates that are independent over the points, in order."""
    kept: list[int] = []
    basis = np.zeros((middle.shape[0], 0))
    for k in range(middle.shape[1]):
        column = middle[:, k]
        size = np.linalg.norm(column)
        for _ in range(2):  # twice is enough (Kahan; Parlett, The Symmetric Eigenvalue Problem, 1980)
            column = column - basis @ (basis.T @ column)
        rest = np.linalg.norm(column)
        if size > 0 and rest > _FLAT * size:
            kept.append(k)
            basis = np.column_stack([basis, column / rest])
    return np.array(kept, dtype=np.int64)


def _ask(columns: Floats, ids: Indices, found: _Found) -> None:
    """First-phase simplex for the points ``ids`` in lockstep; results go to ``found``."""
    m, n = columns.shape
    target = columns[:, ids].T.copy()
    sign = np.where(target < 0, -1.0, 1.0)
    inverse = np.zeros((ids.size, m, m))
    inverse[:, np.arange(m), np.arange(m)] = sign
    basic = np.broadcast_to(np.arange(n, n + m), (ids.size, m)).copy()
    x = np.abs(target)
    for _ in range(20 * m + 50):
        y = np.matmul((basic >= n).astype(np.float64)[:, None, :], inverse)[:, 0]
        prices = y @ columns
        each = np.arange(ids.size)
        prices[each, ids] = -np.inf
        column = prices.argmax(axis=1)
        best = prices[each, column]
        worth = np.einsum("km,km->k", y, target)
        separated = worth > best + _NOISE
        done = separated | (worth <= _NOISE) | (best <= _NOISE)
        if done.any():
            found.direction[ids[done]], found.separated[ids[done]] = y[done], separated[done]
            found.basic[ids[done]] = basic[done]
            more = ~done
            ids, target, inverse, basic, x = ids[more], target[more], inverse[more], basic[more], x[more]
            column = column[more]
        if not ids.size:
            return
        _exchange(columns, column, inverse, basic, x)
    found.basic[ids] = basic


def _exchange(columns: Floats, column: Indices, inverse: Floats, basic: Indices, x: Floats) -> None:
    """One pivot of each question, in place: the given column enters."""
    each = np.arange(column.size)
    direction = np.matmul(inverse, columns.T[column][:, :, None])[:, :, 0]
    ratio = np.full(direction.shape, np.inf)
    np.divide(np.maximum(x, 0.0), direction, out=ratio, where=direction > _NOISE)
    ratio[(basic >= columns.shape[1]) & (direction > _NOISE)] -= 1e-12  # ties drive artificial rows out
    row = ratio.argmin(axis=1)
    pivot = np.where(direction[each, row] > _NOISE, direction[each, row], np.inf)
    step = x[each, row] / pivot
    x -= step[:, None] * direction
    x[each, row] = step
    line = inverse[each, row] / pivot[:, None]
    inverse -= direction[:, :, None] * line[:, None, :]
    inverse[each, row] = line
    basic[each, row] = column


def _proven_corners(values: Floats, direction: Floats, separated: Flags) -> Flags:
    """Where direction·point exceeds direction·other for all others, beyond rounding: (n,)."""
    n, d = values.shape
    proven = np.zeros(n, dtype=np.bool_)
    asked = np.flatnonzero(separated)
    size = max(16, _CHUNK // n)
    largest = np.abs(values).max(axis=0)
    for ids in np.split(asked, range(size, asked.size, size)):
        scores = direction[ids] @ values.T
        own = scores[np.arange(ids.size), ids].copy()
        scores[np.arange(ids.size), ids] = -np.inf
        slip = 2.0 * gamma(d + 3) * (np.abs(direction[ids]) @ largest)
        proven[ids] = own - scores.max(axis=1) > slip + 1e-290
    return proven


def _proven_inner(values: Floats, kept: Indices, found: _Found) -> Flags:
    """Where the basis found consists of points only, all with proven positive shares: (n,)."""
    n, d = values.shape
    proven = np.zeros(n, dtype=np.bool_)
    asked = np.flatnonzero(~found.separated & (found.basic < n).all(axis=1))
    if kept.size < d or not asked.size:
        return proven
    rows = np.concatenate([values.T, np.ones((1, n))])[:, found.basic[asked]].transpose(1, 0, 2)
    target = np.concatenate([values[asked], np.ones((asked.size, 1))], axis=1)
    stack = scaled(make_stack(rows, target, target, upper=1.0))[0]
    inverse = inverses(stack.rows)
    m = d + 1
    solved = Solved(
        status=np.full(asked.size, OPTIMAL, dtype=np.int8),
        x=np.zeros((asked.size, m)),
        value=np.zeros(asked.size),
        multipliers=np.zeros((asked.size, m)),
        basic=np.broadcast_to(np.arange(m), (asked.size, m)).copy(),
        at_upper=np.zeros((asked.size, 2 * m), dtype=np.bool_),
        inverse=inverse,
        iterations=np.zeros(asked.size, dtype=np.int64),
        blocked=np.full(asked.size, -1, dtype=np.int64),
    )
    proven[asked] = certify(stack, solved).decided & np.isfinite(inverse).all(axis=(1, 2))
    return proven


def _membership(points: Sequence[Vector], point: int, others: Sequence[int]) -> Program:
    """Shares of ``others`` that imitate ``point``: any feasible point will do."""
    one = Fraction(1)
    n = len(others)
    rows = (*zip(*(points[other] for other in others), strict=True), (one,) * n) if n else ()
    target = (*points[point], one) if n else ()
    nothing = (Fraction(0),) * n
    return Program(rows=rows, row_low=target, row_high=target, lower=nothing, upper=(one,) * n, cost=nothing)


def _exactly(
    points: Sequence[Vector], single: list[int], kept: Indices, found: _Found, place: int
) -> tuple[tuple[int, ...] | None, Tally]:
    """(the points that imitate point ``place`` of ``single``, or None; which step decided), exactly."""
    n, d = len(single), len(points[0])
    used = sorted(int(j) for j in found.basic[place] if j < n)
    rows = [*kept.tolist(), d]
    idle = [rows[int(j) - n] for j in found.basic[place] if j >= n] + [k for k in range(d) if k not in rows]
    if used and not found.separated[place]:
        near = [single[j] for j in used]
        basis = Basis(tuple(sorted([*range(len(used)), *(len(used) + k for k in idle)])))
        answer = solve_on_basis(_membership(points, single[place], near), basis)
        if answer is not None:
            return tuple(other for other, share in zip(near, answer.x, strict=True) if share), Tally(basis=1)
    others = [k for k in single if k != single[place]]
    searched, step = search(_membership(points, single[place], others))
    if isinstance(searched, Optimum):
        return tuple(other for other, share in zip(others, searched.x, strict=True) if share), step
    return None, step
