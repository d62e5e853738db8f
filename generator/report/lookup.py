"""What every page of a campaign asks for again and again: units, precision, addresses, values of lots."""

from __future__ import annotations

import functools
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from generator import numbers
from generator.findings.measures import Measure, measures_of, own_value, stated_forms
from generator.findings.records import LotFinding, OrderFinding
from generator.findings.values import Table, table_of
from generator.intake.records import Campaign, Component, Lot, Measured, Order, Reading
from generator.report import addresses
from generator.report.views import CampaignPages


@dataclass(frozen=True, slots=True, kw_only=True)
class Lookup:
    """A campaign's pages with everything found by name.

    ``places`` are the decimals of a quantity's values; ``orders`` and ``lots`` map names to addresses.
    """

    book: CampaignPages
    places: Mapping[str, int]
    labels: Mapping[str, str]
    units: Mapping[str, str]
    measures: Mapping[str, Measure]
    table: Table
    positions: Mapping[str, int]
    order_addresses: Mapping[str, str]
    lot_addresses: Mapping[str, str]
    lot_findings: Mapping[str, LotFinding]

    @property
    def campaign(self) -> Campaign:
        """The campaign as read."""
        return self.book.campaign

    @property
    def home(self) -> str:
        """The campaign page's address."""
        return f"{self.campaign.slug}/index.html"

    def hides(self, name: str) -> bool:
        """Whether the edition leaves this input out, so that pages don't speak of it."""
        return name in self.book.hidden

    def link(self, page: str, target: str) -> str:
        """The link from ``page`` to the address ``target``; empty for no target."""
        return addresses.relative(page, target) if target else ""

    def name_with_unit(self, quantity: str) -> str:
        """Words such as "K₂O, %"."""
        label, unit = self.labels.get(quantity, quantity), self.units.get(quantity, "")
        return f"{label}, {unit}" if unit else label

    def lot(self, name: str) -> Lot:
        """The lot of that name."""
        return self.campaign.lots[self.positions[name]]

    def parts(self, quantity: str, lot: str) -> tuple[Fraction, Fraction] | None:
        """A lot's exact numerator and denominator over the lot; None where it reports too little.

        The value of a blend is Σ share·numerator / Σ share·denominator, in index values.
        """
        measure, position = self.measures.get(quantity), self.positions.get(lot)
        if measure is None or position is None:
            return None
        return stated_forms(measure, self.table)[position]

    def value(self, quantity: str, lot: str) -> Fraction | None:
        """What the lot alone has of a quantity, on the limits' basis; None where it has none."""
        parts = self.parts(quantity, lot)
        if parts is None or parts[1] == 0:
            return None
        return own_value(self.measures[quantity].rule, parts[0] / parts[1])


def lookup_of(book: CampaignPages) -> Lookup:
    """Everything found by name, for one campaign."""
    campaign = book.campaign
    quantities = campaign.quantities()
    order_slugs = addresses.slugs(order.name for order in campaign.orders)
    lot_slugs = addresses.slugs(lot.name for lot in campaign.lots)
    return Lookup(
        book=book,
        places={name: _places(campaign, name) for name in quantities},
        labels={name: quantity.label or name for name, quantity in quantities.items()},
        units={name: quantity.unit for name, quantity in quantities.items()},
        measures=measures_of(campaign),
        table=table_of(campaign),
        positions={lot.name: position for position, lot in enumerate(campaign.lots)},
        order_addresses={name: f"{campaign.slug}/orders/{slug}.html" for name, slug in order_slugs.items()},
        lot_addresses={name: f"{campaign.slug}/lots/{slug}.html" for name, slug in lot_slugs.items()},
        lot_findings={finding.lot: finding for finding in book.findings.lots},
    )


def order_of(lookup: Lookup, finding: OrderFinding) -> Order | None:
    """The order that a finding belongs to."""
    return next((order for order in lookup.campaign.orders if order.name == finding.order), None)


def as_typed(measured: Measured | None) -> str:
    """A lot's readings with the decimals that the laboratory typed; replicates one after another.

    What was typed in another unit than the component's is shown converted, a decimal comma as a point.
    """
    if measured is None:
        return numbers.UNKNOWN
    return "; ".join(_reading_text(reading) for reading in measured.readings)


@functools.lru_cache(maxsize=8192)
def _reading_text(reading: Reading) -> str:
    if not reading.text.strip():
        return "0"
    return ("<" if reading.below else "") + numbers.as_typed(reading.value, reading.text)


def _places(campaign: Campaign, quantity: str) -> int:
    """The decimals of a quantity's values: those of its assays or limits as typed, whichever is more.

    What the program derives from components gets one decimal more than its limits.
    """
    limits = [order.limits[quantity] for order in campaign.orders if quantity in order.limits]
    bounds = [bound for limit in limits for bound in (limit.low, limit.high) if bound is not None]
    typed = max((numbers.exact_places(bound) or 0 for bound in bounds), default=0)
    if not any(isinstance(item, Component) and item.name == quantity for item in campaign.components):
        return min(typed + 1, numbers.MOST_PLACES)
    readings = [reading for lot in campaign.lots if quantity in lot.assay for reading in lot.assay[quantity].readings]
    measured = max((numbers.typed_decimals(reading.value, reading.text) for reading in readings), default=0)
    return max(typed, measured)
