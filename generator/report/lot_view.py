"""A lot's page: its assay, its role in the hull, the orders that use it."""

from __future__ import annotations

from generator import numbers
from generator.intake.records import Lot, Measured, Number
from generator.report import words
from generator.report.lookup import Lookup, as_typed
from generator.report.parts import Cell, Column, Fact, Row, Section, Table, text_cell
from generator.report.shares import lot_cell


def lot_facts(lookup: Lookup, lot: Lot) -> tuple[Fact, ...]:
    """What stands beside the assay: stock, cost, place, dates, remarks."""
    settings = lookup.campaign.settings
    unit = settings.quantity_unit
    stock = (
        "unlimited" if lot.is_unlimited else words.with_unit(_typed(lot.stock), unit) if lot.stock else "not checked"
    )
    cost = f"{_typed(lot.cost)} {settings.currency} per {unit}" if lot.cost else "unknown"
    found = [
        ("Stock", "" if lookup.hides("stock") else stock),
        ("Cost", "" if lookup.hides("cost") else cost),
        ("Material", ", ".join(lot.materials)),
        ("Supplier", lot.supplier),
        ("Place", lot.location),
        ("Load order", lot.load_order),
        ("Sampled", lot.sampled.isoformat() if lot.sampled else ""),
        ("Available", lot.available.isoformat() if lot.available else ""),
        ("Moisture", words.with_unit(_typed(lot.moisture), "%") if lot.moisture else ""),
        ("LOI", words.with_unit(_typed(lot.loi), "%") if lot.loi else ""),
        ("Density", _typed(lot.density) if lot.density else ""),
        ("Molar mass", _typed(lot.molar_mass) if lot.molar_mass else ""),
        *lot.remarks.items(),
    ]
    return tuple(Fact(name=name, value=value) for name, value in found if value)


def _typed(number: Number) -> str:
    return numbers.as_typed(number.value, number.text)


def lot_sentence(lookup: Lookup, lot: Lot) -> str:
    """The lot's role in one sentence."""
    finding = lookup.lot_findings.get(lot.name)
    if finding is None or finding.role is None:
        return f"Lot {lot.name} takes no part in the hull."
    if finding.role == "corner":
        return f"Lot {lot.name} is a corner of the hull: the other lots can't imitate it."
    return f"Lot {lot.name} is an inner lot: a blend of others has the same composition."


def lot_sections(lookup: Lookup, lot: Lot, page: str) -> tuple[Section, ...]:
    """All parts of a lot's page that have something to show."""
    found = (_assay(lookup, lot), _imitation(lookup, lot, page), _use(lookup, lot, page))
    return tuple(section for section in found if section is not None)


def _assay(lookup: Lookup, lot: Lot) -> Section | None:
    rows = [
        Row(
            cells=(
                text_cell(component.label or component.name),
                text_cell(component.unit),
                text_cell(as_typed(lot.assay[component.name])),
                text_cell(_deviations(lot.assay[component.name])),
                text_cell(component.basis),
            )
        )
        for component in lookup.campaign.components
        if component.name in lot.assay
    ]
    if not rows:
        return None
    columns = (
        Column(title="Component"),
        Column(title="Unit"),
        Column(title="As typed", kind="number"),
        Column(title="sd", kind="number"),
        Column(title="Basis"),
    )
    table = Table(anchor="assay-table", caption="Assay", columns=columns, rows=tuple(rows))
    return Section(anchor="assay", title="Assay", tables=(table,))


def _deviations(measured: Measured) -> str:
    return "; ".join(_typed(deviation) for deviation in measured.sds) or numbers.UNKNOWN


def _imitation(lookup: Lookup, lot: Lot, page: str) -> Section | None:
    finding = lookup.lot_findings.get(lot.name)
    if finding is None or not finding.imitated_by:
        return None
    rows = [
        Row(cells=(lot_cell(lookup, name, page), text_cell(numbers.text(share * 100, 2))))
        for name, share in finding.imitated_by.items()
    ]
    columns = (Column(title="Lot"), Column(title="Share", unit="%", kind="number"))
    table = Table(anchor="imitation-table", caption="A blend that imitates it", columns=columns, rows=tuple(rows))
    return Section(anchor="imitation", title="Imitation", tables=(table,))


def _use(lookup: Lookup, lot: Lot, page: str) -> Section | None:
    finding = lookup.lot_findings.get(lot.name)
    rows = []
    for order in lookup.book.findings.orders:
        cheapest = order.recipes.get("cheapest")
        share = cheapest.shares.get(lot.name) if cheapest else None
        is_needed = finding is not None and order.order in finding.needed_by
        if share is None and not is_needed:
            continue
        verdict = order.verdict or "none"
        cells = (
            Cell(text=order.order, href=lookup.link(page, lookup.order_addresses.get(order.order, ""))),
            Cell(text=words.VERDICT_WORDS[verdict], mark=verdict),
            text_cell(numbers.UNKNOWN if share is None else numbers.text(share * 100, 1)),
            text_cell("yes" if is_needed else "no"),
        )
        rows.append(Row(cells=cells))
    if not rows:
        return None
    columns = (
        Column(title="Order"),
        Column(title="Verdict"),
        Column(title="Share in the cheapest recipe", unit="%", kind="number"),
        Column(title="Lost without it"),
    )
    table = Table(anchor="use-table", caption="Orders that use it", columns=columns, rows=tuple(rows))
    sentences: tuple[str, ...] = ()
    if finding is not None and finding.stock_worth is not None:
        settings = lookup.campaign.settings
        worth = f"{numbers.money(finding.stock_worth)} {settings.currency} per {settings.quantity_unit}"
        sentences = (f"One unit more of it is worth {worth}.",)
    return Section(anchor="use", title="Where it is used", sentences=sentences, tables=(table,))
