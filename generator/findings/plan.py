"""All orders served together from one stock: the plan of a campaign.

In: a Campaign, its Table and measures, and what is known of its orders taken alone.  Out: a Plan, and
problems of orders that can't join it.  The search is in :mod:`generator.findings.plan_search`; all
amounts published here are exact.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction

from generator.findings.house_rules import breach
from generator.findings.leftover import left_of, makeable_from
from generator.findings.losers import losers_of, one_more_of
from generator.findings.measures import Measure, blend_value
from generator.findings.plan_exact import Settled
from generator.findings.plan_model import Block, PlanModel, plan_model
from generator.findings.plan_search import Sought, seek
from generator.findings.programs import ZERO
from generator.findings.records import Loser, LotFinding, OrderFinding, Plan, PlannedOrder, PlanStage, Verdict
from generator.findings.values import Table
from generator.intake.records import Campaign
from generator.problems import Problem

Planned = tuple[Plan | None, tuple[Problem, ...]]


def plan_of(
    campaign: Campaign, table: Table, measures: Mapping[str, Measure], alone: Mapping[str, Verdict | None]
) -> Planned:
    """The plan, and the problems of orders that can't join it; no plan where no order is open.

    ``alone`` holds the verdict of every order, None for one without an answer.
    """
    if not campaign.orders:
        return None, ()
    model = plan_model(campaign, table, measures, alone)
    settings = campaign.settings
    sought = seek(model, settings.plan_nodes, float(settings.plan_seconds))
    settled = sought.settled
    _check(model, settled)
    left = left_of(model, settled.amounts)
    used = {model.blocks[k].model.names[i] for k, own in enumerate(settled.amounts) for i in own}
    gap = max((o.gap for o in sought.outcomes if o.stage.priority is not None and o.gap is not None), default=None)
    is_proven = all(o.gap == 0 for o in sought.outcomes if o.stage.priority is not None)
    status = "proven" if is_proven else "out of time" if sought.is_out_of_time else "within gap"
    plan = Plan(
        value=float(value_of(model, settled)),
        measure="value" if model.is_valued else "amount",
        orders={order.name: _planned(model, settled, order.name, table, measures) for order in campaign.orders},
        left={campaign.lots[i].name: float(amount) for i, amount in left.items()},
        runs_out=tuple(campaign.lots[i].name for i, amount in left.items() if amount == 0 < model.stock[i]),
        status=status,
        gap=0.0 if is_proven else gap,
        stages=_stages(sought),
        nodes=sought.nodes,
        never_used=tuple(
            lot.name for i, lot in enumerate(campaign.lots) if lot.name not in used and model.stock.get(i) != 0
        ),
        unchecked=tuple(lot.name for lot in campaign.lots if lot.stock is None and not lot.is_unlimited),
        unpriced=tuple(block.order.name for block in model.blocks if model.is_valued and block.order.price is None),
        uncosted=tuple(lot.name for lot in campaign.lots if lot.name in used and lot.cost is None),
        one_more={campaign.lots[i].name: gain for i, gain in one_more_of(model, settled).items()},
        leftover=makeable_from(campaign, table, measures, left, alone),
    )
    return _with_losers(plan, model, settled, alone), model.problems


def verdicts_of(findings: Sequence[OrderFinding]) -> dict[str, Verdict | None]:
    """The verdicts by order."""
    return {finding.order: finding.verdict for finding in findings}


def with_worth(lots: tuple[LotFinding, ...], plan: Plan | None) -> tuple[LotFinding, ...]:
    """The lots with what one unit more of their stock is worth, in money; unchanged without prices."""
    if plan is None or plan.measure != "value":
        return lots
    return tuple(
        replace(lot, stock_worth=plan.one_more.get(lot.lot, 0.0)) if lot.lot in plan.left else lot for lot in lots
    )


def _with_losers(plan: Plan, model: PlanModel, settled: Settled, alone: Mapping[str, Verdict | None]) -> Plan:
    found = {loser.order: loser for loser in losers_of(model, settled, alone)}
    for name, reason in model.left_out.items():
        kind = "alone" if reason == alone.get(name) or alone.get(name) is None else "left out"
        remark = reason if kind == "left out" else ""
        found[name] = Loser(
            order=name, alone=alone.get(name), reason="alone" if kind == "alone" else "left out", remark=remark
        )
    order = [name for name in plan.orders if name in found]
    return replace(plan, losers=tuple(found[name] for name in order))


def _stages(sought: Sought) -> tuple[PlanStage, ...]:
    stages = []
    for outcome, value in zip(sought.outcomes, sought.settled.values, strict=False):
        stage = outcome.stage
        best = -value if stage.aim in ("value", "amount") else value
        stages.append(PlanStage(aim=stage.aim, priority=stage.priority, best=float(best), gap=outcome.gap))
    return tuple(stages)


def value_of(model: PlanModel, settled: Settled) -> Fraction:
    """Σ price·accepted − Σ cost·used, or the amount accepted where nothing is priced."""
    total = ZERO
    for block, own in zip(model.blocks, settled.amounts, strict=True):
        accepted = sum(own.values(), ZERO)
        if not model.is_valued:
            total += accepted
            continue
        price = block.order.price.value if block.order.price else ZERO
        total += price * accepted - _cost(block, own)
    return total


def _cost(block: Block, own: Mapping[int, Fraction]) -> Fraction:
    return sum(((block.model.cost[i] or ZERO) * x for i, x in own.items()), ZERO)


def _planned(
    model: PlanModel, settled: Settled, name: str, table: Table, measures: Mapping[str, Measure]
) -> PlannedOrder:
    order = model.campaign.order(name)
    asked = None if order.amount is None else order.amount.low if order.amount.low is not None else order.amount.high
    place = next((k for k, block in enumerate(model.blocks) if block.order.name == name), None)
    shown = None if asked is None else float(asked)
    if place is None or not settled.amounts[place]:
        return PlannedOrder(accepted=0.0, amounts={}, asked=shown, priority=order.priority)
    block, own = model.blocks[place], settled.amounts[place]
    accepted = sum(own.values(), ZERO)
    exact = {block.model.names[i]: own[i] for i in sorted(own)}
    by_lot = {block.model.lots[i]: x / accepted for i, x in own.items()}
    values = {
        quantity: float(value)
        for quantity, measure in measures.items()
        if (value := blend_value(measure, table, block.model.lots, by_lot)) is not None
    }
    is_costed = all(block.model.cost[i] is not None for i in own)
    return PlannedOrder(
        accepted=float(accepted),
        amounts={lot: float(x) for lot, x in exact.items()},
        exact=exact,
        asked=shown,
        priority=order.priority,
        income=float(order.price.value * accepted) if order.price else None,
        cost=float(_cost(block, own)) if is_costed else None,
        values=values,
    )


def _check(model: PlanModel, settled: Settled) -> None:
    """Everything that a plan promises, once more and exactly: ArithmeticError where it doesn't hold."""
    for block, own in zip(model.blocks, settled.amounts, strict=True):
        total = sum(own.values(), ZERO)
        if not total:
            continue
        fits = block.low <= total and (block.high is None or total <= block.high)
        for terms, low, high in block.rows:
            value = sum((terms[i] * x for i, x in own.items()), ZERO)
            fits = fits and (low is None or value >= low) and (high is None or value <= high)
        shares = {block.model.names[i]: x / total for i, x in own.items()}
        if not fits or breach(block.model.rules, block.model.names, shares) is not None:
            raise ArithmeticError(f"the plan breaks a limit of order {block.order.name}")
    if any(amount < 0 for amount in left_of(model, settled.amounts).values()):
        raise ArithmeticError("the plan takes more than there is")
