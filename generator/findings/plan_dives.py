"""From a mixture of answers to a plan: one set of lots for each order, fixed one after another.

A dive fixes the sets that the mixture is surest of and asks again at the new prices, so that orders
still open adapt to the stock that is left (diving with generated columns: Sadykov and others 2019).
Then some orders pick anew among the sets of their answers while the others keep theirs, all amounts
free, by turns (large neighbourhood search: Shaw 1998).
"""

from __future__ import annotations

import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import inf

import numpy as np

from generator.findings.plan_blocks import (
    NOTHING,
    Answer,
    Desk,
    Mixture,
    Pool,
    answer_of,
    ask,
    desk_of,
    mixed,
    priced,
)
from generator.findings.plan_exact import Choice
from generator.findings.plan_model import Block, Stage
from generator.findings.plan_parts import Part, rows_over, stage_costs
from generator.geometry.mixed import Mixed, SparseRow, search

Sets = dict[int, frozenset[int]]

#: A weight this near to 1 leaves no doubt.
SURE = 1e-6
#: Turns of picking anew, how many served orders pick at a time, out of how many sets, and the gap that is
#: near enough.
TURNS = 60
FREE = 6
MOST_SETS = 5
ENOUGH = 5e-3
#: Nodes and gap of one turn's search.
TURN_NODES = 40
TURN_GAP = 1e-3


@dataclass(frozen=True, slots=True)
class Planned:
    """The choice found for a stage, a bound that no plan's stage value is below, the linear programs solved."""

    choice: Choice
    bound: float
    nodes: int


@dataclass(frozen=True, slots=True)
class _Dive:
    """Where a dive ends: a set of lots for each order (empty: none), the value, the linear programs solved."""

    sets: Sets
    value: float
    nodes: int


def plan_stage(
    pool: Pool,
    stage: Stage,
    held: Sequence[tuple[Stage, float]],
    closed: frozenset[int],
    nodes: int,
    seconds: float,
) -> Planned:
    """The best choice found for one class stage, the ``held`` stages kept at their levels, ``closed`` orders out."""
    until = time.monotonic() + seconds
    desk = desk_of(pool, stage, held, closed)
    first = priced(desk, stage, held, nodes)
    spent = first.nodes
    best = _dive(desk, {}, first.mixture)
    spent += best.nodes
    sets, value = best.sets, best.value
    for turn in range(TURNS):
        is_near = value - first.bound <= ENOUGH * max(abs(value), 1e-9)
        if is_near or spent >= nodes or time.monotonic() > until:
            break
        found = _pick_anew(desk, sets, _set_free(desk, sets, turn), first.mixture, max(0.1, until - time.monotonic()))
        spent += found.nodes
        if found.value < value - 1e-9 * abs(value):
            sets, value = found.sets, found.value
    _, size = stage_costs(stage, pool.parts)
    accepted = [block.low <= 0 or bool(sets.get(k)) for k, block in enumerate(pool.model.blocks)]
    chosen = [sets.get(k, frozenset()) for k in range(len(accepted))]
    return Planned(Choice(tuple(accepted), tuple(chosen)), first.bound * size, spent)


def _set_free(desk: Desk, sets: Sets, turn: int) -> set[int]:
    """Orders that get nothing, and some of the others: neighbours in the file, every so many, by turns."""
    served = [k for k in desk.blocks if sets[k]]
    count = max(1, -(-len(served) // FREE))
    start, by_block = (turn // 2) % count, turn % 2
    some = served[start * FREE : (start + 1) * FREE] if by_block else served[start::count]
    return {k for k in desk.blocks if not sets[k]} | set(some)


def _pick_anew(desk: Desk, sets: Sets, free: set[int], first: Mixture, seconds: float) -> _Dive:
    """The best pick of one set, or none, for the ``free`` orders; the others keep their sets, amounts are free."""
    picks: list[tuple[int, frozenset[int], dict[int, int], int | None]] = []
    rows: list[SparseRow] = []
    upper: list[float] = []
    cost: list[float] = []
    shared: list[dict[int, float]] = [{} for _ in desk.bounds]
    for k in desk.blocks:
        block, part, flags = desk.pool.model.blocks[k], desk.pool.parts[k], []
        for lots in _candidates(desk, k, sets[k], first) if k in free else [sets[k]]:
            if not lots:
                continue
            place = {i: len(upper) + position for position, i in enumerate(sorted(lots))}
            upper += [part.upper[i] for i in place]
            cost += [float(desk.costs[k][i]) for i in place]
            for i, column in place.items():
                for row in np.flatnonzero(desk.uses[k][:, i]):
                    shared[row][column] = float(desk.uses[k][row, i])
            flag = None
            if k in free:
                flag = len(upper)
                flags.append(flag)
                upper.append(1.0)
                cost.append(0.0)
            rows += [*rows_over(block, place), *_total_rows(block, part, place, flag)]
            picks.append((k, lots, place, flag))
        if flags:
            rows.append(SparseRow(dict.fromkeys(flags, 1.0), -inf, 1.0))
    rows += [SparseRow(terms, -inf, float(bound)) for terms, bound in zip(shared, desk.bounds, strict=True)]
    whole = frozenset(flag for _, _, _, flag in picks if flag is not None)
    program = Mixed(cost=cost, upper=upper, rows=rows, whole=whole)
    found = search(program, nodes=TURN_NODES, seconds=seconds, gap=TURN_GAP)
    if found.x is None:
        return _Dive(sets, inf, found.nodes)
    x = found.x
    chosen: Sets = dict.fromkeys(desk.blocks, frozenset())
    for k, lots, place, flag in picks:
        if (flag is None or x[flag] > 0.5) and any(x[column] > NOTHING for column in place.values()):
            chosen[k] = lots
    return _Dive(chosen, found.value, found.nodes)


def _candidates(desk: Desk, k: int, now: frozenset[int], first: Mixture) -> list[frozenset[int]]:
    """An order's present set and the best of its answers' sets at the last prices of the whole."""
    weights = desk.weights(k, first.prices)
    best: dict[frozenset[int], float] = {}
    for answer in desk.pool.answers[k]:
        if answer.lots:
            best[answer.lots] = min(best.get(answer.lots, inf), float(weights @ answer.amounts))
    ranked = sorted(best, key=lambda lots: (best[lots], sorted(lots)))
    return list(dict.fromkeys([*([now] if now else []), *ranked]))[:MOST_SETS]


def _total_rows(block: Block, part: Part, place: Mapping[int, int], flag: int | None) -> list[SparseRow]:
    """The order's amount over one set of lots, which it uses only if ``flag`` is 1 (None: it does)."""
    total = dict.fromkeys(place.values(), 1.0)
    low, high = float(block.low) / part.scale, min(1.0, float(block.high or block.most) / part.scale)
    if flag is None:
        return [SparseRow(total, low if low > 0 else -inf, high)]
    rows = [SparseRow({**total, flag: -high}, -inf, 0.0)]
    return [*rows, SparseRow({**total, flag: -low}, 0.0, inf)] if low > 0 else rows


def _dive(desk: Desk, kept: Sets, first: Mixture) -> _Dive:
    """Fix set after set beyond the ``kept`` ones, with new answers at new prices after each."""
    fixed = dict(kept)
    spent = 0
    while True:
        mixture = mixed(desk, {k: _open_answers(desk, k, fixed) for k in desk.blocks})
        if mixture is None:
            # The set fixed last can't be had in full beside the others: that order is left out.
            own = [k for k in fixed if fixed[k] and k not in kept]
            if not own:
                return _Dive({k: frozenset() for k in desk.blocks}, inf, spent)
            fixed[own[-1]] = frozenset()
            continue
        if len(fixed) == len(desk.blocks):
            _keep(desk, mixture)
            return _Dive({k: fixed[k] for k in desk.blocks}, mixture.value, spent)
        fixed.update(_surest(desk, mixture, fixed))
        answers = {k: _open_answers(desk, k, fixed) for k in desk.blocks}
        _, used = ask(desk, mixture.prices, first.value, answers, fixed)
        spent += used


def _keep(desk: Desk, mixture: Mixture) -> None:
    """Put what each order gets in the end among its answers, so that later dives can begin from it."""
    for k, weights in mixture.weights.items():
        if sum(weight > SURE for _, weight in weights) > 1:
            amounts = np.sum([weight * answer.amounts for answer, weight in weights], axis=0)
            desk.pool.answers[k].append(answer_of(amounts))


def _open_answers(desk: Desk, k: int, fixed: Mapping[int, frozenset[int]]) -> list[Answer]:
    """An order's answers; once fixed, those on its set, and nothing where it may have less."""
    answers = desk.pool.answers[k]
    if k not in fixed:
        return answers
    may_be_less = desk.pool.model.blocks[k].low <= 0
    return [answer for answer in answers if answer.lots == fixed[k] or (not answer.lots and may_be_less)]


def _surest(desk: Desk, mixture: Mixture, fixed: Sets) -> Sets:
    """The sets to fix next: all that the mixture has no doubt of, else the one it is surest of.

    Nothing is fixed for an order until no other has a set in the mixture any more.
    """
    ranked = []
    for k in desk.blocks:
        sets: dict[frozenset[int], float] = {}
        for answer, weight in mixture.weights[k]:
            if answer.lots and weight > SURE:
                sets[answer.lots] = sets.get(answer.lots, 0.0) + weight
        if k not in fixed and sets:
            lots = max(sets, key=lambda own: (sets[own], sorted(own)))
            ranked.append((sets[lots], k, lots))
    if not ranked:
        return {k: frozenset() for k in desk.blocks if k not in fixed}
    sure = {k: lots for weight, k, lots in ranked if weight >= 1 - SURE}
    if sure:
        return sure
    _, k, lots = min(ranked, key=lambda item: (-item[0], item[1]))
    return {k: lots}
