"""The plan made again with only some of the edits made: what it gives each order, and what it is worth.

The number of lots used, which decides between plans of the same value and cost alone, is left aside: that
stage takes most of the time.  Whoever asks compares the replays at both ends with what was recorded.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction

from generator.findings.ask import Asking, run, together
from generator.findings.measures import Measure, measures_of
from generator.findings.model import OrderModel, model_of
from generator.findings.plan import value_of
from generator.findings.plan_model import plan_model
from generator.findings.plan_search import seek
from generator.findings.programs import ZERO
from generator.findings.records import Verdict
from generator.findings.values import Table, table_of
from generator.history.applying import apply
from generator.history.edits import renamed
from generator.history.questions import NO_ANSWER, Answer, ask_again
from generator.history.records import Edit
from generator.history.relevance import Question, matters_to_plan, plan_needs, whole
from generator.history.systems import Subset, System, ranks
from generator.intake.records import Campaign, Order

_Amounts = Mapping[str, Fraction]


@dataclass(slots=True)
class PlanReplay:
    """The plan over the subsets of the edits from one campaign to another; every answer is kept.

    ``plan`` is answered with the amount accepted of each order, under its newer name, ``value`` with the plan's;
    both with None where there is no plan or the search did not prove it best.
    """

    old: Campaign
    new: Campaign
    edits: Sequence[Edit]
    _plans: dict[Subset, tuple[_Amounts, Fraction] | None] = field(default_factory=dict)

    def relevant(self) -> tuple[int, ...]:
        """Positions of the edits that can matter to the plan."""
        needs = plan_needs(self.old, self.new)
        return tuple(position for position, edit in enumerate(self.edits) if matters_to_plan(edit.cells, needs))

    def knows(self, question: Question, subset: Subset) -> bool:
        """Whether this plan was made before: one making answers both questions."""
        assert question in ("plan", "value")
        return subset in self._plans

    def ask(self, question: Question, subset: Subset) -> Asking[None]:
        """Make the plan with these edits made, and keep the answers."""
        if not self.knows(question, subset):
            self._plans[subset] = yield from self._ask(subset)

    def answer(self, question: Question, subset: Iterable[int]) -> Answer:
        """The answer with these edits made; one that is not known is asked on its own."""
        key = frozenset(subset)
        if not self.knows(question, key):
            run(self.ask(question, key))
        made = self._plans[key]
        if made is None:
            return None
        return made[0] if question == "plan" else made[1]

    def _ask(self, subset: Subset) -> Asking[tuple[_Amounts, Fraction] | None]:
        campaign = self._campaign(subset)
        table, measures = table_of(campaign), measures_of(campaign)
        verdicts = yield from together([_ask_verdict(campaign, order, table, measures) for order in campaign.orders])
        alone = {order.name: verdict for order, verdict in zip(campaign.orders, verdicts, strict=True)}
        model = plan_model(campaign, table, measures, alone)
        model = replace(model, stages=tuple(stage for stage in model.stages if stage.aim != "lots"))
        sought = seek(model, campaign.settings.plan_nodes, float(campaign.settings.plan_seconds))
        if any(outcome.gap != 0 for outcome in sought.outcomes if outcome.stage.priority is not None):
            return None
        names = renamed(self.edits, "order")
        amounts = {names.get(order.name, order.name): ZERO for order in campaign.orders}
        for block, own in zip(model.blocks, sought.settled.amounts, strict=True):
            amounts[names.get(block.order.name, block.order.name)] = sum(own.values(), ZERO)
        return amounts, value_of(model, sought.settled)

    def _campaign(self, subset: Subset) -> Campaign:
        """The older campaign with these edits, its rows as they stand in the newer files."""
        campaign = whole(apply(self.old, [self.edits[position] for position in sorted(subset)]))
        lots = ranks([lot.name for lot in self.old.lots], [lot.name for lot in self.new.lots])
        orders = ranks([order.name for order in self.old.orders], [order.name for order in self.new.orders])
        return replace(
            campaign,
            lots=tuple(sorted(campaign.lots, key=lambda lot: lots[lot.name])),
            orders=tuple(sorted(campaign.orders, key=lambda order: orders[order.name])),
        )


def _ask_verdict(
    campaign: Campaign, order: Order, table: Table, measures: Mapping[str, Measure]
) -> Asking[Verdict | None]:
    model = model_of(campaign, order, table, measures)
    known = model if isinstance(model, OrderModel) else None
    verdict = yield from ask_again("verdict", System(campaign, order, known))
    return None if verdict == NO_ANSWER else verdict  # type: ignore[return-value]
