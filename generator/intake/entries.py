"""Reading the known columns of one lot or order: numbers, shares, dates and texts, with their checks."""

from __future__ import annotations

import datetime
from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from typing import Protocol

from generator.intake.cells import NOT_MEASURED, is_numeric_date, parse_date, parse_number, suggest_number
from generator.intake.faults import Faults, fold
from generator.intake.records import Number
from generator.intake.settings import Options
from generator.intake.sheets import Cell
from generator.intake.units import conversion


class Cells(Protocol):
    """What has cells by column."""

    def get(self, name: str, suffix: str = "") -> tuple[Cell, ...]:
        """The cells of a column that are not blank, of every row."""
        ...


def value_of(
    cell: Cell,
    faults: Faults,
    *,
    least: int | None = None,
    above: int | None = None,
    most: int | None = None,
    below: int | None = None,
    unit: str | None = None,
) -> Number | None:
    """The number of a cell within bounds (``least``, ``most`` inclusive), in ``unit`` where that is given.

    None, and a problem, where it is none.
    """
    text = cell.text.removesuffix("%").rstrip() if unit == "%" else cell.text
    value = parse_number(text, cell.decimal)
    if value is None:
        faults.drops(cell.place, "is not a number", suggest_number(cell.text, cell.decimal), found=cell.text)
        return None
    factor = _factor(cell, unit, faults)
    if factor is None:
        return None
    value = value if factor == 1 else value * factor
    limits = {"at least": least, "above": above, "at most": most, "below": below}
    wanted = " and ".join(f"{word} {bound}" for word, bound in limits.items() if bound is not None)
    if (
        (least is not None and value < least)
        or (above is not None and value <= above)
        or (most is not None and value > most)
        or (below is not None and value >= below)
    ):
        faults.drops(cell.place, "is out of range", f"write a number {wanted}", found=cell.text)
        return None
    return Number(value, cell.text, cell.place)


def _factor(cell: Cell, unit: str | None, faults: Faults) -> Fraction | None:
    """The factor into ``unit``; a money unit is also met by its currency alone."""
    if unit is None or not cell.unit:
        return Fraction(1)
    typed = _spelled_out(cell.unit)
    if fold(typed) == fold(_spelled_out(unit).partition("/")[0]):
        return Fraction(1)
    factor = conversion(typed, _spelled_out(unit))
    if factor is None:
        faults.stops_once(
            cell.place,
            f"is in {cell.unit}, and {unit} is wanted",
            f"write the values in {unit}, or change quantity_unit or currency in campaign.toml",
            found=cell.unit,
        )
    return factor


def _spelled_out(unit: str) -> str:
    """The unit with a currency's sign as its code."""
    for sign, code in (("€", "EUR"), ("$", "USD"), ("£", "GBP")):
        unit = unit.replace(sign, code)
    return unit


def values_of(
    cells: Iterable[Cell],
    faults: Faults,
    *,
    least: int | None = None,
    above: int | None = None,
    below: int | None = None,
    unit: str | None = None,
) -> tuple[Number, ...]:
    """The numbers of cells, those left out that say "not measured"."""
    measured = [cell for cell in cells if cell.text.casefold() not in NOT_MEASURED]
    numbers = (value_of(cell, faults, least=least, above=above, below=below, unit=unit) for cell in measured)
    return tuple(number for number in numbers if number is not None)


@dataclass(frozen=True, slots=True)
class Reader:
    """Reads the known columns of one entry."""

    entry: Cells
    options: Options
    faults: Faults

    def single(self, name: str) -> Cell | None:
        """The one cell of a column; a problem where rows or files disagree."""
        cells = self.entry.get(name)
        if not cells:
            return None
        first = cells[0]
        for cell in cells[1:]:
            if not agree(first, cell):
                differs(first, cell, self.faults)
                return None
        return first

    def text(self, name: str) -> str:
        """The text of a column; "" where it is blank."""
        cell = self.single(name)
        return cell.text if cell is not None else ""

    def number(
        self,
        name: str,
        *,
        least: int | None = None,
        above: int | None = None,
        most: int | None = None,
        unit: str | None = None,
    ) -> Number | None:
        """The number of a column; None where it is blank or a problem."""
        cell = self.single(name)
        return value_of(cell, self.faults, least=least, above=above, most=most, unit=unit) if cell is not None else None

    def share(self, name: str) -> Number | None:
        """A share typed in percent, as a fraction of 1."""
        number = self.number(name, least=0, most=100, unit="%")
        return Number(number.value / 100, number.text, number.place) if number is not None else None

    def date(self, name: str) -> datetime.date | None:
        """The date of a column; None where it is blank or a problem."""
        cell = self.single(name)
        if cell is None:
            return None
        date = parse_date(cell.text, cell.dates)
        if date is None:
            if cell.dates is None and is_numeric_date(cell.text):
                remedy = 'write it as 2024-12-31, or set [csv] dates = "DMY" (or "MDY", "YMD") in campaign.toml'
                self.faults.drops(cell.place, "could be day or month first", remedy, found=cell.text)
            else:
                self.faults.drops(
                    cell.place, "is not a date", "write it as year-month-day: 2024-12-31", found=cell.text
                )
        return date

    def word(self, name: str, choices: tuple[str, ...], otherwise: str) -> str:
        """One of a few words, case ignored; ``otherwise`` where it is blank or a problem."""
        cell = self.single(name)
        if cell is None:
            return otherwise
        if fold(cell.text) in choices:
            return fold(cell.text)
        self.faults.drops(cell.place, "is not known", f"write {' or '.join(choices)}", found=cell.text)
        return otherwise


def differs(first: Cell, second: Cell, faults: Faults) -> None:
    """Tell that a second cell for one thing differs from the first."""
    where = f"{first.place.file}, row {first.place.row}"
    faults.drops(second.place, f'differs from "{first.text}" in {where}', "write the same in both", found=second.text)


def agree(first: Cell, second: Cell) -> bool:
    """Whether two cells say the same: as texts, case ignored, or as numbers."""
    if fold(first.text) == fold(second.text):
        return True
    values = parse_number(first.text, first.decimal), parse_number(second.text, second.decimal)
    return None not in values and values[0] == values[1]
