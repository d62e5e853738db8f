"""From a mixture of answers to a plan: one set of lots for each order, fixed one after another.

Each dive fixes the sets that the mixture is surest of and asks again at the new prices, so that orders
still open adapt to the stock that is left (diving with generated columns: Sadykov and others 2019).
Then some orders are set free again, in turn, while the others keep their sets (large neighbourhood
search: Shaw 1998).
"""

from __future__ import annotations

import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import inf

from generator.findings.plan_blocks import Answer, Desk, Mixture, Pool, answer_of, ask, desk_of, mixed, priced
from generator.findings.plan_exact import Choice
from generator.findings.plan_model import Stage
from generator.findings.plan_parts import stage_costs

Sets = dict[int, frozenset[int]]

#: A weight this near to 1 leaves no doubt.
SURE = 1e-6
#: Turns of setting orders free, how many accepted ones at a time, and the gap that is near enough.
TURNS = 60
FREE = 8
ENOUGH = 3e-3


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
    for turn in range(TURNS):
        is_near = best.value - first.bound <= ENOUGH * max(abs(best.value), 1e-9)
        if is_near or spent >= nodes or time.monotonic() > until:
            break
        free = _set_free(desk, best.sets, turn)
        kept = {k: lots for k, lots in best.sets.items() if k not in free}
        found = _dive(desk, kept, first.mixture)
        spent += found.nodes
        if found.value < best.value - 1e-9 * abs(best.value):
            best = found
    _, size = stage_costs(stage, pool.parts)
    accepted = [block.low <= 0 or bool(best.sets.get(k)) for k, block in enumerate(pool.model.blocks)]
    chosen = [best.sets.get(k, frozenset()) for k in range(len(accepted))]
    return Planned(Choice(tuple(accepted), tuple(chosen)), first.bound * size, spent)


def _set_free(desk: Desk, sets: Sets, turn: int) -> set[int]:
    """Orders that get nothing, and some of the others: neighbours in the file, every so many, by turns."""
    served = [k for k in desk.blocks if sets[k]]
    count = max(1, -(-len(served) // FREE))
    number, by_stride = divmod(turn, 2)
    start = number % count
    some = served[start::count] if by_stride else served[start * FREE : (start + 1) * FREE]
    return {k for k in desk.blocks if not sets[k]} | set(some)


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
            desk.pool.answers[k].append(answer_of(sum(weight * answer.amounts for answer, weight in weights)))


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
