"""Cells to exact values: numbers, readings, dates; and the decimal mark of a file, decided from all its cells."""

from __future__ import annotations

import datetime
import functools
import re
from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

Decimal = Literal[".", ","]

#: Written powers of ten beyond this are no measurement, and their exact form would fill the memory.
LARGEST_EXPONENT = 60
#: More digits than any instrument gives; guards the time that exact arithmetic takes.
MOST_DIGITS = 60

#: Longer texts are neither numbers nor limits nor dates; guards the time that patterns take.
LONGEST_NUMBER = 100

#: Spaces and apostrophes that group thousands: space, no-break, narrow no-break, thin, ' and ’.
_GROUPING = " \u00a0\u202f\u2009'’"
_MINUS = str.maketrans({"−": "-", "﹣": "-", "－": "-"})

#: Cells that say "not measured".
NOT_MEASURED = frozenset({"", "-", "–", "—", "n/a", "na", "n.a."})
_UNDETECTED = frozenset({"nd", "n.d.", "n.d", "bdl", "b.d.l.", "<lod", "<dl", "< lod", "< dl", "lod", "trace", "tr"})


def _pattern(decimal: str, others: str) -> re.Pattern[str]:
    mark, group = re.escape(decimal), f"[{re.escape(others)}]"
    whole = rf"(?:[0-9]{{1,3}}(?P<group>{group})[0-9]{{3}}(?:(?P=group)[0-9]{{3}})*|[0-9]+)"
    return re.compile(
        rf"(?P<sign>[+-]?)\s?(?P<body>{whole}(?:{mark}[0-9]*)?|{mark}[0-9]+)(?:[eE](?P<exponent>[+-]?[0-9]{{1,3}}))?"
    )


_NUMBER = {".": _pattern(".", _GROUPING + ","), ",": _pattern(",", _GROUPING + ".")}


@functools.lru_cache(maxsize=1 << 16)
def parse_number(text: str, decimal: Decimal = ".") -> Fraction | None:
    """The exact value of a number as typed, or None where the text is no number under this decimal mark.

    Thousands may be grouped by spaces, apostrophes or the mark that is not the decimal one; ``1e5`` is a number.
    """
    text = text.strip()
    match = _NUMBER[decimal].fullmatch(text.translate(_MINUS)) if len(text) <= LONGEST_NUMBER else None
    if match is None:
        return None
    digits = "".join(char for char in match["body"] if "0" <= char <= "9" or char == decimal).replace(decimal, ".")
    exponent = int(match["exponent"] or 0)
    if abs(exponent) > LARGEST_EXPONENT or len(digits) > MOST_DIGITS:
        return None
    whole, _, part = digits.partition(".")
    sign = -1 if match["sign"] == "-" else 1
    power = exponent - len(part)
    return Fraction(sign * int(whole + part) * 10 ** max(power, 0), 10 ** max(-power, 0))


@dataclass(frozen=True, slots=True)
class Typed:
    """What a measurement cell says."""

    kind: Literal["value", "below", "not measured", "undetected", "above", "error", "no number"]
    value: Fraction = Fraction(0)


def parse_reading(text: str, decimal: Decimal = ".") -> Typed:
    """A measurement cell: a number, below detection (``<0.01``), not measured, or what is wrong with it."""
    text = text.strip()
    folded = text.casefold()
    if folded in NOT_MEASURED:
        return Typed("not measured")
    if folded in _UNDETECTED:
        return Typed("undetected")
    if text.startswith("#"):
        return Typed("error")
    if text[0] in "<≤>≥":
        value = parse_number(text.lstrip("<≤>≥= "), decimal)
        if value is None:
            return Typed("no number")
        return Typed("below" if text[0] in "<≤" else "above", value)
    value = parse_number(text, decimal)
    return Typed("no number") if value is None else Typed("value", value)


_TOKEN = re.compile(r"[0-9]*[.,]?[0-9]+")


#: A letter typed for a zero, between digits.
_LETTER_O = re.compile("(?<=[0-9])[oO](?=[0-9.,])")


def suggest_number(text: str, decimal: Decimal = ".", otherwise: str = "write a number") -> str:
    """A remedy for a cell that is no number: the number it most likely was."""
    token = _TOKEN.search(_LETTER_O.sub("0", text[:LONGEST_NUMBER]))
    if token is None or len(token[0]) > MOST_DIGITS:
        return otherwise
    sign = "-" if text.strip().translate(_MINUS).startswith("-") else ""
    return f"write {sign}{re.sub('[.,]', decimal, token[0])}"


# The decimal mark of a file.

_NUMERIC_CELL = re.compile(
    r"(?:[0-9.,'’\s<>=≤≥±+\-−–%/eE]|\b(?:min|max|minimum|maximum|to|ppm|ppb|g/t|g/kg|mg/kg)\b)+", re.IGNORECASE
)
_MARKED = re.compile(rf"[0-9.,](?:[0-9.,]|[{_GROUPING}](?=[0-9]{{3}}(?![0-9])))*")
_RANGE_DOTS = re.compile(r"\.{2,}")
_DATE = re.compile(r"[0-9]{1,4}([./-])[0-9]{1,2}\1[0-9]{1,4}")


@dataclass(frozen=True, slots=True)
class Evidence:
    """For which decimal mark the cells speak: how many for each, and which could be read both ways."""

    point: int
    comma: int
    unclear: str | None
    unclear_marks: frozenset[str]
    example_point: str | None
    example_comma: str | None


def weigh_marks(cells: Iterable[str]) -> Evidence:
    """Gather the evidence on the decimal mark from cells that hold nothing but numbers or limits."""
    seen: dict[str, list[str]] = {".": [], ",": [], "?.": [], "?,": []}
    for cell in cells:
        text = cell.strip()
        if len(text) > LONGEST_NUMBER or not _NUMERIC_CELL.fullmatch(text) or _DATE.fullmatch(text):
            continue
        for token in _MARKED.findall(_RANGE_DOTS.sub(" ; ", text)):
            says = _mark_of(token)
            if says:
                seen[says].append(text)
    unclear = seen["?."] + seen["?,"]
    return Evidence(
        point=len(seen["."]),
        comma=len(seen[","]),
        unclear=unclear[0] if unclear else None,
        unclear_marks=frozenset(mark for mark in ".," if seen["?" + mark]),
        example_point=next(iter(seen["."]), None),
        example_comma=next(iter(seen[","]), None),
    )


def _mark_of(token: str) -> str:
    """``.`` or ``,`` where the token shows it to be the decimal mark, ``?.`` or ``?,`` where that mark may be decimal
    or grouping, "" where it says nothing."""
    points, commas = token.count("."), token.count(",")
    if points + commas in (0, len(token)):
        return ""
    if points and commas:
        last = max(token.rfind("."), token.rfind(","))
        return token[last] if token.count(token[last]) == 1 else ""
    mark, other = (".", ",") if points else (",", ".")
    whole, _, part = token.partition(mark)
    if points + commas > 1:
        return other if re.fullmatch(rf"[0-9]{{1,3}}(?:[{mark}][0-9]{{3}})+", token) else ""
    grouped = any(char in _GROUPING for char in whole)
    if len(part) != 3 or grouped or not 1 <= len(whole) <= 3 or whole.startswith("0"):
        return mark
    return "?" + mark


def decide_decimal(evidence: Evidence, delimiter: str) -> Decimal | None:
    """The file's decimal mark, or None where its cells can't tell.

    A clear majority (at least two to one) decides, and the cells of the other kind then are no numbers, never
    misread.  In a comma-separated file a point with three digits behind it is decimal: the comma is taken.
    """
    if evidence.point or evidence.comma:
        if evidence.point >= 2 * evidence.comma:
            return "."
        return "," if evidence.comma >= 2 * evidence.point else None
    if evidence.unclear is None or (evidence.unclear_marks == {"."} and delimiter == ","):
        return "."
    return None


# Dates.

_ISO = re.compile(r"([0-9]{4})-([0-9]{1,2})-([0-9]{1,2})(?:[T ][0-9:.]+Z?)?")
_PARTS = re.compile(r"([0-9]{1,4})[./-]\s?([0-9]{1,2})[./-]\s?([0-9]{2,4})")
_FULL_YEAR = re.compile(r"[0-9]{4}")
_MONTHS = "jan|feb|mar|mär|apr|may|mai|jun|jul|aug|sep|oct|okt|nov|dec|dez"
_SPREADSHEET_DATE = re.compile(
    rf"[0-9]{{1,4}}[-. /]*(?:{_MONTHS})[a-zä]*\.?(?:[-. /]*[0-9]{{1,4}})?|(?:{_MONTHS})[a-zä]*\.?[-. /]*[0-9]{{1,4}}"
    rf"(?:[-. /,]+[0-9]{{1,4}})?",
    re.IGNORECASE,
)

DateOrder = Literal["dmy", "mdy", "ymd"]


def parse_date(text: str, order: DateOrder | None = None) -> datetime.date | None:
    """An ISO date; with ``order`` also ``01.02.2024`` and the like, read in that order of day, month, year."""
    text = text.strip()[:LONGEST_NUMBER]
    iso = _ISO.fullmatch(text)
    if iso is not None:
        return _date(int(iso[1]), int(iso[2]), int(iso[3]))
    parts = _PARTS.fullmatch(text)
    if parts is None or order is None:
        return None
    given = dict(zip(order, parts.groups(), strict=True))
    if any(len(given[part]) > 2 for part in "dm") or len(given["y"]) == 3:
        return None
    year = int(given["y"]) if len(given["y"]) == 4 else 2000 + int(given["y"])
    return _date(year, int(given["m"]), int(given["d"]))


def _date(year: int, month: int, day: int) -> datetime.date | None:
    try:
        return datetime.date(year, month, day)
    except ValueError:
        return None


def decide_dates(texts: Iterable[str]) -> DateOrder | None:
    """The one order of day, month and year in which all of a file's dates in figures are dates; else None.

    Years of two digits decide nothing.  With points the month never stands first (common practice).
    """
    shared: set[DateOrder] | None = None
    for text in texts:
        orders = _orders_of(text) if is_numeric_date(text) and _FULL_YEAR.search(text) else set()
        if orders:  # what is a date in no order is a mistake, and says nothing of the others
            shared = orders if shared is None else shared & orders
    return shared.pop() if shared is not None and len(shared) == 1 else None


def _orders_of(text: str) -> set[DateOrder]:
    choices: tuple[DateOrder, ...] = ("dmy", "ymd") if "." in text else ("dmy", "mdy", "ymd")
    return {order for order in choices if parse_date(text, order) is not None}


def is_numeric_date(text: str) -> bool:
    """Whether the text is a date in figures whose order of day and month must be told."""
    text = text.strip()[:LONGEST_NUMBER]
    return _PARTS.fullmatch(text) is not None and _ISO.fullmatch(text) is None


def looks_like_date(text: str) -> bool:
    """Whether a spreadsheet may have made this of a range: ``8-Oct``, ``Oct 8``, ``2024-10-08``, ``08.10.2024``."""
    text = text.strip()[:LONGEST_NUMBER]
    return any(form.fullmatch(text) for form in (_SPREADSHEET_DATE, _ISO, _PARTS))
