"""Which edits can matter to a question about one order, so that no others are replayed.

What is left out is known never to reach the question: another order's row, a component that no limit of the
order needs, a price where a verdict is asked.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Literal

from generator.findings.measures import measures_of
from generator.history.meaning import meaning
from generator.history.records import CellChange
from generator.intake.records import Campaign, Derived, Limit, LinearForm, Measured, Order

#: What can be asked again of one order; ``plan`` and ``value`` are of all orders together.
Question = Literal["verdict", "cost", "room", "amount", "conformity", "recipe", "plan", "value"]

#: What never reaches an order's answers, by where it stands; what is not named here may.
_IDLE_LOT = frozenset({"supplier", "location", "load_order", "alias", "remark", "sampled", "weigh_step"})
_IDLE_ORDER = frozenset({"price", "priority", "client", "accept", "remark"})
_IDLE_COMPONENT = frozenset({"label", "tolerance", "blank_is_zero"})
_IDLE_HOUSE = frozenset({"weigh_step"})
_LIVE_SETTINGS = frozenset({"quantity_basis", "below_detection"})
#: What besides reaches the plan, and what does not.
_PLAN_SETTINGS = _LIVE_SETTINGS | {"plan_nodes", "plan_seconds"}
_IDLE_IN_PLAN = frozenset({"client", "remark"})
#: Which questions the lots' costs reach, and the aims of limits, and an assay's standard deviations.
_ON_COSTS: frozenset[Question] = frozenset({"cost", "conformity", "recipe"})
_ON_AIMS: frozenset[Question] = frozenset({"conformity", "recipe"})
_ON_ERRORS: frozenset[Question] = frozenset({"conformity"})
#: What a component says of errors, and the questions that it reaches.
_ERRORS: dict[str, frozenset[Question]] = {"sd": frozenset({"room", "conformity"}), "bias_sd": _ON_ERRORS}


@dataclass(frozen=True, slots=True)
class Relevance:
    """What can matter to one order: its names in the two campaigns, and the components that its limits need."""

    names: tuple[str, ...]
    needs: frozenset[str]

    @staticmethod
    def of(old: Campaign, new: Campaign, was: str, order: str) -> Relevance:
        """The order is called ``was`` in the older campaign and ``order`` in the newer."""
        return Relevance((order, was), needs_of(old, was) | needs_of(new, order))

    def can_matter(self, cells: Iterable[CellChange], question: Question) -> bool:
        """Whether an edit of these cells can reach the question."""
        return any(self._can_matter(cell, question) for cell in cells)

    def _can_matter(self, cell: CellChange, question: Question) -> bool:
        room, *path = cell.path
        if room == "lot":
            return self._lot_matters(path, cell, question)
        if room == "order":
            return path[0] in self.names and _order_matters(path, cell, question)
        if room == "component":
            is_idle = path[1] in _IDLE_COMPONENT or (path[1] in _ERRORS and question not in _ERRORS[path[1]])
            return path[0] in self.needs and not is_idle
        if room == "setting":
            return path[0] in _LIVE_SETTINGS
        return room != "notes" and not (room == "house" and path[0] in _IDLE_HOUSE)

    def _lot_matters(self, path: list[str], cell: CellChange, question: Question) -> bool:
        if len(path) == 1:
            return True
        if path[1] == "assay":
            if path[2] not in self.needs:
                return False
            return question in _ON_ERRORS or _readings(cell.old) != _readings(cell.new)
        if path[1] == "cost":
            return question in _ON_COSTS
        return path[1] not in _IDLE_LOT


def plan_needs(*campaigns: Campaign) -> frozenset[str]:
    """The components that any order's limits take, in any of the campaigns."""
    return frozenset().union(*(needs_of(campaign, order.name) for campaign in campaigns for order in campaign.orders))


def matters_to_plan(cells: Iterable[CellChange], needs: frozenset[str]) -> bool:
    """Whether an edit of these cells can reach the plan; ``needs`` as :func:`plan_needs` gives them."""
    everything = Relevance((), needs)
    for cell in cells:
        room, *path = cell.path
        if room == "order":
            if len(path) == 1 or path[1] not in _IDLE_IN_PLAN:
                return True
        elif room == "setting":
            if path[0] in _PLAN_SETTINGS:
                return True
        elif everything.can_matter([cell], "cost"):
            return True
    return False


def _order_matters(path: list[str], cell: CellChange, question: Question) -> bool:
    if len(path) > 1 and path[1] == "limit":
        return question in _ON_AIMS or _bounds(cell.old) != _bounds(cell.new)
    return len(path) == 1 or path[1] not in _IDLE_ORDER


def _bounds(limit: object) -> object:
    """Low and high; the aim moves only recipes without costs."""
    return (limit.low, limit.high) if isinstance(limit, Limit) else None


def _readings(measured: object) -> object:
    """The readings without their standard deviations."""
    return meaning(replace(measured, sds=())) if isinstance(measured, Measured) else None


def order_named(campaign: Campaign, name: str) -> Order | None:
    """The order of that name, or None."""
    return next((order for order in campaign.orders if order.name == name), None)


def needs_of(campaign: Campaign, name: str) -> frozenset[str]:
    """Names of the components that the order's limits take."""
    order = order_named(campaign, name)
    if order is None:
        return frozenset()
    measures = measures_of(whole(campaign))
    return frozenset(
        component for limited in order.limits if limited in measures for component in measures[limited].needs()
    )


def slim(campaign: Campaign, needs: frozenset[str]) -> Campaign:
    """The campaign with the components that are needed alone, and derived quantities over these alone."""
    components = tuple(component for component in campaign.components if component.name in needs)
    return whole(replace(campaign, components=components))


def whole(campaign: Campaign) -> Campaign:
    """The campaign without derived quantities whose components are not there: some edits take one away."""
    here = {component.name for component in campaign.components}
    return replace(campaign, derived=tuple(item for item in campaign.derived if _terms(item) <= here))


def _terms(derived: Derived) -> set[str]:
    forms = (derived.numerator, derived.denominator or LinearForm(()))
    return {name for form in forms for name, _ in form.terms}
