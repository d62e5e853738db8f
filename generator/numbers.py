"""The house style of numbers: how an exact value becomes text on a page or in a sentence.

Ground floor: imports nothing of the project.  Rounding is half to even on the exact value, the minus
is U+2212, digits are grouped by a narrow no-break space from 10,000 on, and nothing is ever "−0".
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from fractions import Fraction

MINUS = "−"
GROUP_SPACE = "\N{NARROW NO-BREAK SPACE}"
UNKNOWN = "–"

#: More decimals than this are noise of a conversion, not precision of a laboratory.
MOST_PLACES = 6
#: Four digits read well without grouping, and years and lot numbers look like themselves.
LEAST_GROUPED = 10_000

_NUMERAL = re.compile(r"\d+(?:[.,]\d+)*")


def decimals(texts: Iterable[str]) -> int:
    """Count the most decimals typed in ``texts``, at most ``MOST_PLACES``.

    Decimal point and decimal comma both count; a text with one separator repeated (``1,234,567``) has
    none.  Where the value is known beside the text, :func:`typed_decimals` decides better.
    """
    return max((_decimals_of(text) for text in texts), default=0)


def _decimals_of(text: str) -> int:
    return max((_decimals_of_numeral(numeral) for numeral in _NUMERAL.findall(text)), default=0)


def _decimals_of_numeral(numeral: str) -> int:
    separators = re.findall("[.,]", numeral)
    if not separators or (len(separators) > 1 and len(set(separators)) == 1):
        return 0
    return min(len(re.split("[.,]", numeral)[-1]), MOST_PLACES)


def typed_decimals(value: Fraction, text: str) -> int:
    """How many decimals ``text`` shows, given the ``value`` that it was read as.

    Tells ``1,234`` read as 1234 (none) from ``1,234`` read as 1.234 (three).
    """
    digits = re.sub(r"\D", "", text)
    if digits and value:
        above, below = abs(value.numerator), value.denominator
        wanted = int(digits) * below
        for places in range(MOST_PLACES + 1):
            if above * 10**places == wanted:
                return places
    return _decimals_of(text)


def as_typed(value: Fraction, typed: str) -> str:
    """Write ``value`` with the decimals of the text that it was read from: "58,40" is "58.40".

    Where that text shows no decimals of the value ("1e-3", "1/8") it stands exactly.
    """
    places = typed_decimals(value, typed)
    return text(value, places) if (value * 10**places).denominator == 1 else exact(value)


def text(value: Fraction | float | int, places: int) -> str:
    """``value`` with ``places`` decimals (0 or more); ValueError for what is no finite number."""
    return _digits(_scaled(value, places), places)


def signed(value: Fraction | float | int, places: int) -> str:
    """As :func:`text`, with a plus sign before what is greater than 0 as printed."""
    scaled = _scaled(value, places)
    return ("+" if scaled > 0 else "") + _digits(scaled, places)


def money(value: Fraction | float | int, places: int = 2) -> str:
    """Write an amount of money, without its currency."""
    return text(value, places)


def significant(value: Fraction | float | int, digits: int) -> str:
    """``value`` rounded to ``digits`` significant digits, without trailing zeros behind the point.

    Digits before the point are all kept: 123,456 to three digits is "123 456".
    """
    above, below = _ratio(value)
    if above == 0:
        return "0"
    places = max(0, digits - 1 - _magnitude(abs(above), below))
    scaled = _rounded(above * 10**places, below)
    while places > 0 and scaled % 10 == 0:
        scaled //= 10
        places -= 1
    return _digits(scaled, places)


def amount_places(total: Fraction | float) -> int:
    """Decimals of an amount such that its last place is at most a thousandth of ``total``."""
    size, places = abs(Fraction(total)), 0
    while 0 < size * 10**places < 1000 and places < MOST_PLACES:
        places += 1
    return places


def exact(value: Fraction) -> str:
    """``value`` without any rounding: a decimal where it ends within ``MOST_PLACES``, else p/q."""
    places = exact_places(value)
    return weight(value) if places is None else text(value, places)


def weight(value: Fraction) -> str:
    """``value`` as a fraction in lowest terms: "3", "3/4", "−5/7"."""
    sign = MINUS if value < 0 else ""
    whole = str(abs(value.numerator))
    return sign + (whole if value.denominator == 1 else f"{whole}/{value.denominator}")


def exact_places(value: Fraction) -> int | None:
    """Count the decimals that write ``value`` exactly; None if more than ``MOST_PLACES`` are needed."""
    below = value.denominator
    for places in range(MOST_PLACES + 1):
        if 10**places % below == 0:
            return places
    return None


def percent_shares(shares: Mapping[str, Fraction], places: int) -> dict[str, Fraction]:
    """Percent values of ``shares``, rounded to ``places`` decimals so that they sum to exactly 100.

    Shares that don't sum to 1 exactly (floats once) are taken in proportion; see :func:`apportioned`.
    """
    return apportioned(shares, Fraction(100), places)


def apportioned(shares: Mapping[str, Fraction], total: Fraction, places: int) -> dict[str, Fraction]:
    """``total`` divided in proportion to ``shares``, each part rounded, their sum exact.

    Largest remainder (Hamilton's method); of equal remainders the earlier share is raised.  No part
    is further than one unit of its last place from the exact one.  All zero stays all zero.  ``total``
    must itself have no more than ``places`` decimals, and no share be negative: else ValueError.
    """
    if any(share < 0 for share in shares.values()):
        raise ValueError("a share is negative")
    if (total * 10**places).denominator != 1:
        raise ValueError(f"the total {total} has more than {places} decimals")
    whole = sum(shares.values(), Fraction(0))
    if whole == 0:
        return dict.fromkeys(shares, Fraction(0))
    units = int(total * 10**places)
    wanted = {name: share * units / whole for name, share in shares.items()}
    printed = {name: int(amount) for name, amount in wanted.items()}
    by_remainder = sorted(wanted, key=lambda name: printed[name] - wanted[name])
    for name in by_remainder[: units - sum(printed.values())]:
        printed[name] += 1
    return {name: Fraction(count, 10**places) for name, count in printed.items()}


def share_places(shares: Iterable[Fraction], least: int = 1) -> int:
    """Decimals of percent such that no share above 0 prints as 0 (at most ``MOST_PLACES``)."""
    smallest = min((share for share in shares if share > 0), default=Fraction(1))
    places = least
    while places < MOST_PLACES and smallest * 100 * 10**places < 1:
        places += 1
    return places


def _ratio(value: Fraction | float | int) -> tuple[int, int]:
    """A number as two integers, exactly: pages print tens of thousands, and fractions take their time."""
    if isinstance(value, float) and value - value != 0:
        raise ValueError(f"not a finite number: {value}")
    return value.as_integer_ratio()


def _scaled(value: Fraction | float | int, places: int) -> int:
    above, below = _ratio(value)
    return _rounded(above * 10**places, below)


def _rounded(above: int, below: int) -> int:
    """The integer nearest to above / below (which is greater than 0), half to even."""
    whole, rest = divmod(above, below)
    return whole + (2 * rest > below or (2 * rest == below and whole % 2 == 1))


def _magnitude(above: int, below: int) -> int:
    """Find the power of ten of the first digit of above / below, both greater than 0."""
    guess = len(str(above)) - len(str(below))
    is_reached = above >= 10**guess * below if guess >= 0 else above * 10**-guess >= below
    return guess if is_reached else guess - 1


def _digits(scaled: int, places: int) -> str:
    whole, rest = divmod(abs(scaled), 10**places)
    grouped = f"{whole:,}".replace(",", GROUP_SPACE) if whole >= LEAST_GROUPED else str(whole)
    behind = f".{rest:0{places}d}" if places else ""
    return (MINUS if scaled < 0 else "") + grouped + behind
