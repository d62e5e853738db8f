"""Edits are differences of meaning, told in words, and can be applied: all, or any of them."""

from __future__ import annotations

import copy

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from generator.history.edits import apply, edits, renamed
from generator.history.meaning import lot_cells, order_cells, same_rows, setting_cells
from generator.intake.records import Campaign
from tests.history.making import Tables, edited, pair, tables

SEEDS = st.integers(0, 10**6)


def base() -> Tables:
    """Two lots and one order."""
    return Tables(
        lots={
            "A": {"stock": "100", "cost": "10", "material": "ash", "N": "10.0", "K": "20"},
            "B": {"stock": "50", "cost": "20", "material": "clay", "N": "30", "K": "<5"},
        },
        orders={"1042": {"amount": "10", "N": ">= 20", "K": "<= 18"}},
    )


def sentences(old: Tables, new: Tables) -> list[str]:
    return [edit.sentence.replace("\N{NO-BREAK SPACE}", " ") for edit in edits(old.campaign(), new.campaign())]


def changed(row: str, column: str, value: str) -> Tables:
    new = base()
    (new.lots if row in new.lots else new.orders)[row][column] = value
    return new


def means_the_same(one: Campaign, other: Campaign) -> bool:
    """Whether two campaigns have the same rows and settings, cell by cell, in any order."""
    lots, orders = ({row.name: row for row in rows} for rows in (one.lots, one.orders))
    return (
        same_rows(setting_cells(one), setting_cells(other))
        and lots.keys() == {lot.name for lot in other.lots}
        and orders.keys() == {order.name for order in other.orders}
        and all(same_rows(lot_cells(lots[lot.name]), lot_cells(lot)) for lot in other.lots)
        and all(same_rows(order_cells(orders[order.name]), order_cells(order)) for order in other.orders)
        and {group.name: set(group.lots) for group in one.groups}
        == {group.name: set(group.lots) for group in other.groups}
    )


@given(SEEDS)
@settings(max_examples=25, deadline=None)
def test_nothing_is_edited_from_itself(seed: int) -> None:
    """edits(a, a) is empty."""
    old, _ = pair(seed)
    assert edits(old, old) == ()


@given(SEEDS)
@settings(max_examples=60, deadline=None)
def test_all_edits_applied_give_the_newer_campaign(seed: int) -> None:
    """apply(old, all edits) means the same as the newer campaign, and no edit gives the older one."""
    old, new = pair(seed)
    found = edits(old, new)
    assert means_the_same(apply(old, found), new)
    assert means_the_same(apply(old, ()), old)


@given(SEEDS, st.data())
@settings(max_examples=40, deadline=None)
def test_some_edits_applied_leave_the_others(seed: int, data: st.DataObject) -> None:
    """After any subset of the edits, those that are left are the rest."""
    old, new = pair(seed)
    found = edits(old, new)
    chosen = [edit for edit in found if data.draw(st.booleans())]
    left = edits(apply(old, chosen), new)
    assert {edit.clause for edit in left} == {edit.clause for edit in found} - {edit.clause for edit in chosen}


def test_how_it_is_typed_is_no_edit() -> None:
    """0.50 is 0.5, and rows in another order are the same rows."""
    new = changed("A", "N", "10.00")
    new.lots = dict(reversed(new.lots.items()))
    assert sentences(base(), new) == []


def test_a_renamed_lot_is_one_edit() -> None:
    """A lot whose row is otherwise the same is recognised under its new name."""
    new = base()
    new.lots["A2"] = new.lots.pop("A")
    found = edits(base().campaign(), new.campaign())
    assert [edit.sentence for edit in found] == ["Lot A is now called A2."]
    assert renamed(found, "lot") == {"A": "A2"}
    assert means_the_same(apply(base().campaign(), found), new.campaign())


def test_twins_are_not_guessed() -> None:
    """Where two gone lots are alike, no new name is given to either."""
    old, new = base(), base()
    for name in ("C", "D"):
        old.lots[name] = {"N": "1", "K": "2", "stock": "1", "cost": "1"}
    new.lots["E"] = dict(old.lots["C"])
    assert sentences(old, new) == ["Lot C is no longer there.", "Lot D is no longer there.", "Lot E is new."]


@pytest.mark.parametrize(
    "row, column, value, sentence",
    [
        ("A", "N", "9.5", "Lot A's N re-assayed from 10.0 to 9.5."),
        ("A", "N", "n/a", "Lot A's N no longer measured (it was 10.0)."),
        ("B", "K", "4", "Lot B's K re-assayed from <5 to 4."),
        ("A", "stock", "40", "Lot A's stock fell from 100 to 40 t."),
        ("A", "stock", "unlimited", "Lot A's stock changed from 100 to unlimited."),
        ("B", "cost", "22.5", "Lot B's cost rose from 20 to 22.5 EUR per t."),
        ("B", "material", "loam", "Lot B's material changed from clay to loam."),
        ("1042", "amount", "12", "Order 1042's amount changed from exactly 10 to exactly 12 t."),
        ("1042", "N", ">= 21", "Order 1042's limit on N tightened from at least 20 to at least 21."),
        ("1042", "N", "18 - 30", "Order 1042's limit on N moved from at least 20 to 18 to 30."),
        ("1042", "K", "<= 19", "Order 1042's limit on K loosened from at most 18 to at most 19."),
        ("1042", "K", "", "Order 1042's limit on K dropped (it was at most 18)."),
    ],
)
def test_edits_in_words(row: str, column: str, value: str, sentence: str) -> None:
    """One edited cell is one sentence that says what it was and is."""
    assert sentences(base(), changed(row, column, value)) == [sentence]


def test_why_a_lot_is_left_out() -> None:
    """A lot that is put on hold is told apart from one that is gone."""
    new = changed("B", "use", "no")
    assert sentences(base(), new) == ["Lot B is left out (use is no)."]
    assert sentences(new, base()) == ["Lot B is used again."]


def test_a_new_component_is_one_edit() -> None:
    """A column that comes is one edit, however many lots report it."""
    new = base()
    for row in new.lots.values():
        row["S"] = "3"
    found = edits(base().campaign(), new.campaign())
    assert [edit.sentence for edit in found] == ["Component S is new (measured in 2 lots)."]
    assert means_the_same(apply(base().campaign(), found), new.campaign())
    assert [edit.sentence for edit in edits(new.campaign(), base().campaign())] == [
        "Component S is no longer there (measured in 2 lots)."
    ]


def test_a_declared_anew_component_takes_its_cells_along() -> None:
    """Cells that read as they did and mean something else belong to the edit of their component."""
    old, new = base(), base()
    old.orders["1042"]["N"] = new.orders["1042"]["N"] = "20"
    new.toml = "[components.N]\ntolerance = 0.5\n"
    (edit,) = edits(old.campaign(), new.campaign())
    assert edit.sentence == "Component N: tolerance set to 0.5."
    assert {cell.path[0] for cell in edit.cells} == {"component", "order"}
    assert means_the_same(apply(old.campaign(), [edit]), new.campaign())


def test_groups_follow_their_lots() -> None:
    """A lot that comes is a member of the groups that name it, in every subset of the edits."""
    old = base()
    old.toml = '[groups.earths]\nlots = ["clay"]\nshare = "<= 50"\n'
    new = copy.deepcopy(old)
    new.lots["C"] = {"material": "clay", "N": "1", "K": "2", "stock": "5", "cost": "1"}
    applied = apply(old.campaign(), edits(old.campaign(), new.campaign()))
    assert applied.groups[0].lots == ("B", "C")


def test_settings_in_words() -> None:
    """Settings, house rules, derived quantities and notes are told too, the notes last."""
    new = base()
    new.toml = 'confidence = 0.99\n[house]\nmax_lots = 3\n[derived]\nNK = "N + K"\n'
    files = {**new.files(), "notes.md": b"Seen.\n"}
    campaign = Tables.campaign(new)
    assert sentences(base(), new) == [
        "Setting confidence changed from 0.95 to 0.99.",
        "House rule most lots set to 3.",
        "Derived quantity NK set to N + K.",
    ]
    from generator.intake.campaign import read_campaign

    noted = read_campaign(files, slug="spring", folder="spring")
    assert [edit.sentence for edit in edits(campaign, noted)] == ["The notes were edited."]


def test_edits_are_grouped() -> None:
    """Every edit says of which lot, order or setting it is."""
    new = edited(tables(1), 2, 6)
    groups = {edit.group for edit in edits(tables(1).campaign(), new.campaign())}
    assert all(group == "settings" or group.split(" ")[0] in ("lot", "order") for group in groups)
    assert len(groups) > 1
