"""One run over the campaigns: which are kept, which are made, and what is told of it."""

from __future__ import annotations

import contextlib
import functools
import hashlib
import time
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import asdict
from datetime import datetime
from pathlib import Path

from generator import identity
from generator.disk import canonical_json, digest_of
from generator.folders import Folder, Inputs, is_gone, read_inputs, site_theme
from generator.history.archive import can_record, head_key
from generator.job import Job, Log, Outcome, history_of
from generator.problems import Problem, failing
from generator.report.manifest import FileList, Published
from generator.report.publish import SHARED, Publication, Written
from generator.report.theme_folders import theme_digest
from generator.report.views import IndexEntry
from generator.tasks import Chapter, Incident, Task
from generator.workers import Makers, Tick

ERROR_LOG_NAME = ".hullbook-errors.log"
#: The log of unexpected errors is begun anew beyond this size.
_LONGEST_LOG = 1_000_000
#: Of a build that takes longer, so often it is told how far it is, in seconds.
PROGRESS_EVERY = 5.0


class Run:
    """One build under way: what is kept, what is made, what was written."""

    def __init__(
        self, job: Job, publication: Publication, log: Log, makers: Makers, tick: Tick, *, tries_again: bool
    ) -> None:
        self._job = job
        self._publication = publication
        self._log = log
        self._makers = makers
        self._tick = tick
        self._tries_again = tries_again
        self._theme_digest = functools.cache(theme_digest)
        self._common = functools.cache(self._common_of)
        self._made: list[str] = []
        self._entries: dict[str, Mapping[str, object]] = {}
        self._steps: list[Written] = []
        self._problems: dict[str, tuple[Problem, ...]] = {}
        self._themes: set[str] = set()

    def make(self, folders: Sequence[Folder], only: frozenset[Path] | None, without: frozenset[Path]) -> None:
        """Make the campaigns that are due, and leave the rest as published once no more is wanted."""
        if self._job.history is not None:
            with contextlib.suppress(OSError):  # a campaign that can't be recorded tells so
                self._job.history.mkdir(parents=True, exist_ok=True)
        due = [folder for folder in folders if self._is_due(folder, only, without)]
        progress = Progress(len(due), self._log.say)

        def tick() -> bool:
            progress.tick()
            return self._tick()

        for task, chapter in self._makers.make_all(self._tasks(due), tick):
            self._put(task, chapter)
            progress.count()
        for folder in folders:
            if folder.slug not in self._entries and folder.slug not in self._made:
                self._keep(folder)

    def _is_due(self, folder: Folder, only: frozenset[Path] | None, without: frozenset[Path]) -> bool:
        """Whether a campaign has to be made; another one is kept as published, if it is."""
        is_unread = folder.path in without or (only is not None and folder.path not in only)
        if is_unread and (self._keep(folder) or folder.path in without):
            return False
        inputs = read_inputs(folder, is_just_found=True)
        return not (self._is_current(folder, inputs) and self._keep(folder, is_current=True))

    def _tasks(self, due: Iterable[Folder]) -> Iterator[Task]:
        """Read what is due, each campaign when its turn comes: all together may be more than memory holds."""
        for folder in due:
            inputs = read_inputs(folder)
            if is_gone(folder):
                continue  # gone since it was found, or its disk is: what is published stays until the next build
            yield Task(
                folder=folder,
                inputs=inputs,
                history=history_of(folder, self._job.history),
                theme=self._job.theme,
                moment=self._job.moment,
                edition=self._job.edition,
                client=self._job.client,
                drawn=self._drawn(folder.slug),
            )

    def _drawn(self, slug: str) -> dict[str, str]:
        """The keys of pages that an earlier build drew, as far as the pages still stand."""
        old = self._publication.old.campaigns.get(slug)
        drawn = FileList(str(old.about.get("drawn", ""))) if old is not None else {}
        standing = self._publication.standing(slug) if drawn else frozenset()
        return {address: key for address, key in drawn.items() if address in standing}

    def _put(self, task: Task, chapter: Chapter) -> None:
        """Publish one campaign and tell of it."""
        slug = task.folder.slug
        problems = chapter.entry.problems
        if chapter.incident is not None:
            log_incident(self._job.output, self._job.moment, slug, chapter.incident)
        if (chapter.files is None or chapter.is_makeshift) and self._keep(task.folder):
            # Not even a page of problems could be drawn, or the theme is broken: what is published stays.
            self._entries[slug], step = asdict(chapter.entry), Written()
        elif chapter.files is None:
            step = Written()  # the index does not lead to a campaign without any page
        else:
            step = self._publication.put(slug, self._published(task, chapter), chapter.files, chapter.kept)
            self._entries[slug] = asdict(chapter.entry)
            self._themes.add(chapter.theme)
        self._made.append(slug)
        self._steps.append(step)
        self._problems[slug] = problems + step.problems
        self._tell(chapter, step)

    def _published(self, task: Task, chapter: Chapter) -> Published:
        """Make the manifest's record of a campaign; one with a defect is made again by every build."""
        is_sound = chapter.incident is None and not chapter.must_repeat
        return Published(
            fingerprint=self._fingerprint(task.folder, task.inputs, chapter.theme) if is_sound else "",
            files={},
            about={
                "folder": task.folder.name,
                "entry": asdict(chapter.entry),
                "theme": chapter.theme,
                "is_recorded": chapter.is_recorded,
                "overran": chapter.overran,
                "drawn": FileList(chapter.drawn).text,
            },
        )

    def put_shared(self, folders: Sequence[Folder]) -> None:
        """Publish the index and the pages that belong to no campaign, if anything on them differs."""
        entries = [self._entries[folder.slug] for folder in folders if folder.slug in self._entries]
        theme = self._job.theme or site_theme(next((folder.site for folder in folders), None))
        self._themes.add(theme)
        fingerprint = digest_of([entries, self._theme_digest(theme), identity.program()])
        old = self._publication.old.campaigns.get(SHARED)
        if old is not None and old.fingerprint == fingerprint and self._publication.is_complete(SHARED):
            self._publication.keep(SHARED)
            return
        lines = tuple(entry for entry in map(entry_from, entries) if entry is not None)
        drawn = self._makers.call("generator.shared:draw_shared", lines, theme, tick=self._tick)
        if drawn is None:  # given up or not wanted any more: the next build tries again
            if old is not None:
                self._publication.keep(SHARED)
            return
        if drawn.remark:
            self._log.warn(drawn.remark)
        step = self._publication.put(SHARED, Published(fingerprint=fingerprint, files={}), drawn.files)
        self._steps.append(step)
        self._problems[SHARED] = step.problems

    def outcome(self, folders: Iterable[Folder], finished: Written) -> Outcome:
        """Sum up."""
        pending = [path for step in (*self._steps, finished) for path in step.pending]
        for path in pending:
            self._log.warn(f"{path}: held by another program, not replaced yet")
        for problem in self._problems.get(SHARED, ()):
            self._log.warn(problem.sentence())
        made = set(self._made)
        return Outcome(
            made=tuple(folder.slug for folder in folders if folder.slug in made),
            kept=tuple(folder.slug for folder in folders if folder.slug not in made),
            written=len({path for step in self._steps for path in step.paths}),
            removed=len(finished.paths),
            pending=tuple(pending),
            problems=self._problems,
            themes=frozenset(self._themes),
        )

    def _is_current(self, folder: Folder, inputs: Inputs) -> bool:
        old = self._publication.old.campaigns.get(folder.slug)
        if old is None or not old.fingerprint:
            return False
        if old.fingerprint != self._fingerprint(folder, inputs, str(old.about.get("theme", ""))):
            return False
        if not old.about.get("is_recorded", True) and can_record(history_of(folder, self._job.history)):
            return False
        overran = old.about.get("overran", 0.0)
        if overran and (self._tries_again or (isinstance(overran, float) and self._job.time_limit > overran)):
            return False
        return self._publication.is_complete(folder.slug)

    def _fingerprint(self, folder: Folder, inputs: Inputs, theme: str) -> str:
        """Digest everything that a campaign's pages are made of."""
        digest = hashlib.sha256(self._common(self._job.theme or theme))
        around = f"{folder.name}\0{folder.slug}\0{head_key(self._history_path(folder))}\0"
        digest.update(around.encode("utf-8", "surrogatepass"))
        if inputs.problems:
            digest.update(canonical_json([asdict(problem) for problem in inputs.problems]))
        for name, data in inputs.files.items():
            digest.update(f"\n{name} {len(data)}\n".encode())
            digest.update(data)
        return digest.hexdigest()

    def _common_of(self, theme: str) -> bytes:
        """The part of the fingerprint that campaigns in one theme share."""
        job = self._job
        shared = [job.theme is not None, job.edition, job.client, self._theme_digest(theme), identity.program()]
        return canonical_json(shared)

    def _history_path(self, folder: Folder) -> str:
        """As :func:`history_of`; text is made faster than paths, which counts with a thousand campaigns."""
        return f"{folder.path}/history" if self._job.history is None else f"{self._job.history}/{folder.slug}"

    def _keep(self, folder: Folder, *, is_current: bool = False) -> bool:
        """Keep a campaign as published; False where it is not (or another has its slug).

        ``is_current``: this very program has made it, so that its line of the index needs no check.
        """
        old = self._publication.old.campaigns.get(folder.slug)
        if old is None or old.about.get("folder") != folder.name:
            return False
        entry = old.about.get("entry")
        if not isinstance(entry, dict) or not (is_current or entry_from(entry) is not None):
            return False
        self._publication.keep(folder.slug)
        self._entries[folder.slug] = entry
        self._problems[folder.slug] = tuple(Problem(**problem) for problem in entry["problems"])
        self._themes.add(str(old.about.get("theme", "")))
        return True

    def _tell(self, chapter: Chapter, step: Written) -> None:
        entry = chapter.entry
        unrecorded = () if chapter.is_recorded else tuple(item for item in entry.problems if item.file == "history")
        for problem in (*failing(entry.problems), *unrecorded, *step.problems):
            self._log.warn(f"{entry.slug}: {problem.sentence()}")


def log_incident(output: Path, moment: datetime, where: str, incident: Incident) -> None:
    """Keep the traceback of an unexpected error where the maker of the program can ask for it."""
    path = output / ERROR_LOG_NAME
    with contextlib.suppress(OSError):
        path.parent.mkdir(parents=True, exist_ok=True)
        mode = "a" if path.exists() and path.stat().st_size < _LONGEST_LOG else "w"
        with path.open(mode, encoding="utf-8", errors="backslashreplace") as stream:
            stream.write(f"{moment.isoformat()} {where} {incident.reference}\n{incident.trace}\n")


class Progress:
    """How far a long build is, told now and then; ``clock`` is in seconds and never goes back."""

    def __init__(self, total: int, say: Callable[[str], None], clock: Callable[[], float] = time.monotonic) -> None:
        self._total = total
        self._say = say
        self._clock = clock
        self._done = 0
        self._began = self._told = clock()

    def count(self) -> None:
        """One more is done."""
        self._done += 1
        self.tick()

    def tick(self) -> None:
        """Tell, if it is time: campaigns done, to do, and seconds left at the speed so far."""
        now = self._clock()
        if now - self._told < PROGRESS_EVERY or self._done == self._total:
            return
        self._told = now
        to_do = self._total - self._done
        left = f", about {(now - self._began) / self._done * to_do:.0f} s left" if self._done else ""
        self._say(f"{self._done} of {self._total} campaigns done, {to_do} to do{left}")


def entry_from(stored: object) -> IndexEntry | None:
    """The index line that an earlier build kept in the manifest; None if it is not one of now."""
    try:
        fields = dict(stored)  # type: ignore[call-overload]
        fields["problems"] = tuple(
            Problem(**problem) if isinstance(problem, dict) else problem for problem in fields["problems"]
        )
        return IndexEntry(**fields)
    except (TypeError, ValueError, KeyError):
        return None
