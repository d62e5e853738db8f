"""Recording: stories are told against the revision that stands before, whoever recorded it; kills leave no trace."""

from __future__ import annotations

import errno
import random
from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest

from generator.disk import WriteError
from generator.findings.answers import find
from generator.history import archive, story_files
from generator.history.archive import Draft, OvertakenError, entries, read_history, record, verified
from generator.history.check import check_history
from generator.history.chronicle import GROUP, closed_groups, read_line, recent
from generator.history.recording import Material, record_story
from generator.history.records import Story
from generator.history.stories import UNREADABLE_ANSWERS
from generator.intake.campaign import read_campaign
from generator.intake.records import Campaign
from tests.bench.kill_recording import kill_once
from tests.history.making import Tables, tables

NOON = datetime(2026, 3, 2, 12, tzinfo=UTC)


def read(files: object) -> Campaign:
    return read_campaign(files, slug="spring", folder="spring")  # type: ignore[arg-type]


def material(one: Tables, moment: datetime = NOON) -> Material:
    campaign = one.campaign()
    return Material(
        inputs=one.files(),
        campaign=campaign,
        findings=find(campaign),
        cause="inputs",
        moment=moment,
        program="0.1.0",
        read=read,
    )


def dearer(cost: int) -> Tables:
    one = tables(9)
    one.lots["A"]["cost"] = str(cost)
    return one


def story_of(revision: archive.Revision) -> Story:
    return story_files.from_bytes(verified(revision, "changes.json"))


def test_a_story_is_told_against_the_revision_before(tmp_path: Path) -> None:
    """The second revision holds the edit that made it, and is compared with the first."""
    record_story(tmp_path, material(dearer(11)))
    second = record_story(tmp_path, material(dearer(13)))
    story = story_of(second)
    assert [edit.clause for edit in story.edits] == ["lot A's cost rose from 11 to 13\N{NO-BREAK SPACE}EUR per t"]
    assert [comparison.number for comparison in story.comparisons] == [1]
    assert second.headline == story.headline


def test_a_story_looks_back_to_useful_revisions(tmp_path: Path) -> None:
    """A revision is compared with the one before, one a week before, and the first."""
    for days, cost in enumerate((11, 12, 13)):
        record_story(tmp_path, material(dearer(cost), NOON + timedelta(days=days)))
    last = record_story(tmp_path, material(dearer(20), NOON + timedelta(days=8, hours=1)))
    assert [(one.number, one.title) for one in story_of(last).comparisons] == [
        (3, "the revision before"),
        (2, "a week before"),
        (1, "the first revision"),
    ]


def test_whoever_is_overtaken_tells_anew(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where another program records first, the story is told against that revision, not against an older one."""
    record_story(tmp_path, material(dearer(11)))
    real, overtakers = record, [dearer(12)]

    def slow(folder: Path, draft: Draft) -> archive.Revision:
        if overtakers:
            record_other(folder, overtakers.pop())
        return real(folder, draft)

    def record_other(folder: Path, one: Tables) -> None:
        with monkeypatch.context() as patch:
            patch.setattr("generator.history.recording.record", real)
            record_story(folder, material(one))

    monkeypatch.setattr("generator.history.recording.record", slow)
    third = record_story(tmp_path, material(dearer(13)))
    assert third.number == 3
    assert [edit.old for edit in story_of(third).edits] == ["12"]
    assert check_history(tmp_path) == ()


def test_a_draft_against_an_older_revision_is_refused(tmp_path: Path) -> None:
    """A draft that says what it was compared with is not recorded behind another revision."""
    first = record_story(tmp_path, material(dearer(11)))
    record_story(tmp_path, material(dearer(12)))
    late = Draft(
        inputs={},
        results=lambda mark: b"",
        changes=b"",
        headline="",
        cause="inputs",
        moment=NOON,
        program="0",
        engine="e",
        since=first.digest,
    )
    with pytest.raises(OvertakenError, match="another program"):
        record(tmp_path, late)


def test_damaged_answers_before_are_no_obstacle(tmp_path: Path) -> None:
    """A revision is recorded behind one whose answers are damaged, and says that it can't compare."""
    first = record_story(tmp_path, material(dearer(11)))
    (first.folder / "results.json").write_bytes(b"{}")
    second = record_story(tmp_path, material(dearer(12)))
    assert second.headline == UNREADABLE_ANSWERS
    assert [problem.file for problem in check_history(tmp_path)] == [f"history/{first.folder.name}"]


def test_a_full_disk_leaves_no_trace(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where the disk fills up while the story is written, the history is as it was."""
    record_story(tmp_path, material(dearer(11)))
    before = sorted(path.name for path in tmp_path.iterdir())
    real = archive.create

    def full(path: Path, data: bytes, *, durable: bool = False) -> None:
        if path.name == "changes.json":
            raise OSError(errno.ENOSPC, "No space left on device")
        real(path, data, durable=durable)

    monkeypatch.setattr(archive, "create", full)
    with pytest.raises(WriteError, match="no space left"):
        record_story(tmp_path, material(dearer(12)))
    assert sorted(path.name for path in tmp_path.iterdir()) == before
    assert check_history(tmp_path) == ()


def test_killed_recorders_leave_a_clean_history(tmp_path: Path) -> None:
    """After SIGKILL in the midst of recording the next recorder goes on, and every check is clean."""
    chance = random.Random(3)
    for _ in range(4):
        kill_once(tmp_path, chance)
    assert len(read_history(tmp_path).revisions) >= 8


def test_a_line_of_the_chronicle(tmp_path: Path) -> None:
    """A line holds the revision's headline and story; of a damaged one what is wrong."""
    first = record_story(tmp_path, material(dearer(11)))
    (entry,) = entries(tmp_path)
    line = read_line(entry)
    assert (line.number, line.headline, line.damage) == (1, "First answers.", "")
    assert line.story is not None
    (first.folder / "changes.json").write_bytes(b"[]")
    assert "changes.json was altered" in read_line(entry).damage
    assert read_line(entry).story is None


def test_groups_of_the_chronicle_are_closed_once(tmp_path: Path) -> None:
    """Groups hold fifty numbers each; the newest revision's group is open, and gaps shift nothing."""
    names = [f"{number:04d}-2026-03-02T120000Z-abcdef" for number in range(1, 2 * GROUP + 2) if number != 7]
    found = [archive.Entry(number=int(name[:4]), short_digest="abcdef", path=tmp_path, name=name) for name in names]
    groups = closed_groups(found)
    assert [(group[0].number, group[-1].number) for group in groups] == [(1, GROUP), (GROUP + 1, 2 * GROUP)]
    assert closed_groups(found[:-1]) == groups[:1]
    assert closed_groups([]) == []
    assert len(recent(found)) == GROUP


def test_a_name_that_is_no_moment(tmp_path: Path) -> None:
    """A folder whose name holds no moment counts as old, and raises nothing."""
    entry = archive.Entry(number=1, short_digest="abcdef", path=tmp_path, name="0001-2026-99-99T999999Z-abcdef")
    assert entry.moment.year == 1970
    assert read_line(entry).damage
