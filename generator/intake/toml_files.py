"""TOML with exact numbers, and the row in which a key stands."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction

from generator.intake.cells import parse_number
from generator.intake.decoding import decode
from generator.intake.faults import Faults
from generator.intake.records import Place
from generator.intake.tables import MOST_BYTES

_LINE = re.compile(r"line (\d+)")
_TABLE = re.compile(r"\s*\[\[?(?P<path>[^\]]+)\]\]?\s*(?:#.*)?")
_KEY = re.compile(
    r"""\s*(?P<key>(?:"[^"]*"|'[^']*'|[A-Za-z0-9_-]+)(?:\s*\.\s*(?:"[^"]*"|'[^']*'|[A-Za-z0-9_-]+))*)\s*="""
)
_PART = re.compile(r"""\s*(?:"(?P<double>[^"]*)"|'(?P<single>[^']*)'|(?P<bare>[A-Za-z0-9_-]+))\s*(?:\.|$)""")
#: Lines beyond this hold no key that a person typed; guards the time that patterns take.
_LONGEST_LINE = 500


@dataclass(frozen=True, slots=True)
class TomlFile:
    """A settings file: its values (floats as Fraction) and the row of each key."""

    file: str
    values: Mapping[str, object]
    rows: Mapping[tuple[str, ...], int] = field(default_factory=dict)

    def place(self, path: Sequence[str]) -> Place:
        """Where a key (or the nearest table above it) stands."""
        known = (
            self.rows[tuple(path[:length])] for length in range(len(path), 0, -1) if tuple(path[:length]) in self.rows
        )
        return Place(self.file, next(known, None), ".".join(path) or None)


def load_toml(file: str, data: bytes, faults: Faults) -> TomlFile:
    """A settings file; where it can't be read, an empty one and a problem that stops."""
    empty = TomlFile(file, {})
    decoded = decode(data) if len(data) <= MOST_BYTES else None
    if decoded is None:
        faults.stops(Place(file, None, None), "can't be read as text", "save it as UTF-8")
        return empty
    if decoded.encoding != "UTF-8":
        faults.tell(file, None, f"read as {decoded.encoding}")
    text = decoded.text.replace("\r\n", "\n")
    try:
        return TomlFile(file, tomllib.loads(text, parse_float=_exact), _rows(text))
    except tomllib.TOMLDecodeError as error:
        row = _LINE.search(str(error))
        number = int(row[1]) if row is not None else text.count("\n") + 1
        lines = text.split("\n")
        found = lines[number - 1] if number <= len(lines) else None
        reason = str(error).partition(" (at")[0]
        faults.stops(
            Place(file, number, None),
            f"is not TOML ({reason[:1].lower()}{reason[1:]})",
            'write name = value, and texts in quotation marks: title = "Spring blends"',
            found=found,
        )
    except (ValueError, RecursionError):
        faults.stops(Place(file, None, None), "holds a number or a nesting beyond all measure", "shorten it")
    return empty


def _exact(text: str) -> Fraction | str:
    """A TOML float exactly; ``nan``, ``inf`` and the like stay text, which no setting takes for a number."""
    value = parse_number(text.replace("_", ""))
    return text if value is None else value


def _rows(text: str) -> dict[tuple[str, ...], int]:
    """The first row of every key path and table, as far as plain lines tell."""
    rows: dict[tuple[str, ...], int] = {}
    table: tuple[str, ...] = ()
    for number, line in enumerate(text.split("\n"), start=1):
        if len(line) > _LONGEST_LINE:
            continue
        header = _TABLE.fullmatch(line)
        if header is not None:
            table = _path(header["path"])
            _note(table, number, rows)
            continue
        key = _KEY.match(line)
        if key is not None:
            _note((*table, *_path(key["key"])), number, rows)
    return rows


def _note(path: tuple[str, ...], number: int, rows: dict[tuple[str, ...], int]) -> None:
    """Note the row of a path, and of the tables above it that are not named before."""
    for length in range(1, len(path) + 1):
        rows.setdefault(path[:length], number)


def _path(text: str) -> tuple[str, ...]:
    return tuple(part["double"] or part["single"] or part["bare"] or "" for part in _PART.finditer(text))
