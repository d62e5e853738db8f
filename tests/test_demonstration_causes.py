"""The demonstration's stories are told right: each lost or won order by the edit that did it."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import datetime
from functools import cache

import pytest

from generator.findings import results
from generator.history.archive import contents, read_history
from generator.history.headlines import with_cause
from generator.history.records import Change, Story
from generator.history.stories import PREVIOUS, Earlier, tell
from generator.intake.campaign import read_campaign
from generator.intake.records import Campaign
from tests.demonstration import CAMPAIGNS, STORIES

SALTMERE, ORRINVALE, KARROW = "saltmere-spring-blends", "orrinvale-raw-meal", "karrow-bay-cargoes"


@cache
def stories(name: str) -> tuple[Story, ...]:
    """The stories of a campaign's revisions, told from its recorded inputs and answers."""
    found: list[Story] = []
    earlier: list[Earlier] = []
    for revision in read_history(CAMPAIGNS / name / "history").revisions:
        held = contents(revision)
        campaign, findings = _read(held.inputs, name), results.loads(held.results)
        found.append(tell(earlier, campaign, findings, datetime.fromisoformat(revision.recorded)))
        earlier = [
            Earlier(
                number=revision.number,
                recorded=revision.recorded,
                title=PREVIOUS,
                campaign=campaign,
                findings=findings,
            )
        ]
    return tuple(found)


def _read(files: Mapping[str, bytes], name: str) -> Campaign:
    return read_campaign(files, slug=name, folder=name)


def plain(text: str) -> str:
    """A sentence with ordinary spaces."""
    return text.replace("\N{NO-BREAK SPACE}", " ").replace("\N{NARROW NO-BREAK SPACE}", " ")


def verdicts(story: Story) -> dict[str, Change]:
    """The changed verdicts of a story, by order."""
    return {change.subject: change for change in story.changes if change.kind == "verdict"}


@pytest.mark.parametrize(
    "name, number, headline",
    [
        (
            SALTMERE,
            3,
            "Order S-407 SOP 50 lost on 9 March (unreachable): lot SOP-06's K₂O re-assayed from 50.2 to 49.7 %",
        ),
        (
            ORRINVALE,
            3,
            "Order Quarry only lost on 16 March (unreachable): lot MARL-3's Fe₂O₃ re-assayed from 2.47 to 2.07 %",
        ),
        (KARROW, 2, "Order KB-26 lump lost on 9 March (short): lot LMP-01's stock fell from 46 000 to 35 000 t"),
        (
            KARROW,
            3,
            "Order KB-27 61 low phosphorus lost on 16 March (unreachable): "
            "its limit on P tightened from at most 0.03 to at most 0.025 %",
        ),
    ],
)
def test_headlines_name_the_cause(name: str, number: int, headline: str) -> None:
    """The headline of each revision that lost an order names the order, the day and the edit."""
    assert plain(stories(name)[number - 1].headline).startswith(headline)


def test_a_won_order_is_laid_to_the_new_lot() -> None:
    """KB-25 is won by MAG-08 alone, and would be lost without it."""
    story = stories(KARROW)[1]
    change = verdicts(story)["KB-25 concentrate 67.5"]
    assert change.new == "makeable"
    assert with_cause(change, story.edits).endswith("Cause: lot MAG-08 is new.")
    assert change.cause is not None
    assert change.cause.restores == change.cause.suffices[0]


@pytest.mark.parametrize("name", STORIES)
def test_every_changed_verdict_has_one_edit_as_its_cause(name: str) -> None:
    """In every story each changed verdict is explained by a single edit, whose undoing restores it."""
    for story in stories(name):
        for change in verdicts(story).values():
            assert change.cause is not None
            assert change.cause.at_least == 1
            assert change.cause.restores == tuple(position for (position,) in change.cause.suffices)


@pytest.mark.parametrize("name", STORIES)
def test_parts_of_costs_sum_to_the_change(name: str) -> None:
    """Every changed cost is divided among its edits without rest."""
    told = [change for story in stories(name) for change in story.changes if change.kind == "cost"]
    assert told
    for change in told:
        assert change.cause is not None
        assert isinstance(change.old, float)
        assert isinstance(change.new, float)
        parts = sum(part.amount for part in change.cause.parts)
        assert parts == pytest.approx(change.new - change.old, abs=1e-9)


def test_a_cost_is_laid_to_the_dearer_sand_and_the_new_assay() -> None:
    """Low alkali became dearer mostly by the sand, a little by the new assay of the marl."""
    story = stories(ORRINVALE)[2]
    (change,) = [one for one in story.changes if (one.kind, one.subject) == ("cost", "Low alkali")]
    assert change.cause is not None
    assert [part.group for part in change.cause.parts] == ["lot SAND-4", "lot MARL-3"]


def test_what_is_put_on_hold_is_said_so() -> None:
    """HEM-13, whose use is "no" since, is told as left out, not as gone."""
    assert "Lot HEM-13 is left out (use is no)." in [edit.sentence for edit in stories(KARROW)[2].edits]
