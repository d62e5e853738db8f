"""The plan kept as it is but for one order, which asks for its amount: can it have it?

The other orders get what they got, from the lots that they use, in whatever recipes.  A recipe in what they leave as
they are is looked for first; else a search decides.  All of it is floating point, to about seven digits.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from math import inf

import numpy as np

from generator.findings.plan_blocks import choosing_of
from generator.findings.plan_exact import Settled
from generator.findings.plan_model import PlanModel
from generator.findings.plan_parts import Part, part_of, rows_over
from generator.findings.programs import ZERO
from generator.geometry.choices import Choosing, choose_many
from generator.geometry.mixed import Mixed, SparseRow, linear, search

#: An amount counts as reached within this part of itself.
REACHED = 1e-6
#: Nodes for one question about one order, and seconds as the last guard.
NODES, SECONDS = 50, 20.0
#: What is below this part is noise of the floating point.
NOISE = 1e-9
#: Programs over shares solved to find one order a recipe.
SHARES = 200
#: How near (relative) the least overdraft has to be found; one below this (of a stock) is none.
GAP = 0.1
NO_OVERDRAFT = 1e-7


@dataclass(frozen=True, slots=True)
class Kept:
    """The program of the plan kept as it is, and one order free: its columns come first.

    ``totals`` are the rows that hold the other orders at what they got.  ``choosing`` asks for shares of the open
    order, ``left`` is what the others leave of the lots that have a stock, taking what they take in the plan.
    """

    part: Part
    choosing: Choosing
    lots: tuple[int, ...]
    left: Mapping[int, Fraction]
    columns: Mapping[int, Mapping[int, int]]
    rows: tuple[SparseRow, ...]
    totals: Mapping[int, int]
    stock: Mapping[int, SparseRow]
    upper: tuple[float, ...]


def kept_of(model: PlanModel, settled: Settled, free: int, loose: int | None = None) -> Kept:
    """The plan with block ``free`` open and block ``loose`` allowed to take less; all others as they are."""
    part = part_of(model.blocks[free], caps_by_stock=False)
    rows = list(part.rows)
    upper = list(part.upper)
    columns: dict[int, dict[int, int]] = {free: {i: i for i in range(part.n)}}
    totals: dict[int, int] = {}
    for j, own in enumerate(settled.amounts):
        if j == free or not own:
            continue
        place = {i: len(upper) + position for position, i in enumerate(sorted(own))}
        columns[j] = place
        upper += [inf] * len(place)
        rows += rows_over(model.blocks[j], place)
        accepted = float(sum(own.values(), ZERO)) / float(model.blocks[j].most)
        total = dict.fromkeys(place.values(), 1.0)
        totals[j] = len(rows)
        rows.append(SparseRow(total, 0.0 if j == loose else accepted * (1 - NOISE), accepted))
    left = dict(model.stock)
    for j, own in enumerate(settled.amounts):
        for i, x in own.items() if j not in (free, loose) else ():
            if (lot := model.blocks[j].model.lots[i]) in left:
                left[lot] -= x
    return Kept(
        part=part,
        choosing=choosing_of(model.blocks[free], part),
        lots=model.blocks[free].model.lots,
        left=left,
        columns=columns,
        rows=tuple(rows),
        totals=totals,
        stock=stock_of(model, columns),
        upper=tuple(upper),
    )


def stock_of(model: PlanModel, columns: Mapping[int, Mapping[int, int]]) -> dict[int, SparseRow]:
    """The stock row of every lot that some column draws on, as a share of its stock."""
    terms: dict[int, dict[int, float]] = {}
    for j, place in columns.items():
        block = model.blocks[j]
        for i, column in place.items():
            stock = model.stock.get(block.model.lots[i])
            if stock is not None and stock > 0:
                terms.setdefault(block.model.lots[i], {})[column] = float(block.most / stock)
    return {lot: SparseRow(own, -inf, 1.0 + NOISE) for lot, own in sorted(terms.items())}


def reaches(kept: Kept, wanted: Fraction, freed: Collection[int] = (), closed: Collection[int] = ()) -> bool:
    """Whether the open order can have ``wanted``: the stock of ``freed`` lots unlimited, ``closed`` columns at 0."""
    program = _asked(kept, wanted, freed, closed)
    # Rules waived first: what is out of reach then needs no search, nor does what the others leave as they are.
    if linear(program).x is None:
        return False
    if not kept.part.whole or _finds(kept, wanted, freed):
        return True
    return search(program, nodes=NODES, seconds=SECONDS).x is not None


def most_beside(kept: Kept, wanted: Fraction, columns: Collection[int]) -> float | None:
    """The most that these columns can come to together while the open order has ``wanted``; None if it can't."""
    program = _asked(kept, wanted, (), ())
    program = replace(program, cost=[-1.0 if column in columns else 0.0 for column in range(len(program.upper))])
    waived = linear(program)
    if waived.x is None or not program.whole:
        return None if waived.x is None else -waived.value
    best = search(program, nodes=NODES, seconds=SECONDS)
    return None if best.x is None else -best.value


def _least_total(kept: Kept, wanted: Fraction) -> SparseRow:
    return SparseRow(dict.fromkeys(range(kept.part.n), 1.0), float(wanted) / kept.part.scale * (1 - REACHED), inf)


def _asked(kept: Kept, wanted: Fraction, freed: Collection[int], closed: Collection[int]) -> Mixed:
    rows = [*kept.rows, *(row for lot, row in kept.stock.items() if lot not in freed), _least_total(kept, wanted)]
    upper = [0.0 if column in closed else top for column, top in enumerate(kept.upper)]
    return Mixed(cost=[0.0] * len(upper), upper=upper, rows=rows, whole=kept.part.whole)


def overdrawn(kept: Kept, wanted: Fraction) -> list[int]:
    """Lots of which more than there is would do together, as little more as was found; none where none was found."""
    lots, begin = list(kept.stock), len(kept.upper)
    open_program = _asked(kept, wanted, kept.stock, ())
    rows = [
        SparseRow({**row.terms, begin + number: -1.0}, row.low, row.high)
        for number, row in enumerate(kept.stock.values())
    ]
    program = replace(
        open_program,
        cost=[*open_program.cost, *([1.0] * len(lots))],
        upper=[*open_program.upper, *([inf] * len(lots))],
        rows=[*open_program.rows, *rows],
    )
    best = search(program, nodes=NODES, seconds=SECONDS, gap=GAP) if program.whole else linear(program)
    if best.x is None:
        return []
    return [lot for lot, more in zip(lots, best.x[begin:], strict=True) if more > NO_OVERDRAFT]


def _finds(kept: Kept, wanted: Fraction, freed: Collection[int] = ()) -> bool:
    """Whether the open order finds ``wanted`` in what the others leave, all of them as they are; no says nothing."""
    room = [inf if lot in freed or lot not in kept.left else float(kept.left[lot] / wanted) for lot in kept.lots]
    caps = np.minimum(kept.choosing.cap, np.array(room))
    # Lots of which there is plenty first: a few of them do.
    asked = replace(kept.choosing, cap=caps, cost=1.0 - np.minimum(caps, 1.0))
    return choose_many([asked], [inf], 0.0, nodes=SHARES)[0][0].x is not None
