"""What wakes the watcher: an observer of the campaigns folder, and what of its events counts.

Events are hints.  They may be lost, late, doubled or about something else: nothing is decided by them.
"""

from __future__ import annotations

import contextlib
import logging
import os
import sys
import threading
import warnings
from pathlib import Path
from typing import TYPE_CHECKING, Literal

from generator.intake.campaign import input_name

if TYPE_CHECKING:
    from watchdog.events import FileSystemEventHandler
    from watchdog.observers.api import BaseObserver

#: The numbers of a disk and of a folder on it.
Place = tuple[int, int]
Poll = Literal["auto", "always", "never"]

_NETWORK_TYPES = ("nfs", "cifs", "smb", "fuse.sshfs", "9p", "afs", "ncpfs", "fuse.rclone", "davfs", "fuse.davfs")
_IDLE_EVENTS = frozenset({"opened", "closed_no_write"})


class Hints:
    """An observer that wakes the loop, restarted when it dies; without one the loop polls."""

    def __init__(self, root: Path, wake: threading.Event) -> None:
        self._root = root
        self._wake = wake
        self._observer: BaseObserver | None = None
        self._place: Place | None = None
        self._themes: frozenset[Path] = frozenset()

    def follow(self, themes: frozenset[Path]) -> None:
        """Observe these folders of themes as well, from now on."""
        if themes != self._themes:
            self._themes = themes
            self.stop()
            self._wake.set()  # the loop starts it anew

    def ensure(self) -> bool:
        """Start observing if that is not going on; False where the system refuses."""
        if self._is_observing():
            return True
        self.stop()
        from watchdog import events
        from watchdog.observers import Observer

        # It warns, at length, of folders that come with folders inside, as a revision does.
        warnings.filterwarnings("ignore", category=RuntimeWarning, module=r"watchdog\.")
        # Not asked for: that a file was opened, or closed as it was.  A build makes thousands of these.
        kinds: list[type[events.FileSystemEvent]] = [
            *(events.FileCreatedEvent, events.FileModifiedEvent, events.FileClosedEvent),
            *(events.FileMovedEvent, events.FileDeletedEvent),
            *(events.DirCreatedEvent, events.DirMovedEvent, events.DirDeletedEvent),
        ]
        real = os.path.realpath(self._root)  # an observer gets no events through a link
        place = place_of(real)
        observer = Observer()
        try:
            observer.schedule(_handler(self._wake, real), real, recursive=True, event_filter=kinds)
            observer.start()
        except OSError:
            observer.stop()
            return False
        for folder in self._themes:
            with contextlib.suppress(OSError):  # a scan finds its edits, only later
                path = os.path.realpath(folder)
                observer.schedule(_handler(self._wake, None), path, recursive=True, event_filter=kinds)
        self._observer, self._place = observer, place
        self._wake.set()  # what happened before the start gave no event
        return True

    def _is_observing(self) -> bool:
        """Whether events come, and from the folder that is there now: it may have been replaced by another."""
        observer = self._observer
        return (
            observer is not None
            and observer.is_alive()
            and all(emitter.is_alive() for emitter in observer.emitters)
            and place_of(self._root) == self._place
        )

    def stop(self) -> None:
        """End the observer's threads."""
        observer, self._observer = self._observer, None
        if observer is not None:
            is_running = observer.is_alive()
            observer.stop()
            if is_running:
                observer.join(5)


def _handler(wake: threading.Event, root: str | None) -> FileSystemEventHandler:
    """What an observer calls: it sets the event and returns, since an error or a delay there would lose events.

    Below ``root`` only what may change a campaign counts; without one, everything.
    """
    from watchdog.events import FileSystemEvent, FileSystemEventHandler

    class Handler(FileSystemEventHandler):
        """Wakes the loop, but not for a file that was only read."""

        def on_any_event(self, event: FileSystemEvent) -> None:
            """Judge one event by its paths."""
            if event.event_type in _IDLE_EVENTS:
                return
            paths = (os.fsdecode(path) for path in (event.src_path, event.dest_path) if path)
            if root is None or any(
                is_telling(root, path, event.event_type, is_folder=event.is_directory) for path in paths
            ):
                wake.set()

    return Handler()


def place_of(path: Path | str) -> Place | None:
    """Which folder stands at a path, links followed; None where none can be asked."""
    try:
        status = os.stat(path)  # noqa: PTH116 - text as well
    except OSError:
        return None
    return status.st_dev, status.st_ino


class WakeOnWarning(logging.Handler):
    """The observer tells of lost events in its log only."""

    def __init__(self, wake: threading.Event) -> None:
        super().__init__(logging.WARNING)
        self._wake = wake

    def emit(self, record: logging.LogRecord) -> None:  # noqa: ARG002 - what is said does not matter
        """Wake the loop: a scan finds what was lost."""
        self._wake.set()


def is_telling(root: str, path: str, kind: str, *, is_folder: bool) -> bool:
    """Whether an event below the observed folder may have changed a campaign; its own history never does."""
    inner = Path(os.path.relpath(path, root)).parts
    if is_folder:
        return not inner or (len(inner) == 1 and kind != "modified")
    return len(inner) <= 2 and input_name(inner[-1]) is not None


def wants_events(root: Path, poll: Poll) -> bool:
    """Whether to wait for events: ``auto`` polls on network folders, which give none for others' edits."""
    if poll != "auto":
        return poll == "never"
    real = os.path.realpath(root)
    if sys.platform == "win32":
        return not real.startswith("\\\\")
    try:
        mounts = Path("/proc/mounts").read_text(encoding="utf-8", errors="replace")
    except OSError:
        return True
    return not mount_type(real, mounts).startswith(_NETWORK_TYPES)


def mount_type(path: str, mounts: str) -> str:
    """Find the file system type of an absolute path in the text of ``/proc/mounts``; "" if unknown."""
    found, longest = "", -1
    for line in mounts.splitlines():
        fields = line.split(" ")
        if len(fields) < 3:
            continue
        point = fields[1].replace("\\040", " ")
        is_above = path == point or path.startswith(point.rstrip("/") + "/")
        if is_above and len(point) >= longest:
            found, longest = fields[2], len(point)
    return found
