"""The door of this room: the bytes of one folder become a Campaign."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace

from generator.intake.checks import (
    Named,
    check_aliases,
    check_basis,
    check_names,
    check_whole,
    keep_with_carriers,
    tell_columns,
)
from generator.intake.columns import LOTS, ORDERS
from generator.intake.decoding import decode
from generator.intake.faults import Faults, fold
from generator.intake.lots import read_lots
from generator.intake.orders import Context, read_orders
from generator.intake.quantities import find_components, find_derived, find_groups
from generator.intake.records import Campaign, Component, Derived, Group, Lot, Order, Place, Quantity, Settings
from generator.intake.settings import CAMPAIGN, SITE, Options, read_settings
from generator.intake.sheets import Sheet, read_sheet
from generator.intake.tables import MOST_BYTES, is_whole

__all__ = ["INPUT_NAMES", "input_name", "is_whole", "read_campaign"]

ASSAYS, TARGETS, STOCK, NOTES = "assays.csv", "targets.csv", "stock.csv", "notes.md"

#: More of these in one campaign is no blending question any more; each has its problem.
MOST_LOTS = 2_000
MOST_ORDERS = 2_000
MOST_COMPONENTS = 100

#: The files that are input; anything else in a campaign's folder is none.
INPUT_NAMES: tuple[str, ...] = (ASSAYS, TARGETS, STOCK, CAMPAIGN, SITE, NOTES)
_INPUTS = frozenset(INPUT_NAMES)


def input_name(name: str) -> str | None:
    """The input that a directory entry's name stands for, case ignored; None for everything else."""
    lower = name.lower()
    return lower if lower in _INPUTS else None


def read_campaign(files: Mapping[str, bytes], *, slug: str, folder: str) -> Campaign:
    """Read one folder: everything that can be understood, and every problem at once.

    ``files`` maps names of INPUT_NAMES to bytes; ``folder`` is the folder's name, the default title.  Never raises,
    whatever the bytes are.
    """
    faults = Faults()
    options = read_settings(files, folder, faults)
    campaign = Campaign(
        slug=slug, folder=folder, settings=options.settings, house=options.house, notes=_notes(files, faults)
    )
    assays = _sheet(ASSAYS, files, options, faults)
    targets = _sheet(TARGETS, files, options, faults)
    stock = _sheet(STOCK, files, options, faults) if STOCK in files else None
    if assays is not None:
        campaign = _filled(campaign, assays, targets, stock, options, faults)
    return replace(campaign, read=faults.read(), problems=faults.problems())


def _sheet(name: str, files: Mapping[str, bytes], options: Options, faults: Faults) -> Sheet | None:
    if name not in files:
        faults.stops(Place(name, None, None), "is missing", f"add {name} to the campaign's folder")
        return None
    return read_sheet(name, files[name], ORDERS if name == TARGETS else LOTS, options, faults)


def _notes(files: Mapping[str, bytes], faults: Faults) -> str:
    data = files.get(NOTES, b"")
    decoded = decode(data) if len(data) <= MOST_BYTES else None
    if decoded is None or "\x00" in decoded.text:
        faults.notes(Place(NOTES, None, None), "can't be read as text: left out", "save it as UTF-8")
        return ""
    if decoded.encoding != "UTF-8":
        faults.tell(NOTES, None, f"read as {decoded.encoding}")
    return decoded.text.replace("\r\n", "\n").replace("\r", "\n")


def _filled(
    campaign: Campaign, assays: Sheet, targets: Sheet | None, stock: Sheet | None, options: Options, faults: Faults
) -> Campaign:
    """The campaign with its quantities, lots and orders."""
    components = find_components(assays, targets, options, faults)
    if _has_too_many(assays, targets, components, faults):
        return campaign
    derived = find_derived(components, options, faults)
    check_basis(assays, stock, components, options, faults)
    lots = read_lots(assays, stock, components, options, faults)
    tell_columns(assays, stock, components, faults)
    kept = keep_with_carriers(lots.kept, components, assays, stock, options, faults)
    if not kept:
        faults.stops(Place(ASSAYS, None, None), "no lot is left to blend", "write at least one lot that can be used")
    taken = (*(c.name for c in components), *(d.name for d in derived))
    groups = find_groups(kept, lots.seen, taken, options, faults)
    every: tuple[Quantity, ...] = (*components, *derived, *groups)
    quantities = {quantity.name: quantity for quantity in every}
    remarks = tuple(dict.fromkeys(header for lot in lots.seen for header in lot.remarks))
    check_whole(kept, components, options, faults)
    check_aliases(kept, faults)
    check_names(Named(lots.seen, quantities, remarks), options, faults)
    orders: tuple[Order, ...] = ()
    if targets is not None:
        context = Context(
            quantities,
            {fold(name): q for name, q in quantities.items()},
            lots.seen,
            _reported(quantities.values(), lots.seen),
            options,
        )
        orders = read_orders(targets, context, faults)
        if not targets.rows:
            faults.notes(Place(TARGETS, None, None), "holds no orders", "write one row for each order")
    return replace(
        campaign,
        settings=_spelled(campaign, quantities),
        components=components,
        derived=derived,
        groups=groups,
        lots=kept,
        orders=orders,
    )


def _has_too_many(assays: Sheet, targets: Sheet | None, components: tuple[Component, ...], faults: Faults) -> bool:
    """Whether there are more lots, orders or components than are answered; a problem at the first beyond."""
    before = faults.count
    remedy = "split it into several campaigns"
    for sheet, most, what in ((assays, MOST_LOTS, "lots"), (targets, MOST_ORDERS, "orders")):
        if sheet is None:
            continue
        names: set[str] = set()
        for row in sheet.rows:
            names.add(sheet.name(row))
            if len(names) > most:
                faults.stops(sheet.place(row), f"has more than {most:,} {what}", remedy, sheet.name(row))
                break
    if len(components) > MOST_COMPONENTS:
        name = components[MOST_COMPONENTS].name
        place = Place(assays.file, assays.header_row, name)
        faults.stops(place, f"is one of more than {MOST_COMPONENTS} components", "leave out what no order limits")
    return faults.count > before


def _reported(quantities: Iterable[Quantity], lots: tuple[Lot, ...]) -> frozenset[str]:
    """The quantities that at least one lot reports: of a derived one, all of its components."""
    names = set()
    for quantity in quantities:
        if isinstance(quantity, Group):
            names.add(quantity.name)
            continue
        needed = _parts(quantity)
        if any(needed <= lot.assay.keys() for lot in lots):
            names.add(quantity.name)
    return frozenset(names)


def _parts(quantity: Component | Derived) -> set[str]:
    if isinstance(quantity, Component):
        return {quantity.name}
    forms = (quantity.numerator, quantity.denominator)
    return {name for form in forms if form is not None for name, _ in form.terms}


def _spelled(campaign: Campaign, quantities: Mapping[str, Quantity]) -> Settings:
    """The settings with quantities named as they are spelled in the tables."""
    spelled = {fold(name): name for name in (*LOTS.known, *ORDERS.known, "notes", "remarks", *quantities)}
    settings = campaign.settings
    return replace(
        settings,
        whole=tuple(spelled.get(fold(name), name) for name in settings.whole),
        planes=tuple((spelled.get(fold(a), a), spelled.get(fold(b), b)) for a, b in settings.planes),
        hidden={
            edition: tuple(spelled.get(fold(name), name) for name in names)
            for edition, names in settings.hidden.items()
        },
    )
