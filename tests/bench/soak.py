"""Leave a watcher alone under continual edits from four writers, and look at its memory and its final state.

    python -m tests.bench.soak [--minutes 30] [--campaigns 12] [--seed 1] [--folder DIR]

The writers save in every way that people and their programs do: in place, by renaming, in slow pieces, with lock
files; they copy, rename, remove and bring back folders.  At the end the output must hold the same bytes as a build of
the same campaigns into a new folder.
"""

from __future__ import annotations

import argparse
import contextlib
import os
import random
import shutil
import signal
import subprocess
import sys
import tempfile
import threading
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from statistics import median

from tests.bench.making import make_campaign, write_campaign
from tests.bench.whole import faults, published

CHECKOUT = Path(__file__).parents[2]
WRITERS = 4
_SAMPLE_EVERY = 5.0
#: After the last edit the final state must be there within so many seconds.
PATIENCE = 180.0


@dataclass
class Report:
    """What a soak found: megabytes of the watcher with its processes over time, and whether all ended well."""

    minutes: float
    edits: int
    builds: int
    memory_mb: list[float]
    is_final: bool
    faults: list[str]
    status: int

    def sentence(self) -> str:
        """The report in one line."""
        part = max(1, len(self.memory_mb) // 5)
        start, end = median(self.memory_mb[:part]), median(self.memory_mb[-part:])
        final = "right" if self.is_final else "WRONG"
        return (
            f"{self.minutes:.1f} minutes, {self.edits} edits by {WRITERS} writers, {self.builds} builds; memory "
            f"{start:.0f} MB in the first fifth, {end:.0f} MB in the last, {max(self.memory_mb):.0f} MB at most; "
            f"final state {final}, {len(self.faults)} faults, exit {self.status}"
        )


class Writer(threading.Thread):
    """One of those who edit: each has campaigns of its own, so that nobody undoes another's work."""

    def __init__(self, root: Path, number: int, campaigns: int, seed: int, stop: threading.Event) -> None:
        super().__init__()
        self._root = root
        self._names = [f"w{number}-{index}" for index in range(campaigns)]
        self._draw = random.Random(seed * 100 + number)
        self._stop_asked = stop
        self.edits = 0
        for name in self._names:
            write_campaign(root / name, self._files())

    def run(self) -> None:
        """Edit in one way or another until told to stop, and leave every campaign whole."""
        acts: list[Callable[[Path], None]] = [
            self._save_in_place,
            self._save_by_renaming,
            self._save_slowly,
            self._save_like_a_spreadsheet,
            self._rename_and_back,
            self._remove_and_restore,
            self._break_and_mend,
        ]
        while not self._stop_asked.wait(self._draw.uniform(0.1, 1.5)):
            self._draw.choice(acts)(self._root / self._draw.choice(self._names))
            self.edits += 1

    def _files(self) -> dict[str, str]:
        return make_campaign(self._draw.randrange(10**6), lots=5, components=2, orders=self._draw.randint(1, 3))

    def _save_in_place(self, folder: Path) -> None:
        write_campaign(folder, self._files())

    def _save_by_renaming(self, folder: Path) -> None:
        for name, text in self._files().items():
            (folder / f"{name}~").write_text(text)
            (folder / f"{name}~").replace(folder / name)

    def _save_slowly(self, folder: Path) -> None:
        for name, text in self._files().items():
            with (folder / name).open("w") as stream:
                for start in range(0, len(text), 100):
                    stream.write(text[start : start + 100])
                    stream.flush()
                    time.sleep(0.02)

    def _save_like_a_spreadsheet(self, folder: Path) -> None:
        (folder / "~$assays.csv").write_text("me")
        for name, text in self._files().items():
            (folder / "3F2A1B00").write_text(text)
            (folder / name).rename(folder / "5C11D0.tmp")
            (folder / "3F2A1B00").rename(folder / name)
            (folder / "5C11D0.tmp").unlink()
        (folder / "~$assays.csv").unlink()

    def _rename_and_back(self, folder: Path) -> None:
        # Not while a revision is under way in it: that is lost, and made again, which is not what is looked at here.
        other = folder.with_name(f"{folder.name}-moved")
        folder.rename(other)
        time.sleep(self._draw.uniform(0, 1))
        with contextlib.suppress(OSError):
            shutil.rmtree(folder)  # a recorder that was late may have made it anew
        other.rename(folder)

    def _remove_and_restore(self, folder: Path) -> None:
        for name in ("assays.csv", "targets.csv"):
            (folder / name).unlink()
        time.sleep(self._draw.uniform(0, 1))
        write_campaign(folder, self._files())

    def _break_and_mend(self, folder: Path) -> None:
        (folder / "campaign.toml").write_text("title = \n")
        time.sleep(self._draw.uniform(0, 2))
        write_campaign(folder, self._files())


def soak(root: Path, minutes: float, campaigns: int, seed: int) -> Report:
    """Watch, edit, stop editing, and compare; see the module."""
    stop = threading.Event()
    writers = [Writer(root / "campaigns", number, campaigns // WRITERS, seed, stop) for number in range(WRITERS)]
    log = root / "log.txt"
    with log.open("w") as stream:
        watcher = _hullbook(root, "watch", "output", "--settle", "0.2", stderr=stream)
    memory: list[float] = []
    began = time.monotonic()
    for writer in writers:
        writer.start()
    while time.monotonic() - began < minutes * 60 and watcher.poll() is None:
        time.sleep(_SAMPLE_EVERY)
        memory.append(_memory_mb(watcher.pid))
    stop.set()
    for writer in writers:
        writer.join()
    is_final = _is_final(root)
    watcher.send_signal(signal.SIGTERM)
    status = watcher.wait(60)
    return Report(
        minutes=(time.monotonic() - began) / 60,
        edits=sum(writer.edits for writer in writers),
        builds=log.read_text().count(" built, "),
        memory_mb=memory,
        is_final=is_final,
        faults=faults(root / "output"),
        status=status,
    )


def _is_final(root: Path) -> bool:
    """Wait until the output holds what a build into a new folder makes."""
    deadline = time.monotonic() + PATIENCE
    while time.monotonic() < deadline:
        time.sleep(2)
        shutil.rmtree(root / "other", ignore_errors=True)
        _hullbook(root, "build", "other").wait()
        if published(root / "output") == published(root / "other"):
            return True
    return False


def _hullbook(root: Path, command: str, output: str, *more: str, stderr: object = None) -> subprocess.Popen[bytes]:
    return subprocess.Popen(
        [sys.executable, "-m", "generator", command, "campaigns", output, *more],
        cwd=root,
        env={**os.environ, "PYTHONPATH": str(CHECKOUT)},
        stderr=stderr or subprocess.DEVNULL,
    )


def _memory_mb(process: int) -> float:
    """Resident megabytes of a process and those that it started."""
    total = 0
    for number in [process, *_children(process)]:
        with contextlib.suppress(OSError, IndexError):
            total += int(Path(f"/proc/{number}/statm").read_text().split()[1])
    return total * os.sysconf("SC_PAGE_SIZE") / 1e6


def _children(process: int) -> list[int]:
    found = []
    for task in Path(f"/proc/{process}/task").glob("*/children"):
        with contextlib.suppress(OSError):
            found += [int(number) for number in task.read_text().split()]
    return found


def main() -> None:
    """Run and print the report; exit 1 where the final state is wrong."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--minutes", type=float, default=30.0)
    parser.add_argument("--campaigns", type=int, default=12)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--folder", type=Path)
    options = parser.parse_args()
    with tempfile.TemporaryDirectory() as temporary:
        root = (options.folder or Path(temporary)) / "soaking"
        report = soak(root, options.minutes, options.campaigns, options.seed)
    print(report.sentence())
    for fault in report.faults[:20]:
        print(fault)
    print("memory in MB over time:", " ".join(f"{mb:.0f}" for mb in report.memory_mb))
    sys.exit(not (report.is_final and not report.faults and report.status == 0))


if __name__ == "__main__":
    main()
