"""Plans and batches of small campaigns given as text, without the answers to single orders."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction

from generator.findings.batches import batches_of
from generator.findings.measures import measures_of
from generator.findings.model import OrderModel, model_of
from generator.findings.plan import plan_of
from generator.findings.programs import ZERO, share_program, share_rows
from generator.findings.records import Batch, Plan, Verdict
from generator.findings.values import table_of
from generator.geometry.decide import decide
from generator.geometry.program import Optimum
from generator.intake.records import Campaign
from generator.problems import Problem
from tests.findings.making import make_campaign


@dataclass(frozen=True)
class Planned:
    """A campaign with its plan, the problems that came with it, and its batches."""

    campaign: Campaign
    plan: Plan
    problems: tuple[Problem, ...]
    batches: tuple[Batch, ...]

    def accepted(self) -> dict[str, float]:
        return {name: order.accepted for name, order in self.plan.orders.items()}

    def used(self) -> dict[str, Fraction]:
        """What the plan takes of each lot, exactly."""
        total: dict[str, Fraction] = {}
        for order in self.plan.orders.values():
            for lot, amount in order.exact.items():
                total[lot] = total.get(lot, Fraction(0)) + amount
        return total

    def cost(self) -> float:
        costs = {lot.name: lot.cost.value for lot in self.campaign.lots if lot.cost}
        return float(sum(costs.get(lot, Fraction(0)) * amount for lot, amount in self.used().items()))


def planned(
    assays: str,
    targets: str,
    settings: str = "",
    *,
    verdicts: Mapping[str, Verdict | None] | None = None,
    **more: object,
) -> Planned:
    """The plan of a campaign from the texts of its files; ``more`` are settings to replace."""
    campaign = make_campaign(assays, targets, settings)
    assert [problem.sentence() for problem in campaign.problems if problem.severity == "stops"] == []
    campaign = replace(campaign, settings=replace(campaign.settings, **more))  # type: ignore[arg-type]
    table, measures = table_of(campaign), measures_of(campaign)
    alone: dict[str, Verdict | None] = {}
    for order in campaign.orders:
        model = model_of(campaign, order, table, measures)
        alone[order.name] = _verdict(model) if isinstance(model, OrderModel) else None
    plan, problems = plan_of(campaign, table, measures, {**alone, **(verdicts or {})})
    assert plan is not None
    return Planned(campaign, plan, problems, batches_of(campaign, table, measures, plan))


def _verdict(model: OrderModel) -> Verdict:
    """Whether some blend is within the limits; rules and stock are left to the plan."""
    answer = decide(share_program(model, share_rows(model), (ZERO,) * len(model.lots)))
    return "makeable" if isinstance(answer, Optimum) else "unreachable"
