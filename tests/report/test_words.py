"""Numbers beside limits and sentences say what is so."""

from __future__ import annotations

import pytest

from generator.report import words
from generator.report.parts import aligned


@pytest.mark.parametrize(
    ("value", "low", "high", "shown"),
    [
        (12.46, 12.5, None, "12.46"),
        (12.54, 12.5, None, "12.5"),
        (0.3, None, 0.3, "0.3"),
        (0.304, None, 0.3, "0.304"),
        (13.0, 13.0, 13.0, "13.0"),
        (12.9999, 13.0, 13.0, "12.9999"),
        (5.0, None, None, "5.0"),
    ],
)
def test_a_value_is_never_rounded_over_its_limit(value: float, low: float, high: float, shown: str) -> None:
    """More decimals are shown where fewer would put the value on the wrong side."""
    assert words.beside(value, low, high, 1) == shown


@pytest.mark.parametrize(
    ("low", "high", "shown"),
    [
        (12.5, 13.0, "12.5 to 13.0"),
        (None, 0.3, "at most 0.3"),
        (52.0, None, "at least 52"),
        (13.0, 13.0, "exactly 13"),
        (None, None, "no limit"),
        (-0.25, None, "at least −0.25"),
    ],
)
def test_windows_in_words(low: float | None, high: float | None, shown: str) -> None:
    """Each kind of limit has its words, with the decimals that its bounds need."""
    assert words.window(low, high) == shown


def test_spans_in_words() -> None:
    """Ends without bound and unknown ranges are said so."""
    assert words.span((1.0, 2.0), 1) == "1.0 to 2.0"
    assert words.span((None, 0.0), 1) == "up to 0.0"
    assert words.span((1.0, None), 0) == "from 1"
    assert words.span((None, None), 0) == "any"
    assert words.span(None, 0) == "–"


def test_moments_are_shown_in_universal_time() -> None:
    """ISO text becomes date and minute; other text stays."""
    assert words.moment("2026-03-05T14:02:59Z") == "2026-03-05 14:02 UTC"
    assert words.moment("2026-03-05T14:02:59+02:00") == "2026-03-05 12:02 UTC"
    assert words.moment("some day") == "some day"


def test_decimal_points_stand_in_one_line() -> None:
    """Shorter numbers are padded behind by the width of what they lack."""
    assert aligned(["12.5", "8", "3.25"]) == ["12.5\u2007", "8\u2008\u2007\u2007", "3.25"]
