"""Kill a recorder again and again: ``python -m tests.bench.kill_recording [TIMES] [FOLDER]``.

A process records revision after revision and is killed (SIGKILL) at a random moment.  After each kill another
one records a revision, and the whole history must pass its check: nothing half-written, no number missing or
used twice, the chain unbroken, no trace left of the interrupted write.
"""

from __future__ import annotations

import random
import subprocess
import sys
import tempfile
import time
from datetime import UTC, datetime
from pathlib import Path

from generator.disk import is_unfinished
from generator.history.archive import Draft, entries, record
from generator.history.check import check_history

ROOT = Path(__file__).parent.parent.parent
NOON = datetime(2026, 3, 2, 12, tzinfo=UTC)
#: Killed up to so many seconds after the first revision of a process stands.
LONGEST = 0.06


def draft(cell: str) -> Draft:
    """A revision whose files take a moment to write."""
    table = "".join(f"L{row},{cell},{row}\n" for row in range(2000))
    return Draft(
        inputs={"assays.csv": f"lot,N,K\n{table}".encode(), "targets.csv": b"order,N\n1,5\n"},
        results=lambda mark: f'{{"number": {mark.number}}}\n'.encode() * 2000,
        changes=b"[]\n" * 500,
        headline=f"N is {cell}.",
        cause="inputs",
        moment=NOON,
        program="0",
        engine="e",
    )


def record_for_ever(folder: Path) -> None:
    """Record revisions until killed; a line on standard output for each."""
    start = len(entries(folder))
    for count in range(10**6):
        revision = record(folder, draft(f"{start}.{count}"))
        print(revision.number, flush=True)


def kill_once(folder: Path, chance: random.Random) -> bool:
    """Start a recorder, kill it, record once more, and check everything; whether it was killed while writing."""
    command = [sys.executable, "-m", "tests.bench.kill_recording", "--record", str(folder)]
    with subprocess.Popen(command, cwd=ROOT, stdout=subprocess.PIPE, text=True) as child:
        assert child.stdout is not None
        child.stdout.readline()
        time.sleep(chance.random() * LONGEST)
        child.kill()
    before = entries(folder)
    was_writing = bool(_unfinished(folder))
    revision = record(folder, draft(f"after {chance.random()}"))
    assert revision.number == before[-1].number + 1
    assert [problem.sentence() for problem in check_history(folder)] == []
    assert _unfinished(folder) == []
    assert [entry.number for entry in entries(folder)] == list(range(1, revision.number + 1))
    return was_writing


def _unfinished(folder: Path) -> list[str]:
    return [path.name for path in folder.iterdir() if is_unfinished(path.name)]


def kill_often(folder: Path, times: int) -> int:
    """Kill so many recorders, ten in each history; returns how many of them were killed while writing."""
    chance = random.Random(7)
    count = 0
    for number in range(times):
        own = folder / f"history-{number // 10}"
        own.mkdir(parents=True, exist_ok=True)
        count += kill_once(own, chance)
    return count


def main(arguments: list[str]) -> None:
    """Kill so many recorders and tell that the history stood it."""
    if arguments[:1] == ["--record"]:
        record_for_ever(Path(arguments[1]))
    times = int(arguments[0]) if arguments else 200
    with tempfile.TemporaryDirectory() as scratch:
        start = time.perf_counter()
        count = kill_often(Path(arguments[1] if len(arguments) > 1 else scratch), times)
        seconds = time.perf_counter() - start
        print(f"{times} recorders killed in {seconds:.0f} s, {count} of them while writing; every check clean")


if __name__ == "__main__":
    main(sys.argv[1:])
