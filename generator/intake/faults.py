"""Gathering: every problem and every line of "what was read" of one folder, and the wording they share."""

from __future__ import annotations

import difflib
import functools
import unicodedata
from collections.abc import Iterable

from generator.intake.records import Place, ReadNote
from generator.problems import Problem, Severity

#: No more problems than these are listed: a reader mends the first and sees the rest go.
MOST_PROBLEMS = 1_000
_GRAVITY: tuple[Severity, ...] = ("stops", "drops", "note")

#: Among more names than this no likeness is looked for: it would take longer than the reading.
MOST_CANDIDATES = 500

#: Longer finds are cut: a problem is one line.
LONGEST_FOUND = 80


@functools.lru_cache(maxsize=1 << 16)
def fold(text: str) -> str:
    """The form in which names are compared: compatibility forms unified (₂ is 2, µ is μ), case and
    surplus space ignored."""
    return " ".join(unicodedata.normalize("NFKC", text).casefold().split())


def tidy(text: str) -> str:
    """The text with every run of white space (no-break space and line breaks too) made one space."""
    return " ".join(text.split())


def nearest(name: str, known: Iterable[str]) -> str | None:
    """The known name that ``name`` was most likely meant to be, or None."""
    by_fold = {fold(candidate): candidate for candidate in known}
    if len(by_fold) > MOST_CANDIDATES or len(name) > LONGEST_FOUND:
        return None
    close = difflib.get_close_matches(fold(name), by_fold, n=1, cutoff=0.6)
    return by_fold[close[0]] if close else None


def did_you_mean(name: str, known: Iterable[str], otherwise: str) -> str:
    """A remedy: the nearest known name as a question, or ``otherwise``."""
    close = nearest(name, known)
    return f'did you mean "{close}"?' if close is not None else otherwise


def clipped(text: str) -> str:
    """The text in one line of bearable length."""
    text = tidy(text)
    return text if len(text) <= LONGEST_FOUND else text[: LONGEST_FOUND - 1] + "…"


def _by_place(problem: Problem) -> tuple[str, int, str, str, str]:
    return problem.file, problem.row or 0, problem.column or "", problem.message, problem.found or ""


class Faults:
    """What one reading of a folder has to tell; filled on the way, frozen at the end."""

    def __init__(self) -> None:
        self._problems: dict[Problem, None] = {}
        self._read: dict[ReadNote, None] = {}
        self._first: dict[tuple[str, str | None, str], Place] = {}
        #: How many problems so far leave something out; a reader compares before and after.
        self.count = 0

    def _add(self, severity: Severity, place: Place, found: str | None, message: str, remedy: str) -> None:
        self._problems[
            Problem(
                file=place.file,
                row=place.row,
                column=place.column,
                found=None if found is None else clipped(found),
                message=message,
                remedy=remedy,
                severity=severity,
            )
        ] = None
        if severity != "note":
            self.count += 1

    def stops(self, place: Place, message: str, remedy: str, found: str | None = None) -> None:
        """A problem that leaves the campaign without answers."""
        self._add("stops", place, found, message, remedy)

    def stops_once(self, place: Place, message: str, remedy: str, found: str | None = None) -> None:
        """As :meth:`stops`, for what is wrong with a whole column: told at the first row where it shows."""
        first = self._first.setdefault((place.file, place.column, message), place)
        self.stops(first, message, remedy, found)

    def drops(self, place: Place, message: str, remedy: str, found: str | None = None) -> None:
        """A problem that leaves out a lot or an order."""
        self._add("drops", place, found, message, remedy)

    def notes(self, place: Place, message: str, remedy: str, found: str | None = None) -> None:
        """A problem that changes no answer."""
        self._add("note", place, found, message, remedy)

    def tell(self, file: str, row: int | None, what: str) -> None:
        """A line of "what was read"."""
        self._read[ReadNote(file, row, what)] = None

    def problems(self) -> tuple[Problem, ...]:
        """Every problem once, by file, row and column; of very many the gravest and first, and how many there are."""
        found = sorted(self._problems, key=_by_place)
        if len(found) <= MOST_PROBLEMS:
            return tuple(found)
        shown = sorted(found, key=lambda problem: _GRAVITY.index(problem.severity))[:MOST_PROBLEMS]
        rest = Problem(
            file=shown[-1].file,
            message=f"there are {len(found) - len(shown):,} more problems, which are not listed",
            remedy="mend these first",
            severity="note",
        )
        return (*sorted(shown, key=_by_place), rest)

    def read(self) -> tuple[ReadNote, ...]:
        """Every line of "what was read" once, by file and row."""
        return tuple(sorted(self._read, key=lambda note: (note.file, note.row or 0)))
