"""When to build: events are hints, a scan decides.

An observer only wakes the loop.  The loop stamps every input file, waits until a campaign is quiet
and its files are whole, and builds what changed; events during a build wake the next round.  Now and
then everything is looked at anew by content, whatever the events and stamps said.
"""

from __future__ import annotations

import contextlib
import logging
import signal
import threading
import time
import traceback
from collections.abc import Callable, Iterator
from dataclasses import replace
from datetime import datetime
from pathlib import Path
from types import FrameType

from generator import disk, folders
from generator.book import build, writer_lock
from generator.disk import WriteError
from generator.folders import NoCampaignsError, is_site
from generator.hints import Hints, Place, Poll, WakeOnWarning, place_of, wants_events
from generator.intake.campaign import input_name, is_whole
from generator.job import Job, Log
from generator.lock import OwnerLock
from generator.problems import HullbookError
from generator.report.manifest import MANIFEST_NAME
from generator.report.theme_folders import PLAIN, theme_folder, theme_stamps
from generator.run import log_incident
from generator.settling import Scan, Settling
from generator.status import write_trouble
from generator.tasks import Incident
from generator.workers import Crew, Here, Makers

#: Scans without any event: the first catches lost events soon, the second is all there is.
RESCAN_EVERY = 10.0
POLL_EVERY = 1.0
#: Polling takes at most this part of the time: a slow share is asked less often.
_POLL_SHARE = 0.05
#: Everything is read and compared by content so often, pages as well: for a change that left size and time alike.
FULL_LOOK_EVERY = 300.0
#: Pauses before what failed is tried again (a full disk, a page held by a reader), then the last one.
RETRY_PAUSES = (2.0, 4.0, 8.0, 16.0, 32.0, 60.0)
#: An endless stream of events makes no more than so many scans per second.
_LEAST_PAUSE = 0.05
#: So soon the end is noticed when it was asked for without waking the loop.
_LONGEST_WAIT = 0.25


def watch(
    job: Job,
    log: Log,
    *,
    settle_seconds: float,
    poll: Poll,
    clock: Callable[[], datetime],
    stop: threading.Event | None = None,
) -> int:
    """Build now and after every change until a signal comes, or ``stop`` is set; returns 0.

    Raises LockedError where another process is the writer of the output folder.
    """
    wake = threading.Event()
    ending = stop or threading.Event()
    listener = WakeOnWarning(wake)
    with writer_lock(job.output) as lock, _signals(ending, wake) if stop is None else contextlib.nullcontext():
        logging.getLogger("watchdog").addHandler(listener)
        try:
            with Crew(job.jobs, job.time_limit) if job.jobs else contextlib.nullcontext() as crew:
                if crew is not None:
                    crew.warm()
                makers: Makers = crew or Here()
                watcher = _Watcher(
                    job, log, lock, makers, Settling(settle_seconds), settle_seconds, clock, wake, ending
                )
                watcher.run(has_events=wants_events(job.campaigns, poll))
        finally:
            logging.getLogger("watchdog").removeHandler(listener)
    log.say("stopped watching")
    return 0


class _Watcher:
    """The loop and what it remembers from round to round."""

    def __init__(
        self,
        job: Job,
        log: Log,
        lock: OwnerLock,
        makers: Makers,
        settling: Settling,
        settle_seconds: float,
        clock: Callable[[], datetime],
        wake: threading.Event,
        ending: threading.Event,
    ) -> None:
        self._job = job
        self._log = log
        self._lock = lock
        self._makers = makers
        self._settling = settling
        self._glance = min(max(settle_seconds / 2, _LEAST_PAUSE), 1.0)
        self._clock = clock
        self._wake = wake
        self._ending = ending
        self._hints = Hints(job.campaigns, wake)
        self._is_gone = False
        self._device: int | None = None
        self._output: Place | None = None
        self._scan_seconds = 0.0
        self._full_look_at = time.monotonic() + FULL_LOOK_EVERY
        self._retry_at: float | None = None
        self._blocked_until = 0.0
        self._failures = 0
        self._is_published = False
        self._is_first = True
        self._themes: frozenset[Path] = frozenset()

    def run(self, *, has_events: bool) -> None:
        """Go round until the end is asked for."""
        how = "events" if has_events else "polling"
        self._log.say(f"watching {self._job.campaigns} by {how}, pages go to {self._job.output}; Ctrl-C ends it")
        try:
            while not self._ending.is_set():
                if has_events and not self._is_gone and not self._hints.ensure() and self._job.campaigns.is_dir():
                    has_events = False
                    self._log.warn("the system gives no events for this folder: polling instead")
                self._lock.beat()
                try:
                    self._round()
                except HullbookError:
                    raise
                except Exception as error:  # noqa: BLE001 - nobody is there to start it again: it has to go on
                    self._go_on_after(error)
                self._rest(self._timeout(has_events))
        finally:
            self._hints.stop()

    def _rest(self, seconds: float) -> None:
        """Wait for an event, or the end, or so long; in short waits, which Ctrl-C ends everywhere."""
        until = time.monotonic() + seconds
        while not self._ending.is_set():
            left = until - time.monotonic()
            if left <= 0:
                break
            if self._wake.wait(min(left, _LONGEST_WAIT)):
                self._wake.clear()
                self._ending.wait(_LEAST_PAUSE)
                break

    def _timeout(self, has_events: bool) -> float:
        """Say how long to wait for an event, in seconds."""
        needed = self._settling.rest_needed(time.monotonic())
        if needed is not None:
            return needed if needed > 0 else self._glance
        slow = self._scan_seconds / _POLL_SHARE
        longest = max(RESCAN_EVERY if has_events else POLL_EVERY, slow)
        if self._is_gone:
            longest = POLL_EVERY
        now = time.monotonic()
        due = [at - now for at in (self._full_look_at, self._retry_at) if at is not None]
        return max(min([longest, *due]), 0.0)

    def _round(self) -> None:
        """Scan once, and build what is ready."""
        began = time.monotonic()
        scan = self._scan()
        if scan is None:
            return
        self._scan_seconds = time.monotonic() - began
        ready = self._settling.look(time.monotonic(), scan)
        if time.monotonic() < self._blocked_until:
            return
        chosen = frozenset(folder for folder in ready.quiet if self._is_whole(folder)) | ready.overdue
        if any(self._concerns_all(folder) for folder in self._settling.waiting - chosen):
            return  # every campaign is made with it
        if self._is_full_look_due():
            self._build(scan, chosen, everything=True, thorough=True)
        elif chosen:
            self._build(scan, chosen, everything=any(self._concerns_all(folder) for folder in chosen))

    def _concerns_all(self, place: Path) -> bool:
        return is_site(place) or place in self._themes

    def _scan(self) -> Scan | None:
        """Stamp all files; None while the campaigns folder is away."""
        try:
            scan = folders.scan(self._job.campaigns)
            device = self._job.campaigns.stat().st_dev
        except (NoCampaignsError, OSError):
            self._tell_gone()
            return None
        if not scan and self._device not in (None, device):  # the empty folder in which a share was mounted
            self._tell_gone()
            return None
        self._device = device
        if self._is_gone:
            self._is_gone = False
            self._full_look_at = time.monotonic()  # who knows what happened meanwhile
            self._wake.set()  # the observer is started at once, not after a rest
            self._log.say(f"{self._job.campaigns} is back")
        return {**scan, **{folder: theme_stamps(folder) for folder in self._themes}}

    def _tell_gone(self) -> None:
        """Keep every page while the campaigns folder is away; tell it once."""
        if not self._is_gone:
            self._is_gone = True
            self._hints.stop()
            trouble = f"{self._job.campaigns} is not there"
            self._log.warn(f"{trouble}: waiting for it, pages stay as they are")
            write_trouble(self._job.output, self._clock(), trouble)

    def _is_whole(self, folder: Path) -> bool:
        """Whether no file of the folder looks as if it were still being written."""
        if folder in self._themes:
            return True  # a template that fails is told, and what is published stays
        place = folder.parent if is_site(folder) else folder
        snapshot = disk.read_folder(place, input_name, at_most=folders.MOST_BYTES)
        return not snapshot.unreadable and all(is_whole(name, data) for name, data in snapshot.files.items())

    def _is_full_look_due(self) -> bool:
        now = time.monotonic()
        is_retry = self._retry_at is not None and now >= self._retry_at
        is_lost = self._is_published and (not self._has_manifest() or place_of(self._job.output) != self._output)
        return is_retry or is_lost or now >= self._full_look_at

    def _has_manifest(self) -> bool:
        return (self._job.output / MANIFEST_NAME).exists()

    def _check_output(self) -> None:
        """WriteError where the disk with the pages was taken away: they don't belong into what shows in its place."""
        output = self._job.output.absolute()
        place = next((place for path in (output, *output.parents) if (place := place_of(path))), None)
        if self._output and place and place[0] != self._output[0] and not self._has_manifest():
            raise WriteError(f"{self._job.output} is not there (its disk is not mounted)")

    def _build(self, scan: Scan, chosen: frozenset[Path], *, everything: bool, thorough: bool = False) -> None:
        """Build, and remember what is built and what has to be tried again."""
        moment = self._clock()
        without = self._settling.waiting - chosen
        try:
            self._check_output()
            outcome = build(
                replace(self._job, moment=moment),
                self._lock,
                self._log,
                only=None if everything else chosen,
                without=without,
                is_wanted=lambda: not self._ending.is_set(),
                makers=self._makers,
                thorough=thorough,
                tries_again=self._is_first,
            )
        except NoCampaignsError:
            return  # gone this very moment: the next scan tells
        except WriteError as error:
            self._is_published = False
            self._blocked_until = self._fail(f"{error}; the pages stay as they were")
            write_trouble(self._job.output, moment, str(error))
            return
        self._settling.built({*chosen, *(scan if everything else ())} - without, scan)
        self._is_published, self._is_first = True, False
        self._output = place_of(self._job.output)
        self._follow(outcome.themes)
        if everything:
            self._full_look_at = time.monotonic() + FULL_LOOK_EVERY
        if outcome.pending:
            self._fail(f"{len(outcome.pending)} files are held by other programs")
        else:
            self._retry_at, self._failures = None, 0
        if outcome.has_changed:
            self._log.say(f"{moment:%Y-%m-%dT%H:%M:%SZ} {outcome.sentence()}")

    def _follow(self, names: frozenset[str]) -> None:
        """Watch the folders of the themes that pages are in now."""
        themes = frozenset(folder for folder in map(theme_folder, {*names, PLAIN} - {""}) if folder.is_dir())
        self._settling.built(themes ^ self._themes, {folder: theme_stamps(folder) for folder in themes})
        self._themes = themes
        self._hints.follow(themes)

    def _go_on_after(self, error: Exception) -> None:
        """A defect, or a system that has nothing left to give: tell it, keep its traceback, and try again later."""
        incident = Incident(reference=type(error).__name__, trace="".join(traceback.format_exception(error)))
        trouble = f"internal error {incident.reference}: {error}"
        log_incident(self._job.output, self._clock(), "watch", incident)
        self._blocked_until = self._fail(f"{trouble}; the pages stay as they were")
        write_trouble(self._job.output, self._clock(), trouble)

    def _fail(self, what: str) -> float:
        """Tell of a failure, and return when to try again."""
        pause = RETRY_PAUSES[min(self._failures, len(RETRY_PAUSES) - 1)]
        self._failures += 1
        self._retry_at = time.monotonic() + pause
        self._log.warn(f"{what}; trying again in {pause:.0f} s")
        return self._retry_at


@contextlib.contextmanager
def _signals(ending: threading.Event, wake: threading.Event) -> Iterator[None]:
    """End the loop cleanly at SIGINT and SIGTERM; a second one ends the program at once."""

    def end(number: int, _frame: FrameType | None) -> None:
        if ending.is_set():
            signal.signal(number, signal.SIG_DFL)
            signal.raise_signal(number)
        ending.set()
        wake.set()

    before = {number: signal.signal(number, end) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
