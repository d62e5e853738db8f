"""A changed number divided among the edits, as replays tell it: see :mod:`generator.history.division`."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from generator.history.division import asked_by, divided, most_asked_by
from generator.history.records import Cause, Edit, Part
from generator.history.replay import Question
from generator.history.searching import Allowance, Searching, Wanted
from generator.history.smallest import UNTOLD, Answering, filed, grouped, not_looked_for
from generator.history.systems import Subset

PROGRAM = "program version"
TOGETHER = "The edits can't be told apart here: made one by one, they leave no answer in between."
COARSE = "Divided by file only: row by row, {} more {} would be needed."

#: Replays for one changed number: a division among about a hundred rows.
MOST_FOR_A_NUMBER = 5000
#: Numbers are floats in findings: a difference below this, relative, is none.
_SAME = 1e-9
#: A joint probability is integrated to about this.
_SAME_CHANCE = 5e-5


@dataclass(frozen=True, slots=True, kw_only=True)
class Number:
    """A number that changed, of one question: as recorded before and now; ``price`` and ``what`` as of a Target."""

    replay: Answering
    question: Question
    old: float
    new: float
    price: int = 1
    what: str = "answers"

    def value(self, subset: Subset) -> Fraction | None:
        """The number with these edits made; None where there is none."""
        answer = self.replay.answer(self.question, subset)
        return answer if isinstance(answer, Fraction) else None

    def is_same(self, one: float, other: float) -> bool:
        """Whether two numbers differ by nothing but rounding."""
        least = _SAME_CHANCE if self.question == "conformity" else _SAME * max(1.0, abs(other))
        return abs(one - other) <= least


def number_cause(
    number: Number, edits: Sequence[Edit], every: Sequence[int], allowance: Allowance, *, same_program: bool = False
) -> Searching[Cause]:
    """How much each row's edits add to a changed number, and how much the program's version.

    Where the replays for that are too many, how much all edits of lots, of orders and of settings add.
    """
    groups, remark = _affordable(number, edits, every, allowance)
    if groups is None:
        return Cause(remark=remark)
    chosen = list(groups.values())
    unions = {players: _union(chosen, players) for players in asked_by(len(chosen))}
    yield [Wanted(number.replay, number.question, union) for union in unions.values()]
    start, end = number.value(frozenset()), number.value(frozenset(every))
    if start is None or end is None or not number.is_same(float(end), number.new):
        return Cause(remark=UNTOLD)
    drift = float(start) - number.old
    by_program = not number.is_same(float(start), number.old)
    if by_program and same_program:
        return Cause(remark=UNTOLD)
    parts = [Part(group=PROGRAM, edits=(), amount=drift)] if by_program else []
    division = divided(len(chosen), lambda players: number.value(unions[players])) if chosen else None
    if chosen and division is None:
        return Cause(parts=tuple(parts), by_program=by_program, remark=TOGETHER)
    if division is not None:
        for player, (group, positions) in enumerate(groups.items()):
            amount = float(division.amounts[player])
            error = None if division.errors is None else division.errors[player]
            if amount or error:
                parts.append(Part(group=group, edits=positions, amount=amount, error=error))
    parts.sort(key=lambda part: -abs(part.amount))
    return Cause(parts=tuple(parts), by_program=by_program, remark=remark)


def _affordable(
    number: Number, edits: Sequence[Edit], every: Sequence[int], allowance: Allowance
) -> tuple[Mapping[str, tuple[int, ...]] | None, str]:
    """The groups among which the number is divided, the finest that can be afforded; and what to say of it."""
    groups = grouped(edits, every)
    needed = most_asked_by(len(groups))
    if needed <= MOST_FOR_A_NUMBER:
        unions = (_union(list(groups.values()), players) for players in asked_by(len(groups)))
        needed = sum(not number.replay.knows(number.question, union) for union in unions)
        if allowance.takes(number.price * needed):
            return groups, ""
    files = filed(edits, every)
    if len(files) < len(groups) and allowance.takes_reserve(number.price * most_asked_by(len(files))):
        return files, COARSE.format(needed, number.what)
    return None, not_looked_for(needed, number.what)


def _union(groups: Sequence[tuple[int, ...]], players: frozenset[int]) -> Subset:
    return frozenset(position for player in players for position in groups[player])
