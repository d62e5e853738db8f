"""A choice of few columns decided over every set of them, of which only few need be solved.

Each set solved gives multipliers, and these bound the value of any other set from below: shares that sum to 1 cost
at least the constant of the bound and the least of its scores over the set.  So a set can only be better if it
holds, for every bound known, one of the columns that are near by that bound: whole crowds of sets are closed by
comparing bits.  (The scheme is that of implicit hitting sets: E. Moreno-Centeno and R. M. Karp, Operations Research
61, 2013; its bounds are those of J. N. Hooker and G. Ottosson, Logic-based Benders decomposition, Mathematical
Programming 96, 2003.)  Where relaxations say little, as with recipes of few lots near the middle of their
windows, it needs a few hundred programs in place of tens of thousands of branches.

All bounds are floats less a bound on their rounding errors (``rigour``): what is closed holds nothing that matters.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from math import comb, inf

import numpy as np
from numpy.typing import NDArray

from generator.geometry.branching import NOTHING, exact_value
from generator.geometry.choice import IN, OUT, Box, Choice, Left, closed_box
from generator.geometry.rigour import certify, gamma
from generator.geometry.simplex import INFEASIBLE, OPTIMAL, Solved, solve_scaled
from generator.geometry.stack import Flags, Floats, Indices, Stack

Words = NDArray[np.uint64]

#: Beginnings of sets (all but the last column) held at once; choices of more are gone through in blocks by their
#: first column, and those of more than so many in all are left to others.
_AT_ONCE, MOST_BEGUN = 1_000_000, 10_000_000
#: Sets solved together: enough to make each step of the solver worth its while.
_ABREAST = 64
#: Beginnings compared when the most promising sets are picked, and bounds that they are compared by.
_COMPARED, _BY = 512, 32
_UP = 1.0 + 2.0**-40
_TINY = 1e-290


@dataclass(frozen=True, slots=True)
class _Sets:
    """Sets of columns, as bits (N, words) each: ``begun``, all columns of a set but the last, and ``last``, the
    columns that may end it.  (11 times fewer than sets, for 4 of 60 columns.)"""

    begun: Words
    last: Words

    def some(self, which: Flags) -> _Sets:
        """Those marked."""
        return self if bool(which.all()) else _Sets(self.begun[which], self.last[which])

    def ending(self, last: Words) -> _Sets:
        """The same beginnings with other ends, where any are left."""
        return _Sets(self.begun, last).some(np.asarray(last.any(axis=1), dtype=np.bool_))


@dataclass(slots=True)
class _Search:
    """One choice under way; values are scaled.  ``open``: the sets not yet solved or closed.

    ``scores`` (P, n): what each bound says of a column; a set that holds only columns whose score is above the
    threshold (the best value known; 0 where the bound ``is_empty``, of a set that admits nothing) is closed.
    """

    choice: Choice
    value: float
    enough: float
    scores: Floats
    open: _Sets
    best: Box | None = None
    kept: list[tuple[float, tuple[int, ...]]] = field(default_factory=list)
    is_empty: Flags = field(default_factory=lambda: np.zeros(0, dtype=np.bool_))
    steps: int = 0

    @property
    def is_found(self) -> bool:
        """Whether a point is known that will do."""
        return self.best is not None and self.value <= self.enough

    def add(self, scores: Floats, is_empty: Flags) -> None:
        """Keep bounds, and close what they close."""
        first = len(self.scores)
        self.scores = np.concatenate([self.scores, scores])
        self.is_empty = np.concatenate([self.is_empty, is_empty])
        self.close(first)

    def close(self, first: int) -> None:
        """Drop the open sets that the bounds from number ``first`` on close."""
        thresholds = np.where(self.is_empty, 0.0, self.value)[first:, None]
        for near in _bits(self.scores[first:] <= thresholds):
            if not len(self.open.begun):
                return
            # what has begun without a near column must end with one
            lacks = ~_meets(self.open.begun, near)
            last = self.open.last
            if lacks.any():
                last = last.copy()
                last[lacks] &= near
                self.open = self.open.ending(last)

    def take(self) -> Flags:
        """The most promising open sets, as marks (K, n), which are open no more."""
        count, n = len(self.open.begun), self.choice.n
        spread = np.unique(np.linspace(0, count - 1, min(count, _COMPARED)).astype(np.int64))
        begun, last = _members(self.open.begun[spread], n), _members(self.open.last[spread], n)
        bound = np.where(last, -inf, inf)
        for scores, is_empty in zip(self.scores[-_BY:], self.is_empty[-_BY:], strict=True):
            if not is_empty:
                own = np.where(begun, scores, inf).min(axis=1, initial=inf)
                np.maximum(bound, np.minimum(own[:, None], scores), out=bound, where=last)
        ends = bound.argmin(axis=1)
        chosen = np.sort(np.argsort(bound[np.arange(spread.size), ends], kind="stable")[:_ABREAST])
        unit = _bits(np.eye(n, dtype=np.bool_))
        left = self.open.last.copy()
        left[spread[chosen]] &= ~unit[ends[chosen]]
        self.open = self.open.ending(left)
        members = begun[chosen]
        members[np.arange(chosen.size), ends[chosen]] = True
        return members


def select(
    choice: Choice,
    roots: Sequence[Box] = (Box(),),
    *,
    known: float = inf,
    floor: float = -inf,
    steps: int,
    first_will_do: bool = False,
) -> Left | None:
    """What of the ``roots`` may hold the best point; None where this is no choice of few among shares, or of too many.

    ``known``, ``floor`` and ``first_will_do`` as in ``branching.branch``.  ``steps``: linear programs at most; past
    them the answer is None.
    """
    share_row = _share_row(choice)
    if choice.most is None or share_row is None or not choice.is_sound or not _is_boxed(choice):
        return None
    enough = inf if first_will_do else floor / choice.unit[1] + NOTHING
    blocks = _blocks(choice, roots)
    if blocks is None:
        return None
    nothing = np.zeros((0, 1), dtype=np.uint64)
    search = _Search(choice, known / choice.unit[1], enough, np.zeros((0, choice.n)), _Sets(nothing, nothing))
    for block in blocks:
        search.open = block
        search.close(0)
        while len(search.open.begun) and not search.is_found:
            if search.steps >= steps:
                return None
            before = search.value
            _solve(search, search.take(), share_row)
            if search.value < before:
                search.close(0)
    value = search.value * choice.unit[1]
    if search.is_found and search.best is not None:
        return Left((search.best,), search.best, value, is_done=True, steps=search.steps, is_cut=True)
    kept = sorted((bound, used) for bound, used in search.kept if bound <= search.value)
    boxes = dict.fromkeys(closed_box(used, choice.n) for _, used in kept)
    return Left(tuple(boxes), search.best, value, is_done=True, steps=search.steps)


def _is_boxed(choice: Choice) -> bool:
    """Whether all columns beyond those chosen among have finite bounds."""
    stack, n = choice.stack, choice.n
    return bool(np.isfinite(stack.lower[0, n:]).all() and np.isfinite(stack.upper[0, n:]).all())


def _share_row(choice: Choice) -> int | None:
    """The row that says that the columns chosen among sum to 1."""
    program, n = choice.program, choice.n
    if choice.is_relative:
        return None
    for k, row in enumerate(program.rows):
        if program.row_low[k] == program.row_high[k] == 1 and all(a == 1 for a in row[:n]) and not any(row[n:]):
            return k
    return None


def _blocks(choice: Choice, roots: Sequence[Box]) -> Iterator[_Sets] | None:
    """Every set that is to be looked at, in blocks; None where there are too many.

    A lesser set is part of a greater one that a further column fits, unless leasts say that what is in is used.
    """
    stack, n = choice.stack, choice.n
    usable = np.flatnonzero(stack.upper[0, :n] > 0.0)
    size = min(choice.most or 0, usable.size)
    begun = sum(comb(usable.size, count) for count in range(size))
    if size == 0 or begun > MOST_BEGUN:
        return None
    foes = np.zeros((n, n), dtype=np.bool_)
    for one, other in choice.apart:
        foes[np.ix_(sorted(one), sorted(other))] = True
    firsts = [usable] if begun <= _AT_ONCE else [usable[place : place + 1] for place in range(usable.size)]
    every = _Columns(usable, foes | foes.T)
    forced = np.flatnonzero(stack.lower[0, :n] > 0.0)
    has_least = bool(choice.parts.any())
    return (_within(every.sets(first, size, has_least=has_least), roots, forced, n) for first in firsts)


def _within(sets: _Sets, roots: Sequence[Box], forced: Indices, n: int) -> _Sets:
    """The sets that lie in one of the roots and hold what is forced."""
    parts = []
    for root in roots:
        marks = root.marks(n)
        marks[forced] = IN
        out, inside = _bits(np.array([marks == OUT, marks == IN]))
        missing = inside & ~sets.begun
        # what is missing must be the end, so no more than one may be
        one = np.uint64(1)
        single = (((missing & (missing - one)) == 0).all(axis=1) & ((missing != 0).sum(axis=1) <= 1))[:, None]
        last = sets.last & ~out & np.where(missing.any(axis=1)[:, None], missing, ~np.uint64(0))
        last = np.where(single & ~(sets.begun & out).any(axis=1)[:, None], last, np.uint64(0))
        parts.append(sets.ending(last))
    return _Sets(np.concatenate([part.begun for part in parts]), np.concatenate([part.last for part in parts]))


@dataclass(frozen=True, slots=True)
class _Columns:
    """The columns that sets are made of, and which two of all n are never together (n, n)."""

    usable: Indices
    foes: Flags

    def sets(self, firsts: Indices, size: int, *, has_least: bool) -> _Sets:
        """All sets whose first column is one of these: of the greatest size, the lesser ones that no column fits,
        and with leasts all lesser ones."""
        n = self.foes.shape[0]
        unit, against = _bits(np.eye(n, dtype=np.bool_)), _bits(self.foes)
        free = _bits(np.isin(np.arange(n), self.usable)[None])[0]
        after = _bits(np.triu(np.ones((n, n), dtype=np.bool_), 1)) & free
        found = []
        if size == 1 or has_least:
            found.append(_Sets(np.zeros((1, unit.shape[1]), np.uint64), np.bitwise_or.reduce(unit[firsts])[None]))
        begun, barred, last = unit[firsts], against[firsts], firsts
        for count in range(1, size):
            fits = after[last] & ~barred
            if count == size - 1 or has_least:
                found.append(_Sets(begun, begun.copy()).ending(fits))
            if not has_least:
                # no further column fits, on either side: the set ends with its own last one
                alone = ~(free & ~barred & ~begun).any(axis=1)
                found.append(_Sets(begun[alone] & ~unit[last[alone]], unit[last[alone]]))
            if count < size - 1:
                like, last = np.nonzero(_members(fits, n))
                begun, barred = begun[like] | unit[last], barred[like] | against[last]
        return _Sets(np.concatenate([part.begun for part in found]), np.concatenate([part.last for part in found]))


def _meets(sets: Words, near: Words) -> Flags:
    """Whether each set (N, words) holds one of the near columns."""
    held = (sets[:, 0] & near[0]) != 0
    for word in range(1, near.size):
        held |= (sets[:, word] & near[word]) != 0
    return np.asarray(held, dtype=np.bool_)


def _bits(marked: Flags) -> Words:
    """Rows of marks (K, n) as bits (K, words)."""
    width = -(-marked.shape[1] // 64) * 64
    padded = np.zeros((len(marked), width), dtype=np.bool_)
    padded[:, : marked.shape[1]] = marked
    return np.packbits(padded, axis=1, bitorder="little").view(np.uint64)


def _members(sets: Words, n: int) -> Flags:
    """Bits (K, words) as marks (K, n)."""
    return np.unpackbits(np.ascontiguousarray(sets).view(np.uint8), axis=1, bitorder="little")[:, :n].astype(np.bool_)


def _solve(search: _Search, members: Flags, share_row: int) -> None:
    """Solve sets side by side; keep what may hold the best point, and the bounds that follow."""
    choice = search.choice
    columns, is_real = _columns(members)
    stack = _stack_of_sets(choice, columns, is_real)
    solved = solve_scaled(stack, alone=True)
    proven = certify(stack, solved)
    search.steps += len(members)
    found, empty = solved.status == OPTIMAL, (solved.status == INFEASIBLE) & proven.decided
    for k in np.flatnonzero(~empty).tolist():
        used = tuple(int(j) for j in columns[k][is_real[k]])
        if found[k] and solved.value[k] < search.value - NOTHING:
            value = float(proven.most[k])
            if not np.isfinite(value):
                value = exact_value(choice, closed_box(used, choice.n))
            if value < search.value:
                search.value, search.best = value, closed_box(used, choice.n)
        least = float(proven.least[k]) if found[k] else -inf
        if least <= search.value:
            if proven.best[k]:
                # its only best point: a set that holds more columns has no other
                used = _held(used, solved, k)
            if (least, used) not in search.kept:
                search.kept.append((least, used))
    said = found | (solved.status == INFEASIBLE)
    search.add(_scores(choice, solved.multipliers[said], found[said], share_row), ~found[said])


def _held(used: tuple[int, ...], solved: Solved, k: int) -> tuple[int, ...]:
    """The columns of a set that are not at rest at 0."""
    basic = set(solved.basic[k].tolist())
    return tuple(j for place, j in enumerate(used) if place in basic or solved.x[k, place] > 0.0)


def _columns(members: Flags) -> tuple[Indices, Flags]:
    """The columns of each set, and which of the entries are real: (K, size) each."""
    sizes = members.sum(axis=1)
    width = int(sizes.max())
    columns = np.argsort(~members, axis=1, kind="stable")[:, :width]
    return columns, np.arange(width) < sizes[:, None]


def _stack_of_sets(choice: Choice, columns: Indices, is_real: Flags) -> Stack:
    """The program of each set: its columns, then those that are in every one."""
    base, n = choice.stack, choice.n
    count = len(columns)
    rows = base.rows if base.is_shared else base.rows[0]
    more = np.broadcast_to(rows[:, n:], (count, *rows[:, n:].shape))
    lower, upper = base.lower[0], base.upper[0]
    least = np.maximum(lower[:n], choice.parts / choice.unit[0])

    def spread(of_columns: Floats, of_all: Floats) -> Floats:
        own = np.where(is_real, of_columns[columns], 0.0)
        return np.concatenate([own, np.broadcast_to(of_all[n:], (count, of_all.size - n))], axis=1)

    return Stack(
        rows=np.ascontiguousarray(np.concatenate([rows[:, columns].transpose(1, 0, 2), more], axis=2)),
        row_low=np.broadcast_to(base.row_low[0], (count, rows.shape[0])),
        row_high=np.broadcast_to(base.row_high[0], (count, rows.shape[0])),
        lower=spread(least, lower),
        upper=spread(upper[:n], upper),
        cost=np.concatenate(
            [base.cost[0][columns], np.broadcast_to(base.cost[0][n:], (count, base.cost.shape[1] - n))], axis=1
        ),
    )


def _scores(choice: Choice, multipliers: Floats, has_cost: Flags, share_row: int) -> Floats:
    """For each set solved what its multipliers prove of every column, (K, n): shares that sum to 1 cost at least
    the least score among the columns they use (or, without cost, are impossible where that is above 0).

    Any multipliers will do: every x within the rows has c·x ≥ Σ y·bound + (c − yᵀ·rows)·x.
    """
    base, n = choice.stack, choice.n
    rows = base.rows if base.is_shared else base.rows[0]
    m, width = rows.shape
    y = multipliers.copy()
    y[:, share_row] = 0.0  # shares sum to 1 whatever its multiplier: the least score stands for it
    bound = np.where(y > 0.0, base.row_low[0], base.row_high[0])
    usable = np.isfinite(bound) & (y != 0.0)
    y, bound = np.where(usable, y, 0.0), np.where(usable, bound, 0.0)
    cost = np.where(has_cost[:, None], base.cost[0], 0.0)
    reduced = cost - y @ rows
    slip = gamma(m + 3) * (np.abs(cost) + np.abs(y) @ np.abs(rows)) * _UP
    low, high = base.lower[0, n:], base.upper[0, n:]
    down, up = (reduced - slip)[:, n:], (reduced + slip)[:, n:]
    rest = np.minimum(np.minimum(down * low, up * low), np.minimum(down * high, up * high))
    whole = 1.0 / choice.unit[0]
    scores = (y * bound).sum(axis=1, keepdims=True) + rest.sum(axis=1, keepdims=True) + whole * (reduced - slip)[:, :n]
    size = (np.abs(y) * np.abs(bound)).sum(axis=1, keepdims=True) + np.abs(rest).sum(axis=1, keepdims=True)
    size = size + whole * (np.abs(reduced) + slip)[:, :n]
    return np.asarray(scores - gamma(m + width + 10) * size * _UP - _TINY, dtype=np.float64)
