"""The smallest sets of edits that alone turn an old answer into the new one.

All single edits are asked first, then all pairs, and so on, as long as the replays are affordable.  Beyond
that a set is given from which no edit can be spared, found by way of files, rows and halves; what is then
known of the smallest size is said.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass
from itertools import combinations
from math import comb
from typing import Protocol

from generator.history.questions import Answer
from generator.history.records import Cause, Edit
from generator.history.relevance import Question
from generator.history.searching import Allowance, Asked, Searching, Wanted
from generator.history.systems import Subset

#: Replays for the smallest sets of one change: all pairs of 80 edits, all triples of 28.
MOST_FOR_A_CHANGE = 3300
#: Replays for the smallest set of files or rows, before halves are tried.
MOST_FOR_GROUPS = 200

UNTOLD = "The edits alone do not account for this change."
NOT_SPARED = "Some of these edits may not be needed: to tell, too many more answers would be needed."


class Answering(Asked, Protocol):
    """What can be asked again, and tells the answers."""

    def answer(self, question: Question, subset: Iterable[int]) -> Answer:
        """The answer with these edits made."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Target:
    """An answer that changed, and when two answers count as the same.

    ``old`` and ``new`` are as recorded; ``price`` is that of one replay, in plain ones, and ``what`` it gives.
    ``same_program``: both were found by this very program, so that its version is not the cause.
    """

    replay: Answering
    question: Question
    old: Answer
    new: Answer
    alike: Callable[[Answer, Answer], bool]
    price: int = 1
    what: str = "answers"
    same_program: bool = False

    def wanted(self, subsets: Iterable[Subset]) -> list[Wanted]:
        """The replays of these subsets."""
        return [Wanted(self.replay, self.question, subset) for subset in subsets]

    def answer(self, subset: Iterable[int]) -> Answer:
        """The answer with these edits made."""
        return self.replay.answer(self.question, subset)

    def is_new(self, subset: Iterable[int]) -> bool:
        """Whether these edits alone give the new answer."""
        return self.alike(self.answer(subset), self.new)

    def fresh(self, subsets: Iterable[Subset]) -> int:
        """The price of those that are not known yet."""
        return self.price * sum(not self.replay.knows(self.question, subset) for subset in subsets)


def set_cause(
    target: Target, edits: Sequence[Edit], every: Sequence[int], allowance: Allowance, most: int = MOST_FOR_A_CHANGE
) -> Searching[Cause]:
    """Why an answer changed, by the edits ``every`` that can matter to it; at most about ``most`` replays."""
    yield target.wanted([frozenset(), frozenset(every)])
    start = target.answer(())
    by_program = not target.same_program and not target.alike(start, target.old)
    if target.alike(start, target.new):
        return Cause(by_program=not target.same_program, remark=UNTOLD if target.same_program else "")
    if not target.is_new(every):
        return Cause(by_program=by_program, remark=UNTOLD)
    smallest, at_least = yield from _smallest(target, every, allowance, most)
    found: tuple[int, ...] = ()
    remark = ""
    if not smallest:
        if not allowance.takes_reserve(target.price * len(every)):
            remark = not_looked_for(len(every), target.what)
            return Cause(at_least=at_least, by_program=by_program, remark=remark)
        found, is_spared = yield from _spared(target, edits, every, allowance)
        remark = "" if is_spared else NOT_SPARED
    involved = tuple(dict.fromkeys(position for chosen in (*smallest, found) for position in chosen))
    undone = {one: frozenset(every) - {one} for one in involved} if not remark else {}
    yield target.wanted(undone.values())
    return Cause(
        suffices=smallest,
        at_least=at_least,
        found=found,
        restores=tuple(one for one, rest in undone.items() if target.alike(target.answer(rest), start)),
        by_program=by_program,
        remark=remark,
    )


def not_looked_for(count: int, what: str = "answers") -> str:
    """What stands instead of a cause where even the least search is too much."""
    return f"Not looked for: at least {count} more {what} would be needed."


def _smallest(
    target: Target, every: Sequence[int], allowance: Allowance, most: int
) -> Searching[tuple[tuple[tuple[int, ...], ...], int]]:
    """All smallest sets that give the new answer; none where they can't be afforded, and what is then known."""
    for size in range(1, len(every) + 1):
        if target.price * comb(len(every), size) > most + target.price:
            return (), size
        chosen = list(combinations(every, size))
        subsets = [frozenset(one) for one in chosen]
        price = target.fresh(subsets)
        if price > most or not allowance.takes(price):
            return (), size
        most -= price
        yield target.wanted(subsets)
        found = tuple(one for one, subset in zip(chosen, subsets, strict=True) if target.is_new(subset))
        if found:
            return found, size
    raise AssertionError("all edits together give the new answer")


def _spared(
    target: Target, edits: Sequence[Edit], every: Sequence[int], allowance: Allowance
) -> Searching[tuple[tuple[int, ...], bool]]:
    """A set that gives the new answer and from which no edit can be spared; whether that was found out.

    First the fewest files that are needed, of these the fewest rows, then halves of what is left and at last
    single edits.
    """
    kept = tuple(every)
    for name_of in (_file_of, _row_of):
        groups = list(_groups(edits, kept, name_of).values())
        if 1 < len(groups) < len(kept):
            kept, is_spared = yield from _fewest(target, groups, allowance)
            if not is_spared:
                return kept, False
    return (yield from _halved(target, [(one,) for one in kept], allowance))


def _file_of(edit: Edit) -> str:
    return edit.kind


def _row_of(edit: Edit) -> str:
    return edit.group


def _groups(edits: Sequence[Edit], chosen: Iterable[int], name_of: Callable[[Edit], str]) -> dict[str, tuple[int, ...]]:
    """Positions of edits by what they are an edit of."""
    groups: dict[str, tuple[int, ...]] = {}
    for position in chosen:
        name = name_of(edits[position])
        groups[name] = (*groups.get(name, ()), position)
    return groups


def grouped(edits: Sequence[Edit], chosen: Iterable[int]) -> dict[str, tuple[int, ...]]:
    """Positions of edits by what they are an edit of: each lot, each order, the settings."""
    return _groups(edits, chosen, _row_of)


def filed(edits: Sequence[Edit], chosen: Iterable[int]) -> dict[str, tuple[int, ...]]:
    """Positions of edits by where they stand: all lots, all orders, the settings."""
    return {f"{kind}s": own for kind, own in _groups(edits, chosen, _file_of).items()}


def _fewest(
    target: Target, groups: Sequence[tuple[int, ...]], allowance: Allowance
) -> Searching[tuple[tuple[int, ...], bool]]:
    """The first of the smallest sets of groups that give the new answer; by halves where these are too many."""
    left = MOST_FOR_GROUPS
    for size in range(1, len(groups)):
        count = comb(len(groups), size)
        if count > left or not allowance.takes_reserve(target.price * count):
            break
        left -= count
        unions = [_union(chosen) for chosen in combinations(groups, size)]
        yield target.wanted(map(frozenset, unions))
        for union in unions:
            if target.is_new(union):
                return union, True
    else:
        return _union(groups), True
    return (yield from _halved(target, groups, allowance))


def _halved(
    target: Target, units: Sequence[tuple[int, ...]], allowance: Allowance
) -> Searching[tuple[tuple[int, ...], bool]]:
    """Units that give the new answer together and of which none can be spared; whether that was found out.

    Halves of what is left are tried before single units, so that few replays are needed where few units matter
    (A. Zeller and R. Hildebrandt, "Simplifying and isolating failure-inducing input", 2002).
    """
    kept = list(units)
    size = max(1, len(kept) // 2)
    while True:
        is_shorter = False
        for part in list(_slices(kept, size)):
            rest = [unit for unit in kept if unit not in part]
            if not allowance.takes_reserve(target.price):
                return _union(kept), False
            yield target.wanted([frozenset(_union(rest))])
            if target.is_new(_union(rest)):
                kept, is_shorter = rest, True
        if size == 1 and not is_shorter:
            return _union(kept), True
        size = max(1, min(size // 2, len(kept) // 2))


def _slices(units: Sequence[tuple[int, ...]], size: int) -> Iterator[list[tuple[int, ...]]]:
    for start in range(0, len(units), size):
        yield list(units[start : start + size])


def _union(units: Iterable[tuple[int, ...]]) -> tuple[int, ...]:
    return tuple(sorted(position for unit in units for position in unit))
