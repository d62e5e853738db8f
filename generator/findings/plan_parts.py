"""The plan's blocks in floating point: columns and rows of one order, and of all orders together.

Amounts are columns in units of the block's ``most``, so that all numbers are about 1.  Whole-number
columns say that an order is accepted, that a lot is used, or that a list of kept-apart lots is.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import inf

from generator.findings.plan_model import Block, PlanModel, Stage
from generator.findings.programs import ZERO
from generator.geometry.mixed import Mixed, SparseRow


@dataclass(frozen=True, slots=True, kw_only=True)
class Part:
    """One block's columns: amounts first (n), then whole-number ones; ``used`` maps lots to columns."""

    scale: float
    n: int
    upper: tuple[float, ...]
    rows: tuple[SparseRow, ...]
    accepted: int | None
    used: Mapping[int, int]

    @property
    def whole(self) -> frozenset[int]:
        """The whole-number columns."""
        return frozenset(range(self.n, len(self.upper)))


def part_of(block: Block, *, counts_lots: bool = False, caps_by_stock: bool = True) -> Part:
    """The block in floats; ``counts_lots`` gives every lot a column that says whether it is used.

    Without ``caps_by_stock`` only the shared stock rows, which come later, know of the stock.
    """
    model, rules = block.model, block.model.rules
    n, scale = len(model.lots), float(block.most) or 1.0
    tops = tuple(_top(block, i, caps_by_stock=caps_by_stock) for i in range(n))
    rows = [
        SparseRow(
            {i: float(a) for i, a in enumerate(terms) if a},
            -inf if low is None else float(low),
            inf if high is None else float(high),
        )
        for terms, low, high in block.rows
    ]
    upper = list(tops)
    accepted = None
    if block.low > 0:
        accepted = len(upper)
        upper.append(1.0)
    rows += _amount_rows(block, n, scale, accepted)
    used: dict[int, int] = {}
    for i in range(n):
        if counts_lots or rules.max_lots is not None or rules.least[i]:
            used[i] = len(upper)
            upper.append(1.0)
            rows.append(SparseRow({i: 1.0, used[i]: -tops[i]}, -inf, 0.0))
            if accepted is not None:
                rows.append(SparseRow({used[i]: 1.0, accepted: -1.0}, -inf, 0.0))
    rows += _rule_rows(block, used, accepted)
    for pair in rules.apart:
        columns = []
        for lots in (pair.first_lots, pair.second_lots):
            columns.append(len(upper))
            upper.append(1.0)
            rows += [
                SparseRow({used[i]: 1.0, columns[-1]: -1.0}, -inf, 0.0)
                if i in used
                else SparseRow({i: 1.0, columns[-1]: -tops[i]}, -inf, 0.0)
                for i in sorted(lots)
            ]
        rows.append(SparseRow(dict.fromkeys(columns, 1.0), -inf, 1.0))
    return Part(scale=scale, n=n, upper=tuple(upper), rows=tuple(rows), accepted=accepted, used=used)


def _top(block: Block, i: int, *, caps_by_stock: bool) -> float:
    """The greatest amount of one lot, in units of the block's most."""
    stock = block.model.stock[i] if caps_by_stock else None
    share = block.model.upper[i]
    caps = [1.0, *([float(stock / block.most)] if stock is not None and block.most else [])]
    return min([*caps, *([float(share)] if share is not None else [])])


def rows_over(block: Block, place: Mapping[int, int]) -> list[SparseRow]:
    """Limits, share bounds and least shares over chosen lots, all of them used; ``place`` gives their columns."""
    sparse = [({i: terms[i] for i in place}, low, high) for terms, low, high in block.rows]
    for i in place:
        least = block.model.rules.least[i]
        if least:
            sparse.append(({j: least - (1 if j == i else 0) for j in place}, None, ZERO))
    return [
        SparseRow(
            {place[i]: float(a) for i, a in terms.items() if a},
            -inf if low is None else float(low),
            inf if high is None else float(high),
        )
        for terms, low, high in sparse
    ]


def _amount_rows(block: Block, n: int, scale: float, accepted: int | None) -> list[SparseRow]:
    total = dict.fromkeys(range(n), 1.0)
    high = inf if block.high is None else float(block.high) / scale
    if accepted is None:
        return [SparseRow(total, -inf, min(high, 1.0))]
    low = float(block.low) / scale
    if block.low == block.high:
        return [SparseRow({**total, accepted: -low}, 0.0, 0.0)]
    return [
        SparseRow({**total, accepted: -low}, 0.0, inf),
        SparseRow({**total, accepted: -min(high, 1.0)}, -inf, 0.0),
    ]


def _rule_rows(block: Block, used: Mapping[int, int], accepted: int | None) -> list[SparseRow]:
    """Most lots, and least shares of used lots: x ≥ least·T where used (T fixed: least of it)."""
    rules, n = block.model.rules, len(block.model.lots)
    rows = []
    if rules.max_lots is not None:
        count = dict.fromkeys(used.values(), 1.0)
        if accepted is not None:
            rows.append(SparseRow({**count, accepted: -float(rules.max_lots)}, -inf, 0.0))
        else:
            rows.append(SparseRow(count, -inf, float(rules.max_lots)))
    for i, typed in enumerate(rules.least):
        if not typed:
            continue
        least = float(typed)
        if accepted is not None and block.low == block.high:
            rows.append(SparseRow({i: -1.0, used[i]: least}, -inf, 0.0))
        else:
            terms = dict.fromkeys(range(n), least)
            terms[i] -= 1.0
            rows.append(SparseRow({**terms, used[i]: least}, -inf, least))
    return rows


@dataclass(frozen=True, slots=True)
class Whole:
    """All parts side by side, and where each begins."""

    parts: tuple[Part, ...]
    starts: tuple[int, ...]
    width: int


def side_by_side(parts: Sequence[Part]) -> Whole:
    """The parts in one row of columns."""
    starts, width = [], 0
    for part in parts:
        starts.append(width)
        width += len(part.upper)
    return Whole(tuple(parts), tuple(starts), width)


def stock_rows(model: PlanModel, parts: Sequence[Part]) -> dict[int, list[dict[int, float]]]:
    """For every lot with a stock, its use by each part as a share of the stock (by the part's columns)."""
    rows: dict[int, list[dict[int, float]]] = {}
    for lot, stock in model.stock.items():
        if stock <= 0:
            continue
        uses = []
        for block, part in zip(model.blocks, parts, strict=True):
            uses.append({i: part.scale / float(stock) for i, own in enumerate(block.model.lots) if own == lot})
        if any(uses):
            rows[lot] = uses
    return rows


def stage_costs(stage: Stage, parts: Sequence[Part]) -> tuple[list[dict[int, float]], float]:
    """The stage's costs by part and column, divided by the largest of them, and that divisor."""
    if stage.aim == "lots":
        return [dict.fromkeys(part.used.values(), 1.0) for part in parts], 1.0
    costs = [
        {i: float(cost) * part.scale for i, cost in enumerate(own) if cost}
        for own, part in zip(stage.costs, parts, strict=True)
    ]
    size = max((abs(cost) for own in costs for cost in own.values()), default=1.0)
    return [{i: cost / size for i, cost in own.items()} for own in costs], size


def joined(whole: Whole, by_part: Sequence[Mapping[int, float]]) -> dict[int, float]:
    """Terms by part and column as terms over all columns."""
    return {start + j: value for start, terms in zip(whole.starts, by_part, strict=True) for j, value in terms.items()}


def program_of(
    model: PlanModel,
    whole: Whole,
    cost: Mapping[int, float],
    more: Sequence[SparseRow] = (),
    closed: frozenset[int] = frozenset(),
    free: frozenset[tuple[int, int]] | None = None,
) -> Mixed:
    """One program of all parts, the stock rows and ``more``; the parts in ``closed`` get nothing.

    ``free``: pairs of a part and a lot of its own, the only ones that are used (None: any).
    """
    rows = []
    for start, part in zip(whole.starts, whole.parts, strict=True):
        rows += [SparseRow({start + j: a for j, a in row.terms.items()}, row.low, row.high) for row in part.rows]
    rows += [SparseRow(joined(whole, uses), -inf, 1.0) for uses in stock_rows(model, whole.parts).values()]
    upper = [0.0 if k in closed else top for k, part in enumerate(whole.parts) for top in part.upper]
    if free is not None:
        for k, (start, part) in enumerate(zip(whole.starts, whole.parts, strict=True)):
            for i in range(part.n):
                if (k, i) not in free:
                    upper[start + i] = 0.0
    integral = {start + j for start, part in zip(whole.starts, whole.parts, strict=True) for j in part.whole}
    return Mixed(
        cost=[cost.get(j, 0.0) for j in range(whole.width)],
        upper=upper,
        rows=[*rows, *more],
        whole=frozenset(integral),
    )
