"""The plan's amounts in exact numbers, once it is chosen which orders are accepted and which lots they use."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from generator.findings.plan_model import Block, PlanModel, Stage
from generator.findings.programs import ONE, ZERO
from generator.findings.recipes import lexicographic
from generator.geometry.program import Bound, Program, Vector

Amounts = tuple[dict[int, Fraction], ...]


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


def settle(model: PlanModel, choice: Choice) -> Settled | None:
    """The best amounts for a choice, stage by stage; None if there are none.

    Everything holds exactly: limits, shares, rules, amounts and stock.
    """
    columns = [(k, i) for k, lots in enumerate(choice.lots) if choice.accepted[k] for i in sorted(lots)]
    place = {pair: j for j, pair in enumerate(columns)}
    rows: list[tuple[Vector, Bound, Bound]] = []
    for k, block in enumerate(model.blocks):
        if choice.accepted[k]:
            rows += _block_rows(block, k, choice.lots[k], place)
    rows += _stock_rows(model, place)
    program = Program(
        rows=tuple(terms for terms, _, _ in rows),
        row_low=tuple(low for _, low, _ in rows),
        row_high=tuple(high for _, _, high in rows),
        lower=(ZERO,) * len(columns),
        upper=(None,) * len(columns),
        cost=(ZERO,) * len(columns),
    )
    stages = [stage for stage in model.stages if stage.aim != "lots"]
    objectives = [tuple(stage.costs[k][i] for k, i in columns) for stage in stages]
    if not columns:
        if any(low is not None and low > 0 for low in program.row_low):
            return None
        return Settled(choice, tuple({} for _ in model.blocks), (ZERO,) * len(model.stages))
    staged = lexicographic(program, objectives)
    if staged is None:
        return None
    amounts: Amounts = tuple({} for _ in model.blocks)
    for (k, i), x in zip(columns, staged.x, strict=True):
        if x:
            amounts[k][i] = x
    return Settled(choice, amounts, tuple(stage_value(stage, amounts) for stage in model.stages))


def stage_value(stage: Stage, amounts: Amounts) -> Fraction:
    """A stage's objective at these amounts: its cost, or the number of lots used."""
    if stage.aim == "lots":
        return Fraction(sum(len(own) for own in amounts))
    return sum((stage.costs[k][i] * x for k, own in enumerate(amounts) for i, x in own.items()), ZERO)


def _block_rows(
    block: Block, k: int, lots: frozenset[int], place: dict[tuple[int, int], int]
) -> list[tuple[Vector, Bound, Bound]]:
    """Limits, least shares of used lots, and the amount, over the chosen columns."""
    chosen = sorted(lots)
    sparse: list[tuple[dict[int, Fraction], Bound, Bound]] = [
        ({i: terms[i] for i in chosen}, low, high) for terms, low, high in block.rows
    ]
    for i in chosen:
        least = block.model.rules.least[i]
        if least:
            sparse.append(({j: least - (ONE if j == i else ZERO) for j in chosen}, None, ZERO))
    low = block.low if block.low > 0 else None
    if low is not None or block.high is not None:
        sparse.append((dict.fromkeys(chosen, ONE), low, block.high))
    rows = []
    for terms, least_row, most in sparse:
        if any(terms.values()) or (least_row is not None and least_row > 0):
            vector = [ZERO] * len(place)
            for i, value in terms.items():
                vector[place[k, i]] = value
            rows.append((tuple(vector), least_row, most))
    return rows


def _stock_rows(model: PlanModel, place: dict[tuple[int, int], int]) -> list[tuple[Vector, Bound, Bound]]:
    users: dict[int, list[int]] = {}
    for (k, i), column in place.items():
        users.setdefault(model.blocks[k].model.lots[i], []).append(column)
    rows: list[tuple[Vector, Bound, Bound]] = []
    for lot, columns in users.items():
        if lot in model.stock:
            vector = [ZERO] * len(place)
            for column in columns:
                vector[column] = ONE
            rows.append((tuple(vector), None, model.stock[lot]))
    return rows
