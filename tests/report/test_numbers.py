"""Laws and cases of the house style of numbers."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from generator import numbers

SHARES = st.lists(st.integers(0, 40), min_size=1, max_size=9).filter(any)


def test_text_rounds_half_to_even_on_the_exact_value() -> None:
    """Halves go to the even digit, and a float is taken as the exact value that it is."""
    assert [numbers.text(Fraction(n, 2), 0) for n in (1, 3, 5)] == ["0", "2", "2"]
    assert numbers.text(Fraction("2.675"), 2) == "2.68"
    assert numbers.text(2.675, 2) == "2.67"


def test_text_has_a_true_minus_and_never_minus_zero() -> None:
    """Negative numbers carry U+2212, unless they print as zero."""
    assert numbers.text(Fraction(-5, 2), 1) == "−2.5"
    assert numbers.text(-0.04, 1) == "0.0"
    assert numbers.text(-0.0, 0) == "0"


def test_text_groups_only_from_ten_thousand() -> None:
    """9999 stays as it is; larger numbers get narrow no-break spaces."""
    assert numbers.text(9999, 1) == "9999.0"
    assert numbers.text(-1234567, 0) == "−1\u202f234\u202f567"


@pytest.mark.parametrize("value", [float("nan"), float("inf"), float("-inf")])
def test_text_refuses_what_is_no_number(value: float) -> None:
    """NaN and infinities never reach a page."""
    with pytest.raises(ValueError, match="not a finite number"):
        numbers.text(value, 1)


@given(st.fractions(max_denominator=10**6), st.integers(0, 6))
def test_text_reads_back_within_half_a_unit(value: Fraction, places: int) -> None:
    """What is printed is at most half a unit of its last place from the value."""
    printed = numbers.text(value, places).replace("−", "-").replace("\u202f", "")
    assert abs(Fraction(printed) - value) <= Fraction(1, 2 * 10**places)


@pytest.mark.parametrize(
    ("texts", "places"),
    [
        ([], 0),
        (["12", "8"], 0),
        (["12.5", "8.25", "3"], 2),
        (["12,5"], 1),
        (["<0.01"], 2),
        (["1,234,567"], 0),
        (["1.234,50"], 2),
        (["12.5 - 13"], 1),
        (["12.5..13.75"], 2),
        (["12.5 - 13.5"], 1),
        (["0.123456789"], numbers.MOST_PLACES),
        (["n/a"], 0),
    ],
)
def test_decimals_counts_what_was_typed(texts: list[str], places: int) -> None:
    """Point and comma count alike, repeated separators are thousands, noise is capped."""
    assert numbers.decimals(texts) == places


def test_typed_decimals_tells_a_thousand_from_a_decimal() -> None:
    """The value that was read decides what the comma meant."""
    assert numbers.typed_decimals(Fraction(1234), "1,234") == 0
    assert numbers.typed_decimals(Fraction("1.234"), "1,234") == 3
    assert numbers.typed_decimals(Fraction("12.5"), "12.50") == 2


@pytest.mark.parametrize(
    ("value", "typed", "expected"),
    [
        ("58.4", "58,40", "58.40"),
        ("24000", "24.000", "24\u202f000"),
        ("0", "0.00", "0.00"),
        ("-3.5", "-3,5", "\u22123.5"),
        ("0.001", "1e-3", "0.001"),
        ("1/3", "1/3", "1/3"),
        ("0.075", "750", "0.0750"),
    ],
)
def test_as_typed_keeps_the_decimals_and_not_the_separators(value: str, typed: str, expected: str) -> None:
    """A stock typed as 24.000 and read as twenty-four thousand never stands on a page as 24.000."""
    assert numbers.as_typed(Fraction(value), typed) == expected


@given(SHARES, st.integers(0, 4))
def test_percent_shares_sum_to_a_hundred_and_stay_close(parts: list[int], places: int) -> None:
    """Printed shares sum to exactly 100, each within one unit of its last place."""
    shares = {str(i): Fraction(part, sum(parts)) for i, part in enumerate(parts)}
    printed = numbers.percent_shares(shares, places)
    assert sum(printed.values()) == 100
    for name, share in shares.items():
        assert abs(printed[name] - 100 * share) < Fraction(1, 10**places)
        assert printed[name] >= 0
        assert (printed[name] * 10**places).denominator == 1


def test_percent_shares_of_three_thirds() -> None:
    """Of equal remainders the first is raised."""
    third = Fraction(1, 3)
    printed = numbers.percent_shares({"a": third, "b": third, "c": third}, 1)
    assert list(printed.values()) == [Fraction("33.4"), Fraction("33.3"), Fraction("33.3")]


def test_percent_shares_refuses_a_negative_share() -> None:
    """Shares are never negative; a defect elsewhere is not printed as if it were one."""
    with pytest.raises(ValueError, match="negative"):
        numbers.percent_shares({"a": Fraction(-1), "b": Fraction(2)}, 1)
    assert numbers.percent_shares({"a": Fraction(0)}, 1) == {"a": 0}


def test_share_places_keep_a_used_lot_visible() -> None:
    """A share of 0.004 % gets enough decimals not to print as 0."""
    assert numbers.share_places([Fraction(1, 2), Fraction(1, 2)]) == 1
    assert numbers.share_places([Fraction(4, 10**5), Fraction(1, 2)]) == 3


@pytest.mark.parametrize(
    ("value", "digits", "expected"),
    [
        (Fraction(0), 3, "0"),
        (Fraction(1, 3), 3, "0.333"),
        (Fraction(1, 2), 3, "0.5"),
        (Fraction(-999, 1000), 2, "−1"),
        (123456, 3, "123\u202f456"),
        (0.00012345, 2, "0.00012"),
        (12.345, 3, "12.3"),
    ],
)
def test_significant_keeps_the_digits_that_tell(value: Fraction | float, digits: int, expected: str) -> None:
    """Significant digits, no exponent, no trailing zeros."""
    assert numbers.significant(value, digits) == expected


def test_exact_writes_decimals_where_they_end_and_fractions_elsewhere() -> None:
    """Nothing is rounded: 3/4 is 0.75, 1/3 stays a fraction; a weight is always a fraction."""
    assert numbers.exact(Fraction(3, 4)) == "0.75"
    assert numbers.exact(Fraction(-1, 3)) == "−1/3"
    assert numbers.weight(Fraction(3, 4)) == "3/4"
    assert numbers.weight(Fraction(14)) == "14"


def test_signed_marks_what_is_above_zero() -> None:
    """A plus stands before positive numbers only."""
    assert [numbers.signed(n, 0) for n in (2, 0, -2)] == ["+2", "0", "−2"]
