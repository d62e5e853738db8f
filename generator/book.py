"""One build, start to end: read → find → record → draw → publish.

Only campaigns whose fingerprint differs from the published one are made; the others are looked at
and left.  The fingerprint is of everything that a campaign's pages are made of: input bytes, the
revisions there are, theme, program and libraries.
"""

from __future__ import annotations

import contextlib
import functools
import tomllib
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass, field
from datetime import datetime
from pathlib import Path
from typing import Protocol

from generator import __version__, disk, identity
from generator.chapter import Chapter, Incident, Task, make, read
from generator.disk import digest_of, sha256
from generator.folders import Folder, Inputs, find_campaigns, read_inputs
from generator.history.archive import can_record, head_key
from generator.history.check import check_history
from generator.lock import OwnerLock
from generator.problems import HullbookError, Problem, failing
from generator.report.publish import SHARED, Publication, Published, Written
from generator.report.views import IndexEntry
from generator.report.words import VERDICTS

LOCK_NAME = ".hullbook-lock"
ERROR_LOG_NAME = ".hullbook-errors.log"
_PLAIN = "plain"
#: The log of unexpected errors is begun anew beyond this size.
_LONGEST_LOG = 1_000_000


class WrongUseError(HullbookError):
    """The command can't be carried out as it was given."""


class Log(Protocol):
    """Where a build tells what it does: one line at a time."""

    def say(self, line: str) -> None:
        """Tell what was done."""

    def warn(self, line: str) -> None:
        """Tell what somebody has to look at."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Job:
    """What is to be built: folders, theme (None: each campaign's own), moment, number of processes.

    ``history`` None keeps each campaign's revisions with the campaign.
    """

    campaigns: Path
    output: Path
    moment: datetime
    theme: str | None = None
    history: Path | None = None
    jobs: int = 1


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """What a build did: campaigns made and kept, files written and held, and every campaign's problems."""

    made: tuple[str, ...] = ()
    kept: tuple[str, ...] = ()
    written: int = 0
    removed: int = 0
    pending: tuple[str, ...] = ()
    problems: Mapping[str, tuple[Problem, ...]] = field(default_factory=dict)

    def sentence(self) -> str:
        """Tell the outcome in one line."""
        campaigns = _count(len(self.made) + len(self.kept), "campaign")
        if not (self.made or self.written or self.removed):
            return f"{campaigns}, nothing changed"
        files = f"{_count(self.written, 'file')} written, {self.removed} removed"
        return f"{campaigns}, {len(self.made)} built; {files}"

    @property
    def is_well(self) -> bool:
        """Whether no campaign has a problem and every file is in place."""
        return not self.pending and not any(failing(problems) for problems in self.problems.values())


def writer_lock(output: Path) -> OwnerLock:
    """Make the lock that a builder of this output folder has to hold."""
    return OwnerLock(output / LOCK_NAME)


def check_job(job: Job) -> None:
    """Refuse what can't be meant: no campaigns folder, folders that feed on each other, no such theme.

    WrongUseError or NoCampaignsError, with what to do.
    """
    find_campaigns(job.campaigns)
    if disk.is_inside(job.output, job.campaigns):
        raise WrongUseError(f"the output folder {job.output} lies in the folder of campaigns; choose another")
    if disk.is_inside(job.campaigns, job.output):
        raise WrongUseError(f"the folder of campaigns {job.campaigns} lies in the output folder; choose another")
    if job.history is not None and disk.is_inside(job.history, job.output):
        raise WrongUseError(f"the history folder {job.history} lies in the output folder; choose another")
    if job.output.exists() and not job.output.is_dir():
        raise WrongUseError(f"{job.output} is a file; give a folder for the pages")
    if job.theme is not None:
        _theme_digest(job.theme)


def check(campaigns: Path, history: Path | None) -> Iterator[tuple[Folder, tuple[Problem, ...]]]:
    """Read every campaign and verify its history, without writing anything: all problems of each."""
    for folder in find_campaigns(campaigns):
        campaign = read(folder, read_inputs(folder))
        yield folder, (*campaign.problems, *check_history(history_of(folder, history)))


def history_of(folder: Folder, history: Path | None) -> Path:
    """Say where a campaign's revisions are."""
    return folder.path / "history" if history is None else history / folder.slug


def build(
    job: Job,
    lock: OwnerLock,
    log: Log,
    *,
    only: frozenset[Path] | None = None,
    without: frozenset[Path] = frozenset(),
    before_replace: Callable[[Path], None] | None = None,
    is_wanted: Callable[[], bool] = lambda: True,
) -> Outcome:
    """Build once; the caller holds ``lock``.

    ``only`` names campaign folders that may have changed: others are left unread as published.
    ``without`` names folders that are not ready to be read: they stay as published, or out.  When
    ``is_wanted`` turns false, campaigns not yet begun are left for the next build.  Raises
    NoCampaignsError, and WriteError or LockedError where the output folder can't be written any more;
    the last good pages then stay.
    """
    folders = find_campaigns(job.campaigns)
    publication = Publication(job.output, moment=job.moment, before_replace=before_replace)
    run = _Run(job, publication, log)
    if SHARED not in publication.old.campaigns:
        run.put_shared([])  # every page links to the index: it has to be there before them
    for task, chapter in _chapters(run.due(folders, only, without), job.jobs):
        lock.beat()
        run.put(task, chapter)
        if not is_wanted():
            run.leave_rest(folders)
            break
    run.put_shared(folders)
    return run.outcome(folders, publication.finish())


class _Run:
    """One build under way: what is kept, what is made, what was written."""

    def __init__(self, job: Job, publication: Publication, log: Log) -> None:
        self._job = job
        self._publication = publication
        self._log = log
        self._theme_digest = functools.cache(_own_theme_digest)
        self._made: list[str] = []
        self._entries: dict[str, IndexEntry] = {}
        self._steps: list[Written] = []
        self._problems: dict[str, tuple[Problem, ...]] = {}

    def due(self, folders: Iterable[Folder], only: frozenset[Path] | None, without: frozenset[Path]) -> Iterator[Task]:
        """Find the campaigns that have to be made; the others are kept as published."""
        for folder in folders:
            is_unread = folder.path in without or (only is not None and folder.path not in only)
            if is_unread and (self._keep(folder) or folder.path in without):
                continue
            inputs = read_inputs(folder)
            if not (self._is_current(folder, inputs) and self._keep(folder)):
                yield Task(
                    folder=folder,
                    inputs=inputs,
                    history=history_of(folder, self._job.history),
                    theme=self._job.theme,
                    moment=self._job.moment,
                )

    def leave_rest(self, folders: Iterable[Folder]) -> None:
        """Keep what is published of the campaigns that this build did not reach."""
        for folder in folders:
            if folder.slug not in self._entries:
                self._keep(folder)

    def put(self, task: Task, chapter: Chapter) -> None:
        """Publish one campaign and tell of it."""
        slug = task.folder.slug
        problems = chapter.entry.problems
        if chapter.incident is not None:
            self._log_incident(slug, chapter.incident)
        if chapter.files is None:
            # Not even a page of problems could be drawn.  What is published stays; the index does not
            # lead to a campaign without any page.
            if self._keep(task.folder):
                self._entries[slug] = chapter.entry
            step = Written()
        else:
            step = self._publication.put(slug, self._published(task, chapter), chapter.files)
            self._entries[slug] = chapter.entry
        self._made.append(slug)
        self._steps.append(step)
        self._problems[slug] = problems + step.problems
        self._tell(chapter, step)

    def _published(self, task: Task, chapter: Chapter) -> Published:
        """Make the manifest's record of a campaign; one with a defect is made again by every build."""
        is_sound = chapter.incident is None
        return Published(
            fingerprint=self._fingerprint(task.folder, task.inputs, chapter.theme) if is_sound else "",
            files={},
            about={
                "folder": task.folder.name,
                "entry": asdict(chapter.entry),
                "theme": chapter.theme,
                "is_recorded": chapter.is_recorded,
            },
        )

    def put_shared(self, folders: Sequence[Folder]) -> None:
        """Publish the index and the pages that belong to no campaign, if anything on them differs."""
        entries = [self._entries[folder.slug] for folder in folders if folder.slug in self._entries]
        theme = self._job.theme or _site_theme(next((folder.site for folder in folders), None))
        fingerprint = digest_of([[asdict(entry) for entry in entries], self._theme_digest(theme), identity.program()])
        old = self._publication.old.campaigns.get(SHARED)
        if old is not None and old.fingerprint == fingerprint and self._publication.is_complete(SHARED):
            self._publication.keep(SHARED)
            return
        files = self._shared(entries, theme)
        step = self._publication.put(SHARED, Published(fingerprint=fingerprint, files={}), files)
        self._steps.append(step)
        self._problems[SHARED] = step.problems

    def _shared(self, entries: list[IndexEntry], theme: str) -> dict[str, bytes]:
        """Draw the shared pages; in the plain theme where the one that is wanted can't be used."""
        try:
            return _shared_pages(entries, theme)
        except HullbookError as error:
            if theme == _PLAIN:
                raise
            self._log.warn(f"{error}; the index is shown in the theme {_PLAIN}")
            return _shared_pages(entries, _PLAIN)

    def outcome(self, folders: Iterable[Folder], finished: Written) -> Outcome:
        """Sum up."""
        pending = [path for step in (*self._steps, finished) for path in step.pending]
        for path in pending:
            self._log.warn(f"{path}: held by another program, not replaced yet")
        for problem in self._problems.get(SHARED, ()):
            self._log.warn(problem.sentence())
        return Outcome(
            made=tuple(self._made),
            kept=tuple(folder.slug for folder in folders if folder.slug not in self._made),
            written=len({path for step in self._steps for path in step.paths}),
            removed=len(finished.paths),
            pending=tuple(pending),
            problems=self._problems,
        )

    def _is_current(self, folder: Folder, inputs: Inputs) -> bool:
        old = self._publication.old.campaigns.get(folder.slug)
        if old is None or not old.fingerprint:
            return False
        if old.fingerprint != self._fingerprint(folder, inputs, str(old.about.get("theme", ""))):
            return False
        if not old.about.get("is_recorded", True) and can_record(history_of(folder, self._job.history)):
            return False
        return self._publication.is_complete(folder.slug)

    def _fingerprint(self, folder: Folder, inputs: Inputs, theme: str) -> str:
        return digest_of(
            {
                "folder": folder.name,
                "slug": folder.slug,
                "inputs": {name: sha256(data) for name, data in inputs.files.items()},
                "faults": [asdict(problem) for problem in inputs.problems],
                "history": head_key(history_of(folder, self._job.history)),
                "override": self._job.theme is not None,
                "theme": self._theme_digest(self._job.theme or theme),
                "program": identity.program(),
            }
        )

    def _keep(self, folder: Folder) -> bool:
        """Keep a campaign as published; False where it is not (or another has its slug)."""
        old = self._publication.old.campaigns.get(folder.slug)
        if old is None or old.about.get("folder") != folder.name:
            return False
        entry = _entry_from(old.about.get("entry"))
        if entry is None:
            return False
        self._publication.keep(folder.slug)
        self._entries[folder.slug] = entry
        self._problems[folder.slug] = entry.problems
        return True

    def _tell(self, chapter: Chapter, step: Written) -> None:
        entry = chapter.entry
        self._log.say(f"{entry.slug}: {_summary(entry)}; {_count(len(step.paths), 'file')} written")
        unrecorded = () if chapter.is_recorded else tuple(item for item in entry.problems if item.file == "history")
        for problem in (*failing(entry.problems), *unrecorded, *step.problems):
            self._log.warn(f"{entry.slug}: {problem.sentence()}")

    def _log_incident(self, slug: str, incident: Incident) -> None:
        """Keep the traceback where the maker of the program can ask for it."""
        path = self._job.output / ERROR_LOG_NAME
        with contextlib.suppress(OSError):
            path.parent.mkdir(parents=True, exist_ok=True)
            mode = "a" if path.exists() and path.stat().st_size < _LONGEST_LOG else "w"
            with path.open(mode, encoding="utf-8", errors="backslashreplace") as stream:
                stream.write(f"{self._job.moment.isoformat()} {slug} {incident.reference}\n{incident.trace}\n")


def _chapters(tasks: Iterable[Task], jobs: int) -> Iterator[tuple[Task, Chapter]]:
    """Make campaigns, in their order, here or in ``jobs`` other processes: the same bytes either way."""
    if jobs <= 1:
        for task in tasks:
            yield task, make(task)
        return
    from generator.workers import make_in_processes

    yield from make_in_processes(tasks, jobs)


def _shared_pages(entries: list[IndexEntry], theme_name: str) -> dict[str, bytes]:
    from generator.report.pages import assets, draw_index, draw_method
    from generator.report.themes import load_theme

    theme = load_theme(theme_name)
    return {
        **assets(theme),
        "method.html": draw_method(theme, __version__),
        "index.html": draw_index(tuple(entries), theme),
    }


def _site_theme(site: Path | None) -> str:
    """Find the theme that site.toml names for the index; what is wrong with the file is told elsewhere."""
    try:
        theme = tomllib.loads(site.read_text(encoding="utf-8-sig")).get("theme") if site else None
    except (OSError, ValueError):
        theme = None
    return theme if isinstance(theme, str) else _PLAIN


def _theme_digest(name: str) -> str:
    from generator.report.themes import load_theme

    return load_theme(name).digest


def _own_theme_digest(name: str) -> str:
    """As :func:`_theme_digest`, but a theme that can't be used has the digest of what is wrong with it."""
    try:
        return _theme_digest(name)
    except HullbookError as error:
        return str(error)


def _entry_from(stored: object) -> IndexEntry | None:
    """The index line that an earlier build kept in the manifest; None if it is not one of now."""
    try:
        fields = dict(stored)  # type: ignore[call-overload]
        fields["problems"] = tuple(Problem(**problem) for problem in fields["problems"])
        return IndexEntry(**fields)
    except (TypeError, ValueError, KeyError):
        return None


def _summary(entry: IndexEntry) -> str:
    if not entry.counts:
        return "no answers" if entry.is_stopped else "no orders"
    counts = ", ".join(f"{entry.counts[verdict]} {verdict}" for verdict in VERDICTS if verdict in entry.counts)
    stopped = ", stopped: showing the last good answers" if entry.is_stopped else ""
    return f"{_count(sum(entry.counts.values()), 'order')} ({counts}){stopped}"


def _count(number: int, what: str) -> str:
    return f"{number} {what}{'' if number == 1 else 's'}"
