"""What a campaign's cells mean: the values that two inputs are compared by, whatever they are typed as.

0.50 and 0.5 mean the same, and so do the rows of a file in another order.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import fields

from generator.intake.records import Campaign, Derived, Group, Limit, Lot, Measured, Number, Order

#: What a row's own cells are not: its name, its place in the file, and what is split up below.
_NOT_CELLS = frozenset({"name", "place", "assay", "remarks", "stock", "is_unlimited", "limits"})

Cells = Mapping[tuple[str, ...], object]


def meaning(value: object) -> object:
    """What a typed value means, so that equal meanings compare equal."""
    if isinstance(value, Number):
        return value.value
    if isinstance(value, Measured):
        readings = sorted((reading.value, reading.below) for reading in value.readings)
        return ("measured", readings, sorted(sd.value for sd in value.sds))
    if isinstance(value, Limit):
        return ("limit", value.low, value.high, value.aim)
    if isinstance(value, Derived):
        return ("derived", value.numerator, value.denominator, value.label, value.unit)
    if isinstance(value, Group):
        return ("group", value.patterns, meaning(value.share), value.label)
    if isinstance(value, Mapping):
        return {key: meaning(inner) for key, inner in value.items()}
    return value


def typed(value: object) -> str:
    """A value as it was typed, so that a cell that reads the same can be told from an edited one."""
    if value is None:
        return ""
    if isinstance(value, Measured):
        texts = [*(reading.text for reading in value.readings), *(sd.text for sd in value.sds)]
        return "; ".join(text.strip() for text in texts if text.strip())
    if isinstance(value, Number | Limit):
        return value.text.strip()
    return repr(meaning(value))


def lot_cells(lot: Lot) -> Cells:
    """The cells of a lot by path below the lot; ("stock",) is the stock or "unlimited"."""
    cells: dict[tuple[str, ...], object] = {(name,): getattr(lot, name) for name in _own_fields(lot)}
    cells[("stock",)] = "unlimited" if lot.is_unlimited else lot.stock
    cells |= {("assay", component): measured for component, measured in lot.assay.items()}
    cells |= {("remark", header): text for header, text in lot.remarks.items()}
    return cells


def order_cells(order: Order) -> Cells:
    """The cells of an order by path below the order."""
    cells: dict[tuple[str, ...], object] = {(name,): getattr(order, name) for name in _own_fields(order)}
    cells |= {("limit", quantity): limit for quantity, limit in order.limits.items()}
    cells |= {("remark", header): text for header, text in order.remarks.items()}
    return cells


def setting_cells(campaign: Campaign) -> Cells:
    """The settings, house rules, quantities and notes by path below the campaign."""
    cells: dict[tuple[str, ...], object] = {
        ("setting", item.name): getattr(campaign.settings, item.name) for item in fields(campaign.settings)
    }
    cells |= {("house", item.name): getattr(campaign.house, item.name) for item in fields(campaign.house)}
    for component in campaign.components:
        cells |= {
            ("component", component.name, item.name): getattr(component, item.name)
            for item in fields(component)
            if item.name != "name"
        }
    cells |= {("derived", derived.name): derived for derived in campaign.derived}
    cells |= {("group", group.name): group for group in campaign.groups}
    cells[("notes",)] = campaign.notes.strip()
    return cells


def differing(old: Cells, new: Cells) -> list[tuple[str, ...]]:
    """The paths at which two sets of cells mean different things, in the newer's order, then the older's."""
    return [path for path in dict.fromkeys([*new, *old]) if meaning(old.get(path)) != meaning(new.get(path))]


def same_rows(old: Cells, new: Cells) -> bool:
    """Whether two rows mean the same but for their names."""
    return not differing(old, new)


def is_telling(cells: Cells) -> bool:
    """Whether a row says enough to be known again under another name: a measured value or a limit."""
    return any(path[0] in ("assay", "limit") for path, value in cells.items() if value is not None)


def _own_fields(row: Lot | Order) -> Iterable[str]:
    return [item.name for item in fields(row) if item.name not in _NOT_CELLS]
