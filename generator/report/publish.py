"""Publishing: files by address become an output folder that is never half-published.

A new campaign's folder comes whole.  In one that is there, new files come first, then those that
replace others, its index last of all; the output folder's own index after all campaigns, and the
manifest after everything, as the record of what was written.  Only files that a manifest or a journal
names are ever replaced or removed.  The journal is written before the pages: a process killed at any
moment leaves old or new pages with working links, and the next one knows which files are its own and
what to do again.
"""

from __future__ import annotations

import contextlib
import functools
import os
import shutil
import time
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from pathlib import Path, PurePosixPath

from generator.disk import HeldError, WriteError, create, is_held, reason, sha256, sweep, unfinished, write_whole
from generator.problems import Problem
from generator.report.manifest import (
    ASSETS,
    JOURNAL_NAME,
    MANIFEST_NAME,
    FileList,
    Manifest,
    Published,
    dump,
    journal_line,
    read_journal,
    read_manifest,
)
from generator.report.presence import Presence

#: The name under which the files that belong to no campaign are recorded.
SHARED = ""

#: Pages are open in browsers: what they load stays this long after no page names it any more.
ASSET_GRACE = timedelta(days=1)
#: All waiting for files that others hold, in one publication.
LONGEST_WAIT = 20.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Written:
    """What one step of a publication did: addresses written, those still held, what was in the way."""

    paths: tuple[str, ...] = ()
    pending: tuple[str, ...] = ()
    problems: tuple[Problem, ...] = ()


class Publication:
    """One publication, from the first campaign to the manifest; its user holds the writer's lock.

    ``put`` or ``keep`` each campaign, then ``finish``.  A campaign that gets neither is gone, and its
    files are removed.  ``before_replace`` is called before every rename (tests put faults there).
    ``thorough`` looks at every published file, not only at every folder.
    """

    def __init__(
        self,
        output: Path,
        *,
        moment: datetime,
        before_replace: Callable[[Path], None] | None = None,
        sleep: Callable[[float], None] = time.sleep,
        thorough: bool = False,
    ) -> None:
        self._output = output
        self._moment = moment.astimezone(UTC)
        self._before_replace = before_replace
        self._sleep = sleep
        self._wait_left = LONGEST_WAIT
        journal = read_journal(output)
        sweep({output, *((output / path).parent for path in journal.files)})
        self.old = read_manifest(output).voided(journal.campaigns)
        self._announced: dict[str, frozenset[str]] = dict(journal.files)
        self._is_journalled = (output / JOURNAL_NAME).exists()
        self._presence = Presence(output, thorough=thorough)
        self._new: dict[str, Published] = {}
        self._pending: list[str] = []

    def keep(self, campaign: str) -> None:
        """Leave a campaign as it is published."""
        self._new[campaign] = self.old.campaigns[campaign]
        self._presence.keep(campaign)

    def is_complete(self, campaign: str) -> bool:
        """Whether every file of a published campaign is still there as it was written."""
        return self._presence.holds(campaign, self.old.campaigns[campaign].files)

    def standing(self, campaign: str) -> frozenset[str]:
        """The addresses of a campaign that are still there as an earlier build published them.

        What a killed publication was about to write is not among them, whether it was written or not.
        """
        old = self.old.campaigns.get(campaign)
        if old is None:
            return frozenset()
        return frozenset(old.files) - _absent(self._output, old.files) - self._announced.keys()

    def put(self, campaign: str, published: Published, files: Mapping[str, bytes], kept: Iterable[str] = ()) -> Written:
        """Write a campaign's files; ``published.files`` is filled in here.

        ``kept`` are addresses of the campaign that stay as an earlier build published them.

        Files that hold these bytes already are not touched; foreign files in the way are not either,
        and each is a problem.  WriteError where the disk is full, read-only or gone.
        """
        free, problems = self._free(files)
        digests = {path: self.old.campaigns[campaign].files[path] for path in kept}
        digests |= {path: sha256(data) for path, data in free.items()}
        due = [path for path in free if not _holds(self._output / path, digests[path], len(free[path]))]
        self._announce(campaign, {path: digests[path] for path in due})
        in_order = {path: free[path] for path in _in_order(self._output, campaign, due)}
        written = self._write_new_folder(campaign, in_order)
        rest = {path: data for path, data in in_order.items() if path not in written}
        more, pending = self._write(rest)
        written += more
        for path in pending:
            digests[path] = sha256((self._output / path).read_bytes())
        self._pending += pending
        again = bool(pending or problems)
        self._new[campaign] = replace(
            published, files=FileList(digests), fingerprint="" if again else published.fingerprint
        )
        if not again:
            self._presence.note(campaign, digests)
        return Written(paths=tuple(written), pending=tuple(pending), problems=tuple(problems))

    def finish(self) -> Written:
        """Write the manifest and remove what is no longer used; returns what was removed."""
        self._presence.save()
        leftover = self._leftover()
        retired = self._retired(leftover)
        gone = sorted(path for path in leftover if path not in retired)
        if self._is_as_before(gone, retired):
            return Written()
        if gone:
            self._announce(SHARED, {path: min(leftover[path], default="") for path in gone})
        manifest = Manifest(campaigns=self._new, retired=retired)
        try:
            data = dump(manifest, self.old)
            write_whole(self._output / MANIFEST_NAME, data, durable=True, before_replace=self._before_replace)
        except HeldError:
            return Written(pending=(MANIFEST_NAME,))
        removed = [path for path in gone if self._remove(path, leftover[path])]
        with contextlib.suppress(FileNotFoundError):
            (self._output / JOURNAL_NAME).unlink()
        return Written(paths=tuple(removed))

    def _is_as_before(self, gone: Iterable[str], retired: Mapping[str, tuple[str, str]]) -> bool:
        """Whether the manifest says already what it would say now, and nothing is left to do."""
        old = self.old.campaigns
        return (
            not self._is_journalled
            and not gone
            and retired == self.old.retired
            and old.keys() == self._new.keys() != set()
            and all(self._new[name] is published for name, published in old.items())
        )

    def _digests(self, path: str) -> frozenset[str]:
        """What this program may have written at an address; nothing where it never wrote."""
        found = set(self._announced.get(path, ()))
        if path in self.old.retired:
            found.add(self.old.retired[path][0])
        if path.startswith(ASSETS):
            found |= {self._assets[path]} if path in self._assets else set()
        else:
            owner = self.old.campaigns.get(path.partition("/")[0] if "/" in path else SHARED)
            found |= {owner.files[path]} if owner is not None and path in owner.files else set()
        return frozenset(found)

    @functools.cached_property
    def _assets(self) -> dict[str, str]:
        """The assets of every campaign of the old manifest, with their digests."""
        return {path: digest for item in self.old.campaigns.values() for path, digest in _assets_of(item)}

    def _leftover(self) -> dict[str, frozenset[str]]:
        """What earlier publications wrote and nothing uses now, with the digests that it may have."""
        paths = {*self.old.retired, *self._announced}
        for name, published in self.old.campaigns.items():
            new = self._new.get(name)
            if new is None:
                paths |= published.files.keys()
            elif new is not published:
                paths |= published.files.keys() - new.files.keys()
        assets = {path for path in paths if path.startswith(ASSETS)}
        if assets:
            assets -= {path for item in self._new.values() for path, _ in _assets_of(item)}
        return {path: self._digests(path) for path in paths if path in assets or self._is_unused(path)}

    def _is_unused(self, path: str) -> bool:
        """Whether no campaign has a page at that address; assets are not asked here."""
        owner = self._new.get(path.partition("/")[0] if "/" in path else SHARED)
        return not path.startswith(ASSETS) and (owner is None or path not in owner.files)

    def _free(self, files: Mapping[str, bytes]) -> tuple[dict[str, bytes], list[Problem]]:
        """Split off files whose place is taken by something that this program did not write."""
        free: dict[str, bytes] = {}
        problems: list[Problem] = []
        for path, data in files.items():
            blocker = _blocker(self._output, path, is_owned=bool(self._digests(path)), data=data)
            if blocker is None:
                free[path] = data
            else:
                problems.append(_foreign(blocker))
        return free, problems

    def _announce(self, campaign: str, files: Mapping[str, str]) -> None:
        """Note in the journal what is about to happen, before it does."""
        if not files:
            return
        try:
            self._output.mkdir(parents=True, exist_ok=True)
            with (self._output / JOURNAL_NAME).open("a", encoding="utf-8", newline="\n") as stream:
                stream.write(journal_line(campaign, files))
                stream.flush()
                os.fsync(stream.fileno())
        except OSError as error:
            raise WriteError(f"the output folder can't be written ({reason(error)})") from error
        self._is_journalled = True
        for path, digest in files.items():
            self._announced[path] = self._announced.get(path, frozenset()) | {digest}

    def _write_new_folder(self, campaign: str, files: Mapping[str, bytes]) -> list[str]:
        """Rename a new campaign's folder into place with all its pages, since these link to each other.

        Returns what was written; where the folder can't be renamed its pages are left to come one by one.
        """
        pages = {path: data for path, data in files.items() if path.startswith(f"{campaign}/")}
        target = self._output / campaign
        if campaign == SHARED or not pages or os.path.lexists(target):
            return []
        assets, _ = self._write({path: data for path, data in files.items() if path not in pages})
        beside = unfinished(self._output)
        try:
            for path, data in pages.items():
                file = beside / path.removeprefix(f"{campaign}/")
                file.parent.mkdir(parents=True, exist_ok=True)
                create(file, data)
            if self._before_replace is not None:
                self._before_replace(target)
            beside.rename(target)
        except OSError as error:
            shutil.rmtree(beside, ignore_errors=True)
            if not is_held(error):
                raise WriteError(f"the output folder can't be written ({reason(error)})") from error
            return assets
        return [*assets, *pages]

    def _write(self, files: Mapping[str, bytes]) -> tuple[list[str], list[str]]:
        written: list[str] = []
        pending: list[str] = []
        for path, data in files.items():
            try:
                write_whole(self._output / path, data, before_replace=self._before_replace, pause=self._pause)
                written.append(path)
            except HeldError:
                pending.append(path)
        return written, pending

    def _pause(self, seconds: float) -> None:
        if self._wait_left > 0:
            self._wait_left -= seconds
            self._sleep(seconds)

    def _retired(self, leftover: Mapping[str, frozenset[str]]) -> dict[str, tuple[str, str]]:
        """What is no longer used but has to stay for a while.

        Assets stay for the readers of pages that are open; while a page is held, everything stays
        that it may link to.
        """
        now = self._moment.replace(tzinfo=None, microsecond=0)
        retired: dict[str, tuple[str, str]] = {}
        for path, digests in sorted(leftover.items()):
            digest, since = self.old.retired.get(path, (min(digests, default=""), ""))
            if path.startswith(ASSETS):
                since = since if "" < since <= f"{now.isoformat()}Z" else f"{now.isoformat()}Z"  # a clock set back
                is_due = now - datetime.fromisoformat(since.removesuffix("Z")) > ASSET_GRACE
            else:
                is_due = True
            if self._pending or not is_due:
                retired[path] = (digest, since)
        return retired

    def _remove(self, path: str, digests: frozenset[str]) -> bool:
        """Remove a file that still is as it was written, and folders that it leaves empty."""
        file = self._output / path
        try:
            if sha256(file.read_bytes()) not in digests:
                return False  # someone has made it their own since
            file.unlink()
        except OSError:
            return False
        for parent in PurePosixPath(path).parents[:-1]:
            try:
                (self._output / parent).rmdir()
            except OSError:
                break
        return True


def _assets_of(published: Published) -> Iterable[tuple[str, str]]:
    files = published.files
    return files.assets() if isinstance(files, FileList) else FileList(files).assets()


def _absent(output: Path, files: Iterable[str]) -> set[str]:
    """Those of the files that are gone, at the cost of one listing per folder."""
    wanted: dict[str, dict[str, str]] = {}
    for path in files:
        folder, _, name = path.rpartition("/")
        wanted.setdefault(folder, {})[name] = path
    absent: set[str] = set()
    for folder, names in wanted.items():
        try:
            here = set(os.listdir(output / folder))  # noqa: PTH208 - names are all that is wanted
        except OSError:
            here = set()
        absent |= {path for name, path in names.items() if name not in here}
    return absent


def _holds(path: Path, digest: str, size: int) -> bool:
    try:
        return path.stat().st_size == size and sha256(path.read_bytes()) == digest
    except OSError:
        return False


def _in_order(output: Path, campaign: str, paths: Iterable[str]) -> list[str]:
    """New files first: what links to them comes later.  Assets before pages, the index at the end."""

    def rank(path: str) -> tuple[int, str]:
        if path in (f"{campaign}/index.html", "index.html"):
            return 3, path
        if path.startswith(ASSETS):
            return 0, path
        return (2 if (output / path).exists() else 1), path

    return sorted(paths, key=rank)


def _blocker(output: Path, path: str, *, is_owned: bool, data: bytes) -> str | None:
    """The address of what stands in the way of a file and is not this program's; None if nothing does."""
    for parent in reversed(PurePosixPath(path).parents[:-1]):
        if (output / parent).exists() and not (output / parent).is_dir():
            return parent.as_posix()
    file = output / path
    if file.is_dir():
        return path
    if is_owned or not os.path.lexists(file):
        return None
    try:
        return None if file.read_bytes() == data else path
    except OSError:
        return path


def _foreign(path: str) -> Problem:
    return Problem(
        file=path,
        message="this file in the output folder was not written by this program and stands in the way of a page",
        remedy="move it away, or choose another output folder",
        severity="drops",
    )
