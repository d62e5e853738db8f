"""The fewest columns that shares need: every set of a size is looked at, few of them are solved.

A set of columns is refused by the multipliers that refuted another one, where they leave it no share below 0
either, and is put off by the prices of those solved already, which bound its cost from below.  So each small
program solved settles most of the sets that are left.  (The scheme is that of implicit hitting sets: E.
Moreno-Centeno and R. M. Karp, Operations Research 61, 2013; its bounds are those of J. N. Hooker and G.
Ottosson, Logic-based Benders decomposition, Mathematical Programming 96, 2003.)

All in floats: which columns come back is a proposal.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import lru_cache
from itertools import chain, combinations
from math import comb

import numpy as np
from numpy.typing import NDArray

from generator.geometry.simplex import INFEASIBLE, OPTIMAL, solve
from generator.geometry.stack import Flags, Floats, Indices, make_stack

Words = NDArray[np.uint64]

#: Sets of one size at most; where there are more, whoever asks must search otherwise.
MOST_SETS = 150_000
#: Sets solved side by side: enough to make each step of the solver worth its while.
_TOGETHER = 32
#: A score below this (rows are scaled to about 1) may be 0.
_NOISE = 1e-9


class TooManyError(Exception):
    """There are more sets than may be looked at."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Shares:
    """low ≤ rows·x ≤ high (d rows, n columns), Σx = 1, and for each column in the set lower ≤ x ≤ upper ≤ 1.

    ``forced`` columns are in every set; no set has both columns of a pair in ``apart`` (n × n).
    """

    rows: Floats
    low: Floats
    high: Floats
    lower: Floats
    upper: Floats
    cost: Floats
    forced: Flags
    apart: Flags


def fewest_columns(shares: Shares, most: int) -> tuple[int, ...] | None:
    """Of the smallest sets whose columns can make the shares the cheapest; None if none of at most ``most`` can.

    Raises TooManyError where there are too many sets of a size.
    """
    size = np.abs(shares.rows).max(axis=1, initial=0.0)
    size = np.where(size > 0, size, 1.0)
    search = _Search(
        shares,
        np.vstack([shares.rows / size[:, None], np.ones(shares.cost.size)]),
        np.append(shares.low / size, 1.0),
        np.append(shares.high / size, 1.0),
    )
    for count in range(max(1, int(shares.forced.sum())), most + 1):
        found = search.cheapest(search.allowed(count))
        if found is not None:
            return found
    return None


@lru_cache(maxsize=8)
def _sets(n: int, count: int) -> tuple[Indices, Words]:
    """All sets of so many of n columns, in order: (N, count); and each as bits, (N, words)."""
    sets = np.fromiter(chain.from_iterable(combinations(range(n), count)), dtype=np.int64).reshape(-1, count)
    bits = np.zeros((len(sets), -(-n // 64)), dtype=np.uint64)
    for column in sets.T:
        bits[np.arange(len(sets)), column // 64] |= np.uint64(1) << (column % 64).astype(np.uint64)
    return sets, bits


def _bits(marked: Flags) -> Words:
    """The marked columns as bits: (words,)."""
    padded = np.zeros(-(-marked.size // 64) * 64, dtype=np.bool_)
    padded[: marked.size] = marked
    return np.packbits(padded, bitorder="little").view(np.uint64)


@dataclass(slots=True)
class _Search:
    """``rows`` with their bounds scaled, the last one Σx = 1; ``scores`` (n each): a set whose shares all
    have a positive one can't make them."""

    shares: Shares
    rows: Floats
    low: Floats
    high: Floats
    scores: list[Floats] = field(default_factory=list)

    def __post_init__(self) -> None:
        """Each row alone refutes the sets in which all columns break it."""
        for row, low, high in zip(self.rows[:-1], self.low, self.high, strict=False):
            self.scores += [row - high] if np.isfinite(high) else []
            self.scores += [low - row] if np.isfinite(low) else []

    def allowed(self, count: int) -> Indices:
        """The sets of so many columns that nothing known refutes."""
        n = self.shares.cost.size
        if comb(n, count) > MOST_SETS:
            raise TooManyError(f"{comb(n, count)} sets of {count} columns of {n}")
        sets, bits = _sets(n, count)
        kept = ((bits & _bits(self.shares.forced)) == _bits(self.shares.forced)).all(axis=1)
        for one in np.flatnonzero(self.shares.apart.any(axis=1)):
            others = _bits(self.shares.apart[one])
            kept &= ~((sets == one).any(axis=1) & (bits & others).any(axis=1))
        for score in self.scores:
            # a set with a column that has no positive score is not refuted, whatever its bounds
            kept &= (bits & _bits(score <= _NOISE)).any(axis=1)
        sets = sets[kept]
        sets = sets[(self.shares.upper[sets].sum(axis=1) >= 1) & (self.shares.lower[sets].sum(axis=1) <= 1)]
        for score in self.scores:
            sets = sets[self._least(sets, score) <= _NOISE]
        return np.asarray(sets, dtype=np.int64)

    def _least(self, sets: Indices, score: Floats) -> Floats:
        """The least Σ score·x over shares of each set's columns, within their bounds: (N,)."""
        order = np.argsort(score[sets], axis=1, kind="stable")
        sets = np.take_along_axis(sets, order, axis=1)
        lower, upper, score = self.shares.lower[sets], self.shares.upper[sets], score[sets]
        rest = 1.0 - lower.sum(axis=1)
        total = (score * lower).sum(axis=1)
        for k in range(sets.shape[1]):
            step = np.minimum(rest, upper[:, k] - lower[:, k])
            total += step * score[:, k]
            rest -= step
        return np.asarray(total, dtype=np.float64)

    def cheapest(self, sets: Indices) -> tuple[int, ...] | None:
        """The cheapest of the sets that can make the shares, the first of equals; None if none can."""
        best: tuple[float, tuple[int, ...]] | None = None
        bound = self._least(sets, self.shares.cost)
        while len(sets):
            now = np.argsort(bound, kind="stable")[:_TOGETHER]
            status, value, scores, prices = self._solved(sets[now])
            for place, cost in zip(now[status == OPTIMAL], value[status == OPTIMAL], strict=True):
                offer = (float(cost), tuple(int(column) for column in sets[place]))
                best = offer if best is None or offer < best else best
            left = np.ones(len(sets), dtype=np.bool_)
            left[now] = False
            sets, bound = sets[left], bound[left]
            self.scores += list(scores)
            for price in prices:
                bound = np.maximum(bound, self._least(sets, price))
            kept = bound < best[0] if best else np.ones(len(sets), dtype=np.bool_)
            sets, bound = sets[kept], bound[kept]
            for score in scores:
                kept = ~(score[sets] > _NOISE).all(axis=1)
                sets, bound = sets[kept], bound[kept]
        return None if best is None else best[1]

    def _solved(self, sets: Indices) -> tuple[NDArray[np.int8], Floats, Floats, Floats]:
        """(status, least cost) of each set, and the scores and prices over all columns that follow from them."""
        shares = self.shares
        stack = make_stack(
            np.ascontiguousarray(self.rows[:, sets].transpose(1, 0, 2)),
            self.low,
            self.high,
            lower=shares.lower[sets],
            upper=shares.upper[sets],
            cost=shares.cost[sets],
        )
        solved = solve(stack)
        y = solved.multipliers
        bound = np.where(y > 0, self.low, self.high)
        y, bound = np.where(np.isfinite(bound), y, 0.0), np.where(np.isfinite(bound), bound, 0.0)
        # As Σx = 1, a row's bound stands on every share alike; the row of shares itself then says nothing.
        over = (y * bound).sum(axis=1, keepdims=True) - y @ self.rows
        is_empty, is_optimal = solved.status == INFEASIBLE, solved.status == OPTIMAL
        scores = over[is_empty]
        size = np.abs(scores).max(axis=1, initial=0.0, keepdims=True)
        return solved.status, solved.value, scores / np.where(size > 0, size, 1.0), shares.cost + over[is_optimal]
