"""A large plan under house rules, order by order: Dantzig-Wolfe decomposition.

Orders share nothing but stock, so each is asked alone what it would take at given prices of the lots
(its own small problem of choice); a linear program over the answers sets the next prices (Dantzig and
Wolfe 1960).  With prices y ≥ 0 the answers also bound what any plan can reach (Geoffrion 1974), far
tighter than the same program with whole numbers waived.  A plan that keeps the rules then comes from
:mod:`generator.findings.plan_dives`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import inf

import numpy as np

from generator.findings.plan_exact import Amounts
from generator.findings.plan_model import Block, PlanModel, Stage
from generator.findings.plan_parts import Part, joined, part_of, program_of, side_by_side, stage_costs, stock_rows
from generator.geometry.choices import Choosing, choose_many
from generator.geometry.mixed import Floats, Mixed, SparseRow, linear

#: Rounds of prices at most, and how near (relative) their bound has to come to what the answers can reach.
ROUNDS = 40
NEAR = 1e-3
#: Prices move only this part of the way to what the answers say: fewer rounds (Wentges 1997).
STEP = 0.7
#: An amount (of an order's most) below this is taken for none.
NOTHING = 1e-9
#: How far the level of an earlier stage may give way (relative).
WITHIN = 1e-7


@dataclass(frozen=True, slots=True)
class Answer:
    """What one order would take: amounts by its own lots (n), in units of its most, and the lots used."""

    amounts: Floats
    lots: frozenset[int]


def answer_of(amounts: Floats) -> Answer:
    """An answer from amounts, those next to nothing taken for none."""
    kept = np.where(amounts > NOTHING, amounts, 0.0)
    return Answer(kept, frozenset(int(i) for i in np.flatnonzero(kept)))


@dataclass(slots=True)
class Pool:
    """The orders as parts and as problems of choice, and their answers so far; they serve all stages.

    Every order's first answer is "nothing".
    """

    model: PlanModel
    parts: tuple[Part, ...] = ()
    problems: tuple[Choosing, ...] = ()
    answers: list[list[Answer]] = field(default_factory=list)

    def __post_init__(self) -> None:
        """Make the parts, the problems and the first answers."""
        self.parts = tuple(part_of(block) for block in self.model.blocks)
        self.problems = tuple(map(choosing_of, self.model.blocks, self.parts))
        self.answers = [[answer_of(np.zeros(part.n))] for part in self.parts]

    def know(self, amounts: Amounts) -> None:
        """Put what a plan gives each order among its answers."""
        for k, own in enumerate(amounts):
            if own:
                vector = np.zeros(self.parts[k].n)
                for i, x in own.items():
                    vector[i] = float(x) / self.parts[k].scale
                self.answers[k].append(Answer(vector, frozenset(own)))


@dataclass(frozen=True, slots=True)
class Desk:
    """One stage's work.

    ``costs[k]`` (n) are those of order k's amounts, ``uses[k]`` (rows × n) what they take of the shared
    rows, each ≤ its entry of ``bounds``; ``blocks`` are the orders that take part.
    """

    pool: Pool
    costs: tuple[Floats, ...]
    uses: tuple[Floats, ...]
    bounds: Floats
    blocks: tuple[int, ...]

    def weights(self, k: int, prices: Floats) -> Floats:
        """An order's costs with the prices of what it takes (n)."""
        weights: Floats = self.costs[k] + prices @ self.uses[k]
        return weights


@dataclass(frozen=True, slots=True)
class Mixture:
    """The best mixture of answers: its value, the weight of each answer by order, the prices it sets."""

    value: float
    weights: Mapping[int, Sequence[tuple[Answer, float]]]
    prices: Floats


@dataclass(frozen=True, slots=True)
class Priced:
    """Where the rounds of prices ended: the last mixture, a bound that no plan's value is below, programs solved."""

    mixture: Mixture
    bound: float
    nodes: int


def desk_of(pool: Pool, stage: Stage, held: Sequence[tuple[Stage, float]], closed: frozenset[int]) -> Desk:
    """The work of one class stage, the ``held`` stages kept at their levels, ``closed`` orders out."""
    rows = list(stock_rows(pool.model, pool.parts).values())
    bounds = [1.0] * len(rows)
    for earlier, level in held:
        own, size = stage_costs(earlier, pool.parts)
        rows.append(own)
        bounds.append(level / size + WITHIN * max(1.0, abs(level / size)))
    costs, _ = stage_costs(stage, pool.parts)

    def dense(terms: Mapping[int, float], n: int) -> Floats:
        vector = np.zeros(n)
        for i, value in terms.items():
            vector[i] = value
        return vector

    sizes = [part.n for part in pool.parts]
    return Desk(
        pool=pool,
        costs=tuple(dense(own, n) for own, n in zip(costs, sizes, strict=True)),
        uses=tuple(
            np.array([dense(row[k], n) for row in rows], dtype=np.float64).reshape(len(rows), n)
            for k, n in enumerate(sizes)
        ),
        bounds=np.array(bounds, dtype=np.float64),
        blocks=tuple(k for k in range(len(sizes)) if k not in closed),
    )


def choosing_of(block: Block, part: Part) -> Choosing:
    """An order's limits and rules over shares; cost is set when it is asked.

    In units of the order's most: where it must be that much, its caps by stock hold for shares too; else
    only the shared rows know of the stock.
    """
    rules, n = block.model.rules, part.n
    is_fixed = block.low > 0 and block.low == block.high
    tops = part.upper[:n] if is_fixed else [1.0 if top is None else float(top) for top in block.model.upper]
    rows = [[float(a) for a in terms] for terms, _, _ in block.rows]
    return Choosing(
        cost=np.zeros(n),
        rows=np.array(rows, dtype=np.float64).reshape(len(rows), n),
        low=np.array([-inf if low is None else float(low) for _, low, _ in block.rows], dtype=np.float64),
        high=np.array([inf if high is None else float(high) for _, _, high in block.rows], dtype=np.float64),
        cap=np.array(tops, dtype=np.float64),
        least=np.array([float(least or 0) for least in rules.least], dtype=np.float64),
        most=rules.max_lots,
        apart=tuple((pair.first_lots, pair.second_lots) for pair in rules.apart),
    )


def priced(desk: Desk, stage: Stage, held: Sequence[tuple[Stage, float]], nodes: int) -> Priced:
    """Rounds of prices until the bound is near what the answers can reach, or the effort ends."""
    level, prices = _first_prices(desk, stage, held)
    everything = {k: desk.pool.answers[k] for k in desk.blocks}
    spent, bound = 0, -inf
    mixture = mixed(desk, everything)
    assert mixture is not None, "answers of the stages before keep their levels, and nothing is an answer too"
    for _ in range(ROUNDS):
        below, used = ask(desk, prices, level, everything, nodes=max(1, nodes - spent))
        spent += used
        bound = max(bound, below)
        mixture = mixed(desk, everything) or mixture
        level = mixture.value
        if level - bound <= NEAR * max(abs(level), NOTHING) or spent >= nodes:
            break
        prices = STEP * mixture.prices + (1 - STEP) * prices
    return Priced(mixture, bound, spent)


def _first_prices(desk: Desk, stage: Stage, held: Sequence[tuple[Stage, float]]) -> tuple[float, Floats]:
    """The value and the prices of the shared rows in the program with whole numbers waived."""
    pool = desk.pool
    whole = side_by_side(pool.parts)
    more = []
    for earlier, level in held:
        own, size = stage_costs(earlier, pool.parts)
        more.append(SparseRow(joined(whole, own), -inf, level / size + WITHIN * max(1.0, abs(level / size))))
    closed = frozenset(range(len(pool.parts))) - frozenset(desk.blocks)
    costs, _ = stage_costs(stage, pool.parts)
    found = linear(program_of(pool.model, whole, joined(whole, costs), more, closed))
    count = len(desk.bounds)
    if found.multipliers is None or not count:
        return 0.0 if found.x is None else found.value, np.zeros(count)
    return found.value, np.maximum(0.0, -found.multipliers[-count:])


def ask(
    desk: Desk,
    prices: Floats,
    level: float,
    answers: Mapping[int, Sequence[Answer]],
    sets: Mapping[int, frozenset[int]] | None = None,
    *,
    nodes: int = 20_000,
) -> tuple[float, int]:
    """Ask every order at these prices: what gains on its ``answers`` is put into the pool.

    Orders in ``sets`` are asked over their own set of lots only, those whose set is empty not at all.  Gives
    the bound at these prices (for all plans only if nothing is in ``sets``), and the linear programs solved.
    """
    slack = NEAR * max(abs(level), NOTHING) / (4 * max(1, len(desk.blocks)))
    asked, problems, known = [], [], []
    for k in desk.blocks:
        problem = desk.pool.problems[k]
        if sets is not None and k in sets:
            if not sets[k]:
                continue
            inside = np.zeros(problem.cap.size, dtype=np.bool_)
            inside[sorted(sets[k])] = True
            problem = replace(problem, cap=np.where(inside, problem.cap, 0.0))
        weights = desk.weights(k, prices)
        asked.append(k)
        problems.append(replace(problem, cost=weights))
        known.append(min((float(weights @ answer.amounts) for answer in answers[k]), default=0.0))
    found, spent = choose_many(problems, known, slack, nodes=nodes)
    for k, chosen in zip(asked, found, strict=True):
        if chosen.x is not None:
            desk.pool.answers[k].append(answer_of(chosen.x))
    return sum(chosen.bound for chosen in found) - float(prices @ desk.bounds), spent


def mixed(desk: Desk, answers: Mapping[int, Sequence[Answer]]) -> Mixture | None:
    """The best mixture of answers, weights of each order adding to 1, within the shared rows; None if none fits."""
    columns = [(k, answer) for k in desk.blocks for answer in answers[k]]
    count = len(desk.bounds)
    taken = np.zeros((count, len(columns)))
    cost = np.zeros(len(columns))
    sums: dict[int, dict[int, float]] = {k: {} for k in desk.blocks}
    for j, (k, answer) in enumerate(columns):
        taken[:, j] = desk.uses[k] @ answer.amounts
        cost[j] = desk.costs[k] @ answer.amounts
        sums[k][j] = 1.0
    rows = [
        SparseRow({int(j): float(row[j]) for j in np.flatnonzero(row)}, -inf, float(bound))
        for row, bound in zip(taken, desk.bounds, strict=True)
    ]
    rows += [SparseRow(own, 1.0, 1.0) for own in sums.values()]
    found = linear(Mixed(cost=cost.tolist(), upper=[1.0] * len(columns), rows=rows))
    if found.x is None or found.multipliers is None:
        return None
    weights: dict[int, list[tuple[Answer, float]]] = {k: [] for k in desk.blocks}
    for (k, answer), weight in zip(columns, found.x, strict=True):
        weights[k].append((answer, float(weight)))
    return Mixture(found.value, weights, np.maximum(0.0, -found.multipliers[:count]))
