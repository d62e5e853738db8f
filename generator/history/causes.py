"""Causes: which edits made an answer change.

For a changed verdict, every smallest set of edits that alone turns the old revision's verdict into the new
one, found by asking again with single edits, then pairs, and so on; and the edits whose undoing alone brings
the old verdict back.  For a changed cost or room, a fair division among the edits.  What the program's own
version changed is told apart: it is the difference between the recorded old answer and the present one for
the same input.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import combinations

from generator.findings.records import Findings
from generator.history.division import MOST_EXACT, SAMPLED_ORDERS, divided
from generator.history.edits import renamed
from generator.history.records import Cause, Change, Edit, Part
from generator.history.replay import NO_ANSWER, Question, Replay
from generator.intake.records import Campaign

#: Replays for one changed verdict; beyond, "at least k edits together" is all that is known.
MOST_FOR_A_VERDICT = 400
#: Replays for all changes of one revision: about half a minute at worst.
MOST_IN_ALL = 3000
#: Costs and rooms are floats in findings: a difference below this is none.
_SAME = 1e-9

TOO_MANY = "Too many answers changed in this revision to find the causes of each."
TOGETHER = "The edits can't be told apart here: made one by one, they leave no answer in between."
UNTOLD = "The edits alone do not account for this change."
PROGRAM = "program version"


@dataclass(frozen=True, slots=True, kw_only=True)
class Side:
    """One of the two revisions compared: its input and its answers as recorded."""

    campaign: Campaign
    findings: Findings


def explained(
    old: Side,
    new: Side,
    edits: Sequence[Edit],
    changes: Sequence[Change],
    *,
    same_program: bool = False,
    most: int = MOST_IN_ALL,
) -> tuple[Change, ...]:
    """The changes with the causes of changed verdicts, costs and rooms; at most ``most`` answers are asked again.

    Verdicts come first, then the greatest changes of cost and room.  ``same_program``: both answers were found
    by this very program, so that a change that one edit alone can have made needs no replay.
    """
    work = _Work(old, new, edits, most, same_program=same_program)
    told = list(changes)
    for position in sorted(range(len(changes)), key=lambda position: _urgency(changes[position])):
        told[position] = work.told(changes[position])
    return tuple(told)


def _urgency(change: Change) -> tuple[int, float]:
    """Verdicts before costs before rooms; of numbers the greatest relative change first."""
    rank = {"verdict": 0, "cost": 1, "room": 2}.get(change.kind, 3)
    if isinstance(change.old, float) and isinstance(change.new, float):
        return rank, -abs(change.new - change.old) / (abs(change.old) or 1.0)
    return rank, 0.0


class _Work:
    """The causes of one revision's changes, and how many answers may still be asked again."""

    def __init__(self, old: Side, new: Side, edits: Sequence[Edit], most: int, *, same_program: bool) -> None:
        self._old = old
        self._new = new
        self._edits = edits
        self._left = most
        self._same_program = same_program
        self._was = {name: was for was, name in renamed(edits, "order").items()}
        self._before = {order.order: order for order in old.findings.orders}
        self._replays: dict[str, Replay] = {}

    def told(self, change: Change) -> Change:
        """The change with its cause, where it is of a kind that has one."""
        if change.kind not in ("verdict", "cost", "room"):
            return change
        replay = self._replay(change.subject)
        asked = replay.asked
        cause: Cause | None
        if change.kind == "verdict":
            cause = self._verdict_cause(replay, change)
        else:
            question: Question = "cost" if change.kind == "cost" else "room"
            cause = self._number_cause(replay, change, question)
        self._left -= replay.asked - asked
        return replace(change, cause=cause)

    def _replay(self, order: str) -> Replay:
        if order not in self._replays:
            was = self._was.get(order, order)
            self._replays[order] = Replay(self._old.campaign, self._new.campaign, self._edits, order, was)
        return self._replays[order]

    def _verdict_cause(self, replay: Replay, change: Change) -> Cause:
        relevant = replay.relevant("verdict")
        if self._same_program and len(relevant) == 1:
            return Cause(suffices=(relevant,), at_least=1, restores=relevant)
        return verdict_cause(replay, change.old, change.new, min(self._left, MOST_FOR_A_VERDICT))

    def _number_cause(self, replay: Replay, change: Change, question: Question) -> Cause | None:
        if not isinstance(change.old, float) or not isinstance(change.new, float):
            return None
        groups = grouped(self._edits, replay.relevant(question))
        if self._same_program and len(groups) == 1:
            ((group, positions),) = groups.items()
            return Cause(parts=(Part(group=group, edits=positions, amount=change.new - change.old),))
        needed = 2 ** len(groups) if len(groups) <= MOST_EXACT else SAMPLED_ORDERS * len(groups)
        if needed > self._left:
            return Cause(remark=TOO_MANY)
        return number_cause(replay, question, groups, change.old, change.new)


def grouped(edits: Sequence[Edit], chosen: Iterable[int]) -> dict[str, tuple[int, ...]]:
    """Positions of edits by what they are an edit of: each lot, each order, the settings."""
    groups: dict[str, tuple[int, ...]] = {}
    for position in chosen:
        groups[edits[position].group] = (*groups.get(edits[position].group, ()), position)
    return groups


def verdict_cause(replay: Replay, old: object, new: object, most: int = MOST_FOR_A_VERDICT) -> Cause:
    """Why a verdict changed from ``old`` to ``new`` (None: no answer); at most about ``most`` replays."""
    if most <= 0:
        return Cause(remark=TOO_MANY)
    wanted, was = str(new or NO_ANSWER), str(old or NO_ANSWER)
    every = replay.relevant("verdict")
    start = replay.verdict(())
    by_program = start != was
    if start == wanted:
        return Cause(by_program=True)
    if replay.verdict(every) != wanted:
        return Cause(by_program=by_program, remark=UNTOLD)
    smallest, at_least = _smallest(replay, every, wanted, replay.asked + most)
    found = () if smallest else _spared(replay, every, wanted)
    involved = dict.fromkeys(position for chosen in (*smallest, found) for position in chosen)
    return Cause(
        suffices=smallest,
        at_least=at_least,
        found=found,
        restores=tuple(one for one in involved if replay.verdict(set(every) - {one}) == start),
        by_program=by_program,
    )


def _smallest(replay: Replay, every: Sequence[int], wanted: str, until: int) -> tuple[tuple[tuple[int, ...], ...], int]:
    """All smallest sets that give the wanted verdict; none if the replays run out, and what is then known."""
    for size in range(1, len(every) + 1):
        found: list[tuple[int, ...]] = []
        for chosen in combinations(every, size):
            if replay.asked >= until:
                return tuple(found), size
            if replay.verdict(chosen) == wanted:
                found.append(chosen)
        if found:
            return tuple(found), size
    raise AssertionError("all edits together give the wanted verdict")


def _spared(replay: Replay, every: Sequence[int], wanted: str) -> tuple[int, ...]:
    """A set that gives the wanted verdict and from which no edit can be spared.

    Halves of what is left are tried before single edits, so that few replays are needed where few edits matter
    (A. Zeller and R. Hildebrandt, "Simplifying and isolating failure-inducing input", 2002).
    """
    kept = list(every)
    size = len(kept) // 2
    while size:
        for part in list(_slices(kept, size)):
            rest = [position for position in kept if position not in part]
            if replay.verdict(rest) == wanted:
                kept = rest
        size = min(size // 2, len(kept) // 2) if size > 1 else 0
    return tuple(kept)


def _slices(items: Sequence[int], size: int) -> Iterator[set[int]]:
    for start in range(0, len(items), size):
        yield set(items[start : start + size])


def number_cause(
    replay: Replay, question: Question, groups: dict[str, tuple[int, ...]], old: float, new: float
) -> Cause:
    """How much each group of edits adds to a changed cost or room, and how much the program's version."""
    every = tuple(position for positions in groups.values() for position in positions)
    start, end = replay.number(question, ()), replay.number(question, every)
    if start is None or end is None or abs(float(end) - new) > _SAME * max(1.0, abs(new)):
        return Cause(remark=UNTOLD)
    parts = []
    drift = float(start) - old
    by_program = abs(drift) > _SAME * max(1.0, abs(old))
    if by_program:
        parts.append(Part(group=PROGRAM, edits=(), amount=drift))
    division = divided(len(groups), _value_of(replay, question, list(groups.values()))) if groups else None
    if groups and division is None:
        return Cause(parts=tuple(parts), by_program=by_program, remark=TOGETHER)
    if division is not None:
        for player, (group, positions) in enumerate(groups.items()):
            amount = float(division.amounts[player])
            error = None if division.errors is None else division.errors[player]
            if amount or error:
                parts.append(Part(group=group, edits=positions, amount=amount, error=error))
    parts.sort(key=lambda part: -abs(part.amount))
    return Cause(parts=tuple(parts), by_program=by_program)


def _value_of(
    replay: Replay, question: Question, groups: Sequence[tuple[int, ...]]
) -> Callable[[frozenset[int]], Fraction | None]:
    def value(players: frozenset[int]) -> Fraction | None:
        return replay.number(question, [position for player in players for position in groups[player]])

    return value
