"""Causes by brute force: every subset of all edits, every order of them, without pruning or search."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from itertools import combinations, permutations

from generator import numbers
from generator.findings.answers import find
from generator.findings.ask import run
from generator.findings.conformity import conformities_of, uncertain_rows
from generator.findings.measures import measures_of
from generator.findings.model import OrderModel, model_of
from generator.findings.recipes import ask_cheapest, cheapest_shares
from generator.findings.records import Findings, Plan, Recipe
from generator.findings.room import room_of, scales_of
from generator.findings.uncertainty import uncertainty_of
from generator.findings.values import table_of
from generator.findings.verdicts import judge
from generator.history.causes import Side, explained, grouped
from generator.history.compare import SHARE_MOVED, changes
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

    def amount(self, subset: Iterable[int]) -> Fraction | None:
        model = self.model(subset)
        if model is None:
            return None
        judged = judge(model)
        if judged.verdict in ("unreachable", "barred"):
            return Fraction(0)
        return None if judged.greatest is None else judged.greatest.amount

    def room(self, subset: Iterable[int]) -> Fraction | None:
        model = self.model(subset)
        if model is None:
            return None
        scales = scales_of(model, {component.name: component for component in self._campaign(subset).components})
        room = room_of(model, scales, in_amount=self.verdict(subset) in ("makeable", "edge"))
        return None if room is None else room.t

    def recipe(self, subset: Iterable[int]) -> Mapping[str, float] | None:
        recipe = self._recipe(subset)
        return None if recipe is None else recipe.shares

    def conformity(self, subset: Iterable[int]) -> Fraction | None:
        recipe, model, campaign = self._recipe(subset), self.model(subset), self._campaign(subset)
        if recipe is None or model is None:
            return None
        table = table_of(campaign)
        rows = uncertain_rows(model, table, uncertainty_of(campaign, table))
        (found,) = conformities_of(model, rows, [recipe.exact])
        return None if found.all is None else Fraction(found.all)

    def _campaign(self, subset: Iterable[int]) -> Campaign:
        return apply(self.old, [self.edits[position] for position in sorted(subset)])

    def _recipe(self, subset: Iterable[int]) -> Recipe | None:
        model, campaign = self.model(subset), self._campaign(subset)
        if model is None or self.verdict(subset) not in ("makeable", "edge"):
            return None
        return run(ask_cheapest(model, table_of(campaign), measures_of(campaign)))[0]

    def cost(self, subset: Iterable[int]) -> Fraction | None:
        model = self.model(subset)
        if model is None or self.verdict(subset) not in ("makeable", "edge"):
            return None
        shares = cheapest_shares(model).staged.x
        return sum((share * (cost or 0) for share, cost in zip(shares, model.cost, strict=False)), Fraction(0))


@dataclass
class PlanOracle:
    """The plan of a campaign for any subset of the edits, as its findings have it."""

    old: Campaign
    edits: Sequence[Edit]

    def __post_init__(self) -> None:
        self._plans: dict[frozenset[int], Plan | None] = {}

    def plan(self, subset: Iterable[int]) -> Plan | None:
        key = frozenset(subset)
        if key not in self._plans:
            self._plans[key] = find(apply(self.old, [self.edits[position] for position in sorted(key)])).plan
        return self._plans[key]

    def accepted(self, order: str, subset: Iterable[int], places: int) -> str | None:
        plan = self.plan(subset)
        return numbers.text(plan.orders[order].accepted, places) if plan and order in plan.orders else None

    def value(self, subset: Iterable[int]) -> Fraction | None:
        plan = self.plan(subset)
        return None if plan is None or plan.value is None else Fraction(plan.value)


def smallest(count: int, is_wanted: Callable[[tuple[int, ...]], bool]) -> set[frozenset[int]]:
    """All smallest subsets of so many edits that are wanted."""
    for size in range(count + 1):
        found = {frozenset(chosen) for chosen in combinations(range(count), size) if is_wanted(chosen)}
        if found:
            return found
    return set()


def shapley(edits: Sequence[Edit], value: Callable[[frozenset[int]], Fraction | None]) -> dict[str, Fraction] | None:
    """What each group adds, as a mean over all orders of the groups whose steps all have a value."""
    groups = grouped(edits, range(len(edits)))
    known: dict[frozenset[int], Fraction | None] = {}

    def value_of(subset: frozenset[int]) -> Fraction | None:
        if subset not in known:
            known[subset] = value(subset)
        return known[subset]

    totals = dict.fromkeys(groups, Fraction(0))
    count = 0
    for order in permutations(groups):
        subset: frozenset[int] = frozenset()
        steps = [value_of(subset)]
        for group in order:
            subset |= frozenset(groups[group])
            steps.append(value_of(subset))
        if any(step is None for step in steps):
            continue
        count += 1
        for group, before, after in zip(order, steps, steps[1:], strict=False):
            totals[group] += (after or 0) - (before or 0)
    return {group: total / count for group, total in totals.items()} if count else None


@dataclass
class Counted:
    """How many changes of a pair were checked, by kind, and how many of them were rightly not divided."""

    kinds: Counter[str] = field(default_factory=Counter)
    undivided: int = 0


#: A joint probability is integrated to about this.
_CHANCE = 2e-5


def check_pair(old: Campaign, new: Campaign, *, with_plans: bool = False) -> Counted:
    """Assert that every cause that is told for a pair of campaigns is the one that brute force finds."""
    before, after = find(old), find(new)
    made = edits(old, new)
    counted = Counted()
    plans = PlanOracle(old, made)
    for change in told(old, new, before, after):
        if change.cause is None:
            continue
        oracle = Oracle(old, made, change.subject)
        if change.kind in ("accepted", "plan"):
            if not with_plans:
                continue
            counted.undivided += _check_plan(plans, change, change.cause)
        elif change.kind in ("verdict", "recipe"):
            _check_sets(len(made), change.cause, *_tests(oracle, change, after))
        elif change.old is not None and change.new is not None:
            counted.undivided += _check_parts(made, change, change.cause, getattr(oracle, change.kind))
        counted.kinds[change.kind] += 1
    return counted


#: More replays than any pair here can take.
_ENOUGH = 10**7


def told(old: Campaign, new: Campaign, before: Findings, after: Findings) -> tuple[Change, ...]:
    """The changes of a pair with their causes."""
    made = edits(old, new)
    sides = Side(campaign=old, findings=before), Side(campaign=new, findings=after)
    return explained(*sides, made, changes(before, after), most=_ENOUGH)


Test = Callable[[Iterable[int]], bool]


def _tests(oracle: Oracle, change: Change, after: Findings) -> tuple[Test, Test]:
    """Whether a subset of the edits gives the new answer, and the old one."""
    if change.kind == "verdict":
        old, new = (str(verdict or "none") for verdict in (change.old, change.new))
        return lambda subset: oracle.verdict(subset) == new, lambda subset: oracle.verdict(subset) == old
    (recorded,) = [order.recipes["cheapest"].shares for order in after.orders if order.order == change.subject]
    start = oracle.recipe(())
    return lambda subset: _is_near(oracle.recipe(subset), recorded), lambda subset: _is_near(
        oracle.recipe(subset), start
    )


def _is_near(one: Mapping[str, float] | None, other: Mapping[str, float] | None) -> bool:
    if one is None or other is None:
        return False
    return max(abs(one.get(lot, 0.0) - other.get(lot, 0.0)) for lot in {*one, *other}) < SHARE_MOVED


def _check_sets(count: int, cause: Cause, is_new: Test, is_old: Test) -> None:
    expected = smallest(count, is_new)
    assert {frozenset(chosen) for chosen in cause.suffices} == expected
    assert {len(chosen) for chosen in expected} == {cause.at_least}
    involved = frozenset().union(*expected)
    assert set(cause.restores) == {one for one in involved if is_old(set(range(count)) - {one})}
    assert not cause.by_program


def _check_plan(plans: PlanOracle, change: Change, cause: Cause) -> bool:
    if change.kind == "plan":
        return _check_parts(plans.edits, change, cause, plans.value)
    places = change.places or 0
    old, new = (numbers.text(amount, places) for amount in (change.old, change.new))  # type: ignore[arg-type]
    _check_sets(
        len(plans.edits),
        cause,
        lambda subset: plans.accepted(change.subject, subset, places) == new,
        lambda subset: plans.accepted(change.subject, subset, places) == old,
    )
    return False


def _check_parts(
    edits: Sequence[Edit], change: Change, cause: Cause, value: Callable[[frozenset[int]], Fraction | None]
) -> bool:
    """Whether the number was not divided, which brute force must then find impossible too."""
    near = _CHANCE if change.kind == "conformity" else 1e-9
    expected = shapley(edits, value)
    if expected is None:
        assert not cause.parts
        assert cause.remark
        return True
    parts = {part.group: part.amount for part in cause.parts}
    for group, amount in expected.items():
        assert abs(parts.get(group, 0.0) - float(amount)) < near
    assert isinstance(change.old, float)
    assert isinstance(change.new, float)
    assert abs(sum(parts.values()) - (change.new - change.old)) < near
    return False
