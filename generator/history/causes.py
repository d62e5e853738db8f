"""Causes: which edits made an answer change.

For a changed verdict, recipe or plan every smallest set of edits that alone turns the old revision's answer
into the new one, and the edits whose undoing alone brings the old answer back.  For a changed cost, room,
greatest amount or conformity a fair division among the edits.  What the program's own version changed is told
apart: it is the difference between the recorded old answer and the present one for the same input.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import cast

from generator import numbers
from generator.findings.records import Findings
from generator.history.compare import SHARE_MOVED
from generator.history.edits import renamed
from generator.history.parted import PROGRAM, TOGETHER, Number, number_cause
from generator.history.plan_replay import PlanReplay
from generator.history.questions import NO_ANSWER, NO_BOUND, NOT_KNOWN, Answer
from generator.history.records import Cause, Change, Edit, Part
from generator.history.relevance import Question
from generator.history.replay import Replay
from generator.history.searching import Allowance, Searching, side_by_side
from generator.history.smallest import UNTOLD, Target, grouped, not_looked_for, set_cause
from generator.intake.records import Campaign

__all__ = ["MOST_IN_ALL", "PROGRAM", "TOGETHER", "UNTOLD", "Side", "explained", "grouped"]

#: Replays for all changes of one revision: some fifteen seconds at 2.5 to 3.5 ms each (tests/bench/bench_causes.py).
MOST_IN_ALL = 5_000
#: Of these so many in a hundred are kept for changes whose cause can't be searched for to the end.
_RESERVE = 20

#: Of the plan's replays so many in a hundred as of all others: some five seconds at worst.
_FOR_PLANS = 50
NOT_PROVEN = "The plan was not proven best, so that no edit can be named for what it gives."

#: The solving that one replay takes, where a plain one takes 1, and what it takes besides (measured).
PRICES: Mapping[Question, int] = {"verdict": 1, "cost": 1, "amount": 1, "recipe": 1, "room": 2, "conformity": 1}
_BESIDES: Mapping[Question, int] = {"conformity": 19}
#: The kinds of changes that have a cause, in the turns in which it is searched for.
_TURNS: tuple[tuple[str, ...], ...] = (("verdict",), ("cost", "amount", "room", "conformity"), ("recipe",))
#: House rules are kept by branching: with them solving takes about so many times as long (measured).
_WITH_RULES = 5
#: A plan takes about so many plain replays, and as many more for every node of its search.
_PLAN_PRICE = 100
#: What stands for a number that isn't there.
_INSTEAD: Mapping[str, str] = {"cost": NOT_KNOWN, "amount": NO_BOUND}


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
    """The changes with their causes; at most about ``most`` answers are asked again.

    Verdicts come first, then the greatest changes of numbers, then recipes; those of one turn are searched
    for side by side.  ``same_program``: both answers were found by this very program.
    """
    reserve = most * _RESERVE // 100
    work = _Work(old, new, edits, Allowance(most - reserve, reserve), same_program=same_program)
    told = list(changes)
    for kinds in _TURNS:
        positions = [position for position, change in enumerate(changes) if change.kind in kinds]
        positions.sort(key=lambda position: _urgency(changes[position]))
        causes = side_by_side([work.cause(changes[position]) for position in positions])
        for position, cause in zip(positions, causes, strict=True):
            told[position] = replace(changes[position], cause=cause)
    plans = _Plans(old, new, edits, Allowance(most * _FOR_PLANS // 100), same_program=same_program)
    for position in sorted(range(len(changes)), key=lambda position: _urgency(changes[position])):
        if changes[position].kind in ("accepted", "plan"):
            # One after another: what one has asked the next one knows, and plans are not solved in stacks.
            (told_of_plan,) = side_by_side([plans.cause(changes[position])])
            told[position] = replace(changes[position], cause=told_of_plan)
    return tuple(told)


def _urgency(change: Change) -> float:
    """The greatest relative change first."""
    if isinstance(change.old, float) and isinstance(change.new, float):
        return -abs(change.new - change.old) / (abs(change.old) or 1.0)
    return 0.0


class _Work:
    """The causes of one revision's changes, and how many answers may still be asked again."""

    def __init__(
        self, old: Side, new: Side, edits: Sequence[Edit], allowance: Allowance, *, same_program: bool
    ) -> None:
        self._old = old
        self._new = new
        self._edits = edits
        self._allowance = allowance
        self._same_program = same_program
        self._was = {name: was for was, name in renamed(edits, "order").items()}
        self._lots = renamed(edits, "lot")
        self._replays: dict[str, Replay] = {}

    def cause(self, change: Change) -> Searching[Cause | None]:
        """The cause of a change of one order."""
        replay = self._replay(change.subject)
        if change.kind == "recipe":
            return (yield from self._recipe(replay))
        question = cast("Question", change.kind)
        if isinstance(change.old, float) and isinstance(change.new, float):
            return (yield from self._number(replay, change, question))
        return (yield from self._word(replay, change, question))

    def _replay(self, order: str) -> Replay:
        if order not in self._replays:
            was = self._was.get(order, order)
            self._replays[order] = Replay(self._old.campaign, self._new.campaign, self._edits, order, was)
        return self._replays[order]

    def _price(self, question: Question) -> int:
        has_rules = any(_has_rules(side.campaign) for side in (self._old, self._new))
        return PRICES[question] * (_WITH_RULES if has_rules else 1) + _BESIDES.get(question, 0)

    def _number(self, replay: Replay, change: Change, question: Question) -> Searching[Cause]:
        assert isinstance(change.old, float)
        assert isinstance(change.new, float)
        every = replay.relevant(question)
        groups = grouped(self._edits, every)
        # A probability depends on the recipe, and that on the order of the rows between equals.
        if self._same_program and len(groups) == 1 and question != "conformity":
            ((group, positions),) = groups.items()
            return Cause(parts=(Part(group=group, edits=positions, amount=change.new - change.old),))
        number = Number(replay=replay, question=question, old=change.old, new=change.new, price=self._price(question))
        return (yield from number_cause(number, self._edits, every, self._allowance, same_program=self._same_program))

    def _word(self, replay: Replay, change: Change, question: Question) -> Searching[Cause]:
        """A changed verdict; or a number that came or went."""
        every = replay.relevant(question)
        if self._same_program and len(every) == 1:
            return Cause(suffices=(every,), at_least=1, restores=every)
        target = Target(
            replay=replay,
            question=question,
            old=_recorded(change.kind, change.old),
            new=_recorded(change.kind, change.new),
            alike=_is_same_word,
            price=self._price(question),
            same_program=self._same_program,
        )
        return (yield from set_cause(target, self._edits, every, self._allowance))

    def _recipe(self, replay: Replay) -> Searching[Cause | None]:
        old, new = self._shares(self._old, replay.was), self._shares(self._new, replay.order)
        if old is None or new is None:
            return None
        target = Target(
            replay=replay,
            question="recipe",
            old=old,
            new=new,
            alike=self._is_same_recipe,
            price=self._price("recipe"),
            same_program=self._same_program,
        )
        return (yield from set_cause(target, self._edits, replay.relevant("recipe"), self._allowance))

    def _shares(self, side: Side, name: str) -> Mapping[str, Fraction] | None:
        """The recorded shares of the cheapest recipe."""
        for order in side.findings.orders:
            if order.order == name and "cheapest" in order.recipes:
                return {lot: Fraction(share) for lot, share in order.recipes["cheapest"].shares.items()}
        return None

    def _is_same_recipe(self, one: Answer, other: Answer) -> bool:
        """Whether no share differs by as much as counts as a change; renamed lots are the same lots."""
        if not isinstance(one, Mapping) or not isinstance(other, Mapping):
            return one is other
        shares, others = ({self._lots.get(lot, lot): share for lot, share in recipe.items()} for recipe in (one, other))
        return all(
            abs(float(shares.get(lot, 0)) - float(others.get(lot, 0))) < SHARE_MOVED for lot in {**shares, **others}
        )


class _Plans:
    """The causes of what the plan gives otherwise, from plans made with some of the edits."""

    def __init__(
        self, old: Side, new: Side, edits: Sequence[Edit], allowance: Allowance, *, same_program: bool
    ) -> None:
        self._plans = [side.findings.plan for side in (old, new)]
        self._replay = PlanReplay(old.campaign, new.campaign, edits)
        self._edits = edits
        self._allowance = allowance
        self._same_program = same_program

    def cause(self, change: Change) -> Searching[Cause]:
        """The cause of a changed amount of one order, or of the plan's changed value."""
        assert isinstance(change.old, float)
        assert isinstance(change.new, float)
        if any(plan is None or plan.status != "proven" for plan in self._plans):
            return Cause(remark=NOT_PROVEN)
        every = self._replay.relevant()
        if change.kind == "plan":
            return (yield from self._value(change.old, change.new, every))
        if self._same_program and len(every) == 1:
            return Cause(suffices=(every,), at_least=1, restores=every)
        target = Target(
            replay=self._replay,
            question="plan",
            old={change.subject: Fraction(change.old)},
            new={change.subject: Fraction(change.new)},
            alike=_gives_alike(change),
            price=self._price,
            what="plans",
            same_program=self._same_program,
        )
        if target.fresh(frozenset([one]) for one in every) > self._allowance.left:
            # Not even the two plans at both ends are made where single edits can't be tried.
            return Cause(remark=not_looked_for(len(every), "plans"))
        return (yield from set_cause(target, self._edits, every, self._allowance))

    def _value(self, old: float, new: float, every: Sequence[int]) -> Searching[Cause]:
        groups = grouped(self._edits, every)
        if self._same_program and len(groups) == 1:
            ((group, positions),) = groups.items()
            return Cause(parts=(Part(group=group, edits=positions, amount=new - old),))
        number = Number(replay=self._replay, question="value", old=old, new=new, price=self._price, what="plans")
        return (yield from number_cause(number, self._edits, every, self._allowance, same_program=self._same_program))

    @property
    def _price(self) -> int:
        return _PLAN_PRICE * (1 + max(plan.nodes for plan in self._plans if plan is not None))


def _gives_alike(change: Change) -> Callable[[Answer, Answer], bool]:
    """Whether two plans give the order of a change the same amount, as it is told."""
    places = change.places or 0

    def alike(one: Answer, other: Answer) -> bool:
        if not isinstance(one, Mapping) or not isinstance(other, Mapping):
            return False
        amounts = [plan.get(change.subject) for plan in (one, other)]
        texts = {None if amount is None else numbers.text(amount, places) for amount in amounts}
        return len(texts) == 1

    return alike


def verdict_cause(replay: Replay, old: object, new: object, most: int = MOST_IN_ALL) -> Cause:
    """Why a verdict changed from ``old`` to ``new`` (None: no answer); at most about ``most`` replays."""
    target = Target(
        replay=replay, question="verdict", old=str(old or NO_ANSWER), new=str(new or NO_ANSWER), alike=_is_same_word
    )
    (cause,) = side_by_side(
        [set_cause(target, replay.edits, replay.relevant("verdict"), Allowance(most, MOST_IN_ALL), most)]
    )
    return cause


def _has_rules(campaign: Campaign) -> bool:
    """Whether any house rule is set, for all orders or for a lot."""
    house = campaign.house
    return bool(
        house.keep_apart
        or house.max_lots is not None
        or house.least_if_used
        or any(lot.least_if_used for lot in campaign.lots)
    )


def _recorded(kind: str, value: object) -> Answer:
    """A recorded verdict or number as a replay answers it."""
    if kind == "verdict":
        return str(value or NO_ANSWER)
    return _INSTEAD.get(kind) if value is None else Fraction(cast("float", value))


def _is_same_word(one: Answer, other: Answer) -> bool:
    """Whether two verdicts are the same; of numbers, whether both are there."""
    return isinstance(one, Fraction) if isinstance(other, Fraction) else one == other
