"""What a build is asked for, what it tells on the way, and what came of it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime
from pathlib import Path
from typing import Protocol

from generator.folders import Folder
from generator.problems import HullbookError, Problem, failing
from generator.report.veil import INTERNAL

#: One campaign's work is given up after so many seconds, unless told otherwise.
TIME_LIMIT = 300.0


class WrongUseError(HullbookError):
    """The command can't be carried out as it was given."""


class Log(Protocol):
    """Where a build tells what it does: one line at a time."""

    def say(self, line: str) -> None:
        """Tell what was done."""

    def warn(self, line: str) -> None:
        """Tell what somebody has to look at."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Job:
    """What is to be built: folders, theme (None: each campaign's own), moment, number of processes.

    ``history`` None keeps each campaign's revisions with the campaign.  One edition goes to ``output``,
    several go to a folder of theirs in it each; ``client`` "" shows every client's orders.  ``jobs`` 0
    works in this process, where no campaign can be given up; ``time_limit`` is in seconds.
    """

    campaigns: Path
    output: Path
    moment: datetime
    theme: str | None = None
    history: Path | None = None
    jobs: int = 0
    time_limit: float = TIME_LIMIT
    editions: tuple[str, ...] = (INTERNAL,)
    client: str = ""

    @property
    def edition(self) -> str:
        """The edition of a job that has one."""
        assert len(self.editions) == 1, "a job of several editions is carried out one by one"
        return self.editions[0]


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """What a build did: campaigns made and kept, files written and held, and every campaign's problems.

    ``themes`` are those that the pages are in; ``seconds`` is how long it took.
    """

    made: tuple[str, ...] = ()
    kept: tuple[str, ...] = ()
    written: int = 0
    removed: int = 0
    pending: tuple[str, ...] = ()
    problems: Mapping[str, tuple[Problem, ...]] = field(default_factory=dict)
    themes: frozenset[str] = frozenset()
    seconds: float = 0.0

    def sentence(self) -> str:
        """Tell the outcome in one line, of one form always, so that a program can read it."""
        parts = (
            _count(len(self.made) + len(self.kept), "campaign"),
            f"{len(self.made)} built",
            f"{_count(self.written, 'file')} written",
            f"{self.removed} removed",
            f"{len(self.pending)} held",
            f"{self.with_problems} with problems",
            f"{self.seconds:.2f} s",
        )
        return ", ".join(parts)

    @property
    def with_problems(self) -> int:
        """How many campaigns have a problem that somebody has to mend."""
        return sum(bool(failing(problems)) for problems in self.problems.values())

    @property
    def has_changed(self) -> bool:
        """Whether anything was made, written or removed."""
        return bool(self.made or self.written or self.removed)

    @property
    def is_well(self) -> bool:
        """Whether no campaign has a problem and every file is in place."""
        return not self.pending and not self.with_problems


def history_of(folder: Folder, history: Path | None) -> Path:
    """Say where a campaign's revisions are."""
    return folder.path / "history" if history is None else history / folder.slug


def _count(number: int, what: str) -> str:
    return f"{number} {what}{'' if number == 1 else 's'}"
