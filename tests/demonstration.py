"""Record the demonstration's stories: ``python -m tests.demonstration`` writes each campaign's history anew.

A story is told backwards: the present files are its last revision, and each earlier one is the next one with a few
edits undone.  So the present files stand in one place only.
"""

from __future__ import annotations

import os
import shutil
import tempfile
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

from generator.cli import main

CAMPAIGNS = Path(__file__).parent.parent / "campaigns"


@dataclass(frozen=True, slots=True)
class Edit:
    """One edit in one file: ``after`` stands in it exactly once; the revision before had ``before`` there."""

    file: str
    after: str
    before: str = ""


@dataclass(frozen=True, slots=True)
class Story:
    """The moments of a campaign's revisions, and the edits that made each one out of the one before.

    ``moments`` are UTC; ``edits`` has one entry less: those of the second revision first.
    """

    moments: tuple[str, ...]
    edits: tuple[tuple[Edit, ...], ...]


STORIES: Mapping[str, Story] = {
    "saltmere-spring-blends": Story(
        moments=("2026-02-23T08:10:00", "2026-03-02T07:45:00", "2026-03-09T09:30:00"),
        edits=(
            (
                Edit("assays.csv", "UREA-22,urea,2026-02-24,45.8,,,,,granular\n"),
                Edit("assays.csv", "MOP-32,muriate of potash,2026-02-24,,,59.8,,,granular\n"),
                Edit("stock.csv", "UREA-22,520,492,bay 1,3,Oxmarle Nitrogen,Urea B\n"),
                Edit("stock.csv", "MOP-32,460,352,bay 6,2,Caddow Potash,Muriate of potash B\n"),
                Edit("stock.csv", "UREA-21,40,", "UREA-21,310,"),
                Edit("stock.csv", "MOP-31,95,", "MOP-31,240,"),
                Edit(
                    "targets.csv",
                    "S-409 25-5-5 +SO3,Sedgewater Estate,75,398,2026-04-09,2,whole,>= 25,5 - 6,5 - 6,,>= 8,,\n",
                ),
            ),
            (
                Edit(
                    "assays.csv",
                    "2026-03-05,,,49.7,,44.8,retest; first result 50.2",
                    "2026-02-03,,,50.2,,44.8,",
                ),
                Edit("stock.csv", "UREA-21,0,478,bay 1,,", "UREA-21,40,478,bay 1,3,"),
                Edit("targets.csv", ">= 12,,>= 9,", ">= 12,,>= 6,"),
                Edit(
                    "notes.md",
                    "- SOP-06 was tested again on 5 March after the client's own laboratory asked: "
                    "49.7 % K₂O, not 50.2.\n"
                    "- UREA-21 is used up. UREA-22 came by the next vessel and is dearer.\n"
                    "- S-402 wants at least 9 % SO₃ since 6 March; it was 6 before.\n",
                ),
            ),
        ),
    ),
    "orrinvale-raw-meal": Story(
        moments=("2026-02-16T06:55:00", "2026-03-09T07:20:00", "2026-03-16T07:05:00"),
        edits=(
            (
                Edit("targets.csv", "<= 2.8,<= 0.32,", "<= 2.8,<= 0.40,"),
                Edit("assays.csv", "IRON-1,iron ore fines,stockpile,31.00,", "IRON-1,iron ore fines,stockpile,27.50,"),
                Edit(
                    "notes.md",
                    "\n- Low alkali: the clients want 0.32 % Na₂Oeq since 5 March, not 0.40.\n"
                    "- Iron ore fines cost 31.00 since the new contract.\n",
                ),
            ),
            (
                Edit("assays.csv", "33.42,16.83,4.31,2.07,", "33.42,16.83,4.31,2.47,"),
                Edit("assays.csv", "SAND-4,quartz sand,river terrace,9.50,", "SAND-4,quartz sand,river terrace,8.20,"),
                Edit(
                    "notes.md",
                    "- MARL-3 was assayed anew on 12 March: 2.07 % Fe₂O₃, not 2.47.\n"
                    "- Sand is hauled from the upper terrace now and costs 9.50.\n",
                ),
            ),
        ),
    ),
    "karrow-bay-cargoes": Story(
        moments=("2026-03-02T14:05:00", "2026-03-09T13:40:00", "2026-03-16T15:15:00"),
        edits=(
            (
                Edit(
                    "assays.csv",
                    "MAG-08,magnetite concentrate,2026-03-04,jt,69.94,1.98,0.31,<0.005,0.088,<5\n"
                    "MAG-08,magnetite concentrate,2026-03-04,jt,69.86,2.06,0.33,<0.005,0.092,<5\n",
                ),
                Edit("stock.csv", "MAG-08;28.000;74,90;8,5;C2;2026-05-04;\r\n"),
                Edit("stock.csv", "LMP-01;35.000;", "LMP-01;46.000;"),
                Edit("stock.csv", "Total;337.250;", "Total;320.250;"),
                Edit(
                    "notes.md",
                    "- MAG-08 can't be loaded before 4 May.\n- 11 000 t of LMP-01 went by rail on 6 March.\n",
                ),
            ),
            (
                Edit("assays.csv", "61.18,5.87,2.64,0.087,0.048,63\n", "61.18,5.87,2.64,0.087,0.048,41\n"),
                Edit("assays.csv", "61.02,6.01,2.69,0.089,0.047,66\n", "61.02,6.01,2.69,0.089,0.047,44\n"),
                Edit("stock.csv", "HEM-13;40.000;44,00;7,2;A3;;no", "HEM-13;40.000;44,00;7,2;A3;;"),
                Edit("targets.csv", ",<= 250,<= 20,", ",<= 300,<= 20,"),
                Edit(
                    "notes.md",
                    "- HEM-13 is on hold since 12 March: its sample was mixed up.\n"
                    "- TAI-04 was assayed anew: 64.5 ppm arsenic, not 42.5.\n"
                    "- Sallow Foundry wants 250 ppm phosphorus in KB-27, not 300.\n",
                ),
            ),
        ),
    ),
}


def present_files(folder: Path) -> dict[str, bytes]:
    """The input files of a campaign as they are now."""
    return {path.name: path.read_bytes() for path in sorted(folder.iterdir()) if path.is_file()}


def states(files: Mapping[str, bytes], story: Story) -> list[dict[str, bytes]]:
    """The files of every revision, oldest first; the last is ``files`` itself."""
    told = [dict(files)]
    for edits in reversed(story.edits):
        earlier = dict(told[0])
        for edit in edits:
            earlier[edit.file] = _undone(earlier[edit.file], edit)
        told.insert(0, earlier)
    return told


def _undone(data: bytes, edit: Edit) -> bytes:
    after = edit.after.encode()
    if data.count(after) != 1:
        raise ValueError(f"{edit.file} holds {edit.after!r} {data.count(after)} times, not once")
    return data.replace(after, edit.before.encode())


def record(campaigns: Path, target: Path) -> None:
    """Record every story of ``campaigns`` and put each history into ``target/CAMPAIGN/history``."""
    with tempfile.TemporaryDirectory() as scratch:
        for name, story in STORIES.items():
            work = Path(scratch, "campaigns", name)
            for moment, files in zip(story.moments, states(present_files(campaigns / name), story), strict=True):
                work.mkdir(parents=True, exist_ok=True)
                for file, data in files.items():
                    (work / file).write_bytes(data)
                with _fixed_moment(moment):
                    status = main(["build", "--quiet", str(work), str(Path(scratch, "output", name))])
                if status != 0:
                    raise RuntimeError(f"{name} at {moment}: exit status {status}")
            history = target / name / "history"
            shutil.rmtree(history, ignore_errors=True)
            shutil.copytree(work / "history", history)


@contextmanager
def _fixed_moment(moment: str) -> Iterator[None]:
    seconds = int(datetime.fromisoformat(f"{moment}+00:00").timestamp())
    before = os.environ.get("SOURCE_DATE_EPOCH")
    os.environ["SOURCE_DATE_EPOCH"] = str(seconds)
    try:
        yield
    finally:
        os.environ.pop("SOURCE_DATE_EPOCH")
        if before is not None:
            os.environ["SOURCE_DATE_EPOCH"] = before


if __name__ == "__main__":
    record(CAMPAIGNS, CAMPAIGNS)
