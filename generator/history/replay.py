"""Answers asked again with only some of the edits made: just the verdict, the cost or the room of one order.

Only edits that can matter are replayed.  What is left out is known never to reach the question: another
order's row, a component that no limit of the order needs, a price where a verdict is asked.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from typing import Literal

from generator.findings.house import UndecidedError
from generator.findings.measures import measures_of
from generator.findings.model import OrderModel, model_of
from generator.findings.orders import vanishing
from generator.findings.programs import ZERO
from generator.findings.room import room_of, scales_of
from generator.findings.values import table_of
from generator.history.applying import apply
from generator.history.meaning import meaning
from generator.history.quick import Quick
from generator.history.records import CellChange, Edit
from generator.intake.records import Campaign, Derived, Limit, LinearForm, Measured, Order

Question = Literal["verdict", "cost", "room"]

#: What never reaches an order's verdict, cost or room, by where it stands; what is not named here may.
_IDLE_LOT = frozenset({"supplier", "location", "load_order", "alias", "remark", "sampled", "weigh_step"})
_IDLE_ORDER = frozenset({"price", "priority", "client", "accept", "remark"})
_IDLE_COMPONENT = frozenset({"label", "bias_sd", "tolerance", "blank_is_zero"})
_IDLE_HOUSE = frozenset({"weigh_step"})
_LIVE_SETTINGS = frozenset({"quantity_basis", "below_detection"})

NO_ANSWER = "none"


@dataclass(slots=True)
class Replay:
    """One order over the subsets of the edits from one campaign to another; every answer is kept.

    ``order`` is its name in the newer campaign, ``was`` in the older; ``asked`` counts replays.
    """

    old: Campaign
    new: Campaign
    edits: Sequence[Edit]
    order: str
    was: str
    asked: int = 0
    _needs: frozenset[str] = frozenset()
    _models: dict[frozenset[int], OrderModel | None] = field(default_factory=dict)
    _verdicts: dict[frozenset[int], str] = field(default_factory=dict)
    _quick: Quick = field(default_factory=Quick)
    _numbers: dict[tuple[Question, frozenset[int]], Fraction | None] = field(default_factory=dict)

    def __post_init__(self) -> None:
        """Find out which components the order's limits need, before and after."""
        self._needs = _needs(self.old, self.was) | _needs(self.new, self.order)

    def relevant(self, question: Question) -> tuple[int, ...]:
        """Positions of the edits that can matter to the question."""
        return tuple(
            position
            for position, edit in enumerate(self.edits)
            if any(self._can_matter(cell, question) for cell in edit.cells)
        )

    def verdict(self, subset: Iterable[int]) -> str:
        """The verdict with these edits made; ``NO_ANSWER`` where the order has a problem or is not there."""
        key = frozenset(subset)
        if key not in self._verdicts:
            self.asked += 1
            self._verdicts[key] = self._judged(key)
        return self._verdicts[key]

    def number(self, question: Question, subset: Iterable[int]) -> Fraction | None:
        """The cheapest recipe's cost, or the room, with these edits made; None where there is none."""
        key = (question, frozenset(subset))
        if key not in self._numbers:
            self.asked += 1
            self._numbers[key] = self._cost(key[1]) if question == "cost" else self._room(key[1])
        return self._numbers[key]

    def _judged(self, subset: frozenset[int]) -> str:
        model = self._model(subset)
        try:
            return NO_ANSWER if model is None or vanishing(model) is not None else self._quick.verdict(model)
        except UndecidedError:
            return NO_ANSWER

    def _cost(self, subset: frozenset[int]) -> Fraction | None:
        model = self._model(subset)
        if model is None or all(cost is None for cost in model.cost) or vanishing(model) is not None:
            return None
        try:
            shares = self._quick.cost(model)
        except UndecidedError:
            return None
        if shares is None:
            return None
        total = ZERO
        for share, cost in zip(shares, model.cost, strict=False):
            if share and cost is None:
                return None
            total += share * (cost or ZERO)
        return total

    def _room(self, subset: frozenset[int]) -> Fraction | None:
        model = self._model(subset)
        if model is None or vanishing(model) is not None:
            return None
        scales = scales_of(model, {component.name: component for component in self._campaign(subset).components})
        try:
            room = room_of(model, scales, in_amount=self._quick.is_met(model))
        except UndecidedError:
            return None
        return None if room is None else room.t

    def _model(self, subset: frozenset[int]) -> OrderModel | None:
        if subset not in self._models:
            campaign = self._campaign(subset)
            order = _named(campaign, self.order) or _named(campaign, self.was)
            model = None if order is None else model_of(campaign, order, table_of(campaign), measures_of(campaign))
            self._models[subset] = model if isinstance(model, OrderModel) else None
        return self._models[subset]

    def _campaign(self, subset: frozenset[int]) -> Campaign:
        """The older campaign with these edits, but for what can't concern the order."""
        return _slim(apply(self.old, [self.edits[position] for position in sorted(subset)]), self._needs)

    def _can_matter(self, cell: CellChange, question: Question) -> bool:
        room, *path = cell.path
        if room == "lot":
            return self._lot_matters(path, cell, question)
        if room == "order":
            return path[0] in (self.order, self.was) and _order_matters(path, cell)
        if room == "component":
            idle = _IDLE_COMPONENT if question == "room" else _IDLE_COMPONENT | {"sd"}
            return path[0] in self._needs and path[1] not in idle
        if room == "setting":
            return path[0] in _LIVE_SETTINGS
        return room != "notes" and not (room == "house" and path[0] in _IDLE_HOUSE)

    def _lot_matters(self, path: list[str], cell: CellChange, question: Question) -> bool:
        if len(path) == 1:
            return True
        if path[1] == "assay":
            return path[2] in self._needs and _readings(cell.old) != _readings(cell.new)
        if path[1] == "cost":
            return question == "cost"
        return path[1] not in _IDLE_LOT


def _order_matters(path: list[str], cell: CellChange) -> bool:
    if len(path) > 1 and path[1] == "limit":
        return _bounds(cell.old) != _bounds(cell.new)
    return len(path) == 1 or path[1] not in _IDLE_ORDER


def _bounds(limit: object) -> object:
    """Low and high; the aim moves only recipes without costs."""
    return (limit.low, limit.high) if isinstance(limit, Limit) else None


def _readings(measured: object) -> object:
    """The readings without their standard deviations, which reach neither verdict, cost nor room."""
    return meaning(replace(measured, sds=())) if isinstance(measured, Measured) else None


def _named(campaign: Campaign, name: str) -> Order | None:
    return next((order for order in campaign.orders if order.name == name), None)


def _needs(campaign: Campaign, name: str) -> frozenset[str]:
    """Names of the components that the order's limits take."""
    order = _named(campaign, name)
    if order is None:
        return frozenset()
    measures = measures_of(_whole(campaign))
    return frozenset(
        component for limited in order.limits if limited in measures for component in measures[limited].needs()
    )


def _slim(campaign: Campaign, needs: frozenset[str]) -> Campaign:
    """The campaign with the components that are needed alone, and derived quantities over these alone."""
    components = tuple(component for component in campaign.components if component.name in needs)
    return _whole(replace(campaign, components=components))


def _whole(campaign: Campaign) -> Campaign:
    """The campaign without derived quantities whose components are not there: some edits take one away."""
    here = {component.name for component in campaign.components}
    return replace(campaign, derived=tuple(item for item in campaign.derived if _terms(item) <= here))


def _terms(derived: Derived) -> set[str]:
    forms = (derived.numerator, derived.denominator or LinearForm(()))
    return {name for form in forms for name, _ in form.terms}
