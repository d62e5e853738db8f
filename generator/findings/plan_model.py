"""All orders of a campaign as one program: who may join the plan, on what terms, and in which stages.

In: a Campaign with its Table, measures and the verdicts of its orders taken alone.  Out: a PlanModel of
blocks (one an order), which share nothing but the stock of the lots.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

from generator.findings.measures import Measure
from generator.findings.model import OrderModel, model_of
from generator.findings.programs import ONE, ZERO, amount_rows, share_bound_rows
from generator.findings.records import Verdict
from generator.findings.values import Table
from generator.geometry.program import Bound, Optimum, Program, Unbounded, Vector
from generator.geometry.settle import answer_many
from generator.intake.records import Campaign, Order
from generator.problems import Problem

#: Verdicts under which an order can have a part in the plan.
CAN_JOIN = ("makeable", "edge", "short")
#: Without any bound on an order that gains nothing by growing, this many times everything there is.
FAR = 2

Aim = Literal["value", "amount", "unknown cost", "cost", "lots"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Block:
    """One order of the plan over its n usable lots.

    Accepted, its amount is between ``low`` and ``high`` (None: no bound); ``low`` above 0 makes it a
    choice between nothing and that much.  ``most`` is an amount that it can't exceed anyway.
    """

    order: Order
    model: OrderModel
    low: Fraction
    high: Fraction | None
    most: Fraction

    @property
    def asked(self) -> Fraction | None:
        """The amount at which the order counts as served in full; None where any amount will do."""
        typed = self.order.amount
        return None if typed is None else typed.low if typed.low is not None else typed.high

    @property
    def rows(self) -> list[tuple[Vector, Bound, Bound]]:
        """Limits and share bounds as homogeneous rows over the lots' amounts."""
        limits = [(entry.terms, entry.low, entry.high) for entry in amount_rows(self.model).entries]
        return [*limits, *((terms, None, ZERO) for _, terms in share_bound_rows(self.model))]


@dataclass(frozen=True, slots=True, kw_only=True)
class Stage:
    """One objective, to be made least after those before it; ``costs[k][i]`` of lot i in block k.

    ``aim`` "lots" counts the lots used, and has no costs.  ``priority`` of a class, None for all.
    """

    aim: Aim
    priority: int | None = None
    costs: tuple[Vector, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanModel:
    """The blocks, the stock that binds them by lot position, and why the other orders stay out."""

    campaign: Campaign
    blocks: tuple[Block, ...]
    stock: Mapping[int, Fraction]
    stages: tuple[Stage, ...]
    is_valued: bool
    left_out: Mapping[str, str]
    problems: tuple[Problem, ...] = ()


def plan_model(
    campaign: Campaign, table: Table, measures: Mapping[str, Measure], alone: Mapping[str, Verdict | None]
) -> PlanModel:
    """The plan's program; orders that can't have a part in it are named with the reason."""
    left_out: dict[str, str] = {}
    problems: list[Problem] = []
    blocks: list[Block] = []
    # An order without an amount joins only if it is priced; so it is enough to look at the prices typed.
    is_valued = any(order.price is not None for order in campaign.orders)
    for order in campaign.orders:
        verdict = alone.get(order.name)
        if verdict not in CAN_JOIN:
            left_out[order.name] = "no answer" if verdict is None else verdict
            continue
        if order.amount is None and order.price is None:
            left_out[order.name] = "no amount and no price"
            continue
        model = model_of(campaign, order, table, measures)
        assert isinstance(model, OrderModel), "an order with a verdict has a system"
        block = _block(order, model, is_valued=is_valued)
        if isinstance(block, Problem):
            problems.append(block)
            left_out[order.name] = "no bound on its amount"
        else:
            blocks.append(block)
    return PlanModel(
        campaign=campaign,
        blocks=tuple(blocks),
        stock={i: lot.stock.value for i, lot in enumerate(campaign.lots) if lot.stock is not None},
        stages=_stages(campaign, blocks, is_valued=is_valued),
        is_valued=is_valued,
        left_out=left_out,
        problems=tuple(problems),
    )


def _block(order: Order, model: OrderModel, *, is_valued: bool) -> Block | Problem:
    amount = order.amount
    low = amount.low if amount and amount.low is not None and order.accept == "whole" else ZERO
    high = amount.high if amount else None
    most = high
    if most is None:
        most = _most(order, model, is_valued=is_valued)
        if most is None:
            return Problem(
                file=order.place.file,
                row=order.place.row,
                column="amount",
                found=amount.text if amount else None,
                message="nothing bounds what this order could take at a gain, so it has no part in the plan",
                remedy="give the most that the order takes, or the stock of the lots",
                severity="drops",
            )
    return Block(order=order, model=model, low=low, high=high, most=most)


def _most(order: Order, model: OrderModel, *, is_valued: bool) -> Fraction | None:
    """The most that the stock makes of an order, house rules aside; None where more is always a gain."""
    greatest = best_of(model, tuple(-ONE for _ in model.lots))
    if isinstance(greatest, Optimum):
        return -greatest.value
    price = order.price.value if order.price else ZERO
    if not is_valued:
        return None
    gain = best_of(model, tuple((cost or ZERO) - price for cost in model.cost))
    if not isinstance(gain, Optimum):
        return None
    typed = order.amount.low if order.amount and order.amount.low else ZERO
    stocked = sum((stock for stock in model.stock if stock is not None), ZERO)
    return FAR * (sum(gain.x, ZERO) + typed + stocked)


def best_of(model: OrderModel, cost: Vector) -> Optimum | Unbounded:
    """The least cost that the order's limits and the stock allow, its amount and the house rules aside."""
    return best_of_each([(model, cost)])[0]


def best_of_each(asked: Sequence[tuple[OrderModel, Vector]]) -> list[Optimum | Unbounded]:
    """As :func:`best_of` for many orders, each with its own cost, solved side by side."""
    programs = []
    for model, cost in asked:
        rows = [(entry.terms, entry.low, entry.high) for entry in amount_rows(model).entries]
        rows += [(terms, None, ZERO) for _, terms in share_bound_rows(model)]
        programs.append(
            Program(
                rows=tuple(terms for terms, _, _ in rows),
                row_low=tuple(low for _, low, _ in rows),
                row_high=tuple(high for _, _, high in rows),
                lower=(ZERO,) * len(model.lots),
                upper=model.stock,
                cost=cost,
            )
        )
    answers = []
    for answer in answer_many(programs)[0]:
        assert isinstance(answer, (Optimum, Unbounded)), "nothing at all is always within homogeneous limits"
        answers.append(answer)
    return answers


def _stages(campaign: Campaign, blocks: list[Block], *, is_valued: bool) -> tuple[Stage, ...]:
    """Classes first to last; in each the value of the orders that have a price, and the amount of those
    that have none; then the least of lots of unknown cost, the least cost, the fewest lots."""
    stages = []
    for priority in sorted({block.order.priority for block in blocks}):
        for aim in ("value", "amount"):
            members = [
                block.order.priority == priority and (block.order.price is not None) == (aim == "value")
                for block in blocks
            ]
            if not any(members) or (aim == "value" and not is_valued):
                continue
            costs = tuple(
                _class_costs(block, aim) if inside else (ZERO,) * len(block.model.lots)
                for block, inside in zip(blocks, members, strict=True)
            )
            stages.append(Stage(aim="value" if aim == "value" else "amount", priority=priority, costs=costs))
    usable = [campaign.lots[i] for i in sorted({i for block in blocks for i in block.model.lots})]
    if any(lot.cost is not None for lot in usable):
        if any(lot.cost is None for lot in usable):
            unknown = tuple(tuple(ONE if cost is None else ZERO for cost in block.model.cost) for block in blocks)
            stages.append(Stage(aim="unknown cost", costs=unknown))
        known = tuple(tuple(cost or ZERO for cost in block.model.cost) for block in blocks)
        stages.append(Stage(aim="cost", costs=known))
    return (*stages, Stage(aim="lots")) if blocks else ()


def _class_costs(block: Block, aim: str) -> Vector:
    if aim == "amount":
        return (-ONE,) * len(block.model.lots)
    price = block.order.price.value if block.order.price else ZERO
    return tuple((cost or ZERO) - price for cost in block.model.cost)
