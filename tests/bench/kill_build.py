"""Kill builds and watchers at random moments, and look at what they leave.

    python -m tests.bench.kill_build [--times 500] [--seed 1] [--folder DIR]

After every kill each page must be whole and each of its links lead to a file, every revision must be as it was
recorded, and a foreign file in the output folder untouched.  Now and then, and at the end, a build is let run to its
end: it must leave nothing unfinished, and the same bytes as a build into a new folder.
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
import time
from collections import Counter
from dataclasses import dataclass, field
from pathlib import Path

from generator.history.check import check_history
from tests.bench.making import make_campaign, write_campaign
from tests.bench.whole import faults, published

CHECKOUT = Path(__file__).parents[2]
NAMES = ("ash", "birch")
#: After so many kills a build is let run to its end.
_COMPLETE_EVERY = 25
_LONGEST = 300.0


@dataclass
class Report:
    """What was found; all lists have to stay empty."""

    kills: Counter[str] = field(default_factory=Counter)
    broken: list[str] = field(default_factory=list)
    damaged: list[str] = field(default_factory=list)
    not_completed: list[str] = field(default_factory=list)

    @property
    def is_good(self) -> bool:
        """Whether nothing was broken, damaged or left."""
        return not (self.broken or self.damaged or self.not_completed)


class Range:
    """A folder of campaigns and an output folder, in which commands are started and killed."""

    def __init__(self, root: Path, seed: int) -> None:
        self.root = root
        self.output = root / "output"
        self.report = Report()
        self._draw = random.Random(seed)
        self._usual = 3.0
        self.output.mkdir(parents=True)
        (self.output / "own.txt").write_text("somebody's own file")
        self._edit(NAMES)

    def round(self, turn: int) -> None:
        """Edit, start a command, kill it at a random moment, and look."""
        kind = self._draw.choice(("build", "watch"))
        if self._draw.random() < 0.15:
            for path in (path for path in self.output.iterdir() if path.name != "own.txt"):
                shutil.rmtree(path) if path.is_dir() else path.unlink()
        self._edit(NAMES)
        process = self._start(kind)
        until = time.monotonic() + self._draw.uniform(0.2, self._usual)
        while time.monotonic() < until and process.poll() is None:
            if kind == "watch" and self._draw.random() < 0.1:
                self._edit((self._draw.choice(NAMES),))
            time.sleep(0.05)
        self._kill(process, kind)
        self._look(f"after kill {turn} ({kind})")

    def complete(self, turn: int) -> None:
        """Let a build run to its end, and compare it with a build into a new folder."""
        began = time.monotonic()
        done = self._run("output")
        self._usual = max(1.0, time.monotonic() - began)
        self._look(f"after the build that follows kill {turn}")
        left = [path.name for path in self.root.rglob("*") if path.name.endswith(".tmp") or "journal" in path.name]
        if done.returncode or left:
            self.report.not_completed.append(f"after kill {turn}: exit {done.returncode}, left {left}: {done.stderr}")
        shutil.rmtree(self.root / "other", ignore_errors=True)
        self._run("other")
        pages = {path: data for path, data in published(self.output).items() if path != "own.txt"}
        other = published(self.root / "other")
        if pages != other:
            odd = sorted(path for path in pages.keys() | other.keys() if pages.get(path) != other.get(path))
            self.report.not_completed.append(f"after kill {turn}: differs from a new build in {odd[:5]}")

    def _edit(self, names: tuple[str, ...]) -> None:
        for name in names:
            files = make_campaign(
                self._draw.randrange(10**6),
                lots=5,
                components=self._draw.randint(2, 3),
                orders=self._draw.randint(1, 4),
            )
            write_campaign(self.root / "campaigns" / name, files)

    def _start(self, kind: str) -> subprocess.Popen[bytes]:
        more = ["--settle", "0.05"] if kind == "watch" else []
        jobs = str(self._draw.choice((0, 1, 2)))
        return subprocess.Popen(
            [sys.executable, "-m", "generator", kind, "campaigns", "output", "--quiet", "--jobs", jobs, *more],
            cwd=self.root,
            env={**os.environ, "PYTHONPATH": str(CHECKOUT)},
            stderr=subprocess.DEVNULL,
            start_new_session=True,
        )

    def _run(self, output: str) -> subprocess.CompletedProcess[str]:
        return subprocess.run(
            [sys.executable, "-m", "generator", "build", "campaigns", output],
            cwd=self.root,
            env={**os.environ, "PYTHONPATH": str(CHECKOUT)},
            capture_output=True,
            text=True,
            check=False,
            timeout=_LONGEST,
        )

    def _kill(self, process: subprocess.Popen[bytes], kind: str) -> None:
        """Kill the command alone, or all its processes at once, as a machine that loses power would."""
        if process.poll() is not None:
            self.report.kills["ended before"] += 1
            return
        if self._draw.random() < 0.5:
            process.send_signal(signal.SIGKILL)
        else:
            with contextlib.suppress(ProcessLookupError):
                os.killpg(process.pid, signal.SIGKILL)
        process.wait()
        self.report.kills[kind] += 1

    def _look(self, when: str) -> None:
        self.report.broken += [f"{when}: {fault}" for fault in faults(self.output)]
        if (self.output / "own.txt").read_text() != "somebody's own file":
            self.report.broken.append(f"{when}: a foreign file was changed")
        for name in NAMES:
            problems = check_history(self.root / "campaigns" / name / "history")
            self.report.damaged += [f"{when}: {problem.sentence()}" for problem in problems]


def kill_many(root: Path, times: int, seed: int) -> Report:
    """Kill so many commands, and report."""
    scene = Range(root, seed)
    scene.complete(0)
    for turn in range(1, times + 1):
        scene.round(turn)
        if turn % _COMPLETE_EVERY == 0 or turn == times:
            scene.complete(turn)
            report = scene.report
            found = [*report.broken, *report.damaged, *report.not_completed]
            print(f"{turn} of {times}: {dict(report.kills)} {found[:5]}", file=sys.stderr, flush=True)
    return scene.report


def main() -> None:
    """Run and print the report; exit 1 where anything was broken."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--times", type=int, default=500)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--folder", type=Path)
    options = parser.parse_args()
    with tempfile.TemporaryDirectory() as temporary:
        report = kill_many((options.folder or Path(temporary)) / "killing", options.times, options.seed)
    print(
        f"killed {dict(report.kills)}; {len(report.broken)} broken sites or pages, "
        f"{len(report.damaged)} damaged revisions, {len(report.not_completed)} not completed"
    )
    sys.exit(not report.is_good)


if __name__ == "__main__":
    main()
