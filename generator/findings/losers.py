"""Who loses to whom: why the plan does not serve an order in full, and what would have to give way.

All of it keeps the plan as it is but for one thing: the other orders get what they got, from the lots that
they use.  The questions are answered in floating point, to about seven digits.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from math import inf

from generator.findings.kept import (
    NOISE,
    REACHED,
    Kept,
    kept_of,
    most_beside,
    overdrawn,
    reaches,
    stock_of,
)
from generator.findings.plan_exact import Settled
from generator.findings.plan_model import PlanModel
from generator.findings.plan_parts import rows_over
from generator.findings.programs import ZERO
from generator.findings.records import Loser, Verdict
from generator.geometry.mixed import Mixed, SparseRow, linear

#: Orders named that could give way, those that give up least first.
MOST_INSTEAD = 3
#: Where only house rules are in the way: lots and orders that are looked at.
MOST_SUSPECTS = 6


def losers_of(model: PlanModel, settled: Settled, alone: Mapping[str, Verdict | None]) -> list[Loser]:
    """A Loser for each order of the plan that is not served in full."""
    losers = []
    for k, block in enumerate(model.blocks):
        accepted = sum(settled.amounts[k].values(), ZERO)
        # An order of any amount loses only if it gets nothing.
        wanted = block.asked if block.asked is not None else block.most / 1000
        if accepted >= wanted or (block.asked is None and accepted > 0):
            continue
        verdict = alone.get(block.order.name)
        if verdict == "short" and block.low > 0:
            losers.append(Loser(order=block.order.name, alone=verdict, reason="alone"))
            continue
        losers.append(_loser(model, settled, k, wanted, verdict))
    return losers


def _loser(model: PlanModel, settled: Settled, k: int, wanted: Fraction, verdict: Verdict | None) -> Loser:
    name = model.blocks[k].order.name
    kept = kept_of(model, settled, k)
    if reaches(kept, wanted):
        return Loser(order=name, alone=verdict, reason="price")
    suspects, others = _in_the_way(model, settled, kept, wanted)
    single = [lot for lot in suspects if reaches(kept, wanted, frozenset([lot]))]
    together: list[int] = []
    if not single:
        together = _fewest(kept, wanted, overdrawn(kept, wanted))
    instead = _instead(model, settled, k, wanted, others)
    return Loser(
        order=name,
        alone=verdict,
        reason="alone" if verdict == "short" and not single and not together else "stock",
        short=tuple(model.campaign.lots[lot].name for lot in single or together),
        is_together=len(together) > 1,
        instead={model.blocks[j].order.name: cut for j, cut in instead},
    )


def _in_the_way(model: PlanModel, settled: Settled, kept: Kept, wanted: Fraction) -> tuple[list[int], list[int]]:
    """The lots and the other orders of which one alone may keep the open order from ``wanted``.

    With whole numbers waived, a row without a multiplier keeps nothing: its multipliers prove the greatest
    amount without it too.  Where that amount would do, only the rules are in the way: then lots that run out
    count, and the orders that take most of them, ``MOST_SUSPECTS`` of each.
    """
    lots = list(kept.stock)
    rows = [*kept.rows, *kept.stock.values()]
    cost = [-1.0 if column < kept.part.n else 0.0 for column in range(len(kept.upper))]
    found = linear(Mixed(cost=cost, upper=kept.upper, rows=rows))
    if found.multipliers is None or -found.value * kept.part.scale >= float(wanted) * (1 - REACHED):
        return _scarce(model, settled, kept)
    y = found.multipliers
    behind = len(kept.rows)
    return (
        [lot for number, lot in enumerate(lots) if abs(y[behind + number]) > NOISE],
        [j for j, row in kept.totals.items() if abs(y[row]) > NOISE],
    )


def _scarce(model: PlanModel, settled: Settled, kept: Kept) -> tuple[list[int], list[int]]:
    used = _used(model, settled)
    lots = [lot for lot in kept.stock if used.get(lot) == model.stock[lot]]
    takes = {
        j: sum((x for i, x in settled.amounts[j].items() if model.blocks[j].model.lots[i] in lots), ZERO)
        for j in kept.totals
    }
    lots.sort(key=lambda lot: (-used[lot], lot))
    orders = sorted((j for j in takes if takes[j]), key=lambda j: (-takes[j], j))
    return sorted(lots[:MOST_SUSPECTS]), orders[:MOST_SUSPECTS]


def _used(model: PlanModel, settled: Settled) -> dict[int, Fraction]:
    """What the plan takes of each lot, by position."""
    used: dict[int, Fraction] = {}
    for block, own in zip(model.blocks, settled.amounts, strict=True):
        for i, x in own.items():
            used[block.model.lots[i]] = used.get(block.model.lots[i], ZERO) + x
    return used


def _fewest(kept: Kept, wanted: Fraction, lots: Sequence[int]) -> list[int]:
    """Of lots that do together, a choice of which none can be spared: those last in the file go first."""
    needed = list(lots)
    for lot in reversed(list(needed)):
        rest = [other for other in needed if other != lot]
        if rest and reaches(kept, wanted, frozenset(rest)):
            needed = rest
    return needed


def _instead(
    model: PlanModel, settled: Settled, k: int, wanted: Fraction, others: Sequence[int]
) -> list[tuple[int, float]]:
    """Accepted orders that could give way to order k, with what each would give up, the least first."""
    found = []
    for j in sorted(others):
        accepted = sum(settled.amounts[j].values(), ZERO)
        kept = kept_of(model, settled, k, loose=j)
        total = kept.columns[j].values()
        if model.blocks[j].low > 0:
            if reaches(kept, wanted, closed=total):
                found.append((float(accepted), j))
            continue
        most = most_beside(kept, wanted, total)
        if most is not None:
            found.append((max(0.0, float(accepted) - most * float(model.blocks[j].most)), j))
    return [(j, cut) for cut, j in sorted(found)[:MOST_INSTEAD]]


def one_more_of(model: PlanModel, settled: Settled) -> dict[int, float]:
    """What one unit more of each lot that runs out would add to the classes' value or amount.

    One-sided: a gain from more, the accepted orders and the lots of each kept.
    """
    used = _used(model, settled)
    runs_out = [lot for lot, amount in sorted(used.items()) if model.stock.get(lot) == amount]
    before = _classes(model, settled, None) if runs_out else 0.0
    gains = {}
    for lot in runs_out:
        gain = _classes(model, settled, lot) - before
        gains[lot] = gain if gain > NOISE * max(1.0, abs(before)) else 0.0
    return gains


def _classes(model: PlanModel, settled: Settled, lot: int | None) -> float:
    """The sum of the classes' values, first to last, with one unit more of ``lot``."""
    columns: dict[int, dict[int, int]] = {}
    rows: list[SparseRow] = []
    width = 0
    for k, lots in enumerate(settled.choice.lots):
        block = model.blocks[k]
        if not settled.choice.accepted[k] or not lots:
            continue
        columns[k] = {i: width + position for position, i in enumerate(sorted(lots))}
        width += len(lots)
        rows += rows_over(block, columns[k])
        total = dict.fromkeys(columns[k].values(), 1.0)
        rows.append(SparseRow(total, float(block.low / block.most), float((block.high or block.most) / block.most)))
    stock = stock_of(model, columns)
    if lot is not None:
        stock[lot] = SparseRow(stock[lot].terms, -inf, 1.0 + float(1 / model.stock[lot]))
    rows += stock.values()
    value = 0.0
    for stage in model.stages:
        if stage.priority is None:
            break
        cost = [0.0] * width
        for k, place in columns.items():
            for i, column in place.items():
                cost[column] = float(stage.costs[k][i] * model.blocks[k].most)
        found = linear(Mixed(cost=cost, upper=[inf] * width, rows=rows))
        if found.x is None:
            break
        value -= found.value if stage.aim == "value" or not model.is_valued else 0.0
        terms = {column: c for column, c in enumerate(cost) if c}
        rows.append(SparseRow(terms, -inf, found.value + NOISE * max(1.0, abs(found.value))))
    return value
