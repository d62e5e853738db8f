"""A changed number divided fairly among the edits that changed it.

Shapley's value (L. S. Shapley, "A value for n-person games", 1953): the mean, over all orders in which the
edits could have been made, of what each adds.  An order that passes through a state without an answer (the
order can't be made there) says nothing and is not counted; the parts still sum to the change.
"""

from __future__ import annotations

import random
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations
from math import sqrt

Value = Callable[[frozenset[int]], Fraction | None]

#: Up to so many players every subset is asked: 256 answers.
MOST_EXACT = 8
#: Orders sampled beyond that, half of them the others reversed; the same ones every time.
SAMPLED_ORDERS = 48
_START = 20260302


@dataclass(frozen=True, slots=True)
class Division:
    """What each player adds, in their order; ``errors`` are standard errors, None where exact."""

    amounts: tuple[Fraction, ...]
    errors: tuple[float, ...] | None = None


def divided(players: int, value: Value) -> Division | None:
    """Divide value(all) − value(none) among players 0 … n−1; None where no order of theirs can be counted."""
    every = frozenset(range(players))
    if value(frozenset()) is None or value(every) is None:
        return None
    return _exact(players, value) if players <= MOST_EXACT else _sampled(players, value)


def most_asked_by(players: int) -> int:
    """At most so many values are taken by a division among so many players."""
    return 2**players if players <= MOST_EXACT else SAMPLED_ORDERS * (players - 1) + 2


def asked_by(players: int) -> list[frozenset[int]]:
    """The subsets whose values a division among players 0 … n−1 takes, each once, smaller ones first.

    2^n of them up to ``MOST_EXACT`` players, then those that the sampled orders pass through.
    """
    if players <= MOST_EXACT:
        return [frozenset(chosen) for size in range(players + 1) for chosen in combinations(range(players), size)]
    passed = {frozenset(run[:count]): None for run in _orders(players) for count in range(players + 1)}
    return sorted(passed, key=len)


def _exact(players: int, value: Value) -> Division | None:
    """Count, for every step from a subset to the next, the orders that take it."""
    every = frozenset(range(players))
    subsets = [frozenset(chosen) for size in range(players + 1) for chosen in combinations(range(players), size)]
    known = {subset: amount for subset in subsets if (amount := value(subset)) is not None}
    ways_to = _ways(subsets, known, lambda subset: [subset - {player} for player in subset])
    ways_on = _ways(subsets[::-1], known, lambda subset: [subset | {player} for player in every - subset])
    orders = ways_to.get(every, 0)
    if not orders:
        return None
    amounts = [Fraction(0)] * players
    for subset, amount in known.items():
        for player in every - subset:
            further = subset | {player}
            if further in known:
                weight = Fraction(ways_to[subset] * ways_on[further], orders)
                amounts[player] += weight * (known[further] - amount)
    return Division(tuple(amounts))


def _ways(
    subsets: Sequence[frozenset[int]],
    known: dict[frozenset[int], Fraction],
    neighbours: Callable[[frozenset[int]], list[frozenset[int]]],
) -> dict[frozenset[int], int]:
    """The number of ways from the first subset to each one, through subsets that have a value."""
    ways: dict[frozenset[int], int] = {}
    for subset in subsets:
        if subset in known:
            ways[subset] = sum(ways.get(other, 0) for other in neighbours(subset)) if ways else 1
    return ways


def _sampled(players: int, value: Value) -> Division | None:
    """The mean over sampled orders, each beside its reverse, which takes out much of the chance."""
    samples = [added for run in _orders(players) if (added := _added(run, value)) is not None]
    if len(samples) < 2:
        return None
    count = len(samples)
    amounts = tuple(sum((sample[player] for sample in samples), Fraction(0)) / count for player in range(players))
    errors = []
    for player in range(players):
        spread = sum(float(sample[player] - amounts[player]) ** 2 for sample in samples)
        errors.append(sqrt(spread / (count - 1) / count))
    return Division(amounts, tuple(errors))


def _orders(players: int) -> list[list[int]]:
    """The orders sampled, each beside its reverse: the same ones every time."""
    chance = random.Random(_START)  # noqa: S311  (the same orders every time are what is wanted)
    order = list(range(players))
    orders = []
    for _ in range(SAMPLED_ORDERS // 2):
        chance.shuffle(order)
        orders += [list(order), order[::-1]]
    return orders


def _added(run: Sequence[int], value: Value) -> list[Fraction] | None:
    """What each player adds when they come in this order; None where it passes a state without a value."""
    added = [Fraction(0)] * len(run)
    subset: frozenset[int] = frozenset()
    before = value(subset)
    for player in run:
        subset |= {player}
        after = value(subset)
        if before is None or after is None:
            return None
        added[player], before = after - before, after
    return added
