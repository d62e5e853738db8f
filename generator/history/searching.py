"""Searches for causes, run side by side: whatever all of them want asked again next is solved as one stack.

A search is a generator: it yields the replays that it waits for, and goes on when their answers are kept.
How many replays may be asked is an :class:`Allowance`, which searches take from in their fixed order, so that
the same changes always have the same causes told.
"""

from __future__ import annotations

from collections.abc import Generator, Iterable, Sequence
from dataclasses import dataclass
from typing import Protocol, TypeVar, cast

from generator.findings.ask import Asking, run, together
from generator.history.relevance import Question
from generator.history.systems import Subset

T = TypeVar("T")

#: Replays solved side by side: enough for the stack to pay, and few enough to be held at once (measured).
WAVE = 400


class Asked(Protocol):
    """What can be asked again with some of the edits made, and keeps the answers."""

    def knows(self, question: Question, subset: Subset) -> bool:
        """Whether this was asked before."""

    def ask(self, question: Question, subset: Subset) -> Asking[None]:
        """Ask the question with these edits made."""


@dataclass(frozen=True, slots=True)
class Wanted:
    """One replay that a search waits for."""

    replay: Asked
    question: Question
    subset: Subset

    @property
    def is_known(self) -> bool:
        """Whether its answer is there."""
        return self.replay.knows(self.question, self.subset)


Searching = Generator[list[Wanted], None, T]


@dataclass(slots=True)
class Allowance:
    """How many replays may still be asked: ``left`` for exact searches, ``reserve`` for what little can be said
    where these don't fit.  Both in the price of one plain replay."""

    left: int
    reserve: int = 0

    def takes(self, price: int) -> bool:
        """Whether so much is left; then it is taken."""
        if price > self.left:
            return False
        self.left -= price
        return True

    def takes_reserve(self, price: int) -> bool:
        """Likewise, from what is left first, then from the reserve."""
        if price > self.left + self.reserve:
            return False
        own = min(self.left, price)
        self.left, self.reserve = self.left - own, self.reserve - (price - own)
        return True


def side_by_side(searches: Sequence[Searching[T]]) -> list[T]:
    """The results of all searches, in their order; what they wait for at one time is asked together."""
    results: list[T | None] = [None] * len(searches)
    waiting: dict[int, list[Wanted]] = {place: [] for place in range(len(searches))}
    while waiting:
        for place in list(waiting):
            try:
                waiting[place] = next(searches[place])
            except StopIteration as ended:
                results[place] = ended.value
                del waiting[place]
        answer_all(wanted for own in waiting.values() for wanted in own)
    return cast("list[T]", results)


def answer_all(wanted: Iterable[Wanted]) -> None:
    """Ask what is not known yet, in waves of bounded size."""
    unknown = {(id(one.replay), one.question, one.subset): one for one in wanted if not one.is_known}
    asked = list(unknown.values())
    for start in range(0, len(asked), WAVE):
        run(together([one.replay.ask(one.question, one.subset) for one in asked[start : start + WAVE]]))
