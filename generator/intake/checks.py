"""What only the whole campaign shows: bases without carriers, rules that name nothing, names that nothing has."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction

from generator.intake.columns import CARRIERS, LOT_COLUMNS, ORDER_COLUMNS, Column
from generator.intake.faults import Faults, did_you_mean, fold
from generator.intake.patterns import matches
from generator.intake.records import Basis, Component, Lot, Measured, Number, Place, Quantity
from generator.intake.settings import Options
from generator.intake.sheets import Sheet
from generator.intake.tables import Row
from generator.intake.units import conversion

#: What a basis needs to know of a lot, where quantities are as received or dry.
_NEEDS: Mapping[tuple[Basis, Basis], tuple[str, ...]] = {
    ("as received", "as received"): (),
    ("as received", "dry"): ("moisture",),
    ("as received", "ignited"): ("moisture", "LOI"),
    ("as received", "volume"): ("density",),
    ("as received", "mole"): ("molar mass",),
    ("dry", "as received"): ("moisture",),
    ("dry", "dry"): (),
    ("dry", "ignited"): ("LOI",),
    ("dry", "volume"): ("density",),
    ("dry", "mole"): ("molar mass",),
}


def check_basis(
    assays: Sheet, stock: Sheet | None, components: Iterable[Component], options: Options, faults: Faults
) -> None:
    """A moisture column without a declared basis would make every answer silently wrong."""
    holders = [(sheet, column) for sheet in (assays, stock) if sheet and (column := sheet.find("moisture"))]
    if options.declares_basis or not holders:
        return
    declared = {fold(name) for name, told in options.section("components").items() if "basis" in told}
    silent = [c.name for c in components if fold(c.name) not in declared and c.name not in CARRIERS]
    if silent:
        sheet, column = holders[0]
        faults.stops(
            Place(sheet.file, sheet.header_row, column.header),
            f"there is a moisture column, and no basis is declared for {', '.join(silent)}",
            'write basis = "as received" or basis = "dry" in campaign.toml',
        )


def keep_with_carriers(
    lots: tuple[Lot, ...],
    components: Iterable[Component],
    assays: Sheet,
    stock: Sheet | None,
    options: Options,
    faults: Faults,
) -> tuple[Lot, ...]:
    """The lots that report the carriers their bases need; a problem for each of the others.

    Where no lot could (there is no such column) one problem stops the campaign instead.
    """
    needs = {c.name: _needs(c, options.settings.quantity_basis) for c in components}
    columns = {name for sheet in (assays, stock) if sheet for name in CARRIERS if sheet.find(name)}
    for name, carriers in needs.items():
        for carrier in carriers:
            if carrier not in columns:
                component = next(c for c in components if c.name == name)
                faults.stops(
                    Place(assays.file, assays.header_row, None),
                    f"{name} is on basis {_foreign(component, options)}, which needs a {carrier} column: there is none",
                    f"add the column {carrier}, or declare another basis in campaign.toml",
                )
    kept = []
    for lot in lots:
        lacking = {
            carrier: name
            for name in lot.assay
            for carrier in needs.get(name, ())
            if carrier in columns and not _carrier(lot, carrier)
        }
        for carrier, name in lacking.items():
            faults.drops(
                Place(lot.place.file, lot.place.row, carrier),
                f"lot {lot.name} has no {carrier}, which the basis of {name} needs",
                f"write the lot's {carrier}",
                found="",
            )
        if not lacking:
            kept.append(lot)
    return tuple(kept)


def _needs(component: Component, quantity_basis: Basis) -> tuple[str, ...]:
    bases = (component.basis, component.limit_basis)
    return tuple(dict.fromkeys(carrier for basis in bases for carrier in _NEEDS[quantity_basis, basis]))


def _foreign(component: Component, options: Options) -> Basis:
    """The basis, of the two, that needs a carrier."""
    return component.basis if _NEEDS[options.settings.quantity_basis, component.basis] else component.limit_basis


def _carrier(lot: Lot, name: str) -> Number | None:
    return {"moisture": lot.moisture, "LOI": lot.loi, "density": lot.density, "molar mass": lot.molar_mass}[name]


def tell_columns(assays: Sheet, stock: Sheet | None, components: Iterable[Component], faults: Faults) -> None:
    """Lines of "what was read": columns that are converted, blanks that count as zero, remarks of stock.csv."""
    names = {fold(component.name) for component in components}
    for column in stock.columns if stock is not None else ():
        if not column.is_known and fold(column.name) not in names:
            assert stock is not None
            faults.tell(stock.file, stock.header_row, f"column {column.header}: no component, kept as a remark")
    for sheet in (assays, stock):
        for component in components if sheet is not None else ():
            assert sheet is not None
            named = sheet.find(component.name)
            if named is None:
                continue
            column = named
            if column.unit is not None and column.unit != component.unit and conversion(column.unit, component.unit):
                what = f"column {column.header}: converted from {column.unit} to {component.unit}"
                faults.tell(sheet.file, sheet.header_row, what)
            blanks = len({sheet.name(row) for row in sheet.rows}) - len(
                {sheet.name(row) for row in _filled(sheet, column)}
            )
            if component.blank_is_zero and blanks and sheet is assays:
                lots = "1 lot" if blanks == 1 else f"{blanks} lots"
                faults.tell(sheet.file, sheet.header_row, f"column {column.header}: a blank counts as 0 ({lots})")


def _filled(sheet: Sheet, column: Column) -> Iterator[Row]:
    return (row for row in sheet.rows if sheet.cell(row, column) is not None)


#: The components of a whole may miss its total by this share of it (rounding of each) before it is told.
WHOLE_SLACK = Fraction(1, 100)


def check_whole(lots: Iterable[Lot], components: Iterable[Component], options: Options, faults: Faults) -> None:
    """A note for every lot whose components of the whole don't sum to its total."""
    by_name = {fold(c.name): c for c in components}
    parts = [by_name[fold(name)] for name in options.settings.whole if fold(name) in by_name]
    if len(parts) < 2 or len(parts) < len(options.settings.whole):
        return
    factors = {part.name: conversion(part.unit, parts[0].unit) for part in parts}
    if None in factors.values():
        listed = ", ".join(f"{part.name} in {part.unit or 'no unit'}" for part in parts)
        faults.stops(
            options.place("whole", "components"),
            f"mixes units that don't convert ({listed})",
            "declare one unit for them",
        )
        return
    total = options.settings.whole_total
    for lot in lots:
        if not factors.keys() <= lot.assay.keys():
            continue
        added = sum((_mean(lot.assay[name]) * (factor or 0) for name, factor in factors.items()), Fraction(0))
        if abs(added - total) > WHOLE_SLACK * total:
            names = " + ".join(factors)
            faults.notes(
                lot.place,
                f"{names} is {float(added):.6g}, and the whole is {float(total):.6g}",
                "check its values",
                found=lot.name,
            )


def _mean(measured: Measured) -> Fraction:
    return sum((reading.value for reading in measured.readings), Fraction(0)) / len(measured.readings)


def check_aliases(lots: Iterable[Lot], faults: Faults) -> None:
    """A note for every alias that two lots share: their readers could not tell them apart."""
    first: dict[str, str] = {}
    for lot in lots:
        shown = fold(lot.alias)
        if shown and first.setdefault(shown, lot.name) != lot.name:
            faults.notes(
                Place(lot.place.file, lot.place.row, "alias"),
                f"is the alias of lot {first[shown]} too",
                "give each lot an alias of its own",
                found=lot.alias,
            )


#: Editions are folders of the output and words of the command line.
_EDITION = re.compile(r"[A-Za-z0-9][\w-]*")


@dataclass(frozen=True, slots=True)
class Named:
    """What settings may name."""

    lots: tuple[Lot, ...]
    quantities: Mapping[str, Quantity]
    remarks: tuple[str, ...]


def check_names(named: Named, options: Options, faults: Faults) -> None:
    """Every pattern of keep_apart matches a lot; whole, planes and hide name what there is."""
    words = tuple(word for lot in named.lots for word in (lot.name, *lot.materials))
    for apart in options.house.keep_apart:
        for pattern in apart:
            if not any(matches(pattern, lot) for lot in named.lots):
                faults.stops(
                    options.place("house", "keep_apart"),
                    "matches no lot and no material",
                    did_you_mean(pattern, words, "write a lot's name, a material or a wildcard such as urea*"),
                    found=pattern,
                )
    components = tuple(name for name, quantity in named.quantities.items() if isinstance(quantity, Component))
    _check_known(options.settings.whole, components, ("whole", "components"), options, faults)
    planes = (name for plane in options.settings.planes for name in plane)
    _check_known(planes, tuple(named.quantities), ("views", "planes"), options, faults)
    hideable = (*LOT_COLUMNS, *ORDER_COLUMNS, "notes", "remarks", *named.quantities, *named.remarks)
    for edition, says in options.section("editions").items():
        if edition == "internal" or not _EDITION.fullmatch(edition):
            faults.stops(
                options.place("editions", edition),
                "can't be the name of an edition" if edition != "internal" else "shows everything and hides nothing",
                "write a name of letters, digits, - and _, such as client",
                found=edition,
            )
        _check_known(says.get("hide", ()), hideable, ("editions", edition, "hide"), options, faults)


def _check_known(
    names: Iterable[str], known: tuple[str, ...], path: tuple[str, ...], options: Options, faults: Faults
) -> None:
    folded = {fold(name) for name in known}
    for name in names:
        if fold(name) not in folded:
            otherwise = f"write one of {', '.join(known)}" if known else "leave it out"
            faults.stops(options.place(*path), "is not known here", did_you_mean(name, known, otherwise), found=name)
