"""The hull before and after, in one plane: where the lots stand in two revisions."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping

from generator.findings.measures import Measure, measures_of, own_value, reports, stated
from generator.findings.records import Findings
from generator.findings.values import table_of
from generator.history.records import Outline, Pair
from generator.intake.records import Campaign


def outline(old: Campaign, new: Campaign, findings: Findings) -> Outline | None:
    """The lots of two revisions in the plane that the settings name, else that orders limit most often.

    None where there is no such plane in both, or no lot moved in it.
    """
    pair = _plane(new, findings)
    if pair is None:
        return None
    before, after = _points(old, pair), _points(new, pair)
    if not before or not after or before == after:
        return None
    quantities = new.quantities()
    labels = [quantities[name].label or name for name in pair]
    units = [quantities[name].unit for name in pair]
    return Outline(labels=(labels[0], labels[1]), units=(units[0], units[1]), old=before, new=after)


def _plane(campaign: Campaign, findings: Findings) -> tuple[str, str] | None:
    components = {component.name for component in campaign.components}
    for across, up in campaign.settings.planes:
        if {across, up} <= components:
            return across, up
    limited = Counter(name for order in campaign.orders for name in order.limits)
    for hull in findings.hulls:
        if len(hull.over) > 1:
            first = sorted(hull.over, key=lambda name: -limited[name])
            return first[0], first[1]
    return None


def _points(campaign: Campaign, pair: tuple[str, str]) -> dict[str, Pair]:
    measures = measures_of(campaign)
    if not set(pair) <= measures.keys():
        return {}
    across, up = (_values(campaign, measures[name]) for name in pair)
    return {lot: (across[lot], up[lot]) for lot in across if lot in up}


def _values(campaign: Campaign, measure: Measure) -> Mapping[str, float]:
    """What each lot alone has of a quantity, on the limits' basis."""
    table = table_of(campaign)
    values = {}
    for position, lot in enumerate(campaign.lots):
        if reports(measure, table, position) is not None:
            continue
        below = stated(measure.denominator, table, position)
        value = own_value(measure.rule, stated(measure.numerator, table, position) / below) if below else None
        if value is not None:
            values[lot.name] = float(value)
    return values
