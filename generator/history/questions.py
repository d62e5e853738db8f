"""One order asked again: the same verdicts and numbers as in findings, without what proves them to a reader.

Every program is decided as surely as ever; nothing here is published, so no proof is made readable.  A
question that an order has no answer to is answered with None.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from fractions import Fraction
from typing import Final, cast

from generator.findings.ask import Asking, ask_possible
from generator.findings.conformity import DECIMALS, conformities_of, uncertain_rows
from generator.findings.house import UndecidedError
from generator.findings.model import OrderModel
from generator.findings.orders import LOST, ask_vanishing
from generator.findings.programs import ZERO, capped_upper, share_program, share_rows
from generator.findings.recipes import ask_first_shares, ask_least_cost, named_shares
from generator.findings.records import Verdict
from generator.findings.room import ask_room, scales_of
from generator.findings.uncertainty import uncertainty_of
from generator.findings.values import table_of
from generator.findings.verdicts import ask_allowed, ask_face, ask_greatest_amount, ask_verdict
from generator.history.relevance import Question
from generator.history.systems import System

#: What an answer can be: a verdict, a number, shares by lot, or one of the words below; None: there is none.
Answer = str | Fraction | Mapping[str, Fraction] | None

NO_ANSWER: Final = "none"
NOT_KNOWN: Final = "not known"
NO_BOUND: Final = "no bound"


def ask_again(question: Question, system: System) -> Asking[Answer]:
    """The order's answer in a campaign with some edits made."""
    model = system.model
    if model is None:
        return _none(question)
    try:
        if (yield from ask_vanishing(model)) is not None:
            return _none(question)
        return (yield from _ASKED[question](system, model))
    except UndecidedError:
        return _none(question)


def _none(question: Question) -> Answer:
    return NO_ANSWER if question == "verdict" else None


def _ask_verdict(_system: System, model: OrderModel) -> Asking[Answer]:
    return (yield from ask_bare_verdict(model))


def ask_bare_verdict(model: OrderModel) -> Asking[Verdict]:
    """As ``findings.verdicts.judge``, also where that is undecided, without its proofs."""
    if not model.rules.names():
        return (yield from ask_verdict(model))
    unmet = yield from _ask_unmet(model)
    if unmet is not None:
        return unmet
    return "edge" if (yield from ask_face(model)) else "makeable"


def _ask_unmet(model: OrderModel) -> Asking[Verdict | None]:
    """``unreachable``, ``barred`` or ``short``; None where the order is met."""
    if not (yield from ask_possible(share_program(model, share_rows(model), (ZERO,) * len(model.lots)))):
        return "unreachable"
    if not model.rules.names():
        capped = replace(model, upper=capped_upper(model, model.amount))
        return None if (yield from ask_allowed(capped)) else "short"
    greatest = yield from ask_greatest_amount(_without_amount(model))
    # Without any stock there is no greatest amount; with some, none at all means that the rules allow no blend.
    if (greatest is None and not (yield from ask_allowed(model))) or (greatest is not None and greatest.amount == 0):
        return "barred"
    is_short = (
        greatest is not None
        and greatest.amount is not None
        and model.amount is not None
        and greatest.amount < model.amount
    )
    return "short" if is_short else None


def _without_amount(model: OrderModel) -> OrderModel:
    """The same order of any amount: its greatest amount then needs no proof of its bound."""
    return replace(model, order=replace(model.order, amount=None))


def _ask_cost(_system: System, model: OrderModel) -> Asking[Answer]:
    """The cheapest recipe's cost; ``NOT_KNOWN`` where a lot of unknown cost is needed."""
    if all(cost is None for cost in model.cost):
        return NOT_KNOWN if (yield from _ask_unmet(model)) is None else None
    least = yield from ask_least_cost(model)
    if least is None:
        return None
    return NOT_KNOWN if least.cost is None else least.cost


def _ask_amount(_system: System, model: OrderModel) -> Asking[Answer]:
    """The greatest amount, 0 where the order is lost; ``NO_BOUND`` where it has none."""
    greatest = yield from ask_greatest_amount(_without_amount(model))
    if greatest is None:
        return ZERO if (yield from _ask_unmet(model)) in LOST else NO_BOUND
    return NO_BOUND if greatest.amount is None else greatest.amount


def _ask_room(system: System, model: OrderModel) -> Asking[Answer]:
    scales = scales_of(model, {component.name: component for component in system.campaign.components})
    is_met = (yield from _ask_unmet(model)) is None
    room = yield from ask_room(model, scales, in_amount=is_met)
    return None if room is None else room.t


def _ask_recipe(_system: System, model: OrderModel) -> Asking[Answer]:
    """The shares of the recipe that stands first, by lot."""
    try:
        best = yield from ask_first_shares(model, to_publish=False)
    except ValueError:
        return None
    return named_shares(model, best.staged.x)


def _ask_conformity(system: System, model: OrderModel) -> Asking[Answer]:
    """The probability that the first recipe is inside all limits."""
    shares = cast("dict[str, Fraction] | None", (yield from _ask_recipe(system, model)))
    if shares is None:
        return None
    table = table_of(system.campaign)
    uncertain = uncertain_rows(model, table, uncertainty_of(system.campaign, table))
    (conformity,) = conformities_of(model, uncertain, [shares])
    return None if conformity.all is None else Fraction(f"{conformity.all:.{DECIMALS}f}")


_ASKED: Mapping[str, Callable[[System, OrderModel], Asking[Answer]]] = {
    "verdict": _ask_verdict,
    "cost": _ask_cost,
    "amount": _ask_amount,
    "room": _ask_room,
    "recipe": _ask_recipe,
    "conformity": _ask_conformity,
}
