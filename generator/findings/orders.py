"""Everything known of one order, taken alone: its verdict and proof, recipes, room and ways out."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import TypeVar

from generator.findings.ask import Asking, answered, ask_all_best, ask_nothing, both, together
from generator.findings.assured import ask_assured
from generator.findings.conformity import conformities_of, uncertain_rows
from generator.findings.house import UndecidedError
from generator.findings.measures import Measure
from generator.findings.model import OrderModel, model_of, without_lot
from generator.findings.programs import ONE, ZERO, amount_rows, share_bound_rows
from generator.findings.ranges import ask_limit_findings
from generator.findings.recipes import (
    LeastCost,
    ask_cheapest,
    ask_closest,
    ask_fewest,
    ask_least_cost,
    ask_roomiest,
)
from generator.findings.records import CurvePoint, OrderFinding, Proof, Recipe, RecipeProof, Verdict
from generator.findings.room import Room, Scales, allowed, ask_room, scales_of
from generator.findings.sentences import answer_sentence
from generator.findings.tradeoff import ask_curve
from generator.findings.uncertainty import Uncertainty
from generator.findings.values import Table
from generator.findings.verdicts import Judgement, ask_face, ask_judgement, ask_verdict
from generator.findings.ways_out import ask_can_be_met_at_all, ask_nearest_blend, ask_wanted_lots
from generator.findings.worth import ask_lot_prices, ask_worths, has_all_costs
from generator.geometry.asked import Point
from generator.geometry.program import Program
from generator.intake.records import Campaign, Order
from generator.problems import Problem, Severity

MET = ("makeable", "edge")
LOST = ("unreachable", "barred")

T = TypeVar("T")


@dataclass(frozen=True, slots=True)
class Desk:
    """What every question about an order of one campaign needs."""

    campaign: Campaign
    table: Table
    measures: Mapping[str, Measure]
    uncertainty: Uncertainty


@dataclass(frozen=True, slots=True)
class Reported:
    """What is known of one order, and its own problems."""

    finding: OrderFinding
    problems: tuple[Problem, ...] = ()


def ask_order(desk: Desk, order: Order) -> Asking[Reported]:
    """Everything known of one order."""
    model = model_of(desk.campaign, order, desk.table, desk.measures)
    if not isinstance(model, OrderModel):
        return Reported(_without_verdict(order, model[0]), model)
    problem = yield from ask_vanishing(model)
    if problem is not None:
        return Reported(_without_verdict(order, problem), (problem,))
    undecided: list[str] = []
    try:
        finding = yield from _ask_answers(desk, model, undecided)
    except UndecidedError as error:
        problem = _undecided(order, error)
        return Reported(_without_verdict(order, problem), (problem,))
    return Reported(finding, tuple(_left_out(order, part) for part in dict.fromkeys(undecided)))


def _ask_unless_undecided(part: str, undecided: list[str], asking: Asking[T]) -> Asking[T | None]:
    """A part of the answer that the others can do without: None, and noted, where the house rules leave too many
    branches to decide it."""
    try:
        return (yield from asking)
    except UndecidedError:
        undecided.append(part)
        return None


def _ask_answers(desk: Desk, model: OrderModel, undecided: list[str]) -> Asking[OrderFinding]:
    judgement, limits = yield from both(ask_judgement(model), ask_limit_findings(model))
    greatest = judgement.greatest
    finding = replace(
        _blank(model.order),
        verdict=judgement.verdict,
        greatest_amount=_greatest_amount(judgement),
        greatest_recipe=None if greatest is None else {name: float(x) for name, x in greatest.shares.items()},
        runs_out=greatest.runs_out if greatest else (),
        limits=limits,
        left_out=model.left_out,
    )
    scales = scales_of(model, {component.name: component for component in desk.campaign.components})
    if judgement.verdict in MET:
        finding = yield from _ask_met(desk, model, finding, scales, undecided)
    else:
        asking = ask_room(model, scales, in_amount=False)
        room = yield from _ask_unless_undecided("the room", undecided, asking)
        finding = _with_room(finding, scales, room)
    if judgement.verdict in LOST:
        finding = yield from _ask_ways_out(desk, model, finding, scales, undecided)
    if judgement.verdict == "barred":
        finding = yield from _ask_barred(desk, model, finding)
    finding = replace(finding, proof=_proof(judgement, finding.recipes.get("cheapest")))
    absurd = yield from _ask_absurd(desk, model, judgement)
    return replace(finding, sentence=answer_sentence(desk.campaign, model, judgement, finding, absurd))


def _with_room(finding: OrderFinding, scales: Scales, room: Room | None) -> OrderFinding:
    return replace(finding, room=None if room is None else float(room.t), room_unit=scales.unit if room else None)


def _ask_met(
    desk: Desk, model: OrderModel, finding: OrderFinding, scales: Scales, undecided: list[str]
) -> Asking[OrderFinding]:
    """The recipes of an order that is met, what room costs, and what changes are worth."""

    def ask_part(part: str, asking: Asking[T]) -> Asking[T | None]:
        return _ask_unless_undecided(part, undecided, asking)

    (cheapest, best), (room, closest) = yield from both(
        ask_cheapest(model, desk.table, desk.measures),
        both(
            ask_part("the room", ask_room(model, scales, in_amount=True)),
            ask_part("the closest recipe", ask_closest(model, desk.table, desk.measures)),
        ),
    )
    (roomiest, fewest), without = yield from both(
        both(
            ask_nothing(None)
            if room is None
            else ask_part("the roomiest recipe", ask_roomiest(model, desk.table, desk.measures, scales, room)),
            ask_fewest(model, desk.table, desk.measures, cheapest),
        ),
        _ask_without_each(model, tuple(cheapest.exact)),
    )
    recipes: dict[str, Recipe | None] = {
        "cheapest": cheapest,
        "roomiest": roomiest,
        "closest": closest,
        "fewest": fewest,
    }
    uncertain = uncertain_rows(model, desk.table, desk.uncertainty)
    confidence = desk.campaign.settings.confidence
    recipes["assured"] = yield from ask_part(
        "the assured recipe", ask_assured(model, desk.table, desk.measures, uncertain, confidence, best)
    )
    there = {name: recipe for name, recipe in recipes.items() if recipe is not None}
    conformities = conformities_of(model, uncertain, [recipe.exact for recipe in there.values()])
    finding = replace(
        _with_room(finding, scales, room),
        recipes={
            name: replace(recipe, room=_room_left(model, scales, recipe), conformity=conformity)
            for (name, recipe), conformity in zip(there.items(), conformities, strict=True)
        },
        without_lot={
            name: (verdict, None if cost is None else float(cost)) for name, (verdict, cost) in without.items()
        },
    )
    if not has_all_costs(model):
        return finding
    costs_without = {name: cost for name, (_, cost) in without.items()}
    recipe = finding.recipes["cheapest"]
    (enters, stays), (worth, curve) = yield from both(
        ask_lot_prices(best.branch, recipe, costs_without, best.staged.stages[0]),
        both(
            ask_worths(best.branch, recipe, scales.by_row, best.staged.stages[0]),
            ask_part("the curve", _ask_curve(model, scales, recipe, room)),
        ),
    )
    # With house rules prices and worths are the winning branch's.
    limits = tuple(
        replace(limit, worth=float(worth[limit.on].saving), worth_holds=worth[limit.on].holds)
        if limit.on in worth
        else limit
        for limit in finding.limits
    )
    return replace(finding, enters_at=enters, stays_up_to=stays, limits=limits, curve=curve or ())


def _ask_barred(desk: Desk, model: OrderModel, finding: OrderFinding) -> Asking[OrderFinding]:
    """Which rules stand in the way, and what each, lifted alone, would allow (a fact, no advice)."""
    names = model.rules.names()
    freed = [replace(model, rules=model.rules.without(name)) for name in names]
    found = yield from together([_ask_lifted(desk, one) for one in freed])
    lifted = dict(zip(names, found, strict=True))
    alone = tuple(name for name in names if lifted[name][0] not in LOST)
    return replace(finding, barred_by=alone or names, lifted=lifted)


def _ask_lifted(desk: Desk, model: OrderModel) -> Asking[tuple[Verdict, float | None]]:
    verdict = yield from ask_verdict(model)
    if verdict not in MET:
        return verdict, None
    recipe, _ = yield from ask_cheapest(model, desk.table, desk.measures)
    return verdict, recipe.cost


def _undecided(order: Order, undecided: UndecidedError) -> Problem:
    remedy = "raise max_lots, lower least_if_used, or name the order's lots"
    return _too_many_ways(order, f"this order ({undecided})", remedy, "drops")


def _left_out(order: Order, part: str) -> Problem:
    what = f"{part} of this order, which is left out"
    return _too_many_ways(order, what, "raise max_lots, or name the order's lots", "note")


def _too_many_ways(order: Order, what: str, remedy: str, severity: Severity) -> Problem:
    return Problem(
        file=order.place.file,
        row=order.place.row,
        found=order.name,
        message=f"the house rules leave too many ways to decide {what}",
        remedy=remedy,
        severity=severity,
    )


def _room_left(model: OrderModel, scales: Scales, recipe: Recipe) -> float | None:
    t = allowed(model, scales, [recipe.exact.get(name, ZERO) for name in model.names])
    return None if t is None else float(t)


def _ask_curve(model: OrderModel, scales: Scales, recipe: Recipe, room: Room | None) -> Asking[tuple[CurvePoint, ...]]:
    first = allowed(model, scales, [recipe.exact.get(name, ZERO) for name in model.names])
    if room is None or first is None:
        return ()
    points = yield from ask_curve(model, scales, first, room.t)
    return tuple(
        CurvePoint(room=float(point.t), cost=float(point.cost), shares={name: float(x) for name, x in point.shares})
        for point in points
    )


Without = tuple[Verdict | None, Fraction | None]


def _ask_without_each(model: OrderModel, names: tuple[str, ...]) -> Asking[dict[str, Without]]:
    found = yield from together([_ask_without(model, name) for name in names])
    return dict(zip(names, found, strict=True))


def _ask_without(model: OrderModel, name: str) -> Asking[Without]:
    """Verdict and least cost of the order without one lot; no verdict where no lot is left to use."""
    rest = without_lot(model, name) if len(model.lots) > 1 else None
    if rest is None:
        return None, None
    least: LeastCost | None = None
    if any(cost is not None and top != 0 for cost, top in zip(rest.cost, rest.upper, strict=True)):
        least = yield from ask_least_cost(rest)
    if least is None:
        return (yield from ask_verdict(rest)), None
    return ("edge" if (yield from ask_face(rest)) else "makeable"), least.cost


def _ask_ways_out(
    desk: Desk, model: OrderModel, finding: OrderFinding, scales: Scales, undecided: list[str]
) -> Asking[OrderFinding]:
    nearest, wanted = yield from both(
        _ask_unless_undecided(
            "the nearest blend", undecided, ask_nearest_blend(model, desk.table, desk.measures, scales)
        ),
        ask_wanted_lots(desk.campaign, model, desk.table, desk.measures),
    )
    return replace(finding, nearest=nearest, wanted_lot=wanted)


def _ask_absurd(desk: Desk, model: OrderModel, judgement: Judgement) -> Asking[bool]:
    """Whether the limits are such that no material at all could meet them."""
    if judgement.verdict != "unreachable":
        return False
    return not (yield from ask_can_be_met_at_all(desk.campaign, model, desk.table, desk.measures))


def _greatest_amount(judgement: Judgement) -> float | None:
    if judgement.verdict in LOST:
        return 0.0
    greatest = judgement.greatest
    return None if greatest is None or greatest.amount is None else float(greatest.amount)


def _proof(judgement: Judgement, recipe: Recipe | None) -> Proof:
    lost = judgement.blocking or judgement.branches
    if lost is not None:
        return lost
    if recipe is not None:
        return RecipeProof(shares=recipe.exact, face=judgement.face)
    assert judgement.greatest is not None, "an order that some blend meets has a recipe or is short"
    return RecipeProof(shares=judgement.greatest.shares, cap=judgement.greatest.cap)


def _blank(order: Order) -> OrderFinding:
    low = order.amount.low if order.amount else None
    high = order.amount.high if order.amount else None
    return OrderFinding(
        order=order.name,
        sentence="",
        verdict=None,
        amount=None if low is None else float(low),
        amount_low=None if low is None else float(low),
        amount_high=None if high is None else float(high),
    )


def _without_verdict(order: Order, problem: Problem) -> OrderFinding:
    return replace(_blank(order), sentence=f"No answer: {problem.message}.")


def ask_vanishing(model: OrderModel) -> Asking[Problem | None]:
    """The problem of a ratio whose denominator can vanish in a blend within the limits."""
    rows = amount_rows(model)
    bounds = share_bound_rows(model)
    n = len(model.lots)
    for name in model.limits:
        below = model.denominators[name]
        if all(below):
            continue
        program = Program(
            rows=(*(entry.terms for entry in rows.entries), *(terms for _, terms in bounds), (ONE,) * n),
            row_low=(*(entry.low for entry in rows.entries), *(None for _ in bounds), ONE),
            row_high=(*(entry.high for entry in rows.entries), *(ZERO for _ in bounds), ONE),
            lower=(ZERO,) * n,
            upper=(None,) * n,
            cost=below,
        )
        (best,) = yield from ask_all_best([program])
        if isinstance(best, Point) and best.value == 0:
            place = model.order.limits[name].place if name in model.order.limits else None
            return Problem(
                file=model.order.place.file,
                row=model.order.place.row,
                column=place.column if place else name,
                found=model.order.limits[name].text if name in model.order.limits else None,
                message=f"a blend within the limits can have a denominator of 0 in {name}",
                remedy="add a low limit on the denominator",
                severity="drops",
            )
    return None


vanishing = answered(ask_vanishing)
