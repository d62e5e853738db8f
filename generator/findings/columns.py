"""An order's system column by column: what each lot alone contributes to it.

In: a Campaign, its Table and measures, one order.  Out: a Heading (the limits and their sides), and a Column
for each lot.  Columns don't know of each other: a campaign in which a few cells differ shares all the rest.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from generator.findings.house_rules import holds_both
from generator.findings.measures import Measure, excess, reports, stated, stated_forms
from generator.findings.records import Side
from generator.findings.rules import OutsideDomain
from generator.findings.values import Table
from generator.intake.patterns import matches
from generator.intake.records import Campaign, Limit, Lot, Order
from generator.problems import Problem


@dataclass(frozen=True, slots=True)
class SideOf:
    """One side of the limit ``on``: its bound in index values, and as ``typed`` in the quantity's own unit."""

    on: str
    side: Side
    bound: Fraction
    typed: Fraction


@dataclass(frozen=True, slots=True)
class Heading:
    """What all columns of an order have in common; ``problem``: a limit that has no index."""

    limits: Mapping[str, Limit]
    measures: Mapping[str, Measure]
    sides: tuple[SideOf, ...]
    problem: Problem | None = None


@dataclass(frozen=True, slots=True)
class Column:
    """One lot in an order's system.

    ``reason``: why it is left out, else None.  ``above`` and ``below`` hold its stated numerator and
    denominator for each limit, ``terms`` and ``base`` an entry for each side (see ``model.Row``).
    ``negative`` are the ratios whose denominator is negative in it.
    """

    lot: Lot
    reason: str | None
    above: tuple[Fraction, ...] = ()
    below: tuple[Fraction, ...] = ()
    terms: tuple[Fraction, ...] = ()
    base: tuple[Fraction, ...] = ()
    negative: frozenset[str] = frozenset()


def heading_of(campaign: Campaign, order: Order, measures: Mapping[str, Measure]) -> Heading:
    """The order's limits, with the group shares that hold for all orders, and their sides in index values."""
    limits = _limits(campaign, order, measures)
    sides: list[SideOf] = []
    problem = None
    for name, limit in limits.items():
        try:
            sides += _sides(name, limit, measures[name])
        except OutsideDomain as outside:
            problem = problem or _unfit(measures[name], limit, outside)
    return Heading(limits, measures, tuple(sides), problem)


def column_of(campaign: Campaign, order: Order, heading: Heading, table: Table, position: int) -> Column:
    """The column of the lot at a position of the campaign and of ``table``."""
    lot = campaign.lots[position]
    limits, measures = heading.limits, heading.measures
    reason = _excluded(campaign, order, lot, limits) or _lacking(limits, measures, table, position)
    if reason is not None or heading.problem is not None:
        return Column(lot, reason)
    forms = {name: form for name in limits if (form := stated_forms(measures[name], table)[position]) is not None}
    plain = {name: _is_plain(measures[name], table, position) for name in limits}
    terms, base = [], []
    for side in heading.sides:
        above, below = forms[side.on]
        sign = -1 if side.side == "low" else 1
        if plain[side.on] or side.side == "exact":
            terms.append(sign * (above - side.bound * below))
            base.append(below)
        else:
            measure = measures[side.on]
            term = excess(measure, side.bound, side.side, table, position)
            terms.append(term)
            base.append(-sign * (excess(measure, side.bound + 1, side.side, table, position) - term))
    return Column(
        lot,
        None,
        above=tuple(forms[name][0] for name in limits),
        below=tuple(forms[name][1] for name in limits),
        terms=tuple(terms),
        base=tuple(base),
        negative=frozenset(
            name
            for name in limits
            if measures[name].is_ratio and stated(measures[name].denominator, table, position) < 0
        ),
    )


def _is_plain(measure: Measure, table: Table, position: int) -> bool:
    """Whether every value counts as stated, whichever side of a limit it stands on."""
    values = [table.values[name][position] for name in measure.needs()]
    return all(value is None or value.least == value.stated == value.most for value in values)


def _limits(campaign: Campaign, order: Order, measures: Mapping[str, Measure]) -> dict[str, Limit]:
    """The order's limits and the group shares that hold for all orders, the tighter side of both."""
    limits = {name: limit for name, limit in order.limits.items() if name in measures}
    for group in campaign.groups:
        if group.share is None:
            continue
        own = limits.get(group.name)
        limits[group.name] = group.share if own is None else _tighter(own, group.share)
    return limits


def _tighter(one: Limit, other: Limit) -> Limit:
    lows = [low for low in (one.low, other.low) if low is not None]
    highs = [high for high in (one.high, other.high) if high is not None]
    return Limit(
        low=max(lows, default=None), high=min(highs, default=None), aim=one.aim, text=one.text, place=one.place
    )


def _sides(name: str, limit: Limit, measure: Measure) -> list[SideOf]:
    """The sides of a limit, flipped where the index decreases; OutsideDomain where one has no index."""
    rule = measure.rule
    low = None if limit.low is None else rule.index(limit.low)
    high = None if limit.high is None else rule.index(limit.high)
    typed_low, typed_high = limit.low, limit.high
    if rule.decreases:
        low, high, typed_low, typed_high = high, low, typed_high, typed_low
    if low is not None and low == high:
        return [SideOf(name, "exact", low, low if typed_low is None else typed_low)]
    sides = []
    if low is not None:
        sides.append(SideOf(name, "low", low, low if typed_low is None else typed_low))
    if high is not None:
        sides.append(SideOf(name, "high", high, high if typed_high is None else typed_high))
    return sides


def _unfit(measure: Measure, limit: Limit, outside: OutsideDomain) -> Problem:
    place = limit.place
    return Problem(
        file=place.file if place else "targets.csv",
        row=place.row if place else None,
        column=place.column if place else measure.name,
        found=limit.text,
        message=f"a limit under the blend rule {measure.rule.name!r} {outside}",
        remedy="write a limit inside the rule's domain",
        severity="drops",
    )


def _excluded(campaign: Campaign, order: Order, lot: Lot, limits: Mapping[str, Limit]) -> str | None:
    """Why the lot may not be used in this order at all, or None."""
    if lot.stock is not None and lot.stock.value == 0:
        return "stock is 0"
    if order.only_lots and not any(matches(pattern, lot) for pattern in order.only_lots):
        return "not among the order's lots"
    if any(matches(pattern, lot) for pattern in order.without_lots):
        return "excluded by the order"
    if lot.available and order.due and order.due < lot.available:
        return f"not available before {lot.available.isoformat()}"
    if lot.max_share is not None and lot.max_share.value == 0:
        return "its greatest share is 0"
    both = holds_both(campaign, lot)
    if both is not None:
        return f"it is both {both[0]} and {both[1]}, which are kept apart"
    for group in campaign.groups:
        limit = limits.get(group.name)
        if limit is not None and limit.high == 0 and lot.name in group.lots:
            return f"{group.label} may not be used"
    return None


def _lacking(limits: Mapping[str, Limit], measures: Mapping[str, Measure], table: Table, lot: int) -> str | None:
    for name in limits:
        if stated_forms(measures[name], table)[lot] is not None:
            continue
        missing = reports(measures[name], table, lot)
        if missing is not None:
            return f"{missing} not reported"
    return None
