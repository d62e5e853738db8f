"""A revision's story: its headline, what it is compared with, its brief answers, its file."""

from __future__ import annotations

import json
from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest

from generator.findings import results
from generator.findings.answers import find
from generator.history.headlines import (
    FIRST,
    NO_CHANGE,
    cause_text,
    headline,
    importance,
    part_size,
    part_words,
    with_cause,
)
from generator.history.records import Cause, Change, Edit, Part, Story
from generator.history.stories import PREVIOUS, UNREADABLE_ANSWERS, UNREADABLE_INPUT, Earlier, further_back, tell
from generator.history.story_files import UnreadableStoryError, from_bytes, to_bytes
from tests.history.making import Tables, edited, tables

DATA = Path(__file__).parent.parent / "data"
NOON = datetime(2026, 3, 2, 12, tzinfo=UTC)

ASSAY = Edit(
    kind="lot", name="K-7", field="K2O", old="12.1", new="10.9", clause="lot K-7's K₂O re-assayed from 12.1 to 10.9 %"
)
LIMIT = Edit(
    kind="order", name="1042", field="limit on N", old="", new="", clause="order 1042's limit on N added: at least 3"
)
EDITS = (ASSAY, LIMIT)


def lost(order: str = "1042", cause: Cause | None = None) -> Change:
    sentence = f"Order {order} is now unreachable; it was makeable."
    return Change(kind="verdict", subject=order, old="makeable", new="unreachable", sentence=sentence, cause=cause)


def dearer(cause: Cause | None = None) -> Change:
    sentence = "Order 7: cheapest cost rose to 12 EUR per t from 10 EUR per t."
    return Change(kind="cost", subject="7", old=10.0, new=12.0, sentence=sentence, cause=cause)


def earlier(one: Tables, **fields: object) -> Earlier:
    campaign = one.campaign()
    about = {"number": 1, "recorded": "2026-03-01T12:00:00Z", "title": PREVIOUS}
    return Earlier(**{**about, "campaign": campaign, "findings": find(campaign), **fields})  # type: ignore[arg-type]


def told(old: Tables, new: Tables, **fields: object) -> Story:
    campaign = new.campaign()
    return tell([earlier(old, **fields)], campaign, find(campaign), NOON)


@pytest.mark.parametrize(
    "cause, sentence",
    [
        (
            Cause(suffices=((0,),), at_least=1),
            "Order 1042 lost on 2 March (unreachable): lot K-7's K₂O re-assayed from 12.1 to 10.9 %.",
        ),
        (
            Cause(suffices=((1,),), at_least=1),
            "Order 1042 lost on 2 March (unreachable): its limit on N added: at least 3.",
        ),
        (
            Cause(suffices=((0, 1),), at_least=2),
            "Order 1042 lost on 2 March (unreachable): lot K-7's K₂O re-assayed from 12.1 to 10.9 % together with "
            "its limit on N added: at least 3.",
        ),
        (
            Cause(suffices=((0,), (1,)), at_least=1),
            "Order 1042 lost on 2 March (unreachable): lot K-7's K₂O re-assayed from 12.1 to 10.9 %, or "
            "its limit on N added: at least 3 (each alone suffices).",
        ),
        (Cause(by_program=True), "Order 1042 lost on 2 March (unreachable): the program's version."),
        (None, "Order 1042 lost on 2 March (unreachable)."),
    ],
)
def test_a_lost_order_heads_the_news(cause: Cause | None, sentence: str) -> None:
    """The headline says which order was lost, on which day, and why."""
    assert headline([lost(cause=cause)], EDITS, NOON) == sentence


def test_a_won_order_in_words() -> None:
    """An order that is makeable again is won."""
    won = Change(kind="verdict", subject="9", old="short", new="makeable", sentence="")
    assert headline([won], EDITS, NOON) == "Order 9 won on 2 March."


def test_lost_orders_come_before_costs() -> None:
    """The gravest change heads the news, the others are counted."""
    assert headline([dearer(), lost()], EDITS, NOON) == "Order 1042 lost on 2 March (unreachable); 1 more change."
    assert importance(lost()) < importance(dearer())


def test_orders_lost_by_one_edit_are_one_story() -> None:
    """Several orders lost by the very same edit are told together."""
    cause = Cause(suffices=((0,),), at_least=1)
    found = [lost("1", cause), lost("2", cause), dearer()]
    assert headline(found, EDITS, NOON) == (
        "2 orders lost on 2 March, order 1 first: lot K-7's K₂O re-assayed from 12.1 to 10.9 %; 1 more change."
    )


def test_a_cost_with_its_biggest_part() -> None:
    """A cost's headline names the part that weighs most."""
    parts = (Part(group="lot K-7", edits=(0,), amount=1.5), Part(group="order 1042", edits=(1,), amount=0.5))
    assert headline([dearer(Cause(parts=parts))], EDITS, NOON) == (
        "Order 7: cheapest cost rose to 12 EUR per t from 10 EUR per t; cause: most of all "
        "lot K-7's K₂O re-assayed from 12.1 to 10.9 % (+1.5)."
    )
    assert cause_text(dearer(Cause(parts=parts[:1])), EDITS) == ASSAY.clause


def test_at_least_so_many_edits() -> None:
    """A search that was cut short names what it found and how many edits are needed at least."""
    change = lost(cause=Cause(found=(0, 1), at_least=2))
    assert cause_text(change, EDITS).startswith("2 edits together: ")
    assert with_cause(change, EDITS).endswith("(no single one does).")
    change = lost(cause=Cause(found=(0, 1), at_least=3))
    assert with_cause(change, EDITS).endswith("(at least 3 are needed).")
    change = lost(cause=Cause(found=(0, 1), at_least=1))
    assert with_cause(change, EDITS).endswith("at least 3.")


def test_a_part_has_the_unit_of_its_change() -> None:
    """A part is told as its change is: money per amount, percentage points; what would print as 0 still has a size."""
    change = Change(kind="cost", subject="7", old=10.0, new=12.0, sentence="", unit="EUR per t", places=2)
    assert part_size(change, 1.5) == "+1.50 EUR per t"
    assert part_size(change, -0.00123) == "−0.001 EUR per t"
    chance = Change(kind="conformity", subject="7", old=0.9, new=0.95, sentence="", unit="percentage points", places=1)
    assert part_size(chance, 0.05) == "+5.0 percentage points"


def test_edits_of_a_row_that_is_not_named() -> None:
    """Several edits of a row whose name is hidden are counted."""
    assert part_words(Part(group="", edits=(0, 1), amount=1.0), EDITS) == "2 edits"
    assert part_words(Part(group="lots", edits=(0, 1), amount=1.0), EDITS) == "2 edits of lots"


def test_edits_that_change_nothing() -> None:
    """Where no answer changed the headline says so, and by what."""
    assert headline([], [], NOON) == NO_CHANGE
    assert headline([], [ASSAY], NOON) == f"No answer changed, though {ASSAY.clause}."
    assert headline([], EDITS, NOON) == "No answer changed by 2 edits."


def test_the_first_story() -> None:
    """A first revision has a headline, its answers in brief, and nothing to compare with."""
    campaign = tables(4).campaign()
    story = tell([], campaign, find(campaign), NOON)
    assert story.headline == FIRST
    assert story.comparisons == ()
    assert story.summary.orders.keys() == {order.name for order in campaign.orders}
    assert story.summary.lots["A"].assay["N"][1] == 0.5


def test_a_story_survives_its_file() -> None:
    """What changes.json holds is what was told, but for the cells by which edits are applied."""
    story = told(tables(4), edited(tables(4), 5, 6))
    assert story.changes
    again = from_bytes(to_bytes(story))
    assert to_bytes(again) == to_bytes(story)
    assert again.changes == story.changes
    assert again.summary == story.summary
    assert again.outline == story.outline


def test_damaged_answers_before() -> None:
    """Where the revision before can't be read, the story says so and compares nothing."""
    story = told(tables(4), tables(4), findings=None, campaign=None)
    assert story.headline == UNREADABLE_ANSWERS
    assert story.changes == ()


def test_input_that_this_version_can_t_read() -> None:
    """Changes are told without causes where the older input means nothing to this version."""
    story = told(tables(4), edited(tables(4), 5, 6), campaign=None)
    assert story.comparisons[0].remark == UNREADABLE_INPUT
    assert {change.cause for change in story.changes} == {None}


def test_useful_earlier_revisions() -> None:
    """Besides the one before: a week before, four weeks before, and the first."""
    moments = [NOON - timedelta(days=days) for days in (60, 30, 20, 8, 3, 1)]
    assert further_back(moments, NOON) == {3: "a week before", 1: "four weeks before", 0: "the first revision"}
    assert further_back(moments[:1], NOON) == {}
    assert further_back([], NOON) == {}


def test_strange_files_are_refused() -> None:
    """changes.json with other content raises one kind of error and nothing else."""
    for data in (b"", b"{", b"[1]", b'[{"kind": "verdict"}]', b"3", b'{"format": "hullbook-changes-99"}', b"{}"):
        with pytest.raises(UnreadableStoryError, match=r"changes\.json"):
            from_bytes(data)


def test_the_first_format_still_reads() -> None:
    """A changes.json of the first format gives its changes, without causes."""
    story = from_bytes((DATA / "changes-1.json").read_bytes())
    assert [change.kind for change in story.changes] == ["verdict", "cost"]
    assert story.headline == ""


def test_the_second_format_still_reads() -> None:
    """A changes.json of the second format gives edits, changes, causes, and the answers in brief."""
    story = from_bytes((DATA / "changes-2.json").read_bytes())
    assert with_cause(story.changes[0], story.edits) == (
        "Order 1 is now unreachable; it was makeable. Cause: its limit on N tightened from at least 20 to at least 31."
    )
    assert story.summary.orders["2"].verdict == "makeable"


def test_the_first_format_of_results_still_reads() -> None:
    """A results.json of the first format gives findings that are written again with the same content."""
    data = (DATA / "results-1.json").read_bytes()
    written, again = json.loads(data), json.loads(results.dumps(results.loads(data)))
    assert [order["verdict"] for order in written["orders"]] == [order["verdict"] for order in again["orders"]]
    assert [order["proof"] for order in written["orders"]] == [order["proof"] for order in again["orders"]]
