"""From a mixture of answers to a plan: one set of lots for each order, fixed one after another.

A dive fixes the sets that the mixture is surest of and asks again at the new prices, so that orders
still open adapt to the stock that is left (diving with generated columns: Sadykov and others 2019).
Then some orders pick anew among the sets of their answers while the others keep theirs, all amounts
free, by turns (large neighbourhood search: Shaw 1998).
"""

from __future__ import annotations

import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
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
from generator.geometry.choices import choose_many
from generator.geometry.mixed import Floats, Mixed, SparseRow, linear, search

Sets = dict[int, frozenset[int]]

#: A weight this near to 1 leaves no doubt.
SURE = 1e-6
#: Turns of picking anew, how many orders pick at a time (served ones and others), out of how many sets at
#: each prices, and the gap that is near enough.
TURNS = 100
FREE = 6
MOST_SETS = 4
ENOUGH = 5e-3
#: Nodes and gap of one turn's search.
TURN_NODES = 40
TURN_GAP = 1e-3
#: So many small linear programs count as one node of a search.
PER_NODE = 100


@dataclass(frozen=True, slots=True)
class Planned:
    """The choice found for a stage, a bound that no plan's stage value is below, the nodes spent."""

    choice: Choice
    bound: float
    nodes: int


@dataclass(frozen=True, slots=True)
class _Dive:
    """Where a dive ends: a set of lots for each order (empty: none), the value, the linear programs solved."""

    sets: Sets
    value: float
    nodes: int


@dataclass(frozen=True, slots=True)
class _Pick:
    """A set of lots for each order (empty: none), the value, the nodes spent, prices of the shared rows."""

    sets: Sets
    value: float
    nodes: int
    prices: Floats


def plan_stage(
    pool: Pool,
    stage: Stage,
    held: Sequence[tuple[Stage, float]],
    closed: frozenset[int],
    before: Choice,
    nodes: int,
    seconds: float,
) -> Planned:
    """The best choice found for one class stage, the ``held`` stages kept at their levels, ``closed`` orders out.

    ``before`` is the choice of the stage before, whose amounts are among the answers of the pool.
    """
    until = time.monotonic() + seconds
    desk = desk_of(pool, stage, held, closed)
    first = priced(desk, stage, held, nodes * PER_NODE)
    programs = first.nodes
    # Earlier classes keep their levels at least with the sets that they had.
    kept = {k: before.lots[k] for k in desk.blocks if before.lots[k]}
    starts = [_dive(desk, kept, first.mixture)] if held or not _is_whole(desk) else []
    starts.append(_dive(desk, {}, first.mixture) if held else _one_by_one(desk, first.mixture))
    best = min(starts, key=lambda start: start.value)
    programs += sum(start.nodes for start in starts)
    searched = 0
    sets, value, prices, is_new = best.sets, best.value, first.mixture.prices, True
    for turn in range(TURNS):
        is_near = value - first.bound <= ENOUGH * max(abs(value), 1e-9)
        if is_near or searched + programs // PER_NODE >= nodes or time.monotonic() > until:
            break
        rest = max(0.1, until - time.monotonic())
        if is_new:
            # Prices at which the present sets are what they are: what gains on them is a set to pick.
            prices = _pick_anew(desk, sets, set(), (prices,), rest).prices
            own = {k: [answer for answer in pool.answers[k] if answer.lots == sets[k]] for k in desk.blocks}
            programs += ask(desk, prices, value, own)[1]
        found = _pick_anew(desk, sets, _set_free(desk, sets, turn), (first.mixture.prices, prices), rest)
        searched += found.nodes
        is_new = found.value < value - 1e-9 * abs(value)
        if is_new:
            sets, value = found.sets, found.value
    _, size = stage_costs(stage, pool.parts)
    accepted = [block.low <= 0 or bool(sets.get(k)) for k, block in enumerate(pool.model.blocks)]
    chosen = [sets.get(k, frozenset()) for k in range(len(accepted))]
    return Planned(Choice(tuple(accepted), tuple(chosen)), first.bound * size, searched + programs // PER_NODE)


def _is_whole(desk: Desk) -> bool:
    """Whether most orders are accepted whole or not at all: a dive then ends with many left out that would fit."""
    return 2 * sum(desk.pool.model.blocks[k].low > 0 for k in desk.blocks) > len(desk.blocks)


def _set_free(desk: Desk, sets: Sets, turn: int) -> set[int]:
    """Some orders that get nothing and some that are served: neighbours in the file, every so many, by turns."""
    return set(_some([k for k in desk.blocks if not sets[k]], turn) + _some([k for k in desk.blocks if sets[k]], turn))


def _some(orders: Sequence[int], turn: int) -> list[int]:
    count = max(1, -(-len(orders) // FREE))
    start, by_block = (turn // 2) % count, turn % 2
    return list(orders[start * FREE : (start + 1) * FREE] if by_block else orders[start::count])


def _pick_anew(desk: Desk, sets: Sets, free: set[int], prices: Sequence[Floats], seconds: float) -> _Pick:
    """The best pick of one set, or none, for the ``free`` orders; the others keep their sets, amounts are free.

    With no order free it is a linear program, and the prices of the answer are its own.
    """
    picks: list[tuple[int, frozenset[int], dict[int, int], int | None]] = []
    rows: list[SparseRow] = []
    upper: list[float] = []
    cost: list[float] = []
    shared: list[dict[int, float]] = [{} for _ in desk.bounds]
    for k in desk.blocks:
        block, part, flags = desk.pool.model.blocks[k], desk.pool.parts[k], []
        for lots in _candidates(desk, k, sets[k], prices) if k in free else [sets[k]]:
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
    found = search(program, nodes=TURN_NODES, seconds=seconds, gap=TURN_GAP) if whole else linear(program)
    if found.x is None:
        return _Pick(sets, inf, found.nodes, prices[-1])
    own = prices[-1]
    if found.multipliers is not None:
        own = np.maximum(0.0, -found.multipliers[len(rows) - len(desk.bounds) :])
    x = found.x
    chosen: Sets = dict.fromkeys(desk.blocks, frozenset())
    for k, lots, place, flag in picks:
        if (flag is None or x[flag] > 0.5) and any(x[column] > NOTHING for column in place.values()):
            chosen[k] = lots
    return _Pick(chosen, found.value, found.nodes, own)


def _candidates(desk: Desk, k: int, now: frozenset[int], prices: Sequence[Floats]) -> list[frozenset[int]]:
    """An order's present set and the best of its answers' sets at each of these prices."""
    chosen = [now] if now else []
    for each in prices:
        weights = desk.weights(k, each)
        best: dict[frozenset[int], float] = {}
        for answer in desk.pool.answers[k]:
            if answer.lots:
                best[answer.lots] = min(best.get(answer.lots, inf), float(weights @ answer.amounts))
        chosen += sorted(best, key=lambda lots: (best[lots], sorted(lots)))[:MOST_SETS]
    return list(dict.fromkeys(chosen))


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


def _one_by_one(desk: Desk, first: Mixture) -> _Dive:
    """Serve the orders one after another from the stock that is left, at the prices of the mixture.

    First those that the mixture serves most of, then those that gain most.
    """
    left = desk.bounds.copy()
    sets: Sets = dict.fromkeys(desk.blocks, frozenset())
    value, spent = 0.0, 0
    for k in sorted(desk.blocks, key=lambda k: _promise(desk, k, first)):
        problem, uses = desk.pool.problems[k], desk.uses[k]
        weights = desk.weights(k, first.prices)
        # What is left of the rows on which amounts only draw caps each lot; the others are looked at after.
        with np.errstate(divide="ignore", invalid="ignore"):
            room = np.where(uses > 0, np.maximum(left, 0.0)[:, None] / uses, inf).min(axis=0, initial=inf)
        shares = replace(problem, cost=weights, cap=np.minimum(problem.cap, room))
        found, used = choose_many([shares], [0.0], 0.0)
        spent += used
        x = found[0].x
        if x is None or (desk.pool.model.blocks[k].low > 0 and (uses @ x > left + NOTHING).any()):
            continue
        scale = min(
            1.0, float(np.min(np.where(uses @ x > NOTHING, left / np.maximum(uses @ x, NOTHING), 1.0), initial=1.0))
        )
        if scale <= NOTHING:
            continue
        answer = answer_of(x)
        desk.pool.answers[k].append(answer)
        sets[k] = answer.lots
        left = left - scale * (uses @ answer.amounts)
        value += scale * float(desk.costs[k] @ answer.amounts)
    return _Dive(sets, value, spent)


def _promise(desk: Desk, k: int, first: Mixture) -> tuple[float, float, int]:
    served = sum(weight for answer, weight in first.weights[k] if answer.lots)
    weights = desk.weights(k, first.prices)
    gain = min(float(weights @ answer.amounts) for answer in desk.pool.answers[k])
    return -round(served, 6), gain, k


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
