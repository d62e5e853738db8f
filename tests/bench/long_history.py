"""A history of many revisions, built and browsed: ``python -m tests.bench.long_history [SIZES] [OUTPUT] [CAMPAIGNS]``.

At each size the history is recorded, all its pages are built, and then one more revision is built: that one
must cost the same however many came before.  Prints seconds, files written, and the largest page, and walks
every link of the history's pages.  CAMPAIGNS is kept, and gone on with where it holds a history already.
"""

from __future__ import annotations

import random
import sys
import tempfile
import time
from datetime import UTC, datetime, timedelta
from pathlib import Path

from tests.bench import one_thread  # noqa: F401  # isort: skip  (numpy reads the number of threads when it is imported)
from generator.book import Job, Outcome, build, writer_lock
from generator.findings.answers import find
from generator.history.archive import entries
from generator.history.check import check_history
from generator.history.recording import Material, record_story
from generator.intake.campaign import read_campaign
from generator.intake.records import Campaign
from tests.history.making import Tables
from tests.report.checks import check_page

START = datetime(2026, 1, 5, 6, tzinfo=UTC)
MOST_BYTES = 300_000
LOTS, ORDERS, COMPONENTS = 7, 4, ("N", "K", "S")


class Silent:
    """A log that says nothing."""

    def say(self, line: str) -> None:
        """Say nothing."""

    def warn(self, line: str) -> None:
        """Warn of what a benchmark must not meet."""
        print(line)


def first() -> Tables:
    """The campaign that the history begins with."""
    chance = random.Random(1)
    lots = {
        f"L{number}": {"stock": "400", "cost": str(20 + 3 * number)}
        | {name: str(chance.randint(2, 40)) for name in COMPONENTS}
        for number in range(LOTS)
    }
    orders = {
        f"O{number}": {"amount": "50"} | {name: f">= {chance.randint(8, 20)}" for name in COMPONENTS}
        for number in range(ORDERS)
    }
    # Without standard deviations answers are found quickly: this is about the history, not the answers.
    return Tables(lots, orders, 'title = "A long campaign"\n')


def edit(one: Tables, chance: random.Random) -> None:
    """One or two edits, as a laboratory, a yard and a sales office make them."""
    for _ in range(chance.randint(1, 2)):
        lot, order = chance.choice(list(one.lots)), chance.choice(list(one.orders))
        what = chance.random()
        if what < 0.5:
            name = chance.choice(COMPONENTS)
            one.lots[lot][name] = str(max(1, float(one.lots[lot][name]) + chance.choice([-2, -1, 0.5, 1, 2])))
        elif what < 0.75:
            one.lots[lot]["stock"] = str(chance.randint(0, 9) * 50)
        elif what < 0.85:
            one.lots[lot]["cost"] = str(chance.randint(15, 60))
        else:
            one.orders[order][chance.choice(COMPONENTS)] = f">= {chance.randint(8, 22)}"


def read(files: object) -> Campaign:
    """The campaign as a build reads it."""
    return read_campaign(files, slug="long", folder="long")  # type: ignore[arg-type]


def recorded(folder: Path, one: Tables, moment: datetime) -> None:
    """Record one revision, as a build does."""
    campaign = read(one.files())
    record_story(
        folder,
        Material(
            inputs=one.files(),
            campaign=campaign,
            findings=find(campaign),
            cause="inputs",
            moment=moment,
            program="0",
            read=read,
        ),
    )


def built(root: Path, output: Path, one: Tables, moment: datetime) -> Outcome:
    """Build the campaign as it is now."""
    for name, data in one.files().items():
        (root / "long" / name).write_bytes(data)
    job = Job(campaigns=root, output=output, moment=moment)
    with writer_lock(output) as lock:
        return build(job, lock, Silent())


def walk(output: Path) -> tuple[int, int]:
    """Check every history page and its links; the number of pages and the size of the largest."""
    files = {path.relative_to(output).as_posix(): path for path in output.rglob("*") if path.is_file()}
    held = {address: path.read_bytes() for address, path in files.items()}
    pages = [address for address in held if "/history/" in address]
    for address in pages:
        check_page(held, address)
    return len(pages), max(len(held[address]) for address in held if address.endswith(".html"))


def main(sizes: list[int], output: Path, root: Path) -> None:
    """Measure at each size, and say what was found."""
    folder = root / "long" / "history"
    folder.parent.mkdir(parents=True, exist_ok=True)
    chance, one, count = random.Random(2), first(), len(entries(folder))
    for size in sizes:
        start = time.perf_counter()
        while len(entries(folder)) < size:
            recorded(folder, one, START + timedelta(hours=3 * count))
            edit(one, chance)
            count += 1
        print(f"{size} revisions: recorded in {time.perf_counter() - start:.1f} s", flush=True)
        for what in ("all pages that are due", "the same again", "one more revision", "one more revision"):
            if what == "one more revision":
                edit(one, chance)
                count += 1
            start = time.perf_counter()
            outcome = built(root, output, one, START + timedelta(hours=3 * count))
            print(f"  {what}: {time.perf_counter() - start:.2f} s, {outcome.written} files written", flush=True)
        pages, largest = walk(output)
        print(f"  {pages} history pages, every link leads somewhere; the largest page has {largest} bytes")
        assert largest <= MOST_BYTES, f"a page is larger than {MOST_BYTES} bytes"
    assert check_history(folder) == ()
    print("check is clean")


if __name__ == "__main__":
    numbers = [int(text) for text in (sys.argv[1] if len(sys.argv) > 1 else "10,100,1000").split(",")]
    with tempfile.TemporaryDirectory() as scratch:
        target = Path(sys.argv[2]) if len(sys.argv) > 2 else Path(scratch, "output")
        main(numbers, target, Path(sys.argv[3]) if len(sys.argv) > 3 else Path(scratch, "campaigns"))
