"""Causes by brute force: every subset of all edits, every order of them, without pruning or search."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations, permutations

from generator.findings.answers import find
from generator.findings.measures import measures_of
from generator.findings.model import OrderModel, model_of
from generator.findings.recipes import cheapest_shares
from generator.findings.records import Findings
from generator.findings.values import table_of
from generator.findings.verdicts import judge
from generator.history.causes import Side, explained, grouped
from generator.history.compare import changes
from generator.history.edits import apply, edits
from generator.history.records import Cause, Change, Edit
from generator.intake.records import Campaign


@dataclass
class Oracle:
    """Answers one order of two campaigns for any subset of the edits between them."""

    old: Campaign
    edits: Sequence[Edit]
    order: str

    def __post_init__(self) -> None:
        self._models: dict[frozenset[int], OrderModel | None] = {}
        self._verdicts: dict[frozenset[int], str] = {}

    def model(self, subset: Iterable[int]) -> OrderModel | None:
        key = frozenset(subset)
        if key not in self._models:
            campaign = apply(self.old, [self.edits[position] for position in sorted(key)])
            model = model_of(campaign, campaign.order(self.order), table_of(campaign), measures_of(campaign))
            self._models[key] = model if isinstance(model, OrderModel) else None
        return self._models[key]

    def verdict(self, subset: Iterable[int]) -> str:
        key = frozenset(subset)
        if key not in self._verdicts:
            model = self.model(key)
            self._verdicts[key] = "none" if model is None else judge(model).verdict
        return self._verdicts[key]

    def cost(self, subset: Iterable[int]) -> Fraction | None:
        model = self.model(subset)
        if model is None or self.verdict(subset) not in ("makeable", "edge"):
            return None
        shares = cheapest_shares(model).staged.x
        return sum((share * (cost or 0) for share, cost in zip(shares, model.cost, strict=False)), Fraction(0))


def smallest(oracle: Oracle, wanted: str) -> set[frozenset[int]]:
    """All smallest subsets that give the wanted verdict."""
    every = range(len(oracle.edits))
    for size in range(len(oracle.edits) + 1):
        found = {frozenset(chosen) for chosen in combinations(every, size) if oracle.verdict(chosen) == wanted}
        if found:
            return found
    return set()


def shapley(oracle: Oracle) -> dict[str, Fraction] | None:
    """What each group adds, as a mean over all orders of the groups whose steps all have a cost."""
    groups = grouped(oracle.edits, range(len(oracle.edits)))
    totals = dict.fromkeys(groups, Fraction(0))
    count = 0
    for run in permutations(groups):
        subset: frozenset[int] = frozenset()
        steps = [oracle.cost(subset)]
        for group in run:
            subset |= frozenset(groups[group])
            steps.append(oracle.cost(subset))
        if any(step is None for step in steps):
            continue
        count += 1
        for group, before, after in zip(run, steps, steps[1:], strict=False):
            totals[group] += (after or 0) - (before or 0)
    return {group: total / count for group, total in totals.items()} if count else None


@dataclass
class Counted:
    """How many changes of a pair were checked."""

    verdicts: int = 0
    costs: int = 0
    undivided: int = 0


def check_pair(old: Campaign, new: Campaign) -> Counted:
    """Assert that every cause that is told for a pair of campaigns is the one that brute force finds."""
    before, after = find(old), find(new)
    made = edits(old, new)
    counted = Counted()
    for change in told(old, new, before, after):
        if change.cause is None:
            continue
        oracle = Oracle(old, made, change.subject)
        if change.kind == "verdict":
            _check_verdict(oracle, change, change.cause, len(made))
            counted.verdicts += 1
        elif change.kind == "cost":
            counted.costs += 1
            counted.undivided += _check_cost(oracle, change, change.cause)
    return counted


def told(old: Campaign, new: Campaign, before: Findings, after: Findings) -> tuple[Change, ...]:
    """The changes of a pair with their causes."""
    made = edits(old, new)
    sides = Side(campaign=old, findings=before), Side(campaign=new, findings=after)
    return explained(*sides, made, changes(before, after))


def _check_verdict(oracle: Oracle, change: Change, cause: Cause, count: int) -> None:
    expected = smallest(oracle, str(change.new or "none"))
    assert {frozenset(chosen) for chosen in cause.suffices} == expected
    assert {len(chosen) for chosen in expected} == {cause.at_least}
    involved = frozenset().union(*expected)
    was = str(change.old or "none")
    restores = {one for one in involved if oracle.verdict(set(range(count)) - {one}) == was}
    assert set(cause.restores) == restores
    assert not cause.by_program


def _check_cost(oracle: Oracle, change: Change, cause: Cause) -> bool:
    """Whether the cost was not divided, which brute force must then find impossible too."""
    expected = shapley(oracle)
    if expected is None:
        assert not cause.parts
        assert cause.remark
        return True
    parts = {part.group: part.amount for part in cause.parts}
    for group, amount in expected.items():
        assert abs(parts.get(group, 0.0) - float(amount)) < 1e-9
    assert isinstance(change.old, float)
    assert isinstance(change.new, float)
    assert abs(sum(parts.values()) - (change.new - change.old)) < 1e-9
    return False
