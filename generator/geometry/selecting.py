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

from collections.abc import Sequence
from dataclasses import dataclass, field
from math import comb, inf

import numpy as np
from numpy.typing import NDArray

from generator.geometry.branching import NOTHING, exact_value
from generator.geometry.choice import Box, Choice, Left, closed_box
from generator.geometry.rigour import certify, gamma
from generator.geometry.simplex import INFEASIBLE, OPTIMAL, Solved, solve_scaled
from generator.geometry.stack import Flags, Floats, Indices, Stack

Words = NDArray[np.uint64]

#: Sets at most; where there are more, whoever asks must search otherwise.
MOST_SETS = 2_000_000
#: Sets solved together: enough to make each step of the solver worth its while.
_ABREAST = 64
#: Open sets compared when the most promising are picked, and bounds that they are compared by.
_COMPARED, _BY = 1024, 32
_UP = 1.0 + 2.0**-40
_TINY = 1e-290


@dataclass(slots=True)
class _Search:
    """One choice under way; values are scaled.  ``open`` (N, words): the sets not yet solved or closed, as bits.

    ``scores`` (P, n): what each bound says of a column; a set that holds only columns whose score is above the
    threshold (the best value known; 0 where the bound ``is_empty``, of a set that admits nothing) is closed.
    """

    choice: Choice
    value: float
    open: Words
    scores: Floats
    best: Box | None = None
    kept: list[tuple[float, tuple[int, ...]]] = field(default_factory=list)
    is_empty: Flags = field(default_factory=lambda: np.zeros(0, dtype=np.bool_))
    steps: int = 0

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
            if not len(self.open):
                return
            held = (self.open & near).any(axis=1) if near.size > 1 else (self.open[:, 0] & near[0]) != 0
            if not held.all():
                self.open = self.open[held]

    def take(self) -> Indices:
        """The most promising open sets, as marks (K, n), which are open no more."""
        count = len(self.open)
        spread = np.unique(np.linspace(0, count - 1, min(count, _COMPARED)).astype(np.int64))
        members = _members(self.open[spread], self.choice.n)
        bound = np.full(spread.size, -inf)
        for scores, is_empty in zip(self.scores[-_BY:], self.is_empty[-_BY:], strict=True):
            if not is_empty:
                bound = np.maximum(bound, np.where(members, scores, inf).min(axis=1))
        chosen = np.sort(np.argsort(bound, kind="stable")[:_ABREAST])
        left = np.ones(count, dtype=np.bool_)
        left[spread[chosen]] = False
        self.open = self.open[left]
        return members[chosen]


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
    sets = _allowed_sets(choice, roots)
    if sets is None:
        return None
    search = _Search(choice, known / choice.unit[1], sets, np.zeros((0, choice.n)))
    enough = inf if first_will_do else floor / choice.unit[1] + NOTHING

    def is_found() -> bool:
        return search.best is not None and search.value <= enough

    while len(search.open) and search.steps < steps and not is_found():
        before = search.value
        _solve(search, search.take(), share_row)
        if search.value < before:
            search.close(0)
    if len(search.open) and not is_found():
        return None
    kept = sorted((bound, used) for bound, used in search.kept if bound <= search.value)
    boxes = tuple(closed_box(used, choice.n) for _, used in kept)
    if is_found() and search.best is not None:
        boxes = (search.best,)
    return Left(boxes, search.best, search.value * choice.unit[1], is_done=True, steps=search.steps)


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


def _allowed_sets(choice: Choice, roots: Sequence[Box]) -> Words | None:
    """Every set that is to be looked at, as bits (N, words); None where there are too many.

    A lesser set is part of a greater one that a further column fits, unless leasts say that what is in is used.
    """
    stack, n, most = choice.stack, choice.n, choice.most or 0
    usable = np.flatnonzero(stack.upper[0, :n] > 0.0)
    forced = np.flatnonzero(stack.lower[0, :n] > 0.0)
    size = min(most, usable.size)
    if size == 0 or sum(comb(usable.size, count) for count in range(1, size + 1)) > MOST_SETS:
        return None
    foes = np.zeros((n, n), dtype=np.bool_)
    for one, other in choice.apart:
        foes[np.ix_(sorted(one), sorted(other))] = True
    foes |= foes.T
    levels = _combinations(usable, foes, size)
    if not choice.parts.any():
        levels = [*(_unextendable(level, usable, foes) for level in levels[:-1] if choice.apart), levels[-1]]
    sets = np.concatenate(levels)
    must = _bits(np.isin(np.arange(n), forced)[None])[0]
    sets = sets[((sets & must) == must).all(axis=1)]
    fits = np.zeros(len(sets), dtype=np.bool_)
    for root in roots:
        marks = root.marks(n)
        out, inside = _bits((marks == 2)[None])[0], _bits((marks == 1)[None])[0]
        fits |= ((sets & out) == 0).all(axis=1) & ((sets & inside) == inside).all(axis=1)
    return sets[fits]


def _combinations(usable: Indices, foes: Flags, size: int) -> list[Words]:
    """All sets of 1 … ``size`` of the usable columns without two foes, as bits; one array a size."""
    n = foes.shape[0]
    unit, against = _bits(np.eye(n, dtype=np.bool_)), _bits(foes)
    levels = [unit[usable]]
    last = np.arange(usable.size)
    for _ in range(size - 1):
        counts = usable.size - 1 - last
        like = np.repeat(np.arange(last.size), counts)
        ends = np.cumsum(counts)
        last = last[like] + 1 + np.arange(like.size) - np.repeat(ends - counts, counts)
        column = usable[last]
        bits = levels[-1][like]
        fits = ~(bits & against[column]).any(axis=1)
        levels.append(bits[fits] | unit[column[fits]])
        last = last[fits]
    return levels


def _unextendable(sets: Words, usable: Indices, foes: Flags) -> Words:
    """The sets that no further usable column fits."""
    members = _members(sets, foes.shape[0])
    fits = ~members & ~(members.astype(np.float32) @ foes.astype(np.float32) > 0)
    return sets[~fits[:, usable].any(axis=1)]


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
    count, size = columns.shape
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
