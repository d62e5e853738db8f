"""A campaign as one audience may see it: hidden inputs taken out, lots under the names they are shown by.

What was taken out is not there any more, so that no page, figure or file drawn from the result can tell it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any, TypeVar

from generator.intake.records import Campaign, Group, House, Lot, Order, Settings
from generator.problems import Problem, stopping
from generator.report.veil import Veil

T = TypeVar("T")

#: The fields of a lot by the name that ``hide`` has for them, and what stands there instead.
_LOT_FIELDS: Mapping[str, Mapping[str, Any]] = {
    "stock": {"stock": None, "is_unlimited": False},
    "cost": {"cost": None},
    "material": {"materials": ()},
    "supplier": {"supplier": ""},
    "place": {"location": ""},
    "load order": {"load_order": ""},
    "min share": {"min_share": None},
    "max share": {"max_share": None},
    "least if used": {"least_if_used": None},
    "weigh step": {"weigh_step": None},
    "sampled": {"sampled": None},
    "available": {"available": None},
    "moisture": {"moisture": None},
    "LOI": {"loi": None},
    "density": {"density": None},
    "molar mass": {"molar_mass": None},
}
_ORDER_FIELDS: Mapping[str, Mapping[str, Any]] = {
    "amount": {"amount": None},
    "price": {"price": None},
    "priority": {"priority": 1},
    "due": {"due": None},
    "client": {"client": ""},
    "accept": {"accept": "whole"},
}

#: All that a reader from outside learns of problems: what they are is told to those who can mend them.
WITHHELD = Problem(
    file="campaign",
    message="the input has problems",
    remedy="ask those who sent you this report",
    severity="stops",
)


def redacted(campaign: Campaign, veil: Veil) -> Campaign:
    """The campaign without what is hidden, and without the orders of other clients."""
    if veil.is_clear:
        return campaign
    settings = replace(
        campaign.settings,
        hidden={},
        whole=() if veil.hides(*campaign.settings.whole) else campaign.settings.whole,
        planes=tuple(plane for plane in campaign.settings.planes if not veil.hides(*plane)),
    )
    orders = tuple(_order(order, veil) for order in campaign.orders if veil.shows_client(order.client))
    return replace(
        campaign,
        settings=_titled(settings, veil),
        components=tuple(item for item in campaign.components if not veil.hides(item.name)),
        derived=tuple(item for item in campaign.derived if not veil.hides(item.name)),
        groups=tuple(_group(item, veil) for item in campaign.groups if not veil.hides(item.name)),
        house=_house(campaign.house, veil),
        lots=tuple(_lot(lot, veil) for lot in campaign.lots),
        orders=orders,
        notes="" if veil.hides("notes") or veil.client else veil.text(campaign.notes),
        read=(),
        problems=shown_problems(campaign.problems, veil),
    )


def shown_problems(problems: tuple[Problem, ...], veil: Veil) -> tuple[Problem, ...]:
    """Problems as the audience sees them: outside, only that there are some that stop the campaign."""
    if veil.is_clear:
        return problems
    return (WITHHELD,) if stopping(problems) else ()


def by_shown_lot(values: Mapping[str, T], veil: Veil) -> dict[str, T]:
    """A mapping by lot, by the names that lots are shown by."""
    return {veil.lot(name): value for name, value in values.items()}


def _titled(settings: Settings, veil: Veil) -> Settings:
    return replace(settings, title=veil.text(settings.title))


def _house(house: House, veil: Veil) -> House:
    return replace(
        house,
        least_if_used=None if veil.hides("least if used") else house.least_if_used,
        weigh_step=None if veil.hides("weigh step") else house.weigh_step,
        keep_apart=tuple(tuple(veil.text(pattern) for pattern in patterns) for patterns in house.keep_apart),
    )


def _group(group: Group, veil: Veil) -> Group:
    return replace(group, lots=tuple(veil.lot(name) for name in group.lots), patterns=())


def _lot(lot: Lot, veil: Veil) -> Lot:
    blank = {
        name: value for hidden, fields in _LOT_FIELDS.items() if veil.hides(hidden) for name, value in fields.items()
    }
    assay = {name: measured for name, measured in lot.assay.items() if not veil.hides(name)}
    return replace(lot, **{"name": veil.lot(lot.name), "alias": "", "remarks": {}, "assay": assay, **blank})


def _order(order: Order, veil: Veil) -> Order:
    blank = {
        name: value for hidden, fields in _ORDER_FIELDS.items() if veil.hides(hidden) for name, value in fields.items()
    }
    limits = {name: limit for name, limit in order.limits.items() if not veil.hides(name)}
    named = {"only_lots": (), "without_lots": (), "remarks": {}, "limits": limits}
    return replace(order, **{**named, **blank})
