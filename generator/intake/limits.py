"""Limit cells: from ``12.5 - 13.5`` or ``max 0.3`` to a low and a high bound."""

from __future__ import annotations

import functools
import re
from dataclasses import dataclass
from fractions import Fraction

from generator.intake.cells import LONGEST_NUMBER, Decimal, looks_like_date, parse_number, suggest_number

#: What a limit cell may look like, for remedies.
FORMS = 'write a limit such as "12.5 - 13.5", "<= 0.3", ">= 52" or "13 ± 0.5"'

_NO_LIMIT = frozenset({"", "-", "–", "—", "n/a", "na", "n.a."})
_AT_MOST = re.compile(
    r"(?:<=|=<|≤|⩽|<|max(?:imum|\.)?(?![a-z]))\s*:?\s*(?P<a>.+)|(?P<b>.+?)\s*max(?:imum|\.)?", re.IGNORECASE
)
_AT_LEAST = re.compile(
    r"(?:>=|=>|≥|⩾|>|min(?:imum|\.)?(?![a-z]))\s*:?\s*(?P<a>.+)|(?P<b>.+?)\s*min(?:imum|\.)?", re.IGNORECASE
)
_AROUND = re.compile(r"(?P<a>.+?)\s*(?:±|\+\s?/\s?[-−–]|\+[-−])\s*(?P<b>.+)")
_RANGES = (
    re.compile(r"(?P<a>.+?)\s*(?:\.\.\.?|…)\s*(?P<b>.+)"),
    re.compile(r"(?P<a>.+?)\s*\bto\b\s*(?P<b>.+)", re.IGNORECASE),
)
_DASH = re.compile(r"[-–—−]")


@dataclass(frozen=True, slots=True)
class Bounds:
    """A limit's bounds and aim; ``around`` where they were typed as aim ± something."""

    low: Fraction | None
    high: Fraction | None
    aim: Fraction | None = None
    around: bool = False

    def scaled(self, factor: Fraction) -> Bounds:
        """The same limit in another unit."""
        if factor == 1:
            return self

        def times(value: Fraction | None) -> Fraction | None:
            return None if value is None else value * factor

        return Bounds(times(self.low), times(self.high), times(self.aim), self.around)


@dataclass(frozen=True, slots=True)
class LimitFault:
    """Why a cell is no limit, and what to write instead."""

    message: str
    remedy: str


@functools.lru_cache(maxsize=1 << 14)
def parse_limit(text: str, decimal: Decimal = ".", tolerance: Fraction | None = None) -> Bounds | LimitFault | None:
    """The limit that a cell names; None for no limit.

    ``<`` means ≤.  A bare number is exact, or aim ± ``tolerance`` where that is given.
    """
    text = text.strip()
    if text.casefold() in _NO_LIMIT:
        return None
    if len(text) > LONGEST_NUMBER:
        return LimitFault("is not a limit", FORMS)
    for form, is_high in ((_AT_MOST, True), (_AT_LEAST, False)):
        match = form.fullmatch(text)
        value = parse_number(match["a"] or match["b"], decimal) if match is not None else None
        if value is not None:
            return Bounds(None, value) if is_high else Bounds(value, None)
    number = parse_number(text.removeprefix("=").removeprefix("="), decimal)
    if number is not None:
        if tolerance is not None and not text.startswith("="):
            return Bounds(number - tolerance, number + tolerance, number, around=True)
        return Bounds(number, number)
    around = _AROUND.fullmatch(text)
    if around is not None:
        return _around(around["a"], around["b"], decimal, text)
    return _range(text, decimal)


def _around(aim_text: str, width_text: str, decimal: Decimal, text: str) -> Bounds | LimitFault:
    aim, width = parse_number(aim_text, decimal), parse_number(width_text, decimal)
    if aim is None or width is None:
        return LimitFault("is not a limit", suggest_limit(text, decimal))
    if width < 0:
        return LimitFault("has a negative tolerance", f"write {aim_text.strip()} ± {width_text.strip().lstrip('-−')}")
    return Bounds(aim - width, aim + width, aim, around=True)


def _range(text: str, decimal: Decimal) -> Bounds | LimitFault:
    pairs = [(match["a"], match["b"]) for form in _RANGES if (match := form.fullmatch(text)) is not None]
    pairs += [(text[: dash.start()], text[dash.end() :]) for dash in _DASH.finditer(text)]
    for low_text, high_text in pairs:
        low, high = parse_number(low_text, decimal), parse_number(high_text, decimal)
        if low is None or high is None:
            continue
        if low > high:
            return LimitFault(
                "has its low bound above its high bound", f"write {high_text.strip()} - {low_text.strip()}"
            )
        return Bounds(low, high)
    if looks_like_date(text):
        return LimitFault(
            "is a date: a spreadsheet may have made it of a range such as 8-10",
            'write the range with "to" or "..", such as 8..10, so that spreadsheets leave it alone',
        )
    return LimitFault("is not a limit", suggest_limit(text, decimal))


def suggest_limit(text: str, decimal: Decimal) -> str:
    """A remedy for a cell that is no limit."""
    if re.search(r"[0-9]", text) and not re.search(r"[<>≤≥±]|[0-9]\s*[-–]\s*[0-9]|\.\.|\bto\b", text):
        return suggest_number(text, decimal, FORMS)
    return FORMS
