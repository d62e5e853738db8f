"""Causes name the edits that did it, as brute force over all subsets and orders confirms."""

from __future__ import annotations

import copy
from collections import Counter
from dataclasses import replace
from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from generator.findings.answers import find
from generator.findings.measures import measures_of
from generator.findings.model import OrderModel, model_of
from generator.findings.values import table_of
from generator.history import searching
from generator.history.causes import NOT_PROVEN, TOGETHER, Side, explained, verdict_cause
from generator.history.compare import changes
from generator.history.division import MOST_EXACT, divided
from generator.history.edits import edits
from generator.history.records import Cause, Change, Part
from generator.history.relevance import Relevance
from generator.history.replay import Replay
from generator.history.searching import Allowance, side_by_side
from generator.history.smallest import NOT_SPARED, Target, set_cause
from generator.history.systems import Systems, ranks
from tests.history.brute import Oracle, check_pair, told
from tests.history.making import Tables, pair, ruled_pair

F = Fraction


def plain() -> Tables:
    """Lots A (N 10, K 20) and B (N 30, K 5); an order midway between them."""
    return Tables(
        lots={
            "A": {"stock": "100", "cost": "10", "N": "10", "K": "20"},
            "B": {"stock": "100", "cost": "20", "N": "30", "K": "5"},
        },
        orders={"1042": {"amount": "10", "N": ">= 20", "K": ">= 10"}},
    )


def story(old: Tables, new: Tables) -> tuple[list[str], tuple[Change, ...]]:
    """The edits' clauses and the changes with their causes."""
    before, after = old.campaign(), new.campaign()
    return [edit.clause for edit in edits(before, after)], told(before, after, find(before), find(after))


def only(kind: str, found: tuple[Change, ...]) -> Change:
    (change,) = [change for change in found if change.kind == kind]
    return change


def test_causes_are_those_of_brute_force() -> None:
    """Smallest sets, what restores, and fair parts agree with trying every subset and every order."""
    counted = [check_pair(*pair(seed)) for seed in (3, 8, 9, 15, 29, 46)]
    kinds = sum((one.kinds for one in counted), Counter[str]())
    assert kinds["verdict"] > 5
    assert kinds["cost"] > 6
    assert kinds["recipe"] > 3
    assert kinds["amount"] > 3
    assert kinds["conformity"] > 2


def test_causes_within_house_rules_are_those_of_brute_force() -> None:
    """Where recipes have rules to keep, causes agree with trying every subset as well."""
    kinds = sum((check_pair(*ruled_pair(seed)).kinds for seed in (2, 4, 9, 29)), Counter[str]())
    assert kinds["verdict"] > 1
    assert kinds.total() > 6


@given(st.integers(0, 10**6))
@settings(max_examples=15, deadline=None)
def test_what_is_not_replayed_does_not_matter(seed: int) -> None:
    """The relevant edits alone give the newer verdict and cost of every order: the others never matter."""
    old, new = pair(seed)
    made = edits(old, new)
    for order in new.orders:
        replay = Replay(old, new, made, order.name, order.name)
        oracle = Oracle(old, made, order.name)
        every = range(len(made))
        assert replay.verdict(replay.relevant("verdict")) == oracle.verdict(every)
        if oracle.cost(every) is not None:
            assert replay.number("cost", replay.relevant("cost")) == oracle.cost(every)


@pytest.mark.parametrize("seed", [3, 8, 16, 29, 46])
def test_trusting_the_same_program_spares_replays_only(seed: int) -> None:
    """Where both answers are this program's own, causes are the same as with everything asked again."""
    old, new = pair(seed)
    sides = (Side(campaign=old, findings=find(old)), Side(campaign=new, findings=find(new)))
    made, found = edits(old, new), changes(sides[0].findings, sides[1].findings)
    slow, fast = (explained(*sides, made, found, same_program=same) for same in (False, True))
    for one, other in zip(slow, fast, strict=True):
        assert (one.cause is None) == (other.cause is None)
        if one.cause is not None and other.cause is not None:
            assert replace(one.cause, parts=()) == replace(other.cause, parts=())
            assert [(part.group, pytest.approx(part.amount)) for part in one.cause.parts] == [
                (part.group, part.amount) for part in other.cause.parts
            ]


def test_one_edit_of_many_is_named() -> None:
    """Of several edits the one that lost the order is named, and undoing it restores the order."""
    new = plain()
    new.lots["A"] |= {"K": "12", "cost": "11"}
    new.lots["B"]["stock"] = "90"
    clauses, found = story(plain(), new)
    cause = only("verdict", found).cause
    assert cause is not None
    assert [clauses[position] for (position,) in cause.suffices] == ["lot A's K re-assayed from 20 to 12"]
    assert cause.restores == cause.suffices[0]
    assert cause.at_least == 1


def test_two_edits_that_only_work_together() -> None:
    """Where neither edit alone loses the order, the pair is named, and undoing either restores it."""
    new = plain()
    new.lots["A"]["K"] = "17"
    new.lots["B"]["K"] = "2"
    clauses, found = story(plain(), new)
    cause = only("verdict", found).cause
    assert cause is not None
    assert cause.suffices == ((0, 1),)
    assert cause.restores == (0, 1)
    assert len(clauses) == 2


def test_either_edit_would_do() -> None:
    """Where each of two edits alone loses the order, both are named, and undoing one restores nothing."""
    new = plain()
    new.lots["A"]["K"] = "9"
    new.orders["1042"]["K"] = ">= 19"
    _, found = story(plain(), new)
    cause = only("verdict", found).cause
    assert cause is not None
    assert cause.suffices == ((0,), (1,))
    assert cause.restores == ()


def test_a_search_that_is_cut_short_says_so() -> None:
    """Past the bound, a set that suffices is given from which nothing can be spared, and "at least" is honest."""
    new = plain()
    new.lots["A"]["K"] = "17"
    new.lots["B"]["K"] = "2"
    new.lots["A"]["N"] = "10.01"
    before, after = plain().campaign(), new.campaign()
    replay = Replay(before, after, edits(before, after), "1042", "1042")
    cause = verdict_cause(replay, "makeable", "unreachable", most=3)
    assert cause.suffices == ()
    assert cause.at_least == 2
    assert [replay.edits[position].field for position in cause.found] == ["K", "K"]


def test_without_replays_left_nothing_is_claimed() -> None:
    """A revision of too many changes says that causes were not looked for, and what that would take."""
    new = plain()
    new.lots["A"] |= {"K": "12", "N": "11", "cost": "11"}
    before, after = plain().campaign(), new.campaign()
    sides = (Side(campaign=before, findings=find(before)), Side(campaign=after, findings=find(after)))
    found = changes(sides[0].findings, sides[1].findings)
    cause = only("verdict", explained(*sides, edits(before, after), found, most=0)).cause
    assert cause == Cause(at_least=1, remark="Not looked for: at least 2 more answers would be needed.")


def test_a_cost_is_divided_and_sums_up() -> None:
    """Two dearer lots share the rise of a recipe's cost in the proportion of their shares."""
    new = plain()
    new.lots["A"]["cost"] = "12"
    new.lots["B"]["cost"] = "26"
    _, found = story(plain(), new)
    cause = only("cost", found).cause
    assert cause is not None
    assert {part.group: pytest.approx(part.amount) for part in cause.parts} == {"lot A": 1.0, "lot B": 3.0}


def test_what_can_t_be_told_apart_is_not_divided() -> None:
    """Where every single edit loses the order and all together keep it, no part is made up."""
    new = plain()
    new.lots["A"] |= {"N": "30", "K": "5", "cost": "9"}
    new.lots["B"] |= {"N": "10", "K": "20", "cost": "22"}
    _, found = story(plain(), new)
    assert only("cost", found).cause == Cause(remark=TOGETHER)


def test_another_program_is_a_cause_of_its_own() -> None:
    """What the present program answers otherwise on the old input is laid to the program, not to an edit."""
    before = plain().campaign()
    new = plain()
    new.lots["B"]["supplier"] = "Tarn"
    after = new.campaign()
    honest = find(before)
    lied = replace(honest, orders=(replace(honest.orders[0], verdict="unreachable", recipes={}),))
    sides = (Side(campaign=before, findings=lied), Side(campaign=after, findings=find(after)))
    made = edits(before, after)
    (change, *_) = explained(*sides, made, changes(lied, sides[1].findings))
    assert change.cause == Cause(by_program=True)


def test_a_cost_that_the_program_moved_has_a_part_of_its_own() -> None:
    """The parts of a cost are the program's and the edits', and sum to the change."""
    new = plain()
    new.lots["A"]["cost"] = "12"
    before, after = plain().campaign(), new.campaign()
    honest = find(before)
    cheapest = replace(honest.orders[0].recipes["cheapest"], cost=14.5)
    older = replace(honest, orders=(replace(honest.orders[0], recipes={"cheapest": cheapest}),))
    sides = (Side(campaign=before, findings=older), Side(campaign=after, findings=find(after)))
    found = explained(*sides, edits(before, after), changes(older, sides[1].findings))
    cause = only("cost", found).cause
    assert cause is not None
    assert cause.by_program
    assert {part.group: pytest.approx(part.amount) for part in cause.parts} == {"program version": 0.5, "lot A": 1.0}


def test_a_renamed_order_is_followed() -> None:
    """An order that got another name is asked again under its old one where that edit is not made."""
    new = plain()
    new.orders = {"1043": new.orders["1042"]}
    new.lots["A"]["K"] = "12"
    before, after = plain().campaign(), new.campaign()
    made = edits(before, after)
    replay = Replay(before, after, made, "1043", "1042")
    assert replay.verdict(()) == "makeable"
    assert replay.verdict(range(len(made))) == "unreachable"


def additive(weights: list[int]) -> object:
    return lambda players: F(sum(weights[player] for player in players))


@given(st.lists(st.integers(-9, 9), min_size=1, max_size=MOST_EXACT + 3))
@settings(max_examples=40, deadline=None)
def test_parts_of_a_sum_are_its_terms(weights: list[int]) -> None:
    """Where edits don't act on each other each gets its own effect, exact or sampled."""
    division = divided(len(weights), additive(weights))  # type: ignore[arg-type]
    assert division is not None
    assert division.amounts == tuple(F(weight) for weight in weights)


@given(st.integers(2, MOST_EXACT + 2), st.integers(0, 10**6))
@settings(max_examples=25, deadline=None)
def test_parts_sum_to_the_change(players: int, seed: int) -> None:
    """Whatever the values, the parts sum to value(all) − value(none)."""

    def value(chosen: frozenset[int]) -> Fraction:
        return F((hash((seed, *sorted(chosen))) % 1000), 7)

    division = divided(players, value)
    assert division is not None
    assert sum(division.amounts) == value(frozenset(range(players))) - value(frozenset())


def test_a_known_game() -> None:
    """The glove game: one left and two right gloves, worth 1 as a pair, divide as 2/3, 1/6, 1/6.

    From memory: the standard textbook example of Shapley's value.
    """
    division = divided(3, lambda chosen: F(0 in chosen and len(chosen) > 1))
    assert division is not None
    assert division.amounts == (F(2, 3), F(1, 6), F(1, 6))


def test_sampled_parts_state_their_error() -> None:
    """Beyond the exact bound parts are sampled, the same each time, near the truth within their error."""
    players = MOST_EXACT + 2

    def value(chosen: frozenset[int]) -> Fraction:
        return F(len(chosen) ** 2)

    division = divided(players, value)
    assert division == divided(players, value)
    assert division is not None
    assert division.errors is not None
    for amount, error in zip(division.amounts, division.errors, strict=True):
        assert abs(float(amount) - players) <= 5 * error + 1e-9


def test_orders_without_an_answer_in_between_are_not_counted() -> None:
    """Only orders of the edits that keep an answer count: here player 1 must come first."""
    values = {frozenset(): F(0), frozenset({1}): F(5), frozenset({0, 1}): F(7)}
    division = divided(2, values.get)
    assert division is not None
    assert division.amounts == (F(2), F(5))


def test_a_part_is_what_it_says() -> None:
    """A cause with parts is told, an empty one is not."""
    assert Cause(parts=(Part(group="lot A", edits=(0,), amount=1.0),)).is_told
    assert not Cause(remark=TOGETHER).is_told


@given(st.integers(0, 10**6), st.integers(0, 63))
@settings(max_examples=25, deadline=None)
def test_a_system_from_kept_columns_is_the_same_as_a_new_one(seed: int, mask: int) -> None:
    """Whatever edits are made and were made before, the system laid together from columns is that of the campaign."""
    old, new = pair(seed)
    made = edits(old, new)
    for order in new.orders:
        relevance = Relevance.of(old, new, order.name, order.name)
        systems = Systems(old, new, made, relevance.names, relevance.needs)
        for subset in (
            frozenset[int](),
            frozenset(k for k in range(len(made)) if mask >> k & 1),
            frozenset(range(len(made))),
        ):
            system = systems.of(subset)
            campaign = system.campaign
            anew = model_of(campaign, campaign.order(order.name), table_of(campaign), measures_of(campaign))
            assert without_rules(system.model) == without_rules(anew if isinstance(anew, OrderModel) else None)


def without_rules(model: OrderModel | None) -> OrderModel | None:
    """The system but for its measures, whose blend rules are functions and equal nothing but themselves.

    The rows stand in one order: a limit that an edit adds stands last in a replay, in its column in a campaign.
    """
    if model is None:
        return None
    return replace(model, measures={}, rows=tuple(sorted(model.rows, key=lambda row: (row.on, row.side))))


def test_a_moisture_reaches_all_other_columns() -> None:
    """The first moisture that any lot gets makes the others' unknown: no column is kept over that."""
    old = plain()
    old.toml = 'quantity_basis = "dry"\n[components.N]\nbasis = "as received"\n[components.K]\nbasis = "as received"\n'
    new = copy.deepcopy(old)
    new.lots["A"]["moisture"] = "5"
    before, after = old.campaign(), new.campaign()
    made = edits(before, after)
    systems = Systems(before, after, made, ("1042", "1042"), frozenset("NK"))
    models = [systems.of(frozenset(chosen)).model for chosen in ((), range(len(made)))]
    for model, campaign in zip(models, (before, after), strict=True):
        anew = model_of(campaign, campaign.order("1042"), table_of(campaign), measures_of(campaign))
        assert isinstance(anew, OrderModel)
        assert without_rules(model) == without_rules(anew)
    assert [len(model.lots) for model in models if model] == [2, 1]


def test_rows_stand_as_in_the_newer_file() -> None:
    """Names of both lists keep the newer order; one that is gone stands behind the one it stood behind."""
    assert sorted(ranks("abcd", "xbyd"), key=ranks("abcd", "xbyd").__getitem__) == list("axbcyd")
    assert ranks("abc", "ac") == {"a": 0, "b": 1, "c": 2}
    assert ranks("ab", "ba") == {"b": 0, "a": 1}
    assert ranks("zab", "ab") == {"z": 0, "a": 1, "b": 2}


@pytest.mark.parametrize("seed", [3, 29, 46])
def test_waves_of_any_size_give_the_same_causes(seed: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """How many replays are solved side by side changes no cause."""
    old, new = pair(seed)
    findings = find(old), find(new)
    many = told(old, new, *findings)
    monkeypatch.setattr(searching, "WAVE", 3)
    assert told(old, new, *findings) == many


def test_what_may_be_asked() -> None:
    """The reserve is for those alone who ask for it, when the rest is used up."""
    allowance = Allowance(left=5, reserve=2)
    assert not allowance.takes(6)
    assert allowance.takes(4)
    assert allowance.takes_reserve(2)
    assert (allowance.left, allowance.reserve) == (0, 1)
    assert not allowance.takes_reserve(2)


def wide() -> tuple[Tables, Tables]:
    """Six lots and an order that is lost only when the K of two certain lots falls, with other edits beside."""
    names = "ABCDEF"
    old = Tables(
        lots={name: {"stock": "100", "cost": "10", "N": "20", "K": "20" if name in "CE" else "5"} for name in names},
        orders={"1": {"amount": "10", "K": ">= 18"}},
    )
    new = copy.deepcopy(old)
    for name in names:
        new.lots[name] |= {"N": "21", "K": "6"}
    new.orders["1"]["N"] = ">= 2"
    return old, new


def test_beyond_the_bound_files_and_rows_come_first() -> None:
    """Where pairs can't be afforded, a set is found of which no edit can be spared, and no single one would do."""
    old, new = (tables.campaign() for tables in wide())
    made = edits(old, new)
    replay = Replay(old, new, made, "1", "1")
    count = len(replay.relevant("verdict"))
    cause = verdict_cause(replay, "edge" if replay.verdict(()) == "edge" else "makeable", "unreachable", most=count)
    assert cause.suffices == ()
    assert cause.at_least == 2
    assert cause.remark == ""
    assert {made[position].name for position in cause.found} >= {"C", "E"}
    assert replay.verdict(cause.found) == "unreachable"
    for one in cause.found:
        assert replay.verdict(set(cause.found) - {one}) != "unreachable"


def test_a_search_that_runs_dry_keeps_what_it_has() -> None:
    """Where even halving is cut short, a set that does is named, and that some of it may not be needed."""
    old, new = (tables.campaign() for tables in wide())
    made = edits(old, new)
    replay = Replay(old, new, made, "1", "1")
    every = replay.relevant("verdict")
    target = Target(
        replay=replay, question="verdict", old=replay.verdict(()), new="unreachable", alike=lambda a, b: a == b
    )
    (cause,) = side_by_side([set_cause(target, made, every, Allowance(0, len(every) + 2))])
    assert cause.remark == NOT_SPARED
    assert replay.verdict(cause.found) == "unreachable"
    assert cause.restores == ()


def test_a_number_of_many_rows_is_divided_by_file() -> None:
    """Where a division among rows can't be afforded, lots and orders have a part each, and the sum is the change."""
    new = plain()
    new.lots["A"]["cost"] = "12"
    new.lots["B"]["cost"] = "26"
    new.orders["1042"]["N"] = ">= 21"
    before, after = plain().campaign(), new.campaign()
    sides = Side(campaign=before, findings=find(before)), Side(campaign=after, findings=find(after))
    made, found = edits(before, after), changes(sides[0].findings, sides[1].findings)
    told_cost = only("cost", explained(*sides, made, [change for change in found if change.kind == "cost"], most=7))
    assert told_cost.cause is not None
    assert told_cost.cause.remark == "Divided by file only: row by row, 8 more answers would be needed."
    assert {part.group for part in told_cost.cause.parts} == {"lots", "orders"}
    total = sum(part.amount for part in told_cost.cause.parts)
    assert total == pytest.approx(told_cost.new - told_cost.old)  # type: ignore[operator]


def test_a_cost_that_is_not_known_any_more() -> None:
    """A cost that came or went has the edit for its cause that took it or gave it."""
    new = plain()
    new.lots["A"] |= {"cost": "", "N": "11"}
    clauses, found = story(plain(), new)
    cause = only("cost", found).cause
    assert cause is not None
    assert [clauses[position] for (position,) in cause.suffices] == [
        "lot A's cost no longer given (it was 10\N{NO-BREAK SPACE}EUR per t)"
    ]
    assert cause.restores == cause.suffices[0]


def test_a_bound_that_is_gone() -> None:
    """An amount that has no bound any more has the stocks for its cause that bounded it."""
    new = plain()
    new.lots["A"]["stock"] = "unlimited"
    new.lots["B"] |= {"stock": "unlimited", "cost": "21"}
    clauses, found = story(plain(), new)
    cause = only("amount", found).cause
    assert cause is not None
    assert cause.at_least == 2
    assert all("stock" in clauses[position] for position in cause.suffices[0])


def test_a_recipe_is_laid_to_the_dearer_lot() -> None:
    """A recipe that moved is laid to the edit that moves it; one that only makes it dearer is not named."""
    old = plain()
    old.lots["C"] = {"stock": "100", "cost": "16", "N": "20", "K": "12.5"}
    new = copy.deepcopy(old)
    new.lots["C"]["cost"] = "12"
    new.lots["A"]["cost"] = "10.5"
    clauses, found = story(old, new)
    cause = only("recipe", found).cause
    assert cause is not None
    assert [clauses[position] for (position,) in cause.suffices] == [
        "lot C's cost fell from 16 to 12\N{NO-BREAK SPACE}EUR per t"
    ]


def contested() -> Tables:
    """Two orders that want the same lot, of which there is enough for both."""
    return Tables(
        lots={
            "A": {"stock": "100", "cost": "10", "N": "10"},
            "B": {"stock": "100", "cost": "12", "N": "10"},
        },
        orders={
            "1": {"amount": "80", "priority": "1", "N": ">= 10"},
            "2": {"amount": "90", "priority": "2", "N": ">= 10"},
        },
    )


def test_what_the_plan_gives_is_laid_to_the_stock() -> None:
    """An order that the plan drops names the stock that fell; an edit that the plan doesn't feel is not named."""
    new = contested()
    new.lots["B"]["stock"] = "50"
    new.lots["A"]["cost"] = "11"
    clauses, found = story(contested(), new)
    change = only("accepted", found)
    assert change.cause is not None
    assert [clauses[position] for (position,) in change.cause.suffices] == [
        "lot B's stock fell from 100 to 50\N{NO-BREAK SPACE}t"
    ]
    assert change.cause.restores == change.cause.suffices[0]
    value = only("plan", found)
    assert value.cause is not None
    assert {part.group: pytest.approx(part.amount) for part in value.cause.parts} == {"lot B": -90.0}


def test_a_plan_that_was_not_proven_has_no_cause() -> None:
    """Where the search for a plan was cut short, no edit is named for what it gives."""
    new = contested()
    new.lots["B"]["stock"] = "50"
    before, after = contested().campaign(), new.campaign()
    answers = find(before), find(after)
    assert answers[1].plan is not None
    cut = replace(answers[1], plan=replace(answers[1].plan, status="within gap", gap=0.1))
    sides = Side(campaign=before, findings=answers[0]), Side(campaign=after, findings=cut)
    change = only("accepted", explained(*sides, edits(before, after), changes(answers[0], cut)))
    assert change.cause == Cause(remark=NOT_PROVEN)


def test_plans_that_are_too_many_are_counted() -> None:
    """Where plans can't be afforded, the page says how many would have to be made."""
    new = contested()
    new.lots["B"]["stock"] = "50"
    new.lots["A"]["cost"] = "11"
    before, after = contested().campaign(), new.campaign()
    sides = Side(campaign=before, findings=find(before)), Side(campaign=after, findings=find(after))
    found = explained(*sides, edits(before, after), changes(sides[0].findings, sides[1].findings), most=1)
    cause = only("accepted", found).cause
    assert cause is not None
    assert cause.remark == "Not looked for: at least 2 more plans would be needed."
