"""Edits applied to a campaign, all or some of them, so that answers can be asked again."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from typing import Any, TypeVar

from generator.history.records import CellChange, Edit
from generator.intake.patterns import matches
from generator.intake.records import Campaign, Component, Group, Lot, Order

_Named = TypeVar("_Named")


def apply(old: Campaign, subset: Iterable[Edit]) -> Campaign:
    """The campaign with these edits made; ``subset`` is any of the edits from ``old`` to another campaign.

    Rows that come stand at the end.  A cell of a row that another edit took away is left alone.
    """
    cells = [cell for edit in subset for cell in edit.cells]
    by_room: dict[str, list[CellChange]] = {}
    for cell in cells:
        by_room.setdefault(cell.path[0], []).append(cell)
    campaign = replace(
        old,
        settings=replace(old.settings, **_fields(by_room.get("setting", ()))),
        house=replace(old.house, **_fields(by_room.get("house", ()))),
        components=_components(old.components, by_room.get("component", ())),
        derived=_whole({item.name: item for item in old.derived}, by_room.get("derived", ())),
        groups=_whole({item.name: item for item in old.groups}, by_room.get("group", ())),
        lots=_rows({lot.name: lot for lot in old.lots}, by_room.get("lot", ()), _edited_lot),
        orders=_rows({order.name: order for order in old.orders}, by_room.get("order", ()), _edited_order),
    )
    for cell in by_room.get("notes", ()):
        campaign = replace(campaign, notes=str(cell.new or ""))
    return replace(campaign, groups=tuple(_with_members(group, campaign.lots) for group in campaign.groups))


def _fields(cells: Iterable[CellChange]) -> dict[str, Any]:
    return {cell.path[1]: cell.new for cell in cells}


def _components(old: Iterable[Component], cells: Iterable[CellChange]) -> tuple[Component, ...]:
    found = {component.name: component for component in old}
    told: dict[str, dict[str, Any]] = {}
    gone: set[str] = set()
    for cell in cells:
        _, name, item = cell.path
        told.setdefault(name, {})[item] = cell.new
        if item == "basis" and cell.new is None:
            gone.add(name)
    for name, fields in told.items():
        if name in gone:
            found.pop(name, None)
        elif name in found:
            found[name] = replace(found[name], **fields)
        else:
            found[name] = Component(name=name, **fields)
    return tuple(found.values())


def _whole(found: dict[str, _Named], cells: Iterable[CellChange]) -> tuple[_Named, ...]:
    for cell in cells:
        if cell.new is None:
            found.pop(cell.path[1], None)
        else:
            found[cell.path[1]] = cell.new  # type: ignore[assignment]
    return tuple(found.values())


def _rows(found: dict[str, _Named], cells: Iterable[CellChange], edited: Any) -> tuple[_Named, ...]:
    inner: dict[str, list[CellChange]] = {}
    for cell in cells:
        _, name, *rest = cell.path
        if rest:
            inner.setdefault(name, []).append(cell)
        elif cell.new is None:
            found.pop(name, None)
        else:
            found[name] = cell.new  # type: ignore[assignment]
    return tuple(edited(row, inner[name]) if name in inner else row for name, row in found.items())


def _edited_lot(lot: Lot, cells: Iterable[CellChange]) -> Lot:
    fields: dict[str, Any] = {}
    assay, remarks = dict(lot.assay), dict(lot.remarks)
    for cell in cells:
        _, _, item, *key = cell.path
        if item == "assay":
            _put(assay, key[0], cell.new)
        elif item == "remark":
            _put(remarks, key[0], cell.new)
        elif item == "stock":
            is_unlimited = cell.new == "unlimited"
            fields |= {"stock": None if is_unlimited else cell.new, "is_unlimited": is_unlimited}
        else:
            fields[item] = cell.new
    return replace(lot, assay=assay, remarks=remarks, **fields)


def _edited_order(order: Order, cells: Iterable[CellChange]) -> Order:
    fields: dict[str, Any] = {}
    limits, remarks = dict(order.limits), dict(order.remarks)
    for cell in cells:
        _, _, item, *key = cell.path
        if item in ("limit", "remark"):
            _put(limits if item == "limit" else remarks, key[0], cell.new)
        else:
            fields[item] = cell.new
    return replace(order, limits=limits, remarks=remarks, **fields)


def _put(mapping: dict[str, Any], key: str, value: object) -> None:
    if value is None:
        mapping.pop(key, None)
    else:
        mapping[key] = value


def _with_members(group: Group, lots: Iterable[Lot]) -> Group:
    """The group with the lots that its patterns name now."""
    members = tuple(lot.name for lot in lots if any(matches(pattern, lot) for pattern in group.patterns))
    return group if members == group.lots else replace(group, lots=members)
