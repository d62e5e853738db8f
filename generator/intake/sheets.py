"""A file becomes a sheet: columns that are understood over rows that are entries, with one decimal mark."""

from __future__ import annotations

import functools
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction

from generator.intake.cells import DateOrder, Decimal, decide_dates, decide_decimal, parse_number, weigh_marks
from generator.intake.columns import DATE_COLUMNS, TEXT_COLUMNS, Column, Kind, interpret, read_columns
from generator.intake.faults import Faults, fold
from generator.intake.records import Place
from generator.intake.settings import Options
from generator.intake.tables import DELIMITERS, Row, Table, is_totals_word, read_table
from generator.intake.units import is_unit, unit_of_cell

#: Beyond as many rows without a name no sums are tried: they are a mistake of another kind.
MOST_TOTALS = 20


@dataclass(frozen=True, slots=True)
class Cell:
    """One cell that is not blank: its text, where it stands, and how its file writes numbers and dates."""

    text: str
    place: Place
    decimal: Decimal
    unit: str | None = None
    dates: DateOrder | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Sheet:
    """A table that is understood.  ``broken`` names the entries of which a row had to be left out."""

    file: str
    header_row: int
    key: int
    columns: tuple[Column, ...]
    rows: tuple[Row, ...]
    decimal: Decimal
    dates: DateOrder | None = None
    broken: frozenset[str] = frozenset()
    by_key: Mapping[tuple[str, str], Column]

    def name(self, row: Row) -> str:
        """The entry's name: its lot or order."""
        return row.cell(self.key)

    def find(self, name: str, suffix: str = "") -> Column | None:
        """The column of that name, or None."""
        return self.by_key.get((fold(name), suffix))

    def place(self, row: Row, column: Column | None = None) -> Place:
        """Where a row, or its cell in a column, stands."""
        return Place(self.file, row.number, column.header if column is not None else None)

    def cell(self, row: Row, column: Column | None) -> Cell | None:
        """The cell, or None where it is blank or there is no such column."""
        if column is None or not row.cell(column.index):
            return None
        return Cell(row.cell(column.index), self.place(row, column), self.decimal, column.unit, self.dates)

    def cells(self, column: Column) -> Iterator[Cell]:
        """The column's cells that are not blank."""
        for row in self.rows:
            cell = self.cell(row, column)
            if cell is not None:
                yield cell


def read_sheet(file: str, data: bytes, kind: Kind, options: Options, faults: Faults) -> Sheet | None:
    """The sheet that a file holds, or None where a problem says why not."""

    @functools.cache
    def meaning(cell: str) -> Column | None:
        return interpret(cell, 0, kind, options) if cell.strip() else None

    def is_key(cell: str) -> bool:
        column = meaning(cell)
        return column is not None and column.is_known and column.name == kind.key

    def is_known(cell: str) -> bool:
        column = meaning(cell)
        return column is not None and column.is_known

    table = read_table(file, data, kind.key, is_key, is_known, options.dialect, faults)
    if table is None:
        return None
    columns = read_columns(file, table.header, kind, options, faults)
    columns, rows = _take_units_row(table, columns, faults)
    _tell_headless(table, rows, faults)
    decimal = options.decimal or _decide(table, columns, rows, faults)
    if decimal is None:
        return None
    if decimal != ".":
        faults.tell(file, None, "numbers are read with a decimal comma")
    dates = options.dates or _date_order(file, columns, rows, faults)
    kept, broken = _entries(table, columns, rows, decimal, kind, faults)
    return Sheet(
        file=file,
        header_row=table.header.number,
        key=table.key,
        columns=columns,
        rows=kept,
        decimal=decimal,
        dates=dates,
        broken=broken,
        by_key={column.key: column for column in columns},
    )


def _take_units_row(
    table: Table, columns: tuple[Column, ...], faults: Faults
) -> tuple[tuple[Column, ...], tuple[Row, ...]]:
    """The columns with the units of a row of units right under the header, and the rows without it."""
    if not table.rows:
        return columns, table.rows
    row, key = table.rows[0], table.rows[0].cell(table.key)
    others = [cell for index, cell in enumerate(row.cells) if cell and index != table.key]
    is_said = fold(key) in {"unit", "units", "[unit]", "[units]", "(unit)", "(units)"}
    is_plain = not key and any(is_unit(cell) for cell in others) and not any(char.isdigit() for char in "".join(others))
    if not (others and (is_said or is_plain)):
        return columns, table.rows
    faults.tell(table.file, row.number, "a row of units")
    united = []
    for column in columns:
        cell = row.cell(column.index)
        unit = unit_of_cell(cell) if cell and column.index != table.key else None
        if unit is not None and column.unit is not None and unit != column.unit:
            faults.stops(
                Place(table.file, row.number, column.header),
                f"differs from the unit {column.unit} in the header",
                f"write {column.unit}, or leave one of them out",
                found=cell,
            )
        united.append(replace(column, unit=column.unit if column.unit is not None else unit))
    return tuple(united), table.rows[1:]


def _tell_headless(table: Table, rows: tuple[Row, ...], faults: Faults) -> None:
    """A note for every column that holds values under a blank header."""
    for index, cell in enumerate(table.header.cells):
        if not cell and any(row.cell(index) for row in rows):
            faults.notes(
                Place(table.file, table.header.number, None),
                f"column {index + 1} has values and no header: left out",
                "write its name in the header row",
            )


def _decide(table: Table, columns: tuple[Column, ...], rows: tuple[Row, ...], faults: Faults) -> Decimal | None:
    """The file's decimal mark; None, and a problem, where its cells can't tell."""
    numeric = [column.index for column in columns if column.name not in TEXT_COLUMNS]
    evidence = weigh_marks(row.cell(index) for row in rows for index in numeric if row.cell(index))
    decimal = decide_decimal(evidence, table.delimiter)
    if decimal is None:
        if evidence.unclear is not None and not (evidence.point or evidence.comma):
            message, found = "could be a decimal mark or one that groups thousands", evidence.unclear
        else:
            message = f"numbers are written with a decimal point and with a decimal comma ({evidence.example_comma})"
            found = evidence.example_point or ""
        faults.stops(
            _where(table, columns, rows, found),
            message,
            'write decimal = "." or decimal = "," under [csv] in campaign.toml ([csv] decimal)',
            found=found,
        )
    return decimal


def _date_order(file: str, columns: tuple[Column, ...], rows: tuple[Row, ...], faults: Faults) -> DateOrder | None:
    """The order of day, month and year that the file's dates agree on; None where they leave it open."""
    dated = [column.index for column in columns if column.is_known and column.name in DATE_COLUMNS]
    order = decide_dates(row.cell(index) for row in rows for index in dated)
    if order is not None:
        parts = {"d": "day", "m": "month", "y": "year"}
        faults.tell(file, None, f"dates in figures are read as {', '.join(parts[part] for part in order)}")
    return order


def _where(table: Table, columns: tuple[Column, ...], rows: tuple[Row, ...], text: str) -> Place:
    for row in rows:
        for column in columns:
            if row.cell(column.index) == text:
                return Place(table.file, row.number, column.header)
    return Place(table.file, None, None)


def _entries(
    table: Table, columns: tuple[Column, ...], rows: tuple[Row, ...], decimal: Decimal, kind: Kind, faults: Faults
) -> tuple[tuple[Row, ...], frozenset[str]]:
    """The rows that are entries: without totals, rows without a name, rows wider than the header."""
    kept: list[Row] = []
    broken: set[str] = set()
    nameless = 0
    width = len(table.header.cells)
    for row in rows:
        name = row.cell(table.key)
        nameless += not name
        if is_totals_word(name) or (not name and any(is_totals_word(cell) for cell in row.cells)):
            faults.tell(table.file, row.number, f"totals or means ({name or 'no name'}): left out")
        elif not name and nameless <= MOST_TOTALS and _is_total_of(row, kept, columns, decimal):
            faults.tell(table.file, row.number, f"no {kind.key}, and the sum or mean of the rows above: left out")
        elif not name:
            faults.drops(
                Place(table.file, row.number, table.header.cell(table.key)),
                f"the row names no {kind.key}",
                f"write the {kind.key}'s name, or delete the row",
                found=", ".join(cell for cell in row.cells if cell),
            )
        elif any(row.cells[width:]):
            broken.add(name)
            mark = DELIMITERS[table.delimiter]
            faults.drops(
                Place(table.file, row.number, None),
                f"the row has {len(row.cells)} cells, the header {width}",
                f"put quotation marks around a cell that holds a {mark}, or delete what is too much",
                found=", ".join(row.cells[width:]),
            )
        else:
            kept.append(row)
    return tuple(kept), frozenset(broken)


def _is_total_of(row: Row, above: list[Row], columns: tuple[Column, ...], decimal: Decimal) -> bool:
    """Whether a row's numbers include the sum or mean, to the digits typed, of two or more numbers above."""
    for column in columns:
        text = row.cell(column.index)
        total = parse_number(text, decimal) if text else None
        if total is None:
            continue
        values = [value for r in above if (value := parse_number(r.cell(column.index), decimal)) is not None]
        if len(values) < 2:
            continue
        digits = len(text.partition(decimal)[2])
        slack = Fraction(1, 2 * 10**digits)
        added = sum(values, Fraction(0))
        if abs(total - added) <= slack or abs(total - added / len(values)) <= slack:
            return True
    return False
