"""The plan's amounts in exact numbers: of a choice of orders and lots, or where no choice has to be made."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import lcm

import numpy as np

from generator.findings.house_rules import breach
from generator.findings.plan_model import Block, PlanModel, Stage
from generator.findings.programs import ONE, ZERO
from generator.findings.recipes import lexicographic
from generator.geometry.elimination import common_denominator
from generator.geometry.mixed import Floats
from generator.geometry.program import Bound, Program, Sparse
from generator.geometry.sparse import best_in_turn

Amounts = tuple[dict[int, Fraction], ...]
#: A block and one of its lots, by its own position.
Pair = tuple[int, int]
_Row = tuple[Mapping[int, Fraction], Bound, Bound]

#: A part this small of an order's most is taken for none, or for rounding.
NOTHING = 1e-9


@dataclass(frozen=True, slots=True)
class Choice:
    """What the search settles: for each block whether it is accepted, and the lots (by its own
    positions) that it may use."""

    accepted: tuple[bool, ...]
    lots: tuple[frozenset[int], ...]


@dataclass(frozen=True, slots=True)
class Settled:
    """Exact amounts by block and lot position (used lots only), and the value of each stage."""

    choice: Choice
    amounts: Amounts
    values: tuple[Fraction, ...]


@dataclass(frozen=True, slots=True)
class Relaxed:
    """The best amounts with every choice waived, if they keep all rules all the same: then no plan is better.

    ``is_only``: there is no other plan as good in all stages but the last, the fewest lots.  Such plans use no
    pairs of a block and a lot (by its own position) but ``free``, and keep every row of ``held`` at its bound.
    """

    settled: Settled
    is_only: bool
    free: frozenset[Pair]
    held: tuple[tuple[Mapping[Pair, int], int], ...]


def settle(model: PlanModel, choice: Choice) -> Settled | None:
    """The best amounts for a choice, stage by stage; None if there are none.

    Everything holds exactly: limits, shares, rules, amounts and stock.
    """
    columns = [(k, i) for k, lots in enumerate(choice.lots) if choice.accepted[k] for i in sorted(lots)]
    place = _places(model, columns)
    rows: list[_Row] = []
    for k, block in enumerate(model.blocks):
        if choice.accepted[k]:
            own = place[k]
            rows += _block_rows(block, own) + _least_rows(block, own) + _total_row(block, own, block.low)
    rows += _stock_rows(model, columns)
    if not columns:
        if any(low is not None and low > 0 for _, low, _ in rows):
            return None
        return Settled(choice, tuple({} for _ in model.blocks), (ZERO,) * len(model.stages))
    objectives = _objectives(model, columns)
    best = best_in_turn(_sparse(columns, rows), objectives)
    if best is not None:
        return _settled(model, choice, columns, best.x)
    # A point that floating point finds no regular basis for, or none at all.
    width = range(len(columns))
    staged = lexicographic(_dense(columns, rows), [tuple(own[j] for j in width) for own in objectives])
    return None if staged is None else _settled(model, choice, columns, dict(enumerate(staged.x)))


def relax(model: PlanModel, accepted: Sequence[bool] | None = None) -> Relaxed | None:
    """The plan with every choice waived; None where it breaks a rule, or takes part of an order that is whole.

    With ``accepted`` (by block) only the choice of lots is waived.
    """
    columns = [
        (k, i)
        for k, block in enumerate(model.blocks)
        if accepted is None or accepted[k]
        for i in range(len(block.model.lots))
    ]
    if not columns:
        return None
    rows: list[_Row] = []
    for k, (block, own) in enumerate(zip(model.blocks, _places(model, columns), strict=True)):
        if accepted is None or accepted[k]:
            rows += _block_rows(block, own) + _total_row(block, own, block.low if accepted else ZERO)
    rows += _stock_rows(model, columns)

    def accepts(x: Floats) -> bool:
        return _keeps_rules(model, columns, x)

    program = _sparse(columns, rows)
    best = best_in_turn(program, _objectives(model, columns), accepts)
    if best is None:
        return None
    used: list[set[int]] = [set() for _ in model.blocks]
    for j in best.x:
        used[columns[j][0]].add(columns[j][1])
    served = tuple(bool(own) or block.low <= 0 for own, block in zip(used, model.blocks, strict=True))
    settled = _settled(model, Choice(served, tuple(map(frozenset, used))), columns, best.x)
    if not all(map(_is_allowed, model.blocks, settled.amounts)):
        return None
    free = frozenset(columns[j] for j in best.free)
    held = [({columns[j]: a for j, a in program.rows[k].items()}, bound) for k, bound in best.held.items()]
    return Relaxed(settled, best.is_only, free, tuple(held))


def _keeps_rules(model: PlanModel, columns: Sequence[Pair], x: Floats) -> bool:
    """Whether amounts in floats look like a plan: each order within its amount, and within the house rules."""
    taken: list[dict[int, float]] = [{} for _ in model.blocks]
    for j in np.flatnonzero(x).tolist():
        k, i = columns[j]
        taken[k][i] = float(x[j])
    for block, own in zip(model.blocks, taken, strict=True):
        total, rules = sum(own.values()), block.model.rules
        used = [i for i, amount in own.items() if amount > NOTHING * float(block.most)]
        if not used:
            continue
        if total < float(block.low) * (1 - NOTHING) or (rules.max_lots is not None and len(used) > rules.max_lots):
            return False
        if any(own[i] < float(rules.least[i] or 0) * total * (1 - NOTHING) for i in used):
            return False
        if any(pair.first_lots.intersection(used) and pair.second_lots.intersection(used) for pair in rules.apart):
            return False
    return True


def _is_allowed(block: Block, own: Mapping[int, Fraction]) -> bool:
    """Whether the order gets nothing, or as much as it must and within the house rules."""
    total = sum(own.values(), ZERO)
    if not total:
        return True
    shares = {block.model.names[i]: x / total for i, x in own.items()}
    return total >= block.low and breach(block.model.rules, block.model.names, shares) is None


def _settled(model: PlanModel, choice: Choice, columns: Sequence[Pair], x: Mapping[int, Fraction]) -> Settled:
    amounts: Amounts = tuple({} for _ in model.blocks)
    for j, (k, i) in enumerate(columns):
        if x.get(j):
            amounts[k][i] = x[j]
    return Settled(choice, amounts, tuple(stage_value(stage, amounts) for stage in model.stages))


def _objectives(model: PlanModel, columns: Sequence[Pair]) -> list[dict[int, Fraction]]:
    return [{j: stage.costs[k][i] for j, (k, i) in enumerate(columns)} for stage in model.stages if stage.aim != "lots"]


def stage_value(stage: Stage, amounts: Amounts) -> Fraction:
    """A stage's objective at these amounts: its cost, or the number of lots used."""
    if stage.aim == "lots":
        return Fraction(sum(len(own) for own in amounts))
    return sum((stage.costs[k][i] * x for k, own in enumerate(amounts) for i, x in own.items()), ZERO)


def _places(model: PlanModel, columns: Sequence[Pair]) -> list[dict[int, int]]:
    """The columns of each block by its lots."""
    places: list[dict[int, int]] = [{} for _ in model.blocks]
    for j, (k, i) in enumerate(columns):
        places[k][i] = j
    return places


def _block_rows(block: Block, place: Mapping[int, int]) -> list[_Row]:
    """Limits and share bounds over the chosen lots."""
    return [({j: terms[i] for i, j in place.items()}, low, high) for terms, low, high in block.rows]


def _least_rows(block: Block, place: Mapping[int, int]) -> list[_Row]:
    """The least shares of the chosen lots, all of them used."""
    leasts = [(own, least) for i, own in place.items() if (least := block.model.rules.least[i])]
    return [({j: least - (ONE if j == own else ZERO) for j in place.values()}, None, ZERO) for own, least in leasts]


def _total_row(block: Block, place: Mapping[int, int], low: Fraction) -> list[_Row]:
    if low <= 0 and block.high is None:
        return []
    return [(dict.fromkeys(place.values(), ONE), low if low > 0 else None, block.high)]


def _stock_rows(model: PlanModel, columns: Sequence[Pair]) -> list[_Row]:
    users: dict[int, dict[int, Fraction]] = {}
    for j, (k, i) in enumerate(columns):
        users.setdefault(model.blocks[k].model.lots[i], {})[j] = ONE
    return [(own, None, model.stock[lot]) for lot, own in users.items() if lot in model.stock]


def _sparse(columns: Sequence[Pair], rows: Sequence[_Row]) -> Sparse:
    """The rows in whole numbers; a row without entries stays, for it may be one that can't hold."""
    whole, lows, highs = [], [], []
    for terms, low, high in rows:
        ratios = [(j, *a.as_integer_ratio()) for j, a in terms.items()]
        scale = lcm(*{below for _, _, below in ratios}, common_denominator((low, high)))
        whole.append({j: above * (scale // below) for j, above, below in ratios if above})
        lows.append(None if low is None else low.numerator * (scale // low.denominator))
        highs.append(None if high is None else high.numerator * (scale // high.denominator))
    return Sparse(width=len(columns), rows=tuple(whole), low=tuple(lows), high=tuple(highs))


def _dense(columns: Sequence[Pair], rows: Sequence[_Row]) -> Program:
    return Program(
        rows=tuple(tuple(terms.get(j, ZERO) for j in range(len(columns))) for terms, _, _ in rows),
        row_low=tuple(low for _, low, _ in rows),
        row_high=tuple(high for _, _, high in rows),
        lower=(ZERO,) * len(columns),
        upper=(None,) * len(columns),
        cost=(ZERO,) * len(columns),
    )
