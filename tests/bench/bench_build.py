"""What building costs, against the plainest way of doing the same work; on one thread.

    python -m tests.bench.bench_build [--only NAME…] [--campaigns 1000] [--cold 100] [--repeats 5] [--json FILE]

Every line is a ratio of two measurements made in one run; times are medians.  The campaigns have 24 lots, 8 components
and 12 orders.  The plain script of the cold build answers each question of each order by one call of ``linprog``,
draws one matplotlib figure for each picture and lays out the same number of pages with jinja2; it proves nothing,
records nothing and checks nothing.
"""

from __future__ import annotations

from tests.bench.one_thread import THREADS  # isort: skip  (numpy reads the number of threads when it is imported)

import argparse
import contextlib
import hashlib
import json
import os
import resource
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterable, Iterator
from dataclasses import asdict, dataclass, replace
from datetime import UTC, datetime
from pathlib import Path
from statistics import median
from typing import Any

from generator.book import build, writer_lock
from generator.job import Job
from generator.report.manifest import read_manifest
from generator.run import entry_from
from generator.tasks import Chapter, Task
from generator.workers import Here, Tick
from tests.bench.making import make_campaign, write_campaign

CHECKOUT = Path(__file__).parents[2]
NOON = datetime(2026, 3, 2, 12, tzinfo=UTC)
SETTLE = 0.1


class Silent:
    """A log that nobody reads."""

    def say(self, line: str) -> None:
        """Nothing."""

    def warn(self, line: str) -> None:
        """Nothing."""


@dataclass(frozen=True)
class Line:
    """One line of the table: what ours took, what the other side took, and the most that the ratio may be."""

    work: str
    against: str
    ours: float
    theirs: float
    unit: str
    at_most: float
    note: str = ""

    @property
    def ratio(self) -> float:
        """Ours over theirs."""
        return self.ours / self.theirs


def seconds(work: Callable[[], object]) -> float:
    """How long a piece of work takes."""
    began = time.perf_counter()
    work()
    return time.perf_counter() - began


def job_on(root: Path, **fields: object) -> Job:
    """A build of ``root/campaigns`` into ``root/output``, in this process."""
    return Job(campaigns=root / "campaigns", output=root / "output", moment=NOON, **fields)  # type: ignore[arg-type]


def build_once(job: Job) -> None:
    """Build, lock and all."""
    with writer_lock(job.output) as lock:
        build(job, lock, Silent())


class Copyist:
    """Makes every campaign by copying the pages of one that was built, which spares an hour."""

    def __init__(self, output: Path, slug: str) -> None:
        published = read_manifest(output).campaigns[slug]
        self._slug = slug
        self._files = {path: (output / path).read_bytes() for path in published.files}
        entry = entry_from(published.about["entry"])
        assert entry is not None
        self._entry = entry

    def make_all(self, tasks: Iterable[Task], tick: Tick) -> Iterator[tuple[Task, Chapter]]:
        """The same pages under another name."""
        for task in tasks:
            slug = task.folder.slug
            files = {path.replace(f"{self._slug}/", f"{slug}/", 1): data for path, data in self._files.items()}
            yield task, Chapter(files=files, entry=replace(self._entry, slug=slug), theme="plain")

    def call(self, function: str, *arguments: object, tick: Tick) -> Any:
        """The shared pages are drawn for real."""
        return Here().call(function, *arguments, tick=tick)


def multiply(root: Path, count: int) -> None:
    """Make ``count`` campaigns that are built already: one for real, the others as copies of it.

    What a build with nothing changed reads and compares is the same; only the making is spared.
    """
    first = root / "campaigns" / "c0000"
    write_campaign(first, make_campaign(0))
    build_once(job_on(root))
    for number in range(1, count):
        shutil.copytree(first, first.with_name(f"c{number:04d}"))
    job = job_on(root)
    with writer_lock(job.output) as lock:
        build(job, lock, Silent(), makers=Copyist(job.output, "c0000"))


def nothing_changed(root: Path, repeats: int) -> Line:
    """A build of campaigns in which nothing has changed, against reading and hashing their files."""
    job = job_on(root)
    folders = sorted(path for path in job.campaigns.iterdir())

    def read_and_hash() -> None:
        for folder in folders:
            for path in sorted(path for path in folder.iterdir() if path.is_file()):
                hashlib.sha256(path.read_bytes()).hexdigest()

    pairs = [(seconds(lambda: build_once(job)), seconds(read_and_hash)) for _ in range(repeats + 1)][1:]
    ours, theirs = (median(times) for times in zip(*pairs, strict=True))
    whole = median(seconds(lambda: _command(root, "build")) for _ in range(3))
    return Line(
        work=f"build with nothing changed, {len(folders)} campaigns",
        against="reading and hashing the same files",
        ours=ours,
        theirs=theirs,
        unit="s",
        at_most=2.0,
        note=f"the whole command, start of Python and imports included: {whole:.2f} s",
    )


def _command(root: Path, command: str, *more: str) -> None:
    arguments = [sys.executable, "-m", "generator", command, "campaigns", "output", "--quiet", *more]
    subprocess.run(arguments, cwd=root, env={**os.environ, "PYTHONPATH": str(CHECKOUT)}, check=True)


def one_edit(many: Path, alone: Path, repeats: int) -> Line:
    """From the file closed to the last page in place while watching, less the settle time."""
    with _watching(many), _watching(alone):
        # In turns, so that a busy machine is busy for both; the first of each warms the watcher up.
        pairs = [(_one_edit(many, turn), _one_edit(alone, turn)) for turn in range(repeats + 1)][1:]
    ours, theirs = (median(times) - SETTLE for times in zip(*pairs, strict=True))
    count = sum(1 for _ in (many / "campaigns").iterdir())
    return Line(
        work=f"one cell edited among {count} campaigns, to the last page in place",
        against="the same edit with one campaign",
        ours=ours,
        theirs=theirs,
        unit="s",
        at_most=1.3,
    )


@contextlib.contextmanager
def _watching(root: Path) -> Iterator[None]:
    arguments = ["watch", "campaigns", "output", "--quiet", "--settle", str(SETTLE)]
    with subprocess.Popen(
        [sys.executable, "-m", "generator", *arguments], cwd=root, env={**os.environ, "PYTHONPATH": str(CHECKOUT)}
    ) as watcher:
        try:
            time.sleep(5.0)
            yield
        finally:
            watcher.terminate()


def _one_edit(root: Path, turn: int) -> float:
    """Edit one cell, and wait until the manifest, the last file of a publication, is written."""
    path = root / "campaigns" / "c0000" / "targets.csv"
    manifest = root / "output" / ".hullbook-manifest.json"
    before = manifest.stat().st_mtime_ns
    lines = path.read_text().splitlines()
    cells = lines[1].split(",")
    cells[1] = str(100 + turn + time.time_ns() % 1000)
    path.write_text("\n".join([lines[0], ",".join(cells), *lines[2:]]) + "\n")
    began = time.perf_counter()
    while manifest.stat().st_mtime_ns == before:
        time.sleep(0.002)
        if time.perf_counter() - began > 120:
            raise TimeoutError("the edit was never published")
    return time.perf_counter() - began


def cold(root: Path, count: int) -> Line:
    """A first build of so many campaigns, against the plain script; both one after the other, on one thread."""
    from tests.bench.plain_script import plain_build

    for number in range(count):
        write_campaign(root / "campaigns" / f"c{number:04d}", make_campaign(number))
    ours = seconds(lambda: build_once(job_on(root)))
    pages = sorted((root / "output").rglob("*.html"))
    pictures = {path.relative_to(root / "output").as_posix(): path.read_text().count("<figure") for path in pages}
    plain = plain_build(root / "campaigns", root / "plain", pictures)
    return Line(
        work=f"cold build of {count} campaigns",
        against="a plain script for the same number of pages",
        ours=ours,
        theirs=plain.seconds,
        unit="s",
        at_most=0.25,
        note=(
            f"{len(pages)} pages each; the script: {plain.programs} programs in {plain.program_seconds:.1f} s, "
            f"{plain.figures} figures in {plain.figure_seconds:.1f} s"
        ),
    )


def peak_memory(many: Path, few: Path) -> Line:
    """The peak of a build in which one campaign changed and all are looked at, main process and others together."""
    seed = time.time_ns() % 100_000  # others than are built already, and the same for both
    ours, theirs = (_peak_mb(root, seed) for root in (many, few))
    counts = [sum(1 for _ in (root / "campaigns").iterdir()) for root in (many, few)]
    return Line(
        work=f"peak memory, {counts[0]} campaigns",
        against=f"{counts[1]} campaigns",
        ours=ours,
        theirs=theirs,
        unit="MB",
        at_most=1.5,
        note="the process and its largest helper added up; every campaign is looked at, ten are made anew",
    )


def _peak_mb(root: Path, seed: int) -> float:
    for number in range(10):
        write_campaign(root / "campaigns" / f"c{number:04d}", make_campaign(seed + number))
    code = (
        "import resource, sys; from generator import cli; cli.main(sys.argv[1:]);"
        "print(sum(resource.getrusage(who).ru_maxrss for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN)))"
    )
    told = subprocess.run(
        [sys.executable, "-c", code, "build", "campaigns", "output", "--quiet"],
        cwd=root,
        env={**os.environ, "PYTHONPATH": str(CHECKOUT)},
        capture_output=True,
        text=True,
        check=True,
    )
    return float(told.stdout.split()[-1]) / 1000


def run(folder: Path, options: argparse.Namespace) -> list[Line]:
    """Measure what is asked for."""
    only = set(options.only or ("nothing", "edit", "memory", "cold"))
    many, few, alone = (folder / name for name in ("many", "few", "alone"))
    lines = []
    if only & {"nothing", "edit", "memory"}:
        multiply(many, options.campaigns)
    if "nothing" in only:
        lines.append(nothing_changed(many, options.repeats))
    if "edit" in only:
        multiply(alone, 1)
        lines.append(one_edit(many, alone, options.repeats))
    if "memory" in only:
        multiply(few, 10)
        lines.append(peak_memory(many, few))
    if "cold" in only:
        lines.append(cold(folder / "cold", options.cold))
    return lines


def table(lines: list[Line]) -> str:
    """The table as text."""
    rows = [
        f"{line.work} | {line.against} | {line.ours:.3g} {line.unit} | {line.theirs:.3g} {line.unit} | "
        f"{line.ratio:.2f} | {line.at_most:g} | {'yes' if line.ratio <= line.at_most else 'NO'} | {line.note}"
        for line in lines
    ]
    return "\n".join(["work | against | ours | theirs | ratio | at most | holds | note", *rows])


def main() -> None:
    """Measure, and print the table."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--only", nargs="+", choices=("nothing", "edit", "memory", "cold"))
    parser.add_argument("--campaigns", type=int, default=1000)
    parser.add_argument("--cold", type=int, default=100)
    parser.add_argument("--repeats", type=int, default=5)
    parser.add_argument("--json", type=Path)
    options = parser.parse_args()
    with tempfile.TemporaryDirectory() as temporary:
        lines = run(Path(temporary), options)
    print(
        f"{THREADS} thread, Python {sys.version.split()[0]}, peak of this process "
        f"{resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1000:.0f} MB"
    )
    print(table(lines))
    if options.json:
        options.json.write_text(json.dumps([{**asdict(line), "ratio": line.ratio} for line in lines], indent=1))


if __name__ == "__main__":
    main()
