"""What a problem is: the one way in which bad input is told to its owner.

Ground floor: imports nothing of the project.  A problem is a value, gathered and shown; an exception
of this family is for what stops a whole command (wrong use, a folder that can't be written).
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

Severity = Literal["stops", "drops", "note"]


class HullbookError(Exception):
    """Base of the errors that a command tells in one line; anything else is a defect."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Problem:
    """One fault of the input, with the place, what was found and what to write instead.

    ``row`` counts as a spreadsheet does (the header of a plain table is row 1).  ``severity`` is
    ``stops`` (no answers from this campaign), ``drops`` (a lot or an order is left out) or ``note``.
    """

    file: str
    message: str
    remedy: str
    severity: Severity
    row: int | None = None
    column: str | None = None
    found: str | None = None

    def sentence(self) -> str:
        """The problem in one line, as the log and ``check`` print it."""
        place = self.file
        if self.row is not None:
            place += f", row {self.row}"
        if self.column:
            place += f", column {self.column}"
        found = f": found {self.found!r}" if self.found is not None else ""
        return f"{place}{found}: {self.message}; {self.remedy}"


def stopping(problems: Iterable[Problem]) -> tuple[Problem, ...]:
    """The problems that leave a campaign without answers."""
    return tuple(problem for problem in problems if problem.severity == "stops")


def failing(problems: Iterable[Problem]) -> tuple[Problem, ...]:
    """The problems that make the exit status 1."""
    return tuple(problem for problem in problems if problem.severity != "note")
