"""Causes name the edits that did it, as brute force over all subsets and orders confirms."""

from __future__ import annotations

from collections import Counter
from dataclasses import replace
from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from generator.findings.answers import find
from generator.history.causes import TOGETHER, Side, explained, verdict_cause
from generator.history.compare import changes
from generator.history.division import MOST_EXACT, divided
from generator.history.edits import edits
from generator.history.records import Cause, Change, Part
from generator.history.replay import Replay
from tests.history.brute import Oracle, check_pair, told
from tests.history.making import Tables, pair

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
    assert cause == Cause(at_least=1, remark="Not looked for: at least 2 more answers would have to be asked again.")


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
