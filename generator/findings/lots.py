"""What is known of each lot: corner or inner, and where it is used."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from generator.findings.ask import Asking, ask_all_best
from generator.findings.house_rules import is_kept
from generator.findings.measures import Measure, stated_forms
from generator.findings.records import LotFinding, OrderFinding
from generator.findings.values import Table, typed_values
from generator.geometry.asked import Point
from generator.geometry.program import Program
from generator.intake.records import Campaign, Component, Lot

ONE = Fraction(1)
ZERO = Fraction(0)


def limited_components(campaign: Campaign, measures: Mapping[str, Measure]) -> tuple[str, ...]:
    """Components that some order limits, itself or through a derived quantity, in campaign order."""
    needed = {
        name
        for order in campaign.orders
        for limit in order.limits
        if limit in measures
        for name in measures[limit].needs()
    }
    return tuple(component.name for component in campaign.components if component.name in needed)


def ask_roles(
    campaign: Campaign, table: Table, measures: Mapping[str, Measure]
) -> Asking[list[Mapping[str, Fraction] | None]]:
    """For each lot, over the components that some order limits, the shares of others that imitate it, or None."""
    return (yield from _ask_roles(campaign, table, [measures[name] for name in limited_components(campaign, measures)]))


def lot_findings(
    campaign: Campaign, roles: Sequence[Mapping[str, Fraction] | None], orders: Sequence[OrderFinding]
) -> tuple[LotFinding, ...]:
    """Role, imitation and use of every lot, in file order; ``roles`` as :func:`ask_roles` gives them."""
    components = {component.name: component for component in campaign.components}
    return tuple(
        _finding(campaign, lot, components, roles[position], orders) for position, lot in enumerate(campaign.lots)
    )


def _finding(
    campaign: Campaign,
    lot: Lot,
    components: Mapping[str, Component],
    imitation: Mapping[str, Fraction] | None,
    orders: Sequence[OrderFinding],
) -> LotFinding:
    below = campaign.settings.below_detection
    return LotFinding(
        lot=lot.name,
        role="corner" if imitation is None else "inner",
        stock="unlimited" if lot.is_unlimited else (float(lot.stock.value) if lot.stock else None),
        cost=float(lot.cost.value) if lot.cost else None,
        assay={name: float(typed_values(lot.assay[name], below).stated) for name in components if name in lot.assay},
        # What is kept apart is not shown together, not even as an imitation.
        imitated_by=None
        if imitation is None or not is_kept(campaign, tuple(imitation))
        else {name: float(share) for name, share in imitation.items()},
        used_by=tuple(
            order.order for order in orders if any(lot.name in recipe.shares for recipe in order.recipes.values())
        ),
        needed_by=tuple(
            order.order
            for order in orders
            if order.verdict in ("makeable", "edge")
            and order.without_lot.get(lot.name, ("makeable", None))[0] not in ("makeable", "edge")
        ),
    )


def _ask_roles(
    campaign: Campaign, table: Table, over: Sequence[Measure]
) -> Asking[list[Mapping[str, Fraction] | None]]:
    """For each lot the shares of others that imitate it, or None for a corner.

    An inner lot is one for whose exact values an order is reachable from the others; of equal lots the
    first in the file is the corner.  A lot that reports only some components is asked about these.
    """
    forms = {measure.name: stated_forms(measure, table) for measure in over}
    values = [
        {name: form[0] / form[1] for name, own in forms.items() if (form := own[lot]) is not None}
        for lot in range(len(campaign.lots))
    ]
    asked: list[int] = []
    programs: list[Program] = []
    others_of: dict[int, list[int]] = {}
    for lot, own in enumerate(values):
        if not own:
            continue
        others = [
            other
            for other in range(len(campaign.lots))
            if other != lot
            and own.keys() <= values[other].keys()
            and not _is_later_twin(lot, other, own, values[other])
        ]
        if others:
            asked.append(lot)
            others_of[lot] = others
            programs.append(_imitation_program(own, forms, others))
    roles: list[Mapping[str, Fraction] | None] = [None] * len(campaign.lots)
    for lot, found in zip(asked, (yield from ask_all_best(programs)), strict=True):
        if found is None:
            continue
        assert isinstance(found, Point), "shares are bounded"
        roles[lot] = {campaign.lots[other].name: x for other, x in zip(others_of[lot], found.x, strict=True) if x}
    return roles


def _is_later_twin(lot: int, other: int, own: Mapping[str, Fraction], its: Mapping[str, Fraction]) -> bool:
    return other > lot and all(its[name] == value for name, value in own.items())


def _imitation_program(
    own: Mapping[str, Fraction], forms: Mapping[str, Sequence[tuple[Fraction, Fraction] | None]], others: Sequence[int]
) -> Program:
    rows = []
    for name, value in own.items():
        known = [form for other in others if (form := forms[name][other]) is not None]
        rows.append(tuple(above - value * below for above, below in known))
    bounds = (*((ZERO,) * len(rows)), ONE)
    n = len(others)
    return Program(
        rows=(*rows, (ONE,) * n),
        row_low=bounds,
        row_high=bounds,
        lower=(ZERO,) * n,
        upper=(None,) * n,
        cost=(ZERO,) * n,
    )
