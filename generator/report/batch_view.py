"""Batch cards: what the operator weighs, in the order of loading, on one sheet."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from generator import numbers
from generator.findings.records import Batch, OrderFinding
from generator.report import words
from generator.report.addresses import slugs
from generator.report.loading import loading_turn
from generator.report.lookup import Lookup, order_of
from generator.report.parts import Fact, Table
from generator.report.plan_view import plan_address
from generator.report.shares import amount_places, values_table

#: So many tick boxes stand on a card; of more batches the number is written in.
MOST_TICKS = 24


@dataclass(frozen=True, slots=True, kw_only=True)
class CardRow:
    """One lot to load: what the scale shows before and after it."""

    load_order: str
    lot: str
    material: str
    place: str
    amount: str
    total: str


@dataclass(frozen=True, slots=True, kw_only=True)
class CardBatch:
    """One batch, or several equal ones: its heading, the lots in turn, tick boxes by number, values."""

    anchor: str
    title: str
    rows: tuple[CardRow, ...]
    total: str
    ticks: tuple[str, ...]
    holds: bool
    told: tuple[str, ...]
    values: Table | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Card:
    """The card of one order; ``plan`` is the link to the plan's page."""

    order: str
    plan: str
    unit: str
    batches: tuple[CardBatch, ...]
    has_places: bool
    has_materials: bool
    has_load_order: bool
    revision: str


def card_addresses(lookup: Lookup) -> dict[str, str]:
    """The addresses of batch cards by order."""
    carded = {batch.order for batch in lookup.book.findings.batches}
    named = slugs(order.name for order in lookup.campaign.orders)
    return {name: f"{lookup.campaign.slug}/batches/{slug}.html" for name, slug in named.items() if name in carded}


def batch_card(lookup: Lookup, finding: OrderFinding, page: str) -> Card:
    """Everything on the card of one order, which stands at the address ``page``."""
    batches = [batch for batch in lookup.book.findings.batches if batch.order == finding.order]
    shown = tuple(_batch(lookup, finding, batch) for batch in batches)
    rows = [row for batch in shown for row in batch.rows]
    mark = lookup.book.findings.revision
    return Card(
        order=finding.order,
        plan=lookup.link(page, plan_address(lookup)),
        unit=lookup.campaign.settings.quantity_unit,
        batches=shown,
        has_places=any(row.place for row in rows),
        has_materials=any(row.material for row in rows),
        has_load_order=any(row.load_order for row in rows),
        revision=str(mark.number) if mark else "",
    )


def card_lead(lookup: Lookup, finding: OrderFinding) -> str:
    """What is to be weighed, in a sentence."""
    batches = [batch for batch in lookup.book.findings.batches if batch.order == finding.order]
    unit = lookup.campaign.settings.quantity_unit
    total = sum((batch.times * _sum(batch) for batch in batches), Fraction(0))
    count = batches[0].of
    text = f"{words.with_unit(_text(total, _places(batches)), unit)} in {words.plural(count, 'batch', 'batches')}"
    plan = lookup.book.findings.plan
    planned = plan.orders.get(finding.order) if plan else None
    if planned is not None and _text(Fraction(planned.accepted), _places(batches)) != _text(total, _places(batches)):
        accepted = numbers.text(planned.accepted, amount_places(planned.accepted))
        text += f", of the {words.with_unit(accepted, unit)} that the plan gives it"
    text += "."
    if not all(batch.holds for batch in batches):
        text += " Not every limit holds: see below before anything is loaded."
    return text


def card_facts(lookup: Lookup, finding: OrderFinding) -> tuple[Fact, ...]:
    """Revision, client and due date: what tells this sheet from another."""
    order, mark = order_of(lookup, finding), lookup.book.findings.revision
    facts = [Fact(name="Revision", value=str(mark.number) if mark else "not recorded")]
    if mark:
        facts.append(Fact(name="Recorded", value=words.moment(mark.recorded)))
    if order is not None and order.client:
        facts.append(Fact(name="Client", value=order.client))
    if order is not None and order.due is not None:
        facts.append(Fact(name="Due", value=order.due.isoformat()))
    facts.append(Fact(name="Campaign", value=lookup.campaign.settings.title))
    return tuple(facts)


def _sum(batch: Batch) -> Fraction:
    return (
        sum(batch.exact.values(), Fraction(0))
        if batch.exact
        else sum(map(Fraction, batch.amounts.values()), Fraction(0))
    )


def _places(batches: list[Batch]) -> int:
    """Decimals with which every amount is printed as it is weighed, else enough to weigh by."""
    needed = [numbers.exact_places(x) for batch in batches for x in batch.exact.values()]
    known = [places for places in needed if places is not None]
    if needed and len(known) == len(needed):
        return max(known)
    return amount_places(min(_sum(batch) for batch in batches)) + 1


def _text(value: Fraction, places: int) -> str:
    return numbers.text(value, places)


def _batch(lookup: Lookup, finding: OrderFinding, batch: Batch) -> CardBatch:
    places = _places([other for other in lookup.book.findings.batches if other.order == batch.order])
    amounts: Mapping[str, Fraction] = batch.exact or {lot: Fraction(x) for lot, x in batch.amounts.items()}
    rows, running = [], Fraction(0)
    total = Fraction(round(_sum(batch) * 10**places), 10**places)
    # What can't be weighed exactly is rounded such that the batch still comes to its total.
    weighed = numbers.apportioned(amounts, total, places)
    for name in sorted(amounts, key=lambda name: (loading_turn(lookup.lot(name).load_order), lookup.positions[name])):
        lot = lookup.lot(name)
        printed = weighed[name]
        running += printed
        rows.append(
            CardRow(
                load_order=lot.load_order,
                lot=name,
                material=", ".join(lot.materials),
                place=lot.location,
                amount=_text(printed, places),
                total=_text(running, places),
            )
        )
    last = batch.batch + batch.times - 1
    title = "The batch" if batch.of == 1 else f"Batch {batch.batch} of {batch.of}"
    if batch.times > 1:
        each = words.with_unit(_text(running, places), lookup.campaign.settings.quantity_unit)
        title = f"{batch.of} equal batches of {each}"
        if batch.times < batch.of:
            title = f"Batches {batch.batch} to {last} of {batch.of}, {each} each"
    return CardBatch(
        anchor=f"batch-{batch.batch}",
        title=title,
        rows=tuple(rows),
        total=_text(running, places),
        ticks=tuple(str(number) for number in range(batch.batch, last + 1)) if batch.times <= MOST_TICKS else (),
        holds=batch.holds,
        told=_told(lookup, finding, batch),
        values=values_table(
            lookup, finding, batch.values, f"batch-{batch.batch}-values", "What comes out", "As weighed"
        )
        if finding.limits and batch.values
        else None,
    )


def _told(lookup: Lookup, finding: OrderFinding, batch: Batch) -> tuple[str, ...]:
    told = [batch.remark] if batch.remark else []
    if batch.breaks:
        names = words.listed(lookup.labels.get(name, name) for name in batch.breaks)
        told.append(f"These amounts break: {names}.")
    elif not batch.holds and not batch.remark:
        told.append("These amounts do not hold everything that the order asks.")
    asked = finding.amount
    if asked is not None and batch.times == batch.of and not batch.breaks and batch.remark:
        total = batch.times * _sum(batch)
        if total != Fraction(repr(asked)):
            unit = lookup.campaign.settings.quantity_unit
            places = max(amount_places(total), 0)
            told.append(
                f"Weighed {words.with_unit(numbers.text(total, min(3, places)), unit)}, "
                f"asked {words.with_unit(numbers.text(asked, min(3, places)), unit)}."
            )
    return tuple(told)
