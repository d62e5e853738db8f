"""Feed the reader and the solver spoilt campaigns: every refusal has to name file and row, and nothing may hang.

    python -m tests.bench.mutate_inputs [--times 20000] [--seed 1] [--limit 20] [--answers 10]

A campaign of the corpus (the demonstration's, and small ones with every kind of cell) is spoilt by bytes, by cells or
by structure, one to four times over; it is read, and every so many, where it can be, answered as well.
"""

from __future__ import annotations

import argparse
import csv
import io
import random
import signal
import sys
import time
import traceback
from collections import Counter
from dataclasses import dataclass, field
from pathlib import Path
from types import FrameType

from generator.findings.answers import find
from generator.intake.campaign import INPUT_NAMES, read_campaign
from generator.problems import Problem

Files = dict[str, bytes]

SMALL: tuple[Files, ...] = (
    {
        "assays.csv": b"lot,stock,cost,N [%],K2O\nA,100,10,10,20\nB,50,20,30,5\nC,unlimited,35,20,18\n",
        "targets.csv": b"order,amount,N,K2O\n1,10,>= 20,>= 16\n2,5..30,15..20,10 to 18\n3,<= 8,20 \xc2\xb1 3,max 12\n",
        "campaign.toml": b'title = "x"\n[components.N]\nsd = 0.1\n[house]\nmax_lots = 2\nkeep_apart = [["A", "B"]]\n',
    },
    {
        "assays.csv": (
            b"lot;moisture;CaO;SiO2;Al2O3;Fe2O3\nlime;2,5;52,1;3,2;0,9;0,4\nclay;18;2,2;58;17;7,1\niron;9;1;4;2;80\n"
        ),
        "targets.csv": b"order;LSF;SiO2\nmeal;92 - 98;<= 15\n",
        "campaign.toml": (
            b'basis = "dry"\n[derived]\nLSF = "100*CaO / (2.8*SiO2 + 1.18*Al2O3 + 0.65*Fe2O3)"\n'
            b'[groups.mine]\nlots = ["l*"]\nshare = "<= 90"\n'
        ),
        "stock.csv": b"lot;stock\nlime;1000\nclay;200\niron;5\n",
        "notes.md": b"# A note\n\nwith *words*.\n",
    },
    {
        "assays.csv": (
            b"lot,sampled,Fe,Fe sd,As [ppm]\nA,2026-01-02,61.2,0.2,<5\nA,2026-01-03,61.5,0.2,7\nB,,58,0.3,n/a\n"
        ),
        "targets.csv": b"order,due,Fe min,Fe max,As [ppm],only lots\ncargo,2026-02-01,59,62,<= 20,A; B\n",
        "site.toml": b'currency = "SEK"\n',
    },
)

CELLS = (
    *("", " ", "-", "n/a", "0", "-0", "1e9", "1e999", "1e-400", "-5", "12,5", "12.5.1", "1,234.5", "1 234", "½", "١٢"),
    *("<0.01", "<", ">= ", "<= <= 3", "5..", "..5", "9..3", "3 - 9", "8-Oct", "5 ± ", "5 ± -1", "±", "NaN", "inf"),
    *("unlimited", "no", "yes", "'12", '"', '""', "=1+1", "#REF!", "\x07", "\ufeff", "\u202e", "a" * 300, "9" * 200),
    *("*", "A;B;*", "[", "]", "%", "100 %", "2026-13-40", "total", "lot", "order", "N sd", "é", "\U0001f600", "A", "B"),
)
LINES = (
    *("[", "[[x]]", "a = ", "x = 1", "title = 5", "basis = 'dry'", "quantity_basis = 'mole'", "confidence = 2"),
    *(
        "[components.N]",
        "rule = 'flash'",
        "rule = 'power:99'",
        "rule = 'log'",
        "sd = '2 %'",
        "sd = -1",
        "blank = 'zero'",
    ),
    *("[house]", "max_lots = 0", "max_lots = 1", "keep_apart = [['*', '*']]", "least_if_used = 90", "weigh_step = 0"),
    *("[derived]", "d = 'N / K2O'", "d = 'N / (N - N)'", "d = '((((('", "d = 'd'", "[columns]", "ignore = ['N']"),
    *("[csv]", "decimal = ','", "encoding = 'x'", "[groups.g]", "lots = []", "share = '>= 50'", "[whole]", "total = 0"),
    *("components = ['N']", "[editions.client]", "hide = 5", "plan_nodes = -1", "batch_size = 1", "theme = '../..'"),
)


@dataclass
class Report:
    """What came of the mutations; ``tracebacks``, ``hangs`` and ``nameless`` have to stay empty."""

    read: int = 0
    answered: int = 0
    refused: int = 0
    slowest: float = 0.0
    tracebacks: list[str] = field(default_factory=list)
    hangs: list[str] = field(default_factory=list)
    nameless: Counter[str] = field(default_factory=Counter)
    about_whole: Counter[str] = field(default_factory=Counter)

    @property
    def is_good(self) -> bool:
        """Whether nothing failed."""
        return not (self.tracebacks or self.hangs or self.nameless)

    def sentence(self) -> str:
        """The report in one line."""
        return (
            f"{self.read} mutated inputs, {self.refused} refused, {self.answered} answered as well; "
            f"{len(self.tracebacks)} tracebacks, {len(self.hangs)} over the time limit, "
            f"{sum(self.nameless.values())} refusals without file or row; slowest {self.slowest:.1f} s"
        )


class _TooLongError(Exception):
    pass


def spoil(files: Files, draw: random.Random) -> Files:
    """Spoil one to four things, by bytes, cells or structure."""
    spoilt = dict(files)
    for _ in range(draw.randint(1, 4)):
        name = draw.choice(sorted(spoilt) or ["assays.csv"])
        data = spoilt.get(name, b"")
        if draw.random() < 0.04:
            _spoil_folder(spoilt, name, draw)
        elif draw.random() < 0.3:
            spoilt[name] = _spoil_bytes(data, draw)
        elif name.endswith(".csv"):
            spoilt[name] = _spoil_table(data, draw)
        else:
            spoilt[name] = _spoil_lines(data, draw)
    return spoilt


def _spoil_folder(files: Files, name: str, draw: random.Random) -> None:
    """A file goes, is empty, or stands under the name of another."""
    data = files.pop(name, b"")
    other = draw.choice(INPUT_NAMES)
    if draw.random() < 0.5:
        files[other] = draw.choice((data, b"", b"\xff\xfe", b"\x00" * 50))


def _spoil_bytes(data: bytes, draw: random.Random) -> bytes:
    place, length = draw.randrange(len(data) + 1), draw.randint(1, 8)
    new = bytes(draw.randrange(256) for _ in range(length))
    acts = (
        lambda: data[:place] + new + data[place:],
        lambda: data[:place] + new + data[place + length :],
        lambda: data[:place],
        lambda: data[:place] + data[place + length * 5 :],
        lambda: data + data[place:],
        lambda: data.decode("utf-8", "replace").encode(draw.choice(("utf-16", "utf-16-be", "cp1252")), "replace"),
        lambda: b"\xef\xbb\xbf" + data,
        lambda: data.replace(b"\n", draw.choice((b"\r", b"\r\n", b"\n\n"))),
    )
    return draw.choice(acts)()


def _spoil_table(data: bytes, draw: random.Random) -> bytes:
    text = data.decode("utf-8", "replace")
    mark = ";" if text.count(";") > text.count(",") else ","
    try:
        rows = list(csv.reader(io.StringIO(text, newline=""), delimiter=mark))
    except csv.Error:
        return _spoil_bytes(data, draw)
    if not rows:
        return draw.choice(CELLS).encode("utf-8", "replace")
    row, other = draw.randrange(len(rows)), draw.randrange(len(rows))
    column = draw.randrange(max(1, len(rows[row])))
    acts = (
        *[lambda: rows[row].__setitem__(slice(column, column + 1), [draw.choice(CELLS)])] * 6,
        lambda: rows.insert(other, list(rows[row])),
        lambda: rows.pop(row),
        lambda: rows.insert(row, draw.choice(([], ["total"], ["", "1", "2"], ["x"] * 30))),
        lambda: rows.__setitem__(row, rows[row][::-1]),
        lambda: [cells.insert(column, cells[column % len(cells)]) for cells in rows if cells],
        lambda: [cells.pop(column) for cells in rows if len(cells) > column],
        lambda: rows.__setitem__(slice(None), [list(cells) for cells in zip(*rows, strict=False)]),
        lambda: rows.__setitem__(0, [draw.choice(CELLS) for _ in rows[0]]),
    )
    draw.choice(acts)()
    stream = io.StringIO(newline="")
    csv.writer(stream, delimiter=mark if draw.random() < 0.9 else draw.choice(",;\t|")).writerows(rows)
    return stream.getvalue().encode("utf-8", "replace")


def _spoil_lines(data: bytes, draw: random.Random) -> bytes:
    lines = data.split(b"\n")
    place = draw.randrange(len(lines) + 1)
    if draw.random() < 0.7:
        lines.insert(place, draw.choice(LINES).encode())
    elif lines:
        del lines[place : place + 1]
    return b"\n".join(lines)


def corpus(checkout: Path) -> list[Files]:
    """The demonstration's campaigns, and the small ones, these more often: they are quick."""
    found = []
    for folder in sorted(path for path in (checkout / "campaigns").glob("*") if path.is_dir()):
        files = {name: (folder / name).read_bytes() for name in INPUT_NAMES if (folder / name).is_file()}
        if files:
            found.append(files)
    return [*found, *SMALL * 3]


def mutate(times: int, seed: int, *, limit: float, answers: int, checkout: Path) -> Report:
    """Spoil and read so many campaigns, and answer every ``answers``-th; each has ``limit`` seconds."""
    draw = random.Random(seed)
    report = Report()
    sources = corpus(checkout)
    before = signal.signal(signal.SIGPROF, _too_long)
    try:
        for turn in range(times):
            source = draw.choice(sources)
            # The demonstration's take seconds each to answer: less often.
            every = answers if source in SMALL else answers * 20
            _try(spoil(source, draw), report, limit, answer=turn % every == 0)
            if turn % 1000 == 999:
                print(report.sentence(), file=sys.stderr, flush=True)
    finally:
        signal.signal(signal.SIGPROF, before)
    return report


def _try(files: Files, report: Report, limit: float, *, answer: bool) -> None:
    began = time.process_time()
    signal.setitimer(signal.ITIMER_PROF, limit)  # of this process: others may be busy
    problems: tuple[Problem, ...] = ()
    try:
        campaign = read_campaign(files, slug="spoilt", folder="spoilt")
        problems = campaign.problems
        if answer and not campaign.is_stopped:
            problems = find(campaign).problems
            report.answered += 1
    except _TooLongError:
        report.hangs.append(repr(files))
    except Exception:
        report.tracebacks.append(f"{traceback.format_exc()}{files!r}")
    finally:
        signal.setitimer(signal.ITIMER_PROF, 0)
    report.read += 1
    report.slowest = max(report.slowest, time.process_time() - began)
    refusals = [problem for problem in problems if problem.severity != "note"]
    report.refused += bool(refusals)
    for problem in refusals:
        _judge(problem, report)


#: What is wrong with a file as a whole, or missing from it, stands in no row.
WHOLE = (
    *("is missing", "is empty", "can't be read as text", "is larger than", "no lot is left", "has no row that"),
    *("there is no column", "has no column", "has no row with"),
)


def _judge(problem: Problem, report: Report) -> None:
    if problem.file and problem.row is not None:
        return
    what = f"{problem.file}: {problem.message}"
    if problem.file and any(words in problem.message for words in WHOLE):
        report.about_whole[what] += 1
    else:
        report.nameless[what] += 1


def _too_long(_number: int, _frame: FrameType | None) -> None:
    raise _TooLongError


def main() -> None:
    """Run and print the report; exit 1 where anything failed."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--times", type=int, default=20_000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--limit", type=float, default=20.0, help="seconds of work for one campaign")
    parser.add_argument("--answers", type=int, default=10, help="every so many are answered as well")
    options = parser.parse_args()
    checkout = Path(__file__).parents[2]
    report = mutate(options.times, options.seed, limit=options.limit, answers=options.answers, checkout=checkout)
    print(report.sentence())
    print("about a file as a whole:", dict(report.about_whole.most_common(20)))
    print("without file or row:", dict(report.nameless.most_common(20)))
    for text in (*report.tracebacks[:5], *report.hangs[:5]):
        print(text)
    sys.exit(not report.is_good)


if __name__ == "__main__":
    main()
