"""The demonstration in ``campaigns/``: its recorded stories are those of the present files and answers."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import pytest

from generator.findings import results
from generator.findings.records import BlockingProof, Findings
from generator.folders import find_campaigns
from generator.history.archive import Revision, contents, read_history
from generator.history.check import check_history
from generator.intake.campaign import read_campaign
from tests.demonstration import CAMPAIGNS, STORIES, present_files, record, states

VERDICTS = {"makeable", "barred", "edge", "short", "unreachable"}
ANEW = "; run python -m tests.demonstration"


def recorded(folder: Path, name: str) -> tuple[Revision, ...]:
    history = read_history(folder / name / "history")
    assert history.problems == ()
    return history.revisions


@pytest.fixture(scope="module")
def newest() -> Mapping[str, Findings]:
    """The recorded last answers of every campaign."""
    return {name: results.loads(contents(recorded(CAMPAIGNS, name)[-1]).results) for name in STORIES}


def test_campaigns_are_the_stories() -> None:
    """The folder holds the campaigns of the stories, and its README is none."""
    assert {folder.slug for folder in find_campaigns(CAMPAIGNS)} == set(STORIES)


@pytest.mark.parametrize("name", STORIES)
def test_no_problem(name: str) -> None:
    """No campaign of the demonstration has a problem, not even a note, in any of its revisions."""
    for files in states(present_files(CAMPAIGNS / name), STORIES[name]):
        assert [problem.sentence() for problem in read_campaign(files, slug=name, folder=name).problems] == []


@pytest.mark.parametrize("name", STORIES)
def test_history_is_whole(name: str) -> None:
    """The recorded histories pass the check of their digests."""
    assert [problem.sentence() for problem in check_history(CAMPAIGNS / name / "history")] == []


def test_recorded_is_what_is_found_now(tmp_path: Path) -> None:
    """Recording the stories anew gives the recorded moments, inputs, answers and changes, byte for byte."""
    record(CAMPAIGNS, tmp_path)
    for name, story in STORIES.items():
        kept, anew = recorded(CAMPAIGNS, name), recorded(tmp_path, name)
        assert [revision.recorded for revision in anew] == [f"{moment}Z" for moment in story.moments]
        assert [revision.recorded for revision in kept] == [revision.recorded for revision in anew], name + ANEW
        assert contents(kept[-1]).inputs == present_files(CAMPAIGNS / name), name + ANEW
        for old, new in zip(kept, anew, strict=True):
            assert contents(old) == contents(new), f"{name}, revision {new.number}" + ANEW


def test_every_verdict_occurs(newest: Mapping[str, Findings]) -> None:
    """Between the campaigns every verdict occurs in the last revisions."""
    assert {order.verdict for findings in newest.values() for order in findings.orders} == VERDICTS


def test_proofs_of_one_two_and_three_limits(newest: Mapping[str, Findings]) -> None:
    """Orders are blocked by one limit alone, by two together and by three together."""
    proofs = [order.proof for findings in newest.values() for order in findings.orders]
    assert {len(proof.multipliers) for proof in proofs if isinstance(proof, BlockingProof)} == {1, 2, 3}


@pytest.mark.parametrize("name", STORIES)
def test_story_changes_a_verdict_at_the_last(name: str) -> None:
    """In every story an order is lost or won by the edits of the last revision."""
    before, after = (
        {order.order: order.verdict for order in results.loads(contents(revision).results).orders}
        for revision in recorded(CAMPAIGNS, name)[-2:]
    )
    assert any(before[order] != verdict for order, verdict in after.items() if order in before)
