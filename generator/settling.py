"""When a folder has come to rest: decided from scans and a clock alone, without sleeping."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path

from generator.disk import Stamp

Stamps = tuple[tuple[str, Stamp], ...]
Scan = Mapping[Path, Stamps]

#: A folder that does not come to rest, or a file that stays torn, is built after so long all the same.
LONGEST_UNREST = 30.0


@dataclass(frozen=True, slots=True)
class Ready:
    """Folders that changed and came to rest, and those that don't rest but have waited too long."""

    quiet: frozenset[Path] = frozenset()
    overdue: frozenset[Path] = frozenset()


@dataclass(frozen=True, slots=True)
class _Unrest:
    stamps: Stamps
    since: float
    first: float


class Settling:
    """Which folders differ from what was built, and are quiet: decided from scans and a clock alone.

    ``settle_seconds`` is how long two scans with equal stamps must lie apart.
    """

    def __init__(self, settle_seconds: float, longest_seconds: float = LONGEST_UNREST) -> None:
        self._settle = settle_seconds
        self._longest = longest_seconds
        self._built: dict[Path, Stamps] = {}
        self._unrest: dict[Path, _Unrest] = {}

    @property
    def waiting(self) -> frozenset[Path]:
        """Folders that changed and are not built yet."""
        return frozenset(self._unrest)

    def rest_needed(self, now: float) -> float | None:
        """Tell after how many seconds the first waiting folder can be quiet; None if none is waiting.

        0 or less: one is quiet already, and waits for something else.
        """
        return min((unrest.since + self._settle - now for unrest in self._unrest.values()), default=None)

    def look(self, now: float, scan: Scan) -> Ready:
        """Compare a scan with the ones before; ``now`` is in seconds of a clock that never goes back."""
        quiet: set[Path] = set()
        overdue: set[Path] = set()
        for folder in {*scan, *self._built, *self._unrest}:
            stamps, before = scan.get(folder, ()), self._unrest.get(folder)
            if stamps == self._built.get(folder, ()):
                self._unrest.pop(folder, None)
            elif before is None:
                self._unrest[folder] = _Unrest(stamps, now, now)
            else:
                if stamps != before.stamps:
                    self._unrest[folder] = replace(before, stamps=stamps, since=now)
                elif now - before.since >= self._settle:
                    quiet.add(folder)
                if now - before.first >= self._longest:
                    overdue.add(folder)
        return Ready(frozenset(quiet), frozenset(overdue))

    def built(self, done: Iterable[Path], scan: Scan) -> None:
        """Note that these folders are built as this scan, made before the build, saw them."""
        for folder in done:
            self._unrest.pop(folder, None)
            if folder in scan:
                self._built[folder] = scan[folder]
            else:
                self._built.pop(folder, None)
