"""The door: commands in, exit status out (0 all well, 1 campaigns have problems, 2 wrong use).

The only module that asks the clock and the environment.  Rooms are imported when a command needs
them, so that ``--help`` and ``--version`` answer at once.
"""

from __future__ import annotations

import argparse
import contextlib
import os
import sys
from collections.abc import Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING

from generator import __version__
from generator.problems import HullbookError, failing

if TYPE_CHECKING:
    from generator.job import Job

ALL_WELL, HAS_PROBLEMS, WRONG_USE = 0, 1, 2
#: As a shell tells of a command that Ctrl-C ended.
INTERRUPTED = 130

#: Later moments don't fit a datetime (year 9999).
_LAST_SECOND = 253_402_300_799


class Lines:
    """The log of a command on standard error; ``quiet`` keeps only what somebody has to look at."""

    def __init__(self, *, quiet: bool) -> None:
        self._quiet = quiet

    def say(self, line: str) -> None:
        """Print a line, unless quiet."""
        if not self._quiet:
            self.warn(line)

    def warn(self, line: str) -> None:
        """Print a line; what the terminal can't show is escaped, and one that is gone or full ends nothing."""
        encoding = sys.stderr.encoding or "utf-8"
        with contextlib.suppress(OSError):
            print(line.encode(encoding, "backslashreplace").decode(encoding), file=sys.stderr, flush=True)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit status."""
    options = _parser().parse_args(arguments)
    log = Lines(quiet=options.quiet)
    try:
        status: int = options.run(options, log)
    except HullbookError as error:
        log.warn(f"hullbook: {error}")
        return WRONG_USE
    except KeyboardInterrupt:
        log.warn("hullbook: stopped; the next build goes on from here")
        return INTERRUPTED
    return status


def now(environment: dict[str, str] | os._Environ[str] = os.environ) -> datetime:
    """Tell the moment to record: SOURCE_DATE_EPOCH where it is set, else the clock's."""
    fixed = environment.get("SOURCE_DATE_EPOCH", "")
    if not fixed:
        return datetime.now(UTC)
    if not fixed.isascii() or not fixed.isdigit() or int(fixed) > _LAST_SECOND:
        raise HullbookError(f"SOURCE_DATE_EPOCH is {fixed!r}, which is no number of seconds since 1970")
    return datetime.fromtimestamp(int(fixed), UTC)


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="hullbook",
        description="Read campaign folders of assays and orders, decide every order with a proof, and publish pages.",
        epilog="Exit status: 0 all well, 1 a campaign has problems, 2 wrong use.",
    )
    parser.add_argument("--version", action="version", version=f"hullbook {__version__}")
    commands = parser.add_subparsers(required=True, metavar="COMMAND")
    build = commands.add_parser("build", help="build once", description="Build what has changed, once.")
    watch = commands.add_parser("watch", help="build whenever a file changes", description="Build now and after edits.")
    check = commands.add_parser(
        "check",
        help="verify inputs and history, write nothing",
        description="Read every campaign and verify its history; write nothing.",
    )
    pack = commands.add_parser(
        "pack",
        help="one campaign in one self-contained file",
        description="Write one campaign, in one edition, as one HTML file that opens and prints anywhere.",
    )
    for command in (build, watch, check):
        _add_campaigns(command)
    for command in (build, watch):
        _add_output(command)
    _add_pack(pack)
    for command in (build, watch, check, pack):
        command.add_argument("--history", type=Path, metavar="DIR", help="keep revisions in DIR/CAMPAIGN instead")
        command.add_argument("--quiet", action="store_true", help="tell only what somebody has to look at")
    _add_watching(watch)
    build.set_defaults(run=_build)
    watch.set_defaults(run=_watch)
    check.set_defaults(run=_check)
    pack.set_defaults(run=_pack)
    return parser


def _add_campaigns(command: argparse.ArgumentParser) -> None:
    command.add_argument(
        "campaigns",
        nargs="?",
        default="campaigns",
        type=Path,
        metavar="CAMPAIGNS",
        help="folder of campaigns, or one campaign (default: campaigns)",
    )


def _add_output(command: argparse.ArgumentParser) -> None:
    command.add_argument(
        "output",
        nargs="?",
        default="output",
        type=Path,
        metavar="OUTPUT",
        help="where the pages go (default: output)",
    )
    _add_audience(command)
    command.add_argument(
        "--edition",
        action="append",
        dest="editions",
        metavar="NAME",
        help="internal (default), client or one that campaign.toml names; several go to OUTPUT/NAME each",
    )
    command.add_argument(
        "--jobs",
        type=_jobs,
        default=1,
        metavar="N",
        help="processes at once (default: 1; 0: none beside this one, and no time limit)",
    )
    command.add_argument(
        "--time-limit",
        type=_limit,
        default=300.0,
        metavar="SECONDS",
        help="give up a campaign that takes longer, and show its last good answers (default: 300)",
    )


def _add_audience(command: argparse.ArgumentParser) -> None:
    command.add_argument("--theme", metavar="NAME|PATH", help="theme for all campaigns (default: each one's own)")
    command.add_argument("--client", default="", metavar="NAME", help="only this client's orders (default: all)")


def _add_pack(command: argparse.ArgumentParser) -> None:
    command.add_argument("campaign", type=Path, metavar="CAMPAIGN", help="the campaign's folder")
    command.add_argument("file", type=Path, metavar="FILE.html", help="the file to write")
    _add_audience(command)
    command.add_argument("--edition", default="client", metavar="NAME", help="whom it is for (default: client)")


def _add_watching(command: argparse.ArgumentParser) -> None:
    command.add_argument(
        "--settle",
        type=_seconds,
        default=0.5,
        metavar="SECONDS",
        help="how long a folder must be quiet before it is built (default: 0.5)",
    )
    command.add_argument(
        "--poll",
        choices=("auto", "always", "never"),
        default="auto",
        help="look again and again instead of waiting for events (default: auto, on network folders)",
    )


def _jobs(text: str) -> int:
    number = int(text)
    if not 0 <= number <= 64:
        raise argparse.ArgumentTypeError("give a number from 0 to 64")
    return number


def _limit(text: str) -> float:
    number = float(text)
    if not 1 <= number <= 86_400:
        raise argparse.ArgumentTypeError("give seconds from 1 to 86400")
    return number


def _seconds(text: str) -> float:
    number = float(text)
    if not 0 <= number <= 3600:
        raise argparse.ArgumentTypeError("give seconds from 0 to 3600")
    return number


def _job(options: argparse.Namespace) -> Job:
    from generator.book import check_job
    from generator.job import Job

    job = Job(
        campaigns=options.campaigns,
        output=options.output,
        moment=now(),
        theme=options.theme,
        history=options.history,
        jobs=options.jobs,
        time_limit=options.time_limit,
        editions=tuple(dict.fromkeys(options.editions or ("internal",))),
        client=options.client,
    )
    check_job(job)
    return job


def _build(options: argparse.Namespace, log: Lines) -> int:
    from generator.book import build, writer_lock

    job = _job(options)
    with writer_lock(job.output) as lock:
        outcome = build(job, lock, log)
    for slug in outcome.kept:
        for problem in failing(outcome.problems.get(slug, ())):
            log.warn(f"{slug}: {problem.sentence()}")
    log.say(f"{job.moment:%Y-%m-%dT%H:%M:%SZ} {outcome.sentence()}")
    return ALL_WELL if outcome.is_well else HAS_PROBLEMS


def _watch(options: argparse.Namespace, log: Lines) -> int:
    from generator.watch import watch

    return watch(_job(options), log, settle_seconds=options.settle, poll=options.poll, clock=now)


def _pack(options: argparse.Namespace, log: Lines) -> int:
    from generator.packing import pack

    size, problems = pack(
        options.campaign,
        options.file,
        moment=now(),
        theme=options.theme,
        edition=options.edition,
        client=options.client,
        history=options.history,
    )
    for problem in problems:
        log.warn(problem.sentence())
    log.say(f"{options.file}: {size / 1000:.0f} kB, edition {options.edition}")
    return HAS_PROBLEMS if failing(problems) else ALL_WELL


def _check(options: argparse.Namespace, log: Lines) -> int:
    from generator.book import check

    status = ALL_WELL
    for folder, problems in check(options.campaigns, options.history):
        for problem in problems:
            print(f"{folder.name}: {problem.sentence()}")
        if failing(problems):
            status = HAS_PROBLEMS
        elif not problems:
            log.say(f"{folder.name}: all well")
    return status
