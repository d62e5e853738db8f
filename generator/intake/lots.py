"""Rows of assays.csv and stock.csv become lots."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from fractions import Fraction

from generator.intake.columns import CARRIERS
from generator.intake.entries import Reader, agree, differs, values_of
from generator.intake.faults import Faults, did_you_mean, fold
from generator.intake.measured import read_assay
from generator.intake.records import Component, Lot, Measured, Number, Place, Reading
from generator.intake.settings import Options
from generator.intake.sheets import Cell, Sheet
from generator.intake.tables import Row

NO_WORDS = frozenset({"no", "n", "false"})
YES_WORDS = frozenset({"yes", "y", "true"})


@dataclass(frozen=True, slots=True)
class Entry:
    """One lot's cells that are not blank, of every row in both files, by column."""

    name: str
    place: Place
    cells: Mapping[tuple[str, str], tuple[Cell, ...]]
    is_held: bool = False
    is_faulty: bool = False

    def get(self, name: str, suffix: str = "") -> tuple[Cell, ...]:
        """The cells of a column."""
        return self.cells.get((fold(name), suffix), ())


@dataclass(slots=True)
class _Gathering:
    """An entry while its rows are gathered."""

    place: Place
    cells: dict[tuple[str, str], list[Cell]] = field(default_factory=dict)
    rows: int = 0
    is_held: bool = False
    is_faulty: bool = False

    def add(self, sheet: Sheet, row: Row) -> None:
        for column in sheet.columns:
            cell = sheet.cell(row, column)
            if cell is not None:
                self.cells.setdefault(column.key, []).append(cell)

    def join(self, sheet: Sheet, row: Row, faults: Faults) -> None:
        """Add a row of stock.csv; where a cell stands already it must say the same."""
        for column in sheet.columns:
            cell = sheet.cell(row, column)
            if cell is None or column.index == sheet.key:
                continue
            there = self.cells.get(column.key, [])
            if not there:
                self.cells[column.key] = [cell]
            elif not any(agree(old, cell) for old in there):
                differs(there[0], cell, faults)


@dataclass(frozen=True, slots=True)
class Lots:
    """The lots of a campaign, and all that were named, those left out too."""

    kept: tuple[Lot, ...]
    seen: tuple[Lot, ...]


def read_lots(
    assays: Sheet, stock: Sheet | None, components: tuple[Component, ...], options: Options, faults: Faults
) -> Lots:
    """The lots in the order of assays.csv.  A lot with a problem, and one on hold, is seen but not kept."""
    broken = assays.broken | (stock.broken if stock is not None else frozenset())
    kept, seen = [], []
    for entry in _gather(assays, stock, faults):
        before = faults.count
        lot = _lot(entry, assays, stock, components, options, faults)
        seen.append(lot)
        if faults.count == before and not (entry.is_held or entry.is_faulty) and entry.name not in broken:
            kept.append(lot)
    return Lots(tuple(kept), tuple(seen))


def _gather(assays: Sheet, stock: Sheet | None, faults: Faults) -> Iterator[Entry]:
    gathered: dict[str, _Gathering] = {}
    for row in assays.rows:
        name = assays.name(row)
        entry = gathered.setdefault(name, _Gathering(assays.place(row)))
        before = faults.count
        if not _is_used(assays, row, faults):
            entry.is_held = entry.is_held or entry.rows == 0
            continue
        if len([cell for cell in row.cells if cell]) < 2 and len(assays.columns) > 1:
            faults.drops(
                assays.place(row),
                "the row holds nothing but a name",
                "fill in its cells, or delete the row",
                found=name,
            )
        entry.is_held = False
        entry.rows += 1
        entry.add(assays, row)
        entry.is_faulty = entry.is_faulty or faults.count > before
    if stock is not None:
        _join(gathered, stock, faults)
    for name, entry in gathered.items():
        if entry.rows > 1:
            faults.tell(entry.place.file, entry.place.row, f"lot {name}: {entry.rows} rows, values averaged")
        cells = {key: tuple(found) for key, found in entry.cells.items()}
        yield Entry(name, entry.place, cells, entry.is_held, entry.is_faulty)


def _join(gathered: dict[str, _Gathering], stock: Sheet, faults: Faults) -> None:
    """Add the rows of stock.csv to the lots of the same name."""
    names = tuple(gathered)
    joined: set[str] = set()
    for row in stock.rows:
        name = stock.name(row)
        before = faults.count
        is_used = _is_used(stock, row, faults)
        if name not in gathered:
            if is_used:
                remedy = did_you_mean(name, (n for n in names if n != name), "add its row to assays.csv")
                faults.notes(stock.place(row), "has no row in assays.csv: left out", remedy, found=name)
            continue
        joined.add(name)
        if is_used:
            gathered[name].join(stock, row, faults)
        else:
            gathered[name].is_held = True
        gathered[name].is_faulty = gathered[name].is_faulty or faults.count > before
    if stock.find("stock") is not None:
        # There, a lot without a row has a blank stock, which is told as such.
        return
    for name, entry in gathered.items():
        if name not in joined and not entry.is_held:
            remedy = did_you_mean(name, (stock.name(row) for row in stock.rows), "add its row")
            place = Place(stock.file, None, stock.columns[0].header)
            faults.notes(place, "has no row in stock.csv", remedy, found=name)


def _is_used(sheet: Sheet, row: Row, faults: Faults) -> bool:
    """Whether the row is to be read: its ``use`` is not "no"."""
    cell = sheet.cell(row, sheet.find("use"))
    if cell is None or fold(cell.text) in YES_WORDS:
        return True
    if fold(cell.text) in NO_WORDS:
        faults.tell(sheet.file, row.number, f"lot {sheet.name(row)}: use is no, left out")
        return False
    faults.drops(
        cell.place, "is neither yes nor no", 'write "no" to leave the row out, else "yes" or nothing', found=cell.text
    )
    return True


def _lot(
    entry: Entry,
    assays: Sheet,
    stock: Sheet | None,
    components: tuple[Component, ...],
    options: Options,
    faults: Faults,
) -> Lot:
    sheets = [sheet for sheet in (assays, stock) if sheet is not None]
    read = Reader(entry, options, faults)
    amount, is_unlimited = _stock(entry, read, sheets, faults)
    assay = read_assay(entry, (c for c in components if c.name not in CARRIERS), faults)
    carriers = {name: _carrier(entry, name, read) for name in CARRIERS}
    for component in components:
        number = carriers.get(component.name)
        if number is not None:
            assay[component.name] = _measured(entry, component.name, read)
    lot = Lot(
        name=entry.name,
        place=entry.place,
        assay=assay,
        stock=amount,
        is_unlimited=is_unlimited,
        cost=read.number("cost", unit=f"{options.settings.currency}/{options.settings.quantity_unit}"),
        materials=tuple(part.strip() for part in read.text("material").split(";") if part.strip()),
        supplier=read.text("supplier"),
        location=read.text("place"),
        load_order=read.text("load order"),
        alias=read.text("alias"),
        min_share=read.share("min share"),
        max_share=read.share("max share"),
        least_if_used=read.share("least if used"),
        weigh_step=read.number("weigh step", above=0, unit=options.settings.quantity_unit),
        sampled=read.date("sampled"),
        available=read.date("available"),
        moisture=carriers["moisture"],
        loi=carriers["LOI"],
        density=carriers["density"],
        molar_mass=carriers["molar mass"],
        remarks=_remarks(entry, sheets, components),
    )
    _check_shares(lot, faults)
    return lot


def _stock(entry: Entry, read: Reader, sheets: Iterable[Sheet], faults: Faults) -> tuple[Number | None, bool]:
    """The stock, and whether it is unlimited; a blank in a present column is a problem."""
    holders = [(sheet, column) for sheet in sheets if (column := sheet.find("stock")) is not None]
    if not holders:
        return None, False
    cell = read.single("stock")
    if cell is None:
        if not entry.is_held and not entry.get("stock"):
            sheet, column = holders[-1]
            at = next((row.number for row in sheet.rows if sheet.name(row) == entry.name), None)
            where = Place(sheet.file, at, column.header)
            missing = "has no row with a stock" if at is None else "the stock is blank"
            faults.drops(
                where,
                f"lot {entry.name}: {missing}",
                'write the amount, 0 for none, or "unlimited"',
                found="" if at is not None else None,
            )
        return None, False
    if fold(cell.text) == "unlimited":
        return None, True
    return read.number("stock", least=0, unit=read.options.settings.quantity_unit), False


#: Open or closed ends of what a carrier can be: (least, above, below); percent, or the unit typed.
_RANGES: Mapping[str, tuple[int | None, int | None, int | None]] = {
    "moisture": (0, None, 100),
    "LOI": (0, None, 100),
    "density": (None, 0, None),
    "molar mass": (None, 0, None),
}


def _carrier_values(entry: Entry, name: str, read: Reader) -> tuple[Number, ...]:
    least, above, below = _RANGES[name]
    unit = "%" if name in ("moisture", "LOI") else None
    return values_of(entry.get(name), read.faults, least=least, above=above, below=below, unit=unit)


def _carrier(entry: Entry, name: str, read: Reader) -> Number | None:
    """The carrier's value: the mean of the replicates."""
    numbers = _carrier_values(entry, name, read)
    if not numbers:
        return None
    if len({number.value for number in numbers}) == 1:
        return numbers[0]
    mean = sum((number.value for number in numbers), Fraction(0)) / len(numbers)
    return Number(mean, "; ".join(number.text for number in numbers), numbers[0].place)


def _measured(entry: Entry, name: str, read: Reader) -> Measured:
    numbers = _carrier_values(entry, name, read)
    sds = values_of(entry.get(name, "sd"), read.faults, least=0)
    return Measured(tuple(Reading(number.value, number.text, number.place) for number in numbers), sds)


def _remarks(entry: Entry, sheets: Iterable[Sheet], components: tuple[Component, ...]) -> Mapping[str, str]:
    """The texts of columns that are neither known nor components, by header."""
    names = {fold(component.name) for component in components}
    remarks: dict[str, str] = {}
    for sheet in sheets:
        for column in sheet.columns:
            if column.is_known or (fold(column.name) in names and column.suffix in ("", "sd")):
                continue
            texts = dict.fromkeys(cell.text for cell in entry.get(column.name, column.suffix))
            if texts:
                remarks[column.header] = "; ".join(texts)
    return remarks


def _check_shares(lot: Lot, faults: Faults) -> None:
    low, high = lot.min_share, lot.max_share
    if low is not None and high is not None and low.value > high.value:
        faults.drops(
            low.place or lot.place,
            "the least share is above the greatest",
            f"write at most {high.text}",
            found=low.text,
        )
