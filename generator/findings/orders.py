"""Everything known of one order, taken alone: its verdict and proof, recipes, room and ways out."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction

from generator.findings.assured import assured
from generator.findings.conformity import conformity_of, uncertain_rows
from generator.findings.house import UndecidedError
from generator.findings.measures import Measure
from generator.findings.model import OrderModel, model_of, without_lot
from generator.findings.programs import ONE, ZERO, amount_rows, share_bound_rows
from generator.findings.ranges import limit_findings
from generator.findings.recipes import cheapest, cheapest_shares, closest, fewest, roomiest
from generator.findings.records import CurvePoint, OrderFinding, Proof, Recipe, RecipeProof, Verdict
from generator.findings.room import Room, Scales, allowed, room_of, scales_of
from generator.findings.sentences import answer_sentence
from generator.findings.tradeoff import curve
from generator.findings.uncertainty import Uncertainty
from generator.findings.values import Table
from generator.findings.verdicts import Judgement, judge
from generator.findings.ways_out import can_be_met_at_all, nearest_blend, wanted_lots
from generator.findings.worth import has_all_costs, lot_prices, worths
from generator.geometry.decide import decide
from generator.geometry.program import Optimum, Program
from generator.intake.records import Campaign, Order
from generator.problems import Problem

MET = ("makeable", "edge")
LOST = ("unreachable", "barred")


@dataclass(frozen=True, slots=True)
class Desk:
    """What every question about an order of one campaign needs."""

    campaign: Campaign
    table: Table
    measures: Mapping[str, Measure]
    uncertainty: Uncertainty


def order_finding(desk: Desk, order: Order, problems: list[Problem]) -> OrderFinding:
    """Everything known of one order; its own problems are added to ``problems``."""
    model = model_of(desk.campaign, order, desk.table, desk.measures)
    if not isinstance(model, OrderModel):
        problems.extend(model)
        return _without_verdict(order, model[0])
    vanishing = _vanishing(model)
    if vanishing is not None:
        problems.append(vanishing)
        return _without_verdict(order, vanishing)
    try:
        return _answered(desk, model)
    except UndecidedError as undecided:
        problem = _undecided(order, undecided)
        problems.append(problem)
        return _without_verdict(order, problem)


def _answered(desk: Desk, model: OrderModel) -> OrderFinding:
    judgement = judge(model)
    greatest = judgement.greatest
    finding = replace(
        _blank(model.order),
        verdict=judgement.verdict,
        greatest_amount=_greatest_amount(judgement),
        greatest_recipe=None if greatest is None else {name: float(x) for name, x in greatest.shares.items()},
        runs_out=greatest.runs_out if greatest else (),
        limits=limit_findings(model),
        left_out=model.left_out,
    )
    scales = scales_of(model, {component.name: component for component in desk.campaign.components})
    is_met = judgement.verdict in MET
    room = room_of(model, scales, in_amount=is_met)
    finding = replace(finding, room=None if room is None else float(room.t), room_unit=scales.unit if room else None)
    finding = _met(desk, model, finding, scales, room) if is_met else finding
    finding = _ways_out(desk, model, finding, scales) if judgement.verdict in LOST else finding
    finding = _barred(desk, model, finding) if judgement.verdict == "barred" else finding
    finding = replace(finding, proof=_proof(judgement, finding.recipes.get("cheapest")))
    return replace(
        finding, sentence=answer_sentence(desk.campaign, model, judgement, finding, _absurd(desk, model, judgement))
    )


def _met(desk: Desk, model: OrderModel, finding: OrderFinding, scales: Scales, room: Room | None) -> OrderFinding:
    """The recipes of an order that is met, what room costs, and what changes are worth."""
    recipes = {"cheapest": cheapest(model, desk.table, desk.measures)}
    if room is not None:
        recipes["roomiest"] = roomiest(model, desk.table, desk.measures, scales, room)
    recipes["closest"] = closest(model, desk.table, desk.measures)
    recipes["fewest"] = fewest(model, desk.table, desk.measures)
    uncertain = uncertain_rows(model, desk.table, desk.uncertainty)
    held = assured(model, desk.table, desk.measures, uncertain, desk.campaign.settings.confidence)
    if held is not None:
        recipes["assured"] = held
    recipes = {
        name: replace(_with_room(model, scales, recipe), conformity=conformity_of(model, uncertain, recipe.exact))
        for name, recipe in recipes.items()
    }
    finding = replace(finding, recipes=recipes)
    without = {name: _without(desk, model, name) for name in recipes["cheapest"].exact}
    finding = replace(
        finding,
        without_lot={
            name: (verdict, None if cost is None else float(cost)) for name, (verdict, cost) in without.items()
        },
    )
    if not has_all_costs(model):
        return finding
    # With house rules these are the winning branch's.
    branch = cheapest_shares(model).branch
    enters, stays = lot_prices(branch, recipes["cheapest"], {name: cost for name, (_, cost) in without.items()})
    worth = worths(branch, recipes["cheapest"], scales.by_row)
    limits = tuple(
        replace(limit, worth=float(worth[limit.on].saving), worth_holds=worth[limit.on].holds)
        if limit.on in worth
        else limit
        for limit in finding.limits
    )
    return replace(
        finding,
        enters_at=enters,
        stays_up_to=stays,
        limits=limits,
        curve=_curve(model, scales, recipes["cheapest"], room),
    )


def _barred(desk: Desk, model: OrderModel, finding: OrderFinding) -> OrderFinding:
    """Which rules stand in the way, and what each, lifted alone, would allow (a fact, no advice)."""
    names = model.rules.names()
    lifted = {}
    for name in names:
        freed = replace(model, rules=model.rules.without(name))
        verdict = judge(freed).verdict
        cost = cheapest(freed, desk.table, desk.measures).cost if verdict in MET else None
        lifted[name] = (verdict, cost)
    alone = tuple(name for name in names if lifted[name][0] not in LOST)
    return replace(finding, barred_by=alone or names, lifted=lifted)


def _undecided(order: Order, undecided: UndecidedError) -> Problem:
    return Problem(
        file=order.place.file,
        row=order.place.row,
        found=order.name,
        message=f"the house rules leave too many ways to decide this order ({undecided})",
        remedy="raise max_lots, lower least_if_used, or name the order's lots",
        severity="drops",
    )


def _with_room(model: OrderModel, scales: Scales, recipe: Recipe) -> Recipe:
    t = allowed(model, scales, [recipe.exact.get(name, ZERO) for name in model.names])
    return replace(recipe, room=None if t is None else float(t))


def _curve(model: OrderModel, scales: Scales, recipe: Recipe, room: Room | None) -> tuple[CurvePoint, ...]:
    first = allowed(model, scales, [recipe.exact.get(name, ZERO) for name in model.names])
    if room is None or first is None:
        return ()
    return tuple(
        CurvePoint(room=float(point.t), cost=float(point.cost), shares={name: float(x) for name, x in point.shares})
        for point in curve(model, scales, first, room.t)
    )


def _without(desk: Desk, model: OrderModel, name: str) -> tuple[Verdict | None, Fraction | None]:
    """Verdict and least cost of the order without one lot; no verdict where no lot is left to use."""
    rest = without_lot(model, name) if len(model.lots) > 1 else None
    if rest is None:
        return None, None
    verdict = judge(rest).verdict
    if verdict not in MET:
        return verdict, None
    recipe = cheapest(rest, desk.table, desk.measures)
    known = all(rest.cost[rest.names.index(used)] is not None for used in recipe.exact)
    if not known:
        return verdict, None
    costs = dict(zip(rest.names, rest.cost, strict=True))
    return verdict, sum(((costs[used] or ZERO) * share for used, share in recipe.exact.items()), ZERO)


def _ways_out(desk: Desk, model: OrderModel, finding: OrderFinding, scales: Scales) -> OrderFinding:
    return replace(
        finding,
        nearest=nearest_blend(model, desk.table, desk.measures, scales),
        wanted_lot=wanted_lots(desk.campaign, model, desk.table, desk.measures),
    )


def _absurd(desk: Desk, model: OrderModel, judgement: Judgement) -> bool:
    """Whether the limits are such that no material at all could meet them."""
    return judgement.verdict == "unreachable" and not can_be_met_at_all(desk.campaign, model, desk.table, desk.measures)


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


def _vanishing(model: OrderModel) -> Problem | None:
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
        answer = decide(program)
        if isinstance(answer, Optimum) and answer.value == 0:
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
