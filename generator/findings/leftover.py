"""Stock after the plan: what is left of each lot, and what the rest alone can still make."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction

from generator.findings.house_rules import breach
from generator.findings.measures import Measure
from generator.findings.model import OrderModel, model_of
from generator.findings.plan_exact import Amounts
from generator.findings.plan_model import CAN_JOIN, Block, PlanModel, Stage, best_of
from generator.findings.plan_search import seek
from generator.findings.programs import ONE, ZERO
from generator.findings.records import Verdict
from generator.findings.values import Table
from generator.geometry.program import Optimum
from generator.intake.records import Campaign

#: Nodes and seconds for one order's greatest amount under house rules.
NODES, SECONDS = 200, 20.0


def left_of(model: PlanModel, amounts: Amounts) -> dict[int, Fraction]:
    """What is left of every lot whose stock is given, by position, in file order."""
    left = dict(model.stock)
    for block, own in zip(model.blocks, amounts, strict=True):
        for i, x in own.items():
            lot = block.model.lots[i]
            if lot in left:
                left[lot] -= x
    return left


def makeable_from(
    campaign: Campaign,
    table: Table,
    measures: Mapping[str, Measure],
    left: Mapping[int, Fraction],
    alone: Mapping[str, Verdict | None],
) -> dict[str, float]:
    """For each order that some blend meets, the most that the stock left makes within its limits and rules.

    Each order alone; an order that the stock sets no bound to is not named.  The amount is exact; that house
    rules allow no more is the search's claim.
    """
    found: dict[str, float] = {}
    if not left:
        return found
    lots = tuple(
        replace(lot, stock=replace(lot.stock, value=left[i])) if lot.stock is not None else lot
        for i, lot in enumerate(campaign.lots)
    )
    rest = replace(campaign, lots=lots)
    for order in campaign.orders:
        if alone.get(order.name) not in CAN_JOIN:
            continue
        model = model_of(rest, order, table, measures)
        # Without a model not even one lot is left that the order may use.
        most = _most(rest, model) if isinstance(model, OrderModel) else ZERO
        if most is not None:
            found[order.name] = float(most)
    return found


def _most(campaign: Campaign, model: OrderModel) -> Fraction | None:
    answer = best_of(model, (-ONE,) * len(model.lots))
    if not isinstance(answer, Optimum):
        return None
    most = -answer.value
    if not most:
        return ZERO
    shares = {name: x / most for name, x in zip(model.names, answer.x, strict=True)}
    if breach(model.rules, model.names, shares) is None:
        return most
    block = Block(order=model.order, model=model, low=ZERO, high=None, most=most)
    stage = Stage(aim="amount", priority=1, costs=((-ONE,) * len(model.lots),))
    stock = {lot: amount for lot, amount in zip(model.lots, model.stock, strict=True) if amount is not None}
    plan = PlanModel(campaign=campaign, blocks=(block,), stock=stock, stages=(stage,), is_valued=False, left_out={})
    return -seek(plan, NODES, SECONDS).settled.values[0]
