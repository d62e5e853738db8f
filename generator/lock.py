"""Owner locks: one writer per folder, told by a file that names the owner.

Ground floor: imports only ``problems`` and ``disk``.
"""

from __future__ import annotations

import contextlib
import json
import os
import secrets
import socket
import sys
import time
from dataclasses import dataclass
from pathlib import Path

from generator.disk import WriteError, create, reason, unfinished
from generator.problems import HullbookError

#: A lock whose owner can't be asked (another machine) is stale when it was not renewed for so long.
HEARTBEAT_STALE_AFTER = 600.0
_HEARTBEAT_EVERY = 15.0


class LockedError(HullbookError):
    """Another process is the writer of this folder."""


@dataclass(frozen=True, slots=True)
class Owner:
    """Who holds a lock: machine, process, and when that process started (0 where unknown)."""

    host: str
    process: int
    started: int
    token: str

    def name(self) -> str:
        """Name the owner as messages do."""
        return f"process {self.process} on {self.host}"


class OwnerLock:
    """One writer per folder, told by a file that names the owner.

    A lock of a process that no longer runs on this machine is taken over; one of another machine only
    when its heartbeat stopped for ``HEARTBEAT_STALE_AFTER`` seconds, measured by the clock of the
    file server.  Use as a context manager; call :meth:`beat` now and then while working.
    """

    def __init__(self, path: Path) -> None:
        self._path = path
        self._owner = Owner(_host(), os.getpid(), process_start(os.getpid()), secrets.token_hex(8))
        self._beaten = 0.0

    def acquire(self) -> None:
        """Take the lock; LockedError, naming the owner, if another process has it."""
        try:
            self._path.parent.mkdir(parents=True, exist_ok=True)
            if self._try_create():
                return
            holder = self._holder()
            if holder is not None and not self._is_stale(holder):
                raise LockedError(f"{self._path.parent} is being written by {holder.name()}")
            self._clear_stale(holder)
            if not self._try_create():
                raise LockedError(f"{self._path.parent} is being written by another process")
        except OSError as error:
            raise WriteError(f"the folder {self._path.parent.name} can't be written ({reason(error)})") from error

    def release(self) -> None:
        """Give the lock back; a lock that another process took over is left alone."""
        with contextlib.suppress(OSError):
            if self._holder() == self._owner:
                self._path.unlink()

    def beat(self, now: float | None = None) -> None:
        """Renew the lock; LockedError if another process took it over meanwhile."""
        moment = time.monotonic() if now is None else now
        if moment - self._beaten < _HEARTBEAT_EVERY:
            return
        self._beaten = moment
        holder = self._holder()
        if holder is not None and holder != self._owner:
            raise LockedError(f"{self._path.parent} was taken over by {holder.name()}")
        with contextlib.suppress(OSError):
            if holder is None:  # somebody removed the folder: take it again
                self._path.parent.mkdir(parents=True, exist_ok=True)
                self._try_create()
            else:
                os.utime(self._path)

    def __enter__(self) -> OwnerLock:
        """Acquire."""
        self.acquire()
        return self

    def __exit__(self, *_: object) -> None:
        """Release."""
        self.release()

    def _try_create(self) -> bool:
        text = json.dumps(
            {
                "host": self._owner.host,
                "process": self._owner.process,
                "started": self._owner.started,
                "token": self._owner.token,
            }
        )
        # Written beside and linked into place, so that nobody ever reads a lock without its owner.
        beside = unfinished(self._path.parent)
        create(beside, text.encode(), durable=False)
        try:
            os.link(beside, self._path)
        except FileExistsError:
            return False
        except OSError:  # a file system without hard links
            try:
                create(self._path, text.encode(), durable=False)
            except FileExistsError:
                return False
        finally:
            # Who holds the lock may have swept it away as unfinished.
            beside.unlink(missing_ok=True)
        self._beaten = time.monotonic()
        return True

    def _holder(self) -> Owner | None:
        try:
            content = json.loads(self._path.read_bytes())
            return Owner(str(content["host"]), int(content["process"]), int(content["started"]), str(content["token"]))
        except (OSError, ValueError, TypeError, KeyError):
            return None

    def _is_stale(self, holder: Owner) -> bool:
        if holder.host == _host():
            return not is_running(holder.process, holder.started)
        return self._heartbeat_age() > HEARTBEAT_STALE_AFTER

    def _heartbeat_age(self) -> float:
        """Seconds since the last heartbeat, both times given by the file system of the lock."""
        probe = unfinished(self._path.parent)
        create(probe, b"", durable=False)
        try:
            return probe.stat().st_mtime - self._path.stat().st_mtime
        finally:
            probe.unlink()

    def _clear_stale(self, judged: Owner | None) -> None:
        """Remove the stale lock, unless a third process was faster: then put its lock back."""
        aside = unfinished(self._path.parent)
        try:
            self._path.rename(aside)
        except FileNotFoundError:
            return
        moved = OwnerLock(aside)._holder()
        if moved != judged:
            with contextlib.suppress(OSError):
                os.link(aside, self._path)
        aside.unlink()


def _host() -> str:
    return socket.gethostname()


def process_start(process: int) -> int:
    """When a process started, in clock ticks since the machine did; 0 where the system doesn't say."""
    try:
        after_name = Path(f"/proc/{process}/stat").read_text().rpartition(")")[2]
        return int(after_name.split()[19])
    except (OSError, ValueError, IndexError):
        return 0


def is_running(process: int, started: int) -> bool:
    """Whether that process of this machine still runs, and is not another that got its number."""
    if sys.platform == "win32":
        return _is_running_windows(process)
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except PermissionError:
        pass  # it runs, under another user
    except (OverflowError, ValueError):
        return False
    now_started = process_start(process)
    return started == 0 or now_started == 0 or now_started == started


def _is_running_windows(process: int) -> bool:
    """Windows has no signal 0: ask for a handle that may be waited for."""
    if sys.platform != "win32":
        raise AssertionError("only for Windows")
    import ctypes

    synchronize, still_active = 0x00100000, 0x102
    kernel = ctypes.windll.kernel32
    handle = kernel.OpenProcess(synchronize, False, process)
    if not handle:
        return False
    try:
        return bool(kernel.WaitForSingleObject(handle, 0) == still_active)
    finally:
        kernel.CloseHandle(handle)
