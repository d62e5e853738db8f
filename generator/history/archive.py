"""The archive: revisions written once and whole, chained by digest, never changed.

A history folder holds one folder per revision, ``0007-2026-03-02T091200Z-3fa1c2``:

    inputs/…         the campaign's files byte for byte
    results.json     the answers (their revision's digest left empty: it is taken over this file)
    changes.json     the answers that differ from the revision before
    revision.json    number, moment, program, digests of all files, digest of the revision before

and ``head.json``, the number and digest of the newest one, so that a removed newest revision is
noticed.  A revision's own digest is the SHA-256 of the canonical JSON of all other keys of its
``revision.json``; its first six digits end the folder's name.
"""

from __future__ import annotations

import contextlib
import json
import os
import re
import shutil
import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

from generator.disk import (
    WriteError,
    canonical_json,
    create,
    digest_of,
    read_file,
    reason,
    sha256,
    sweep,
    sync_folder,
    unfinished,
    write_whole,
)
from generator.findings.records import RevisionMark
from generator.lock import LockedError, OwnerLock
from generator.problems import HullbookError, Problem, Severity

FORMAT = "hullbook-revision-1"
LOCK_NAME = ".hullbook-lock"
HEAD_NAME = "head.json"
_FOLDER = re.compile(r"(\d{4,})-(\d{4}-\d\d-\d\dT\d{6}Z)-([0-9a-f]{6})")

#: Another recorder needs milliseconds; after so many seconds something is wrong with the lock.
LOCK_PATIENCE = 5.0
_LOCK_PAUSE = 0.05


class DamagedError(HullbookError):
    """A revision is not what was recorded."""


class OvertakenError(HullbookError):
    """Another program has recorded a revision since the draft was made: its changes must be told anew."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Revision:
    """One revision as its ``revision.json`` states it.

    ``files`` maps paths inside the folder to SHA-256 digests; ``recorded`` is UTC, as
    "2026-03-02T09:12:00Z"; ``previous`` is "" for the first; ``engine`` identifies the code that
    found the answers; ``headline`` says in one sentence what changed.
    """

    number: int
    recorded: str
    program: str
    engine: str
    previous: str
    headline: str
    cause: str
    files: Mapping[str, str]
    digest: str
    folder: Path

    @property
    def mark(self) -> RevisionMark:
        """How results name this revision."""
        return RevisionMark(number=self.number, recorded=self.recorded, digest=self.digest)

    def holds(self, inputs: Mapping[str, bytes]) -> bool:
        """Whether these are the inputs of this revision, byte for byte."""
        mine = {path: digest for path, digest in self.files.items() if path.startswith("inputs/")}
        return mine == {f"inputs/{name}": sha256(data) for name, data in inputs.items()}


@dataclass(frozen=True, slots=True, kw_only=True)
class History:
    """The undamaged revisions of a campaign, oldest first, and what is wrong with the others."""

    revisions: tuple[Revision, ...] = ()
    problems: tuple[Problem, ...] = ()

    @property
    def head(self) -> Revision | None:
        """The newest undamaged revision."""
        return self.revisions[-1] if self.revisions else None


@dataclass(frozen=True, slots=True, kw_only=True)
class Draft:
    """What a new revision is made of, but for its number and digest.

    ``results`` and ``changes`` make the bytes of the two files once the number is known: ``results``
    gets the mark with an empty digest.  ``cause`` is "inputs" or "program version".  ``since`` is the
    digest of the revision that ``changes`` were found against ("" for a first one; None: never mind).
    """

    inputs: Mapping[str, bytes]
    results: Callable[[RevisionMark], bytes]
    changes: bytes
    headline: str
    cause: str
    moment: datetime
    program: str
    engine: str
    since: str | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Contents:
    """The files of one revision, each verified against its digest."""

    inputs: Mapping[str, bytes]
    results: bytes
    changes: bytes


@dataclass(frozen=True, slots=True, kw_only=True)
class Entry:
    """A folder whose name is that of a revision."""

    number: int
    short_digest: str
    path: Path
    name: str

    @property
    def moment(self) -> datetime:
        """When it was recorded, as its name says; long ago where that is no moment at all."""
        match = _FOLDER.fullmatch(self.name)
        try:
            return datetime.strptime(match[2] if match else "", "%Y-%m-%dT%H%M%SZ").replace(tzinfo=UTC)
        except ValueError:
            return datetime(1970, 1, 1, tzinfo=UTC)


def head_key(folder: Path | str) -> str:
    """Which revisions there are, by their names alone: cheap, for fingerprints."""
    return " ".join(_names(folder))


def read_history(folder: Path, *, newest: int | None = None) -> History:
    """Read the undamaged revisions of a history folder, by their ``revision.json``; others are named.

    Only the ``newest`` so many folders are looked at, if that is given.  Files are not read
    (:func:`contents` does that, and ``check``).  Nothing is raised.
    """
    revisions: list[Revision] = []
    problems: list[Problem] = []
    found = entries(folder)
    for entry in found if newest is None else found[-newest:]:
        try:
            revisions.append(read_revision(entry))
        except DamagedError as error:
            problems.append(damaged(entry.name, str(error)))
    return History(revisions=tuple(revisions), problems=tuple(problems))


def contents(revision: Revision) -> Contents:
    """Read the files of a revision; DamagedError if one is missing or not as recorded."""
    files = {path: verified(revision, path) for path in revision.files}
    try:
        return Contents(
            inputs={path.removeprefix("inputs/"): data for path, data in files.items() if path.startswith("inputs/")},
            results=files["results.json"],
            changes=files["changes.json"],
        )
    except KeyError as error:
        raise DamagedError(f"{error.args[0]} is not listed") from error


def record(folder: Path, draft: Draft) -> Revision:
    """Write a new revision, whole or not at all, and return it; the first gets number 1.

    Where another program has recorded the same inputs meanwhile with the same engine, that revision
    is returned instead.  Raises WriteError (disk full, read-only), LockedError, or OvertakenError
    where the newest revision is not the one that the draft's changes were found against.
    """
    try:
        folder.mkdir(exist_ok=True)  # without parents: a campaign that was moved away must not come back empty
    except OSError as error:
        raise WriteError(f"the history can't be written ({reason(error)})") from error
    with _locked(folder):
        sweep([folder])  # the lock is held, so no other recorder is at work
        head = _head(folder)
        if head is not None and head.engine == draft.engine and head.holds(draft.inputs):
            return head
        if draft.since is not None and draft.since != (head.digest if head else ""):
            raise OvertakenError("another program has recorded a revision meanwhile")
        return _write(folder, draft, head)


def _head(folder: Path) -> Revision | None:
    """The newest undamaged revision, looked for from the newest back."""
    for entry in reversed(entries(folder)):
        with contextlib.suppress(DamagedError):
            return read_revision(entry)
    return None


def can_record(folder: Path) -> bool:
    """Whether a revision could be recorded now, as far as a small trial tells."""
    trial = unfinished(folder)
    try:
        folder.mkdir(exist_ok=True)
        create(trial, b"")
        trial.unlink()
    except OSError:
        return False
    return True


def entries(folder: Path) -> list[Entry]:
    """List the revision folders by number; of two with one number (which no recorder makes) both."""
    matches = [(name, _FOLDER.fullmatch(name)) for name in _names(folder)]
    return sorted(
        (
            Entry(number=int(match[1]), short_digest=match[3], path=folder / name, name=name)
            for name, match in matches
            if match
        ),
        key=lambda entry: (entry.number, entry.name),
    )


def _names(folder: Path | str) -> list[str]:
    """The names of revision folders, sorted."""
    try:
        return sorted(name for name in os.listdir(folder) if _FOLDER.fullmatch(name))  # noqa: PTH208 - names alone
    except OSError:
        return []


def read_revision(entry: Entry) -> Revision:
    """Read and verify ``revision.json`` alone; DamagedError saying what is wrong with it."""
    try:
        stated = json.loads(read_file(entry.path / "revision.json"))
        revision = _from_json(stated, entry.path)
    except OSError as error:
        raise DamagedError(f"revision.json can't be read ({reason(error)})") from error
    except (ValueError, TypeError, KeyError, AttributeError, RecursionError) as error:
        raise DamagedError("revision.json is not as it was written") from error
    if digest_of({key: value for key, value in stated.items() if key != "digest"}) != revision.digest:
        raise DamagedError("revision.json was altered: its digest does not fit")
    if entry.name != _folder_name(revision):
        raise DamagedError("its folder was renamed: the name does not fit revision.json")
    return revision


def _from_json(stated: dict[str, object], folder: Path) -> Revision:
    if stated["format"] != FORMAT:
        raise DamagedError(f"its format {stated['format']!r} is not known to this version of the program")
    number, files = stated["number"], stated["files"]
    if not isinstance(number, int) or not isinstance(files, dict):
        raise TypeError
    if any(Path(path).is_absolute() or ".." in Path(path).parts for path in files):
        raise ValueError("a path leads out of the revision")
    return Revision(
        number=number,
        recorded=str(stated["recorded"]),
        program=str(stated["program"]),
        engine=str(stated["engine"]),
        previous=str(stated["previous"]),
        headline=str(stated["headline"]),
        cause=str(stated["cause"]),
        files={str(path): str(digest) for path, digest in files.items()},
        digest=str(stated["digest"]),
        folder=folder,
    )


def _to_json(revision: Revision) -> dict[str, object]:
    """Every key of ``revision.json`` but the digest."""
    return {
        "format": FORMAT,
        "number": revision.number,
        "recorded": revision.recorded,
        "program": revision.program,
        "engine": revision.engine,
        "previous": revision.previous,
        "headline": revision.headline,
        "cause": revision.cause,
        "files": dict(sorted(revision.files.items())),
    }


def _folder_name(revision: Revision) -> str:
    return f"{revision.number:04d}-{revision.recorded.replace(':', '')}-{revision.digest[:6]}"


def verified(revision: Revision, path: str) -> bytes:
    """Read one file of a revision; DamagedError if it is missing or not as recorded."""
    try:
        data = read_file(revision.folder / path)
    except OSError as error:
        raise DamagedError(f"{path} can't be read ({reason(error)})") from error
    if sha256(data) != revision.files.get(path):
        raise DamagedError(f"{path} was altered: its digest does not fit")
    return data


def _write(folder: Path, draft: Draft, head: Revision | None) -> Revision:
    recorded = f"{draft.moment.astimezone(UTC).replace(tzinfo=None, microsecond=0).isoformat()}Z"
    number = 1 + max((entry.number for entry in entries(folder)), default=0)
    mark = RevisionMark(number=number, recorded=recorded, digest="")
    files = {f"inputs/{name}": data for name, data in draft.inputs.items()}
    files |= {"results.json": draft.results(mark), "changes.json": draft.changes}
    undigested = Revision(
        number=number,
        recorded=recorded,
        program=draft.program,
        engine=draft.engine,
        previous=head.digest if head else "",
        headline=draft.headline,
        cause=draft.cause,
        files={path: sha256(data) for path, data in sorted(files.items())},
        digest="",
        folder=folder,
    )
    stated = _to_json(undigested)
    digest = digest_of(stated)
    files["revision.json"] = json.dumps({**stated, "digest": digest}, indent=1, ensure_ascii=False).encode() + b"\n"
    target = folder / f"{number:04d}-{recorded.replace(':', '')}-{digest[:6]}"
    _write_folder(target, files)
    # A process killed here leaves head.json one behind, which `check` does not mind.
    write_whole(folder / HEAD_NAME, canonical_json({"number": number, "digest": digest}), durable=True)
    return read_revision(Entry(number=number, short_digest=digest[:6], path=target, name=target.name))


def _write_folder(target: Path, files: Mapping[str, bytes]) -> None:
    """Write the folder beside its place, wait until the disk has it, and rename it into place."""
    beside = unfinished(target.parent)
    try:
        beside.mkdir()
        (beside / "inputs").mkdir()
        for path, data in sorted(files.items()):
            create(beside / path, data, durable=True)
        sync_folder(beside / "inputs")
        sync_folder(beside)
        beside.rename(target)
        sync_folder(target.parent)
    except OSError as error:
        shutil.rmtree(beside, ignore_errors=True)
        raise WriteError(f"the revision could not be written ({reason(error)})") from error


@contextlib.contextmanager
def _locked(folder: Path) -> Iterator[None]:
    lock = OwnerLock(folder / LOCK_NAME)
    deadline = time.monotonic() + LOCK_PATIENCE
    while True:
        try:
            lock.acquire()
            break
        except LockedError:
            if time.monotonic() > deadline:
                raise
            time.sleep(_LOCK_PAUSE)
    try:
        yield
    finally:
        lock.release()


def damaged(name: str, what: str, severity: Severity = "note") -> Problem:
    """Word the problem of a revision that is not what was recorded."""
    return Problem(
        file=f"history/{name}",
        message=f"this revision is damaged and not used: {what}",
        remedy="bring its folder back from a backup; the others are not affected",
        severity=severity,
    )
