"""A lot's page: its assay, its role in the hull, the orders that use it."""

from __future__ import annotations

from generator import numbers
from generator.findings.values import typed_values
from generator.intake.records import Component, Lot, Measured, Number
from generator.report import words
from generator.report.lookup import Lookup, as_typed
from generator.report.parts import Cell, Column, Fact, Row, Section, Table, aligned, text_cell
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
    """What the lot is good for: where it is used, and whether others can imitate it."""
    return " ".join(part for part in (_use_sentence(lookup, lot), _role_sentence(lookup, lot)) if part)


def _use_sentence(lookup: Lookup, lot: Lot) -> str:
    """How many orders take it, and how many are lost without it."""
    orders = lookup.book.findings.orders
    used = sum(1 for order in orders if (found := order.recipes.get("cheapest")) and found.shares.get(lot.name))
    finding = lookup.lot_findings.get(lot.name)
    needed = len(finding.needed_by) if finding else 0
    if not orders:
        return ""
    if not used and not needed:
        return "No order's cheapest recipe takes it."
    text = f"In the cheapest recipe of {words.plural(used, 'order')}"
    which = f"{needed or 'none'} of them {'are' if needed > 1 else 'is'}"
    if used == 1:
        which = "which is" if needed else "which is not"
    return f"{text}, {which} lost without it."


def _role_sentence(lookup: Lookup, lot: Lot) -> str:
    finding = lookup.lot_findings.get(lot.name)
    if finding is None or finding.role is None:
        return "It takes no part in the hull."
    if finding.role == "corner":
        return "A corner lot: no blend of the others has its composition."
    return "An inner lot: a blend of others has the same composition."


def lot_sections(lookup: Lookup, lot: Lot, page: str) -> tuple[Section, ...]:
    """All parts of a lot's page that have something to show."""
    found = (_assay(lookup, lot), _imitation(lookup, lot, page), _use(lookup, lot, page))
    return tuple(section for section in found if section is not None)


def _assay(lookup: Lookup, lot: Lot) -> Section | None:
    components = [component for component in lookup.campaign.components if component.name in lot.assay]
    if not components:
        return None
    measured = [lot.assay[component.name] for component in components]
    typed = aligned(map(as_typed, measured))
    counts = [_counts_as(lookup, component, lot) for component in components]
    deviations = [_deviation(component, found) for component, found in zip(components, measured, strict=True)]
    columns = [Column(title="Component"), Column(title="As typed", kind="number")]
    texts = [[lookup.name_with_unit(component.name) for component in components], typed]
    if any(len(found.readings) > 1 or found.readings[0].below for found in measured):
        columns.append(Column(title="Counts as", kind="number"))
        texts.append(aligned(counts))
    if any(deviations):
        columns.append(Column(title="sd", kind="number"))
        texts.append([text or numbers.UNKNOWN for text in deviations])
    columns.append(Column(title="Basis"))
    texts.append([component.basis for component in components])
    rows = tuple(Row(cells=tuple(map(text_cell, row))) for row in zip(*texts, strict=True))
    note = "Counts as: the mean of the readings, each below its detection limit by the campaign's rule."
    table = Table(
        anchor="assay-table",
        caption="Assay",
        columns=tuple(columns),
        rows=rows,
        note=note if any(column.title == "Counts as" for column in columns) else "",
    )
    return Section(anchor="assay", title="Assay", tables=(table,))


def _counts_as(lookup: Lookup, component: Component, lot: Lot) -> str:
    """The value that the answers use, with one decimal more than was typed where readings were averaged."""
    measured = lot.assay[component.name]
    value = typed_values(measured, lookup.campaign.settings.below_detection).stated
    typed = max(numbers.typed_decimals(reading.value, reading.text) for reading in measured.readings)
    places = next((places for places in (typed, typed + 1) if (value * 10**places).denominator == 1), typed + 2)
    return numbers.text(value, places)


def _deviation(component: Component, measured: Measured) -> str:
    """The standard deviation typed beside the assay, else the component's; empty where neither is known."""
    if measured.sds:
        return "; ".join(map(_typed, measured.sds))
    if component.sd is None:
        return ""
    return (
        f"{numbers.exact(component.sd.value * 100)} %" if component.sd.relative else numbers.exact(component.sd.value)
    )


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
    return Section(anchor="imitation", title="A blend that imitates it", tables=(table,))


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
        Column(title="Share in cheapest recipe", unit="%", kind="number"),
        Column(title="Lost without it"),
    )
    table = Table(anchor="use-table", caption="Where it is used", columns=columns, rows=tuple(rows))
    sentences: tuple[str, ...] = ()
    if finding is not None and finding.stock_worth is not None:
        settings = lookup.campaign.settings
        plan = lookup.book.findings.plan
        gain, unit = finding.stock_worth, settings.quantity_unit
        if not gain:
            sentences = ("More of it would add nothing to the plan.",)
        elif plan is None or plan.measure == "value":
            sentences = (f"One {unit} more of it would add {numbers.money(gain)} {settings.currency} to the plan.",)
        else:
            more = words.with_unit(numbers.significant(gain, 3), unit)
            sentences = (f"One {unit} more of it would let {more} more be accepted in the plan.",)
    return Section(anchor="use", title="Where it is used", sentences=sentences, tables=(table,))
