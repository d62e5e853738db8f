"""A small campaign for the tests of building, and light pages in place of drawn ones."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path

import pytest

from generator.book import build, writer_lock
from generator.job import Job, Outcome
from generator.report.views import CampaignPages, IndexEntry

NOON = datetime(2026, 3, 2, 12, tzinfo=UTC)

ASSAYS = "lot,stock,cost,N,K\nA,100,10,10,20\nB,50,20,30,5\nC,unlimited,35,20,18\n"
TARGETS = "order,amount,N,K\n1,10,>= 20,>= 16\n2,30,15..20,>= 10\n"


class Told:
    """A log that remembers."""

    def __init__(self) -> None:
        self.said: list[str] = []
        self.warned: list[str] = []

    def say(self, line: str) -> None:
        self.said.append(line)

    def warn(self, line: str) -> None:
        self.warned.append(line)


def put_campaign(root: Path, name: str = "spring", **files: str | bytes) -> Path:
    """Write a campaign folder; keywords give other files, with ``_`` for the dot."""
    folder = root / name
    folder.mkdir(parents=True, exist_ok=True)
    for key, content in {"assays_csv": ASSAYS, "targets_csv": TARGETS, **files}.items():
        data = content.encode() if isinstance(content, str) else content
        (folder / key.replace("_", ".")).write_bytes(data)
    return folder


def make_job(root: Path, **fields: object) -> Job:
    """A job on ``root/campaigns`` and ``root/output``."""
    given = {"campaigns": root / "campaigns", "output": root / "output", "moment": NOON, **fields}
    return Job(**given)


def run(job: Job, log: Told | None = None, **options: object) -> Outcome:
    """Build once, lock and all."""
    with writer_lock(job.output) as lock:
        return build(job, lock, log or Told(), **options)


def pages_of(output: Path) -> dict[str, bytes]:
    """Every published file but the program's own records."""
    paths = [path for path in output.rglob("*") if path.is_file() and not path.name.startswith((".hullbook", "status"))]
    return {path.relative_to(output).as_posix(): path.read_bytes() for path in sorted(paths)}


def text_of(output: Path, address: str) -> str:
    """One published page."""
    return (output / address).read_text(encoding="utf-8")


def _light_campaign(book: CampaignPages, theme: object) -> dict[str, bytes]:
    slug = book.campaign.slug
    lines = [
        book.campaign.settings.title,
        *(f"{order.order}: {order.verdict}" for order in book.findings.orders),
        *(f"changed: {sentence}" for sentence in book.changes),
        *(f"revision {line.number}: {line.headline}" for line in book.revisions),
        *(f"banner: {problem.sentence()}" for problem in book.banner_problems),
        *(f"problem: {problem.sentence()}" for problem in book.campaign.problems),
        f"theme {getattr(theme, 'name', '')}",
    ]
    pages = {f"{slug}/orders/{order.order}.html": order.sentence.encode() for order in book.findings.orders}
    return {f"{slug}/index.html": "\n".join(lines).encode(), **pages}


def _light_index(entries: tuple[IndexEntry, ...], theme: object) -> bytes:
    return "\n".join(f"{entry.slug} {entry.title} {entry.counts} {entry.headline}" for entry in entries).encode()


@contextlib.contextmanager
def light_pages() -> Iterator[None]:
    """Draw plain text instead of pages and figures: these tests are about building."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("generator.report.pages.draw_campaign", _light_campaign)
        patch.setattr("generator.report.pages.draw_index", _light_index)
        yield
