"""The disk: snapshots of a folder, files written whole or not at all, digests.

Ground floor: imports only ``problems``.  Everything that touches the file system in a way that could
be seen half-done by a reader, or half-left by a killed process, is in this module.
"""

from __future__ import annotations

import contextlib
import errno
import hashlib
import json
import os
import secrets
import shutil
import stat
import sys
import time
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path

from generator.problems import HullbookError

#: Beginning and end of the names of files and folders that are being written; :func:`sweep` removes
#: what a killed process left.  Short, so that no name in a folder of long names passes 255 bytes.
UNFINISHED_START = ".hullbook-"
UNFINISHED_END = ".tmp"

#: A replace that a file server or a virus scanner refuses is tried again after these pauses (about
#: 5 s in all): on Windows and SMB a target that any reader holds open can't be replaced, mostly for
#: milliseconds.
RETRY_PAUSES = (0.02, 0.04, 0.08, 0.16, 0.32, 0.64, 1.0, 1.0, 1.0, 1.0)
_HELD_BY_OTHERS = frozenset({errno.EACCES, errno.EPERM, errno.EBUSY})
_WINDOWS_HELD = frozenset({5, 32, 33})

# Not blocking: a pipe of that name would have to be waited for before anything can be asked of it.
_READING = os.O_RDONLY | getattr(os, "O_NONBLOCK", 0) | getattr(os, "O_BINARY", 0)


#: Maps the name of a directory entry to its canonical name; None: not wanted.
Wanted = Callable[[str], str | None]
#: Names in a folder by canonical name, and names left aside since another stands for the same.
Listing = tuple[dict[str, str], tuple[str, ...]]


class WriteError(HullbookError):
    """A file could not be written: the disk is full, read-only or gone."""


class HeldError(WriteError):
    """A file could not be replaced since another program holds it; it may work later."""


def sha256(data: bytes) -> str:
    """Return the SHA-256 digest in hexadecimal."""
    return hashlib.sha256(data).hexdigest()


_CANONICAL = json.JSONEncoder(sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)


def canonical_json(value: object) -> bytes:
    """JSON of one form only: keys sorted, no spaces, UTF-8; what digests are taken of."""
    return _CANONICAL.encode(value).encode("utf-8", "surrogatepass")  # a damaged file may hold half a character


def digest_of(value: object) -> str:
    """SHA-256 of the canonical JSON of ``value``."""
    return sha256(canonical_json(value))


@dataclass(frozen=True, slots=True)
class Stamp:
    """What the file system says of one file; equal stamps mean "probably not written since"."""

    size: int
    modified_ns: int
    inode: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Snapshot:
    """The files of one folder at one moment, by canonical name.

    ``shadowed`` are directory entries left aside since another entry has the same canonical name;
    ``unreadable`` maps canonical names to why they could not be read.
    """

    files: Mapping[str, bytes]
    shadowed: tuple[str, ...] = ()
    unreadable: Mapping[str, str] = field(default_factory=dict)


def wanted_entries(folder: Path | str, wanted: Wanted) -> Listing:
    """Find the names in ``folder`` that ``wanted`` maps to a canonical name, by that; and those left aside.

    An entry that has its canonical name exactly goes before one that differs in case.  A folder that
    is not there has no entries; other OSErrors are raised.
    """
    chosen: dict[str, str] = {}
    shadowed: list[str] = []
    try:
        names = os.listdir(folder)  # noqa: PTH208 - names are all that is wanted
    except (FileNotFoundError, NotADirectoryError):
        return {}, ()
    for name in names:
        canonical = wanted(name)
        if canonical is None:
            continue
        if canonical in chosen:
            (_, name), (_, other) = sorted((name != canonical, name) for name in (name, chosen[canonical]))
            shadowed.append(other)
        chosen[canonical] = name
    return dict(sorted(chosen.items())), tuple(sorted(shadowed))


def read_folder(
    folder: Path, wanted: Wanted, *, at_most: int | None = None, listing: Listing | None = None
) -> Snapshot:
    """Read the files of ``folder`` that ``wanted`` maps to a canonical name (None: not wanted).

    At most ``at_most`` bytes of each file are read.  What is no regular file or can't be opened is in
    ``unreadable``; nothing is raised for it.  ``listing`` is what :func:`wanted_entries` has found just now.
    """
    files: dict[str, bytes] = {}
    unreadable: dict[str, str] = {}
    try:
        entries, shadowed = listing or wanted_entries(folder, wanted)
    except OSError as error:
        return Snapshot(files={}, unreadable={".": reason(error)})
    start = os.path.join(folder, "")  # noqa: PTH118 - a thousand folders in a blink
    for name, entry in entries.items():
        path = start + entry
        try:
            files[name] = read_file(path, at_most=at_most)
        except FileNotFoundError:
            if os.path.islink(path):  # noqa: PTH114 - as above
                unreadable[name] = "it is a link to a file that does not exist"
        except OSError as error:
            unreadable[name] = reason(error)
    return Snapshot(files=files, shadowed=shadowed, unreadable=unreadable)


def read_file(path: Path | str, *, at_most: int | None = None) -> bytes:
    """Read a regular file, at most ``at_most`` bytes; OSError if it is none or can't be read."""
    descriptor = os.open(path, _READING)
    try:
        status = os.fstat(descriptor)
        if not stat.S_ISREG(status.st_mode):
            raise OSError(errno.EINVAL, "it is not a file")
        left = sys.maxsize if at_most is None else at_most
        # One byte more than there should be: less than asked for is the end, so most files are read in one go.
        asked = min(left, max(status.st_size, 1 << 12) + 1)
        piece = os.read(descriptor, asked)
        if len(piece) < asked:
            return piece
        pieces = [piece]
        while piece and (left := left - len(piece)) > 0:
            piece = os.read(descriptor, min(left, asked))
            pieces.append(piece)
        return b"".join(pieces)
    finally:
        os.close(descriptor)


def stamp(path: Path | str) -> Stamp | None:
    """Ask for the stamp of a file, or None where there is none (or it can't be asked)."""
    try:
        status = os.stat(path)  # noqa: PTH116 - a thousand folders in a blink
    except OSError:
        return None
    return Stamp(status.st_size, status.st_mtime_ns, status.st_ino)


def reason(error: OSError) -> str:
    """Say why, without the path that the error would show."""
    return error.strerror.lower() if error.strerror else type(error).__name__


def write_whole(
    path: Path,
    data: bytes,
    *,
    durable: bool = False,
    before_replace: Callable[[Path], None] | None = None,
    pause: Callable[[float], None] = time.sleep,
) -> bool:
    """Write ``data`` to ``path`` so that a reader sees the old bytes or the new, never a part.

    Returns False, and touches nothing, where the file holds these bytes already.  The new file has
    the mode that the umask gives.  ``durable`` also waits until the disk has it.  ``before_replace``
    is called with the path just before the rename (tests put faults there).  Raises HeldError where
    the rename is refused for seconds, WriteError where writing fails.
    """
    if _holds(path, data):
        return False
    beside = unfinished(path.parent)
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        create(beside, data, durable=durable)
        if before_replace is not None:
            before_replace(path)
        _replace(beside, path, pause)
        if durable:
            sync_folder(path.parent)
    except OSError as error:
        with contextlib.suppress(OSError):
            beside.unlink()
        raise WriteError(f"{path.name} could not be written ({reason(error)})") from error
    except HeldError:
        beside.unlink()
        raise
    return True


def _holds(path: Path, data: bytes) -> bool:
    try:
        return path.stat().st_size == len(data) and path.read_bytes() == data
    except OSError:
        return False


def create(path: Path, data: bytes, *, durable: bool = False) -> None:
    """Write a file that must not exist yet, with the mode that the umask gives; OSError if it can't be.

    ``durable`` waits until the disk has it.
    """
    # Not by ``tempfile``: it would give mode 0600, and nobody else could read the page.
    descriptor = os.open(path, os.O_CREAT | os.O_EXCL | os.O_WRONLY | getattr(os, "O_BINARY", 0), 0o666)
    with os.fdopen(descriptor, "wb") as stream:
        stream.write(data)
        if durable:
            stream.flush()
            os.fsync(stream.fileno())


def _replace(source: Path, target: Path, pause: Callable[[float], None]) -> None:
    """Rename, trying again while another program holds the target; HeldError when it goes on."""
    for seconds in (*RETRY_PAUSES, None):
        try:
            source.replace(target)
        except OSError as error:
            if not is_held(error) or target.is_dir():
                raise
            if seconds is None:
                raise HeldError(f"{target.name} is held by another program ({reason(error)})") from error
            pause(seconds)
        else:
            return


def is_held(error: OSError) -> bool:
    """Whether the error is the kind that goes away when another program lets go of the file."""
    return error.errno in _HELD_BY_OTHERS or getattr(error, "winerror", None) in _WINDOWS_HELD


def sync_folder(folder: Path) -> None:
    """Wait until the disk has the names in ``folder`` (where the system can do that)."""
    if sys.platform == "win32":
        return
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        with contextlib.suppress(OSError):  # some network file systems can't sync a folder
            os.fsync(descriptor)
    finally:
        os.close(descriptor)


def unfinished(folder: Path) -> Path:
    """Make up a name in ``folder`` for what is being written; :func:`sweep` knows it."""
    return folder / f"{UNFINISHED_START}{secrets.token_hex(4)}{UNFINISHED_END}"


def is_unfinished(name: str) -> bool:
    """Whether a file of that name is being written, or was left by a killed writer."""
    return name.startswith(UNFINISHED_START) and name.endswith(UNFINISHED_END)


def sweep(folders: Iterable[Path]) -> int:
    """Remove unfinished files and folders that a killed writer left in these folders; returns how many.

    Only the folders' one writer may call this.
    """
    count = 0
    for folder in folders:
        with contextlib.suppress(OSError):
            left = [name for name in os.listdir(folder) if is_unfinished(name)]  # noqa: PTH208 - thousands, mostly others
            for entry in (folder / name for name in left):
                if entry.is_dir() and not entry.is_symlink():
                    shutil.rmtree(entry, ignore_errors=True)
                else:
                    entry.unlink(missing_ok=True)
            count += len(left)
    return count


def is_inside(inner: Path, outer: Path) -> bool:
    """Whether ``inner`` is ``outer`` or lies in it, links followed."""
    return (
        os.path.realpath(inner) == os.path.realpath(outer)
        or Path(os.path.realpath(outer)) in Path(os.path.realpath(inner)).parents
    )
