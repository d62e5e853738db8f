"""Stock after the plan: what is left of each lot, and what the rest alone can still make."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction

from generator.findings.house_rules import breach
from generator.findings.measures import Measure
from generator.findings.model import OrderModel, model_of
from generator.findings.plan_exact import Amounts
from generator.findings.plan_model import CAN_JOIN, Block, PlanModel, Stage, best_of_each
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
    models: dict[str, OrderModel] = {}
    for order in campaign.orders:
        if alone.get(order.name) not in CAN_JOIN:
            continue
        # Without a model not even one lot is left that the order may use.
        found[order.name] = 0.0
        model = model_of(rest, order, table, measures)
        if isinstance(model, OrderModel):
            models[order.name] = model
    answers = best_of_each([(model, (-ONE,) * len(model.lots)) for model in models.values()])
    for (name, model), answer in zip(models.items(), answers, strict=True):
        if isinstance(answer, Optimum):
            found[name] = float(_most(rest, model, answer))
        else:
            del found[name]
    return found


def _most(campaign: Campaign, model: OrderModel, answer: Optimum) -> Fraction:
    """The most within the house rules, ``answer`` being the most without them."""
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
