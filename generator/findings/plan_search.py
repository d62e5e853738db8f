"""Which orders the plan accepts and which lots each uses: searched in floating point, settled exactly.

The stages are searched one after another, each with the earlier ones held within ``WITHIN`` of their
best; whatever a stage finds is settled in exact numbers, and counts only if it is no worse in any
earlier stage.  A plan with many whole-number columns goes to :mod:`generator.findings.plan_blocks`.
"""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import dataclass, field
from math import inf

from generator.findings.plan_blocks import Pool
from generator.findings.plan_dives import plan_stage
from generator.findings.plan_exact import Choice, Pair, Relaxed, Settled, relax, settle
from generator.findings.plan_model import PlanModel, Stage
from generator.findings.plan_parts import Whole, joined, part_of, program_of, side_by_side, stage_costs
from generator.geometry.mixed import Floats, SparseRow, linear, search

#: How far, relative to its best, an earlier stage may give way while later ones are searched.
WITHIN = 1e-6
#: With more "this lot is used" columns than this, orders are priced one by one.
DIRECT_USES = 240
#: With more pairs of an order and a lot than this, the fewest lots are not searched for.
FEWEST_PAIRS = 400
#: An amount (of an order's most) below this is taken for none.
NOTHING = 1e-9
#: Choices that floats hold possible and exact numbers don't: so many are cut off before giving way.
MOST_CUTS = 12


@dataclass(frozen=True, slots=True)
class Outcome:
    """How a stage ended: its gap (relative, 0 if proven best; None: not searched or not known), nodes."""

    stage: Stage
    gap: float | None
    nodes: int = 0


@dataclass(frozen=True, slots=True)
class Sought:
    """The best plan found, and how each stage ended."""

    settled: Settled
    outcomes: tuple[Outcome, ...]
    is_out_of_time: bool = False

    @property
    def nodes(self) -> int:
        """Nodes spent in all."""
        return sum(outcome.nodes for outcome in self.outcomes)


@dataclass(slots=True)
class Effort:
    """What may still be spent: nodes by count, seconds as the last guard."""

    nodes: int
    until: float = field(default=inf)

    @property
    def is_over(self) -> bool:
        """Whether the last guard's time is over."""
        return time.monotonic() >= self.until

    @property
    def seconds(self) -> float:
        """Seconds left, at least a little."""
        return max(0.05, min(1e6, self.until - time.monotonic()))

    def spend(self, nodes: int) -> None:
        """Count nodes."""
        self.nodes = max(0, self.nodes - nodes)


def seek(model: PlanModel, nodes: int, seconds: float) -> Sought:
    """The best plan that the effort allows; nothing accepted is always a plan."""
    effort = Effort(nodes, time.monotonic() + seconds)
    relaxed = relax(model)
    if relaxed is not None:
        # Where no choice had to be made, no choice makes a better plan.
        before = [Outcome(stage, 0.0) for stage in model.stages if stage.aim != "lots"]
        return _with_fewest(model, relaxed, before, effort)
    uses = sum(len(part_of(block).used) for block in model.blocks)
    if uses > DIRECT_USES:
        return _sought_by_blocks(model, effort)
    return _sought_directly(model, effort)


def nothing(model: PlanModel) -> Settled:
    """The plan that accepts no order."""
    count = len(model.blocks)
    choice = Choice((False,) * count, (frozenset(),) * count)
    settled = settle(model, choice)
    assert settled is not None, "nothing at all is always a plan"
    return settled


def _sought_directly(model: PlanModel, effort: Effort) -> Sought:
    pairs = sum(len(block.model.lots) for block in model.blocks)
    best = nothing(model)
    outcomes: list[Outcome] = []
    held: list[tuple[Stage, float]] = []
    cuts: list[Choice] = []
    whole = side_by_side([part_of(block) for block in model.blocks])
    has_rules = any(len(part.whole) > (part.accepted is not None) for part in whole.parts)
    for number, stage in enumerate(model.stages):
        if stage.priority is None and not has_rules and all(outcome.gap == 0 for outcome in outcomes):
            # The orders are chosen; if no others do as well, what is left is no choice any more.
            relaxed = _only(model, whole, best, held, effort)
            if relaxed is not None:
                costs = [Outcome(later, 0.0) for later in model.stages[number:] if later.aim != "lots"]
                return _with_fewest(model, relaxed, [*outcomes, *costs], effort)
        if stage.aim == "lots":
            if pairs > FEWEST_PAIRS:
                outcomes.append(Outcome(stage, None))
                break
            whole = side_by_side([part_of(block, counts_lots=True) for block in model.blocks])
        rows = [_held_row(whole, earlier, level) for earlier, level in held]
        found, outcome, level = _stage(model, whole, stage, rows, cuts, effort, is_first=number == 0)
        outcomes.append(outcome)
        if found is not None and _is_no_worse(found, best, number):
            best = found
        if level is None:
            level = float(best.values[number])
        held.append((stage, level))
    return Sought(best, tuple(outcomes), effort.is_over)


def _only(
    model: PlanModel, whole: Whole, best: Settled, held: Sequence[tuple[Stage, float]], effort: Effort
) -> Relaxed | None:
    """The exact plan for the orders accepted so far, where no other ones come near in all ``held`` stages.

    None where others may, or where it is no better than what is known.
    """
    cut = _cut_row(whole, best.choice)
    for number, (stage, level) in enumerate(held):
        costs, size = stage_costs(stage, whole.parts)
        rows = [cut, *(_held_row(whole, earlier, own) for earlier, own in held[:number])]
        program = program_of(model, whole, joined(whole, costs), rows)
        found = search(program, nodes=effort.nodes, seconds=effort.seconds)
        effort.spend(found.nodes)
        near = WITHIN * max(1.0, abs(level / size))
        if found.status == "infeasible" or (found.status == "proven" and found.bound > level / size + near):
            relaxed = relax(model, best.choice.accepted)
            is_better = relaxed is not None and relaxed.settled.values <= best.values
            return relaxed if is_better else None
        if found.status != "proven":
            return None
    return None


def _with_fewest(model: PlanModel, relaxed: Relaxed, before: Sequence[Outcome], effort: Effort) -> Sought:
    """The last stage, the fewest lots, among plans that are as good in all the others."""
    best = relaxed.settled
    stage = model.stages[-1]
    if relaxed.is_only:
        return Sought(best, (*before, Outcome(stage, 0.0)), effort.is_over)
    if len(relaxed.free) > FEWEST_PAIRS:
        return Sought(best, (*before, Outcome(stage, None)), effort.is_over)
    whole = side_by_side([part_of(block, counts_lots=True) for block in model.blocks])
    rows = []
    for terms, bound in relaxed.held:
        own = {whole.starts[k] + i: a * whole.parts[k].scale for (k, i), a in terms.items() if (k, i) in relaxed.free}
        rows.append(SparseRow(own, float(bound), float(bound)))
    found, outcome, _ = _stage(model, whole, stage, rows, [], effort, is_first=False, free=relaxed.free)
    if found is not None and _is_no_worse(found, best, len(before)):
        best = found
    return Sought(best, (*before, outcome), effort.is_over)


def _is_no_worse(new: Settled, old: Settled, stages: int) -> bool:
    """Whether it is as good in the stages before, and better or alike in this one."""
    return new.values[: stages + 1] <= old.values[: stages + 1]


def _stage(
    model: PlanModel,
    whole: Whole,
    stage: Stage,
    rows: Sequence[SparseRow],
    cuts: list[Choice],
    effort: Effort,
    *,
    is_first: bool,
    free: frozenset[Pair] | None = None,
) -> tuple[Settled | None, Outcome, float | None]:
    """Search one stage: the plan found, how it ended, and the level at which to hold it after.

    ``rows`` hold the earlier stages.  ``free``: the only lots that blocks may use.
    """
    costs, size = stage_costs(stage, whole.parts)
    later = _later_blocks(model, stage)
    spent = 0
    for _ in range(MOST_CUTS if is_first else 2):
        more = [*rows, *(_cut_row(whole, cut) for cut in cuts)]
        program = program_of(model, whole, joined(whole, costs), more, closed=later, free=free)
        found = search(program, nodes=effort.nodes, seconds=effort.seconds) if program.whole else linear(program)
        effort.spend(found.nodes)
        spent += found.nodes
        if found.x is None:
            return None, Outcome(stage, None, spent), None
        choice = choice_of(whole, found.x)
        settled = settle(model, choice)
        if settled is not None:
            gap = relative_gap(found.value, found.bound) if found.status == "stopped" else 0.0
            return settled, Outcome(stage, gap, spent), found.value * size
        cuts.append(choice)
    return None, Outcome(stage, None, spent), None


def relative_gap(value: float, bound: float) -> float | None:
    """By how much of itself a value could be better; None where the bound says nothing."""
    if bound == -inf:
        return None
    return max(0.0, value - bound) / max(abs(value), 1e-9)


def _later_blocks(model: PlanModel, stage: Stage) -> frozenset[int]:
    """Blocks of later classes: they can only take from this one."""
    if stage.priority is None:
        return frozenset()
    return frozenset(k for k, block in enumerate(model.blocks) if block.order.priority > stage.priority)


def _held_row(whole: Whole, stage: Stage, level: float) -> SparseRow:
    costs, size = stage_costs(stage, whole.parts)
    scaled = level / size
    return SparseRow(joined(whole, costs), -inf, scaled + WITHIN * max(1.0, abs(scaled)))


def _cut_row(whole: Whole, cut: Choice) -> SparseRow:
    """Cut one choice off: some order or lot must be chosen otherwise.

    Orders without whole-number columns have no say in it.
    """
    terms: dict[int, float] = {}
    ones = 0
    for start, part, accepted, lots in zip(whole.starts, whole.parts, cut.accepted, cut.lots, strict=True):
        flags = {start + column: i in lots for i, column in part.used.items()}
        if part.accepted is not None:
            flags[start + part.accepted] = accepted
        for column, is_one in flags.items():
            terms[column] = -1.0 if is_one else 1.0
            ones += is_one
    return SparseRow(terms, 1.0 - ones, inf)


def choice_of(whole: Whole, x: Floats) -> Choice:
    """The orders accepted and the lots used at a point."""
    accepted, lots = [], []
    for start, part in zip(whole.starts, whole.parts, strict=True):
        own = x[start : start + len(part.upper)]
        is_accepted = part.accepted is None or own[part.accepted] > 0.5
        chosen = frozenset(
            i
            for i in range(part.n)
            if is_accepted and own[i] > NOTHING and (i not in part.used or own[part.used[i]] > 0.5)
        )
        accepted.append(bool(is_accepted and (chosen or part.accepted is not None)))
        lots.append(chosen)
    return Choice(tuple(accepted), tuple(lots))


def _sought_by_blocks(model: PlanModel, effort: Effort) -> Sought:
    best = nothing(model)
    outcomes: list[Outcome] = []
    held: list[tuple[Stage, float]] = []
    pool = Pool(model)
    for number, stage in enumerate(model.stages):
        if stage.priority is None:
            outcomes.append(Outcome(stage, None))
            continue
        pool.know(best.amounts)
        later = _later_blocks(model, stage)
        found = plan_stage(pool, stage, held, later, best.choice, effort.nodes, effort.seconds)
        effort.spend(found.nodes)
        settled = settle(model, found.choice)
        if settled is not None and _is_no_worse(settled, best, number):
            best = settled
        value = float(best.values[number])
        outcomes.append(Outcome(stage, relative_gap(value, found.bound), found.nodes))
        held.append((stage, value))
    return Sought(best, tuple(outcomes), effort.is_over)
