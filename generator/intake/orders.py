"""Rows of targets.csv become orders."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import cast

from generator.intake.cells import parse_number, suggest_number
from generator.intake.columns import Column
from generator.intake.entries import Reader
from generator.intake.faults import Faults, did_you_mean, fold
from generator.intake.limits import Bounds, LimitFault, parse_limit
from generator.intake.patterns import matches, split_patterns
from generator.intake.records import Acceptance, Component, Derived, Group, Limit, Lot, Order, Place, Quantity
from generator.intake.settings import Options
from generator.intake.sheets import Cell, Sheet
from generator.intake.tables import Row
from generator.intake.units import conversion, is_fraction_unit, split_cell


@dataclass(frozen=True, slots=True)
class _RowCells:
    """One order's cells."""

    sheet: Sheet
    row: Row

    def get(self, name: str, suffix: str = "") -> tuple[Cell, ...]:
        cell = self.sheet.cell(self.row, self.sheet.find(name, suffix))
        return () if cell is None else (cell,)


@dataclass(frozen=True, slots=True)
class Context:
    """What the orders' limits may name, and the lots they may choose from."""

    quantities: Mapping[str, Quantity]
    folded: Mapping[str, Quantity]
    seen: tuple[Lot, ...]
    reported: frozenset[str]
    options: Options

    def quantity(self, name: str) -> Quantity | None:
        """The quantity of that name, case ignored."""
        return self.folded.get(fold(name))


def read_orders(targets: Sheet, context: Context, faults: Faults) -> tuple[Order, ...]:
    """The open orders in file order; one with a problem is left out."""
    remarks = _unknown_columns(targets, context, faults)
    rows: dict[str, int] = {}
    orders = []
    for row in targets.rows:
        name = targets.name(row)
        before = faults.count
        order = _order(targets, row, context, remarks, faults)
        if order is None:
            continue
        if name in rows:
            faults.drops(
                targets.place(row),
                f"is a second order of this name, beside row {rows[name]}",
                "give it a name of its own",
                found=name,
            )
        rows.setdefault(name, row.number)
        if faults.count == before and name not in targets.broken:
            orders.append(order)
    return tuple(orders)


def _unknown_columns(targets: Sheet, context: Context, faults: Faults) -> frozenset[Column]:
    """The columns that are remarks; a problem for each that holds limits and names nothing."""
    remarks = set()
    for column in targets.columns:
        if column.is_known or context.quantity(column.name) is not None:
            continue
        cells = [split_cell(cell.text)[0] for cell in targets.cells(column)]
        is_limit = any(isinstance(parse_limit(text, targets.decimal), Bounds) for text in cells)
        if is_limit or (column.suffix and cells):
            known = tuple(context.quantities)
            otherwise = (
                f"write one of {', '.join(known) or 'the components'}, or add it to [columns] ignore in campaign.toml"
            )
            faults.stops(
                targets_place(targets, column),
                "names no component, derived quantity or group",
                did_you_mean(column.name, known, otherwise),
                found=column.header,
            )
        else:
            remarks.add(column)
            faults.tell(targets.file, targets.header_row, f"column {column.header}: not limits, kept as a remark")
    return frozenset(remarks)


def targets_place(targets: Sheet, column: Column) -> Place:
    """Where a column's header stands."""
    return Place(targets.file, targets.header_row, column.header)


def _order(targets: Sheet, row: Row, context: Context, remarks: frozenset[Column], faults: Faults) -> Order | None:
    """The order of a row; None where it is done."""
    options = context.options
    read = Reader(_RowCells(targets, row), options, faults)
    name = targets.name(row)
    if read.word("state", ("open", "done"), "open") == "done":
        faults.tell(targets.file, row.number, f"order {name}: state is done, left out")
        return None
    priority = read.number("priority", least=1)
    if priority is not None and priority.value.denominator != 1:
        faults.drops(
            priority.place or targets.place(row), "is no whole number", "write 1, 2, 3 and so on", found=priority.text
        )
    unit = f"{options.settings.currency}/{options.settings.quantity_unit}"
    return Order(
        name=name,
        place=targets.place(row),
        limits=_limits(targets, row, context, faults),
        amount=_amount(read, options, faults),
        price=read.number("price", unit=unit),
        priority=int(priority.value) if priority is not None else 1,
        due=read.date("due"),
        client=read.text("client"),
        accept=cast(Acceptance, read.word("accept", ("whole", "part"), options.settings.accept)),
        only_lots=_patterns(read, "only lots", context, faults),
        without_lots=_patterns(read, "without lots", context, faults),
        remarks={
            column.header: row.cell(column.index)
            for column in targets.columns
            if column in remarks and row.cell(column.index)
        },
    )


def _patterns(read: Reader, name: str, context: Context, faults: Faults) -> tuple[str, ...]:
    cell = read.single(name)
    if cell is None:
        return ()
    patterns = split_patterns(cell.text)
    words = tuple(word for lot in context.seen for word in (lot.name, *lot.materials))
    for pattern in patterns:
        if not any(matches(pattern, lot) for lot in context.seen):
            remedy = did_you_mean(pattern, words, "write a lot's name, a material or a wildcard such as scrap*")
            faults.drops(cell.place, f'"{pattern}" matches no lot and no material', remedy, found=cell.text)
    return patterns


def _amount(read: Reader, options: Options, faults: Faults) -> Limit | None:
    cell = read.single("amount")
    if cell is None:
        return None
    wanted = options.settings.quantity_unit
    if cell.unit and fold(cell.unit) != fold(wanted):
        faults.stops_once(
            cell.place,
            f"is in {cell.unit}, and quantity_unit is {wanted}",
            f"write the amounts in {wanted}, or change quantity_unit in campaign.toml",
            found=cell.unit,
        )
        return None
    bounds = parse_limit(cell.text, cell.decimal)
    if isinstance(bounds, LimitFault):
        remedy = 'write a number, or a range such as "<= 500" or "100..500"'
        number = suggest_number(cell.text, cell.decimal, remedy)
        is_form = bounds.message != "is not a limit"
        faults.drops(
            cell.place,
            bounds.message if is_form else "is not an amount",
            bounds.remedy if is_form else number,
            found=cell.text,
        )
        return None
    if bounds is None:
        return None
    if (bounds.low is not None and bounds.low < 0) or (bounds.high is not None and bounds.high <= 0):
        faults.drops(cell.place, "is not an amount above 0", "write the amount that is wanted", found=cell.text)
        return None
    return Limit(low=bounds.low, high=bounds.high, aim=bounds.aim, text=cell.text, place=cell.place)


def _limits(targets: Sheet, row: Row, context: Context, faults: Faults) -> Mapping[str, Limit]:
    """The limits of a row by quantity, in the order of the columns."""
    limits: dict[str, Limit] = {}
    for column in targets.columns:
        if column.is_known:
            continue
        quantity = context.quantity(column.name)
        if quantity is None or quantity.name in limits or not row.cell(column.index):
            continue
        limit = _limit(targets, row, quantity, faults)
        if limit is None:
            continue
        limits[quantity.name] = limit
        if quantity.name not in context.reported:
            faults.drops(
                limit.place or targets.place(row),
                f"no lot reports {quantity.name}",
                "add its values to assays.csv, or take the limit away",
                found=limit.text,
            )
    return limits


def _limit(targets: Sheet, row: Row, quantity: Quantity, faults: Faults) -> Limit | None:
    """The limit of one quantity: its cell, or its pair min and max, with its aim."""
    cells = {suffix: targets.cell(row, targets.find(quantity.name, suffix)) for suffix in ("", "min", "max", "aim")}
    whole, aim = cells[""], _pair_number(cells["aim"], quantity, faults)
    low, high = _pair_number(cells["min"], quantity, faults), _pair_number(cells["max"], quantity, faults)
    if whole is not None:
        bounds = _bounds(whole, quantity, faults)
        pair = cells["min"] or cells["max"]
        if pair is not None:
            faults.drops(
                pair.place,
                f"{quantity.name} has a limit in its own column too",
                "leave one of the two blank",
                found=pair.text,
            )
        if bounds is None and aim is None:
            return None
        bounds = bounds or Bounds(None, None)
        return Limit(
            low=bounds.low,
            high=bounds.high,
            aim=aim if aim is not None else bounds.aim,
            text=whole.text,
            place=whole.place,
        )
    first = cells["min"] or cells["max"] or cells["aim"]
    if first is None or (low is None and high is None and aim is None):
        return None
    if low is not None and high is not None and low > high:
        faults.drops(
            first.place, "is above the high bound", "write a low bound that is not above the high one", found=first.text
        )
    typed = ((word, cell) for word, cell in cells.items() if cell is not None)
    return Limit(
        low=low, high=high, aim=aim, text=", ".join(f"{word} {cell.text}" for word, cell in typed), place=first.place
    )


def _pair_number(cell: Cell | None, quantity: Quantity, faults: Faults) -> Fraction | None:
    if cell is None or cell.text.casefold() in ("-", "–", "—", "n/a", "na", "n.a."):
        return None
    text, unit = split_cell(cell.text)
    value = parse_number(text, cell.decimal)
    if value is None:
        faults.drops(cell.place, "is not a number", suggest_number(cell.text, cell.decimal), found=cell.text)
        return None
    factor = _factor(unit or cell.unit, quantity, cell, faults)
    if factor is None:
        return None
    _check_range(Bounds(value * factor, value * factor), quantity, cell, faults)
    return value * factor


def _bounds(cell: Cell, quantity: Quantity, faults: Faults) -> Bounds | None:
    """A limit cell's bounds in the quantity's unit."""
    text, unit = split_cell(cell.text)
    factor = _factor(unit or cell.unit, quantity, cell, faults)
    if factor is None:
        return None
    tolerance = quantity.tolerance if isinstance(quantity, Component) else None
    bounds = parse_limit(text, cell.decimal, None if tolerance is None else tolerance / factor)
    if isinstance(bounds, LimitFault):
        faults.drops(cell.place, bounds.message, bounds.remedy, found=cell.text)
        return None
    if bounds is None:
        return None
    bounds = bounds.scaled(factor)
    _check_range(bounds, quantity, cell, faults)
    return bounds


def _factor(unit: str | None, quantity: Quantity, cell: Cell, faults: Faults) -> Fraction | None:
    if unit is None:
        return Fraction(1)
    factor = conversion(unit, quantity.unit)
    if factor is None:
        faults.stops_once(
            cell.place,
            f"is in {unit or 'no unit'}, and {quantity.name} is in {quantity.unit or 'no unit'}",
            f"write the limits in one unit with the values, or declare the unit of {quantity.name} in campaign.toml",
            found=unit,
        )
    return factor


def _check_range(bounds: Bounds, quantity: Quantity, cell: Cell, faults: Faults) -> None:
    """A problem for a typed bound that no percentage can be; aim ± tolerance may reach beyond."""
    percent = conversion(quantity.unit, "%") if is_fraction_unit(quantity.unit) else None
    if isinstance(quantity, Derived) or percent is None:
        return
    typed = (bounds.aim,) if bounds.around else (bounds.low, bounds.high)
    if any(bound is not None and not 0 <= bound * percent <= 100 for bound in typed):
        what = "is a share" if isinstance(quantity, Group) else "is a limit"
        faults.drops(cell.place, f"{what} outside 0 to 100 percent", "write the limit that is meant", found=cell.text)
