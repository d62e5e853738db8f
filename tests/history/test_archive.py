import errno
import json
import multiprocessing
import shutil
from datetime import UTC, datetime
from pathlib import Path

import pytest

from generator.disk import WriteError, digest_of, sha256
from generator.history import archive
from generator.history.archive import DamagedError, Draft, can_record, contents, head_key, read_history, record
from generator.history.check import check_history

NOON = datetime(2026, 3, 2, 9, 12, tzinfo=UTC)


def draft(cell: str = "1", *, engine: str = "e1", moment: datetime = NOON, headline: str = "first answers") -> Draft:
    return Draft(
        inputs={"assays.csv": f"lot,N\nA,{cell}\n".encode(), "targets.csv": b"order,N\n1,5\n"},
        results=lambda mark: json.dumps({"number": mark.number, "recorded": mark.recorded}).encode(),
        changes=b"[]",
        headline=headline,
        cause="inputs",
        moment=moment,
        program="0.1.0",
        engine=engine,
    )


class Killed(BaseException):
    """What stands for kill -9 in these tests: nothing handles it."""


class Dying:
    """Writes files, the fatal one by half, and dies there."""

    def __init__(self, fatal: int) -> None:
        self.left = fatal

    def __call__(self, path: Path, data: bytes, *, durable: bool = False) -> None:
        self.left -= 1
        path.write_bytes(data if self.left else data[: len(data) // 2])
        if not self.left:
            raise Killed


def three(folder: Path) -> list[Path]:
    return [record(folder, draft(cell)).folder for cell in "123"]


def test_a_revision_holds_inputs_byte_for_byte(tmp_path: Path) -> None:
    """What was recorded comes back byte for byte, under a name of number, moment and digest."""
    revision = record(tmp_path / "history", draft())
    assert revision.folder.name == f"0001-2026-03-02T091200Z-{revision.digest[:6]}"
    held = contents(revision)
    assert held.inputs == draft().inputs
    assert json.loads(held.results) == {"number": 1, "recorded": "2026-03-02T09:12:00Z"}
    assert sorted(path.name for path in revision.folder.iterdir()) == [
        "changes.json",
        "inputs",
        "results.json",
        "revision.json",
    ]


def test_revisions_are_chained(tmp_path: Path) -> None:
    """Each revision states the digest of the one before, and numbers go up by one."""
    three(tmp_path)
    history = read_history(tmp_path)
    assert [revision.number for revision in history.revisions] == [1, 2, 3]
    assert [revision.previous for revision in history.revisions] == [
        "",
        history.revisions[0].digest,
        history.revisions[1].digest,
    ]
    assert check_history(tmp_path) == ()
    assert history.problems == ()


def test_the_digest_is_of_all_other_keys(tmp_path: Path) -> None:
    """A reader can recompute the digest from revision.json with a JSON and a SHA-256 library."""
    stated = json.loads((record(tmp_path, draft()).folder / "revision.json").read_text(encoding="utf-8"))
    digest = stated.pop("digest")
    text = json.dumps(stated, sort_keys=True, separators=(",", ":"), ensure_ascii=False)
    assert digest == sha256(text.encode())


def test_the_same_inputs_make_no_second_revision(tmp_path: Path) -> None:
    """Recording what the newest revision holds returns that revision."""
    assert record(tmp_path, draft()) == record(tmp_path, draft())
    assert len(read_history(tmp_path).revisions) == 1


def test_another_engine_makes_a_revision(tmp_path: Path) -> None:
    """The same inputs answered by other code are a revision of their own."""
    record(tmp_path, draft())
    assert record(tmp_path, draft(engine="e2")).number == 2


def test_recorded_is_utc_whatever_the_zone(tmp_path: Path) -> None:
    """A moment of another zone is recorded in UTC."""
    moment = datetime.fromisoformat("2026-03-02T11:12:00.5+02:00")
    assert record(tmp_path, draft(moment=moment)).recorded == "2026-03-02T09:12:00Z"


@pytest.mark.parametrize("name", ["inputs/assays.csv", "results.json", "changes.json"])
def test_an_altered_file_is_named(tmp_path: Path, name: str) -> None:
    """One changed byte in any file of any revision is found, and the revision and file are named."""
    second = three(tmp_path)[1]
    path = second / name
    path.write_bytes(path.read_bytes() + b" ")
    (problem,) = check_history(tmp_path)
    assert problem.file == f"history/{second.name}"
    assert name in problem.message


def test_a_file_missing_from_a_revision_is_named(tmp_path: Path) -> None:
    """A deleted input of a revision is found."""
    (three(tmp_path)[0] / "inputs" / "targets.csv").unlink()
    (problem,) = check_history(tmp_path)
    assert "inputs/targets.csv can't be read" in problem.message


def test_a_file_added_to_a_revision_is_named(tmp_path: Path) -> None:
    """A file that the revision does not list is found."""
    (three(tmp_path)[0] / "inputs" / "stock.csv").write_bytes(b"lot,stock\n")
    (problem,) = check_history(tmp_path)
    assert "inputs/stock.csv was added" in problem.message


def test_an_altered_statement_is_skipped_by_builds(tmp_path: Path) -> None:
    """A revision whose revision.json was edited is named and left out; the others stay."""
    path = three(tmp_path)[1] / "revision.json"
    path.write_text(path.read_text(encoding="utf-8").replace("first answers", "better answers"), encoding="utf-8")
    history = read_history(tmp_path)
    assert [revision.number for revision in history.revisions] == [1, 3]
    assert "altered" in history.problems[0].message
    assert [problem.severity for problem in history.problems] == ["note"]
    assert len(check_history(tmp_path)) == 1


@pytest.mark.parametrize("content", [b"", b"{", b"[]", b"null", b"[" * 100_000, b'{"format": 3}', b"\xff\xfe"])
def test_a_broken_statement_never_raises(tmp_path: Path, content: bytes) -> None:
    """Whatever stands in revision.json, the history is read and the revision named."""
    (three(tmp_path)[2] / "revision.json").write_bytes(content)
    assert read_history(tmp_path).head.number == 2
    assert len(read_history(tmp_path).problems) == 1
    assert len(check_history(tmp_path)) == 1


def test_a_newer_format_is_said_so(tmp_path: Path) -> None:
    """A revision of a later version of the program is skipped with a message about its format."""
    path = three(tmp_path)[2] / "revision.json"
    path.write_text(path.read_text().replace("hullbook-revision-1", "hullbook-revision-9"))
    assert "'hullbook-revision-9' is not known" in read_history(tmp_path).problems[0].message


def test_a_removed_revision_is_missing(tmp_path: Path) -> None:
    """A gap in the numbers is named, and so is the newest revision's absence."""
    first, _, third = three(tmp_path)
    shutil.rmtree(first)
    shutil.rmtree(third)
    assert [problem.message for problem in check_history(tmp_path)] == [
        "revision 1 is missing",
        "revision 3 is missing",
    ]


def test_an_exchanged_revision_breaks_the_chain(tmp_path: Path) -> None:
    """A revision that was recorded elsewhere under the same number is found by the chain."""
    other = tmp_path / "other"
    mine = tmp_path / "mine"
    three(mine)
    for cell in "149":
        record(other, draft(cell))
    (second,) = mine.glob("0002-*")
    shutil.rmtree(second)
    (strange,) = other.glob("0002-*")
    shutil.copytree(strange, mine / strange.name)
    (problem,) = check_history(mine)
    assert problem.file.startswith("history/0003-")
    assert "not recorded after" in problem.message


def test_recording_after_damage_goes_on(tmp_path: Path) -> None:
    """After a damaged newest revision the next one gets the next number, and only the damage is named."""
    (three(tmp_path)[2] / "revision.json").write_bytes(b"")
    revision = record(tmp_path, draft("4"))
    assert revision.number == 4
    assert len(check_history(tmp_path)) == 1


def test_a_renamed_revision_is_named(tmp_path: Path) -> None:
    """A revision under a name with another moment is not taken for one."""
    folder = three(tmp_path)[0]
    folder.rename(folder.with_name(folder.name.replace("2026", "2025")))
    (problem,) = check_history(tmp_path)
    assert "renamed" in problem.message


def test_a_killed_recorder_leaves_no_trace(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A process killed at any write leaves no revision in part, and the next recorder cleans up."""

    record(tmp_path, draft("1"))
    for fatal in range(1, 5):
        with monkeypatch.context() as patch:
            patch.setattr(archive, "create", Dying(fatal))
            with pytest.raises(Killed):
                record(tmp_path, draft("2"))
        assert check_history(tmp_path) == ()
        assert len(read_history(tmp_path).revisions) == 1
    assert record(tmp_path, draft("2")).number == 2
    assert sorted(path.name[:4] for path in tmp_path.iterdir()) == ["0001", "0002", "head"]


def test_a_full_disk_is_a_write_error(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A disk that fills up gives one clear error and leaves the history as it was."""
    record(tmp_path, draft("1"))

    def full(path: Path, data: bytes, *, durable: bool = False) -> None:
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(archive, "create", full)
    with pytest.raises(WriteError, match=r"the revision could not be written \(no space left on device\)"):
        record(tmp_path, draft("2"))
    assert not can_record(tmp_path)
    assert sorted(path.name[:4] for path in tmp_path.iterdir()) == ["0001", "head"]


def test_a_file_in_the_way_is_a_write_error(tmp_path: Path) -> None:
    """A file named history, where the folder should be, is a clear error."""
    (tmp_path / "history").write_text("my notes")
    with pytest.raises(WriteError):
        record(tmp_path / "history", draft())
    assert not can_record(tmp_path / "history")
    assert read_history(tmp_path / "history").revisions == ()


def _record_some(folder: Path, worker: int) -> None:
    for step in range(4):
        record(folder, draft(f"{worker}.{step}"))


def test_recorders_at_once_never_share_a_number(tmp_path: Path) -> None:
    """Three processes recording different inputs give a chain without gaps or doubles."""
    context = multiprocessing.get_context("spawn")
    workers = [context.Process(target=_record_some, args=(tmp_path, worker)) for worker in range(3)]
    for worker in workers:
        worker.start()
    for worker in workers:
        worker.join(60)
    assert [worker.exitcode for worker in workers] == [0, 0, 0]
    assert check_history(tmp_path) == ()
    assert [revision.number for revision in read_history(tmp_path).revisions] == list(range(1, 13))


def test_the_key_tells_which_revisions_there_are(tmp_path: Path) -> None:
    """The key changes with every revision recorded or removed, and not otherwise."""
    empty = head_key(tmp_path)
    _, second, _ = three(tmp_path)
    full = head_key(tmp_path)
    (tmp_path / "note.txt").write_text("x")
    assert head_key(tmp_path) == full != empty
    shutil.rmtree(second)
    assert head_key(tmp_path) not in (full, empty)


def test_a_path_out_of_the_revision_is_refused(tmp_path: Path) -> None:
    """A statement that lists a file outside the revision is damaged, even with a right digest."""
    folder = record(tmp_path, draft()).folder
    stated = json.loads((folder / "revision.json").read_text())
    stated["files"]["../../secret"] = "0" * 64
    stated["digest"] = digest_of({key: value for key, value in stated.items() if key != "digest"})
    (folder / "revision.json").write_text(json.dumps(stated))
    assert read_history(tmp_path).revisions == ()


def test_damage_found_when_contents_are_read(tmp_path: Path) -> None:
    """Contents are verified as they are read."""
    revision = record(tmp_path, draft())
    (revision.folder / "results.json").write_bytes(b"{}")
    with pytest.raises(DamagedError, match=r"results\.json was altered"):
        contents(revision)
