"""Cells to exact values."""

from __future__ import annotations

import datetime
from fractions import Fraction

import pytest

from generator.intake.cells import decide_dates, parse_date, parse_number, parse_reading, suggest_number
from generator.intake.units import conversion, split_header

F = Fraction


@pytest.mark.parametrize(
    "text, decimal, value",
    [
        ("0.1", ".", F(1, 10)),
        ("-5", ".", F(-5)),
        ("−5,5", ",", F(-11, 2)),
        (".5", ".", F(1, 2)),
        ("5.", ".", F(5)),
        ("1e5", ".", F(100000)),
        ("2,5E-3", ",", F(1, 400)),
        ("12,345,678.9", ".", F(123456789, 10)),
        ("12.345.678,9", ",", F(123456789, 10)),
        ("0.12345678901234567890123", ".", F(12345678901234567890123, 10**23)),
    ],
)
def test_numbers(text: str, decimal: str, value: F) -> None:
    """A number is exactly what was typed."""
    assert parse_number(text, decimal) == value  # type: ignore[arg-type]


@pytest.mark.parametrize(
    "text",
    [
        "",
        "nan",
        "inf",
        "-",
        "1_000",
        "١٢",
        "²",
        "0x10",
        "1,23",
        "12,34,567",
        "1 23",
        "1.2.3",
        "e5",
        "1e999999999",
        "12o",
        "1e5.5",
        "9" * 99,
    ],
)
def test_no_numbers(text: str) -> None:
    """What Python's float may take, and what no one can have meant, is no number."""
    assert parse_number(text) is None


@pytest.mark.parametrize(
    "text, kind, value",
    [
        ("<0.01", "below", F(1, 100)),
        ("< 0.01", "below", F(1, 100)),
        ("n/a", "not measured", F(0)),
        ("-", "not measured", F(0)),
        ("", "not measured", F(0)),
        ("ND", "undetected", F(0)),
        (">100", "above", F(100)),
        ("#DIV/0!", "error", F(0)),
        ("nan", "no number", F(0)),
        ("<", "no number", F(0)),
    ],
)
def test_readings(text: str, kind: str, value: F) -> None:
    """Below detection, not measured and the rest are told apart."""
    typed = parse_reading(text)
    assert (typed.kind, typed.value) == (kind, value)


def test_suggestions() -> None:
    """The remedy is the number that was most likely meant, with the file's decimal mark."""
    assert suggest_number("12,5o") == "write 12.5"
    assert suggest_number("12.5o", ",") == "write 12,5"
    assert suggest_number("-3x") == "write -3"
    assert suggest_number("3O,1") == "write 30.1"
    assert suggest_number("high") == "write a number"


@pytest.mark.parametrize(
    "text, order, date",
    [
        ("2024-02-01", None, (2024, 2, 1)),
        ("2024-2-1", None, (2024, 2, 1)),
        ("2024-02-01 10:30", None, (2024, 2, 1)),
        ("01.02.2024", "dmy", (2024, 2, 1)),
        ("01/02/2024", "mdy", (2024, 1, 2)),
        ("1.2.24", "dmy", (2024, 2, 1)),
        ("01.02.2024", None, None),
        ("2024-02-30", None, None),
        ("2024.02.01", "dmy", None),
        ("01.02.2024", "ymd", None),
        ("soon", "dmy", None),
    ],
)
def test_dates(text: str, order: str | None, date: tuple[int, int, int] | None) -> None:
    """ISO dates are exact; others need to be told their order."""
    assert parse_date(text, order) == (None if date is None else datetime.date(*date))  # type: ignore[arg-type]


@pytest.mark.parametrize(
    "texts, order",
    [
        (["15.12.2026"], "dmy"),
        (["01.02.2026"], "dmy"),  # common practice: with points the day stands first
        (["2026.02.01"], "ymd"),
        (["1/2/2026"], None),
        (["1/2/2026", "13/2/2026"], "dmy"),
        (["1/2/2026", "2/13/2026"], "mdy"),
        (["13/2/2026", "2/13/2026"], None),
        (["2026/2/13"], "ymd"),
        (["1.2.26"], None),
        (["1.2.26", "31.2.27"], None),
        (["1.2.26", "30.3.26", "n/a", "2026-03-09"], None),
        (["1/2/26", "2/13/2026"], "mdy"),
        (["1.2.26", "32.1.26", "1.2.2026"], "dmy"),
        (["2026-03-09"], None),
        ([], None),
    ],
)
def test_order_of_dates(texts: list[str], order: str | None) -> None:
    """A file's dates in figures are read in the one order in which all of them are dates."""
    assert decide_dates(texts) == order


@pytest.mark.parametrize(
    "header, name, unit",
    [
        ("K2O [%]", "K2O", "%"),
        ("K2O(PPM)", "K2O", "ppm"),
        ("K2O", "K2O", None),
        (" P  total [ g/t ] ", "P total", "g/t"),
        ("K2O ppm", "K2O", "ppm"),
        ("CV [MJ/kg]", "CV", "MJ/kg"),
        ("S (wt%)", "S", "%"),
    ],
)
def test_header_units(header: str, name: str, unit: str | None) -> None:
    """A header's unit is what stands in brackets behind it."""
    assert split_header(header) == (name, unit)


def test_conversions() -> None:
    """Mass fractions convert exactly; nothing else does."""
    assert conversion("%", "ppm") == 10000
    assert conversion("g/kg", "%") == F(1, 10)
    assert conversion("ppb", "mg/kg") == F(1, 1000)
    assert conversion("g/t", "ppm") == 1
    assert conversion("MJ/kg", "%") is None
    assert conversion("", "%") is None
