"""The limit grammar."""

from __future__ import annotations

import re
from fractions import Fraction

import pytest

from generator.intake.limits import Bounds, LimitFault, parse_limit

F = Fraction
LIMITS = [
    ("12.5 - 13.5", F("12.5"), F("13.5"), None),
    ("12.5-13.5", F("12.5"), F("13.5"), None),
    ("12.5 – 13.5", F("12.5"), F("13.5"), None),
    ("12.5..13.5", F("12.5"), F("13.5"), None),
    ("12.5 .. 13.5", F("12.5"), F("13.5"), None),
    ("12...13", F(12), F(13), None),
    ("12.5 to 13.5", F("12.5"), F("13.5"), None),
    ("-5 - -3", F(-5), F(-3), None),
    ("-5..3", F(-5), F(3), None),
    ("-5 to -3.5", F(-5), F("-3.5"), None),
    ("<= 0.3", None, F("0.3"), None),
    ("<=0.3", None, F("0.3"), None),
    ("≤ 0.3", None, F("0.3"), None),
    ("< 0.3", None, F("0.3"), None),
    ("=< 0.3", None, F("0.3"), None),
    ("max 0.3", None, F("0.3"), None),
    ("max. 0.3", None, F("0.3"), None),
    ("Max0.3", None, F("0.3"), None),
    ("0.3 max", None, F("0.3"), None),
    ("0.3 max.", None, F("0.3"), None),
    ("maximum 0.3", None, F("0.3"), None),
    (">= 52", F(52), None, None),
    ("≥52", F(52), None, None),
    ("> 52", F(52), None, None),
    ("min 52", F(52), None, None),
    ("52 MIN", F(52), None, None),
    (">= -5", F(-5), None, None),
    ("13 ± 0.5", F("12.5"), F("13.5"), F(13)),
    ("13±0.5", F("12.5"), F("13.5"), F(13)),
    ("13 +/- 0.5", F("12.5"), F("13.5"), F(13)),
    ("13 +- 0.5", F("12.5"), F("13.5"), F(13)),
    ("-1 ± 0.5", F("-1.5"), F("-0.5"), F(-1)),
    ("13", F(13), F(13), None),
    ("-13", F(-13), F(-13), None),
    ("= 13", F(13), F(13), None),
    ("8-10", F(8), F(10), None),
    ("1e-3 - 2e-3", F("0.001"), F("0.002"), None),
    ("0.1 - 0.1", F("0.1"), F("0.1"), None),
]


@pytest.mark.parametrize("text, low, high, aim", LIMITS)
@pytest.mark.parametrize("decimal", [".", ","])
def test_limits(text: str, low: F | None, high: F | None, aim: F | None, decimal: str) -> None:
    """Every form is read, with a decimal point and with a decimal comma."""
    typed = text if decimal == "." else re.sub(r"(?<=[0-9])\.(?=[0-9])", ",", text)
    bounds = parse_limit(typed, decimal)  # type: ignore[arg-type]
    assert isinstance(bounds, Bounds)
    assert (bounds.low, bounds.high, bounds.aim) == (low, high, aim)


@pytest.mark.parametrize("text", ["", "  ", "-", "n/a"])
def test_no_limit(text: str) -> None:
    """A blank sets no limit."""
    assert parse_limit(text) is None


def test_tolerance_makes_an_aim() -> None:
    """A bare number is an aim where the component has a tolerance; "= 13" stays exact."""
    assert parse_limit("13", ".", F("0.5")) == Bounds(F("12.5"), F("13.5"), F(13), around=True)
    assert parse_limit("= 13", ".", F("0.5")) == Bounds(F(13), F(13))
    assert parse_limit("<= 13", ".", F("0.5")) == Bounds(None, F(13))


@pytest.mark.parametrize(
    "text", ["8-Oct", "Oct-8", "8. Okt", "08-Oct-24", "October 8", "2024-10-08", "08.10.2024", "10/8/2024"]
)
def test_dates_are_told(text: str) -> None:
    """A range that a spreadsheet turned into a date is told as such."""
    assert parse_limit(text) == LimitFault(
        "is a date: a spreadsheet may have made it of a range such as 8-10",
        'write the range with "to" or "..", such as 8..10, so that spreadsheets leave it alone',
    )


@pytest.mark.parametrize(
    "text, message, remedy",
    [
        ("13 - 12", "has its low bound above its high bound", "write 12 - 13"),
        ("13 ± -1", "has a negative tolerance", "write 13 ± 1"),
        ("12,5o", "is not a limit", "write 12.5"),
        ("about", "is not a limit", 'write a limit such as "12.5 - 13.5", "<= 0.3", ">= 52" or "13 ± 0.5"'),
        ("nan", "is not a limit", 'write a limit such as "12.5 - 13.5", "<= 0.3", ">= 52" or "13 ± 0.5"'),
        ("<= 1 - 2", "is not a limit", 'write a limit such as "12.5 - 13.5", "<= 0.3", ">= 52" or "13 ± 0.5"'),
        ("1 - 2 - 3", "is not a limit", 'write a limit such as "12.5 - 13.5", "<= 0.3", ">= 52" or "13 ± 0.5"'),
        ("- " * 5000, "is not a limit", 'write a limit such as "12.5 - 13.5", "<= 0.3", ">= 52" or "13 ± 0.5"'),
    ],
)
def test_no_limits(text: str, message: str, remedy: str) -> None:
    """What is no limit is told, with what to write instead."""
    assert parse_limit(text) == LimitFault(message, remedy)
