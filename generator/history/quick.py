"""Answers without their proofs, for replays: the same verdict and cost as in findings, at a fraction of the price.

Every program is decided exactly, as ever.  Replays differ by a few cells, so the basis in which the last
one ended mostly proves the next one too; and nothing here is published, so no proof is made readable.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from generator.findings.model import OrderModel
from generator.findings.programs import ZERO, capped_upper, share_program, share_rows
from generator.findings.recipes import cheapest_shares
from generator.findings.records import Verdict
from generator.findings.verdicts import face_of, judge
from generator.geometry.decide import decide
from generator.geometry.program import Answer, Basis, Bound, Optimum, Vector


@dataclass(slots=True)
class Quick:
    """Asks about models that resemble each other; remembers the last basis for each shape of program."""

    _bases: dict[tuple[str, int, int], Basis] = field(default_factory=dict)

    def verdict(self, model: OrderModel) -> Verdict:
        """The first verdict that applies; as :func:`generator.findings.verdicts.judge`, without proofs."""
        if model.rules.names():
            return judge(model).verdict
        if not isinstance(self._shares("reach", model, model.upper), Optimum):
            return "unreachable"
        if not self.is_met(model):
            return "short"
        return "edge" if face_of(model) else "makeable"

    def is_met(self, model: OrderModel) -> bool:
        """Whether shares within the limits and rules exist in the order's amount."""
        if model.rules.names():
            return judge(model).verdict in ("makeable", "edge")
        return isinstance(self._shares("met", model, capped_upper(model, model.amount)), Optimum)

    def cost(self, model: OrderModel) -> Vector | None:
        """Shares of a cheapest recipe in the order's amount (ties aside); None if there is none."""
        if model.rules.names() or any(cost is None for cost in model.cost):
            try:
                return cheapest_shares(model).staged.x
            except ValueError:
                return None
        costs = tuple(cost or ZERO for cost in model.cost)
        answer = self._shares("cost", model, capped_upper(model, model.amount), costs)
        return answer.x if isinstance(answer, Optimum) else None

    def _shares(self, key: str, model: OrderModel, upper: tuple[Bound, ...], cost: Vector = ()) -> Answer:
        program = share_program(model, share_rows(model), cost or (ZERO,) * len(model.lots), upper=upper)
        shape = (key, len(program.cost), len(program.rows))
        answer = decide(program, self._bases.get(shape))
        if isinstance(answer, Optimum) and answer.basis is not None:
            self._bases[shape] = answer.basis
        return answer
