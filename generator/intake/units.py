"""Units: the mass fractions that convert exactly into each other, and how a header names its unit."""

from __future__ import annotations

import functools
import re
from fractions import Fraction

from generator.intake.faults import fold, tidy

#: How many percent one of the unit is.
_PERCENT = {
    "%": Fraction(1),
    "g/kg": Fraction(1, 10),
    "kg/t": Fraction(1, 10),
    "ppm": Fraction(1, 10**4),
    "g/t": Fraction(1, 10**4),
    "mg/kg": Fraction(1, 10**4),
    "ppb": Fraction(1, 10**7),
}
_ALIASES = {"percent": "%", "pct": "%", "wt%": "%", "wt.%": "%", "wt %": "%", "wt-%": "%", "% w/w": "%", "mass %": "%"}

#: Longer headers and cells carry no unit; guards the time that patterns take.
_LONGEST = 200

_BRACKETED = re.compile(r"(?P<name>.*?)\s*(?:\[(?P<square>[^\[\]]*)\]|\((?P<round>[^()]*)\))\s*")
_BARE = re.compile(r"(?P<name>.*\S)\s+(?P<unit>%|ppm|ppb|g/t|g/kg|mg/kg|kg/t)", re.IGNORECASE)
_IN_CELL = re.compile(r"(?P<rest>.*?[0-9.,)a-z])\s*(?P<unit>%|ppm|ppb|g/t|g/kg|mg/kg|kg/t)", re.IGNORECASE)


def canonical_unit(text: str) -> str:
    """The unit in its usual spelling: case and space ignored for mass fractions, others as typed."""
    folded = fold(text)
    if folded in _ALIASES:
        return _ALIASES[folded]
    return folded if folded in _PERCENT else tidy(text)


def is_fraction_unit(unit: str) -> bool:
    """Whether the unit is a mass fraction."""
    return unit in _PERCENT


def conversion(source: str, target: str) -> Fraction | None:
    """The factor from a value in ``source`` to one in ``target``; None where they are not of one kind."""
    if source == target or fold(source) == fold(target):
        return Fraction(1)
    if source in _PERCENT and target in _PERCENT:
        return _PERCENT[source] / _PERCENT[target]
    return None


def split_header(header: str) -> tuple[str, str | None]:
    """A header's name and the unit in ``[ ]`` or ``( )`` behind it (or a bare ``%``, ``ppm``…), if any."""
    header = tidy(header)
    if len(header) > _LONGEST:
        return header, None
    match = _BRACKETED.fullmatch(header)
    if match is not None and match["name"]:
        unit = match["square"] if match["square"] is not None else match["round"]
        return match["name"], canonical_unit(unit)
    match = _BARE.fullmatch(header)
    return (match["name"], canonical_unit(match["unit"])) if match is not None else (header, None)


@functools.lru_cache(maxsize=1 << 14)
def split_cell(text: str) -> tuple[str, str | None]:
    """A cell's text and the mass fraction unit typed behind the number, if any."""
    match = _IN_CELL.fullmatch(text.strip()) if len(text) <= _LONGEST else None
    return (match["rest"], canonical_unit(match["unit"])) if match is not None else (text.strip(), None)


#: Units that stand in a row of units beside mass fractions.
_OTHER_UNITS = frozenset(
    fold(unit)
    for line in (
        "t kg g lb oz l m3 m³ kt st mm µm °C K °F mm²/s mm2/s cSt kPa bar Pa psi",
        "kg/m3 kg/m³ g/cm3 g/cm³ t/m3 t/m³ kg/l g/ml g/mol kg/kmol kg/mol MJ/kg kJ/kg kcal/kg",
        "EUR USD GBP CHF EUR/t USD/t GBP/t CHF/t EUR/kg USD/kg €/t $/t £/t €/kg $/kg",
    )
    for unit in line.split()
)


def is_unit(text: str) -> bool:
    """Whether a cell can be the unit of its column: a known unit, or anything in brackets."""
    text = tidy(text)
    if len(text) > 2 and (text[0], text[-1]) in {("[", "]"), ("(", ")")}:
        return True
    return canonical_unit(text) in _PERCENT or fold(text) in _OTHER_UNITS


def unit_of_cell(text: str) -> str:
    """The unit that a cell of a units row names, without its brackets."""
    text = tidy(text)
    if len(text) > 2 and (text[0], text[-1]) in {("[", "]"), ("(", ")")}:
        text = text[1:-1]
    return canonical_unit(text)
