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


def test_what_is_not_certain_is_not_printed_as_certain() -> None:
    """A probability short of 1 never reads 100.0 %, nor one above 0 as 0.0 %."""
    assert [words.percent(p) for p in (1, 0.99996, 0.9994, 0.125, 0.00001, 0)] == [
        "100.0", "> 99.9", "99.9", "12.5", "< 0.1", "0.0",
    ]  # fmt: skip


def test_a_sentence_beside_its_verdict_does_not_say_it_again() -> None:
    """The verdict's word opens a sentence only where it is not what stands beside it."""
    assert words.beside_verdict("Short: the stock makes at most 5 t.") == "The stock makes at most 5 t."
    assert words.beside_verdict("Makeable, but on the edge: only A.") == "Makeable, but on the edge: only A."


@pytest.mark.parametrize(
    ("counts", "told"),
    [
        ({"makeable": 4, "edge": 1, "short": 5}, "5 of 10 orders can be made, each taken alone."),
        ({"makeable": 2}, "All 2 orders can be made, each taken alone."),
        ({"unreachable": 3}, "None of 3 orders can be made, each taken alone."),
        ({"edge": 1}, "The one order can be made."),
        ({"none": 1}, "The one order cannot be made."),
    ],
)
def test_how_many_orders_can_be_made(counts: dict[str, int], told: str) -> None:
    """Makeable and edge count as made, every other verdict does not."""
    assert words.made(counts) == told


def test_moments_are_shown_in_universal_time() -> None:
    """ISO text becomes date and minute; other text stays."""
    assert words.moment("2026-03-05T14:02:59Z") == "2026-03-05 14:02 UTC"
    assert words.moment("2026-03-05T14:02:59+02:00") == "2026-03-05 12:02 UTC"
    assert words.moment("some day") == "some day"


def test_decimal_points_stand_in_one_line() -> None:
    """Shorter numbers are padded behind by the width of what they lack."""
    assert aligned(["12.5", "8", "3.25"]) == ["12.5\u2007", "8\u2008\u2007\u2007", "3.25"]
