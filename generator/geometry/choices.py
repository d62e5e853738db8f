"""Many small programs over shares of which only few may be used: at most so many, each at least so much,
some never together.

Branch and bound over "used" and "not used" (Land and Doig 1960): the open branches of all problems are
solved side by side as one stack of linear programs.  Everything here is floating point; whoever asks
settles what it needs exactly.
"""

from __future__ import annotations

import heapq
from collections.abc import Sequence
from dataclasses import dataclass, field
from math import inf

import numpy as np
from numpy.typing import NDArray

from generator.geometry.simplex import INFEASIBLE, OPTIMAL, solve
from generator.geometry.stack import make_stack

Floats = NDArray[np.float64]

#: A share below this is taken for none.
NOTHING = 1e-9
#: Open branches of one problem that are solved together: so many, and more where there are few problems.
ABREAST = 4
TOGETHER = 48


@dataclass(frozen=True, slots=True, kw_only=True)
class Choosing:
    """minimise cost·x over low ≤ rows·x ≤ high, Σx = 1, 0 ≤ x ≤ cap, with at most ``most`` of the n shares
    above 0 (None: any), each of them at least ``least``, and of every pair in ``apart`` one side all 0."""

    cost: Floats
    rows: Floats
    low: Floats
    high: Floats
    cap: Floats
    least: Floats
    most: int | None
    apart: tuple[tuple[frozenset[int], frozenset[int]], ...] = ()


@dataclass(frozen=True, slots=True)
class Chosen:
    """The best shares found (None: none below the value known before), their cost, and a bound that
    no shares are below."""

    x: Floats | None
    value: float
    bound: float


@dataclass(order=True, slots=True)
class _Branch:
    """Bounds of the shares on one branch, and which are in; sorted by the bound of the branch it came from."""

    bound: float
    number: int
    lower: Floats = field(compare=False)
    upper: Floats = field(compare=False)
    inside: frozenset[int] = field(compare=False)


@dataclass(slots=True)
class _Work:
    """One problem under way: its open branches and the best found."""

    problem: Choosing
    value: float
    slack: float
    heap: list[_Branch]
    x: Floats | None = None
    lost: float = inf
    count: int = 0

    def next(self, abreast: int) -> list[_Branch]:
        """The most promising branches; those that can't gain ``slack`` are closed."""
        if self.heap and self.heap[0].bound >= self.value - self.slack:
            self.heap.clear()
        return [heapq.heappop(self.heap) for _ in range(min(abreast, len(self.heap)))]

    def chosen(self) -> Chosen:
        """What was found; a branch closed without being searched out counts at its bound."""
        open_bound = min((branch.bound for branch in self.heap), default=inf)
        return Chosen(self.x, self.value, min(self.value - self.slack, open_bound, self.lost))

    def push(self, branch: _Branch) -> None:
        """Keep a branch for later."""
        self.count += 1
        branch.number = self.count
        heapq.heappush(self.heap, branch)


def choose_many(
    problems: Sequence[Choosing], known: Sequence[float], slack: float, *, nodes: int = 20_000
) -> tuple[list[Chosen], int]:
    """For each problem the best shares that cost at least ``slack`` less than what is ``known``, and the
    number of linear programs solved.

    Stops after about ``nodes`` of them: the bounds then tell how much is left open.
    """
    works = [
        _Work(problem, value, slack, [_Branch(-inf, 0, np.zeros(problem.cap.size), problem.cap.copy(), frozenset())])
        for problem, value in zip(problems, known, strict=True)
    ]
    spent, open_works = 0, len(works)
    while spent < nodes:
        abreast = max(ABREAST, TOGETHER // max(1, open_works))
        batch = [(work, branch) for work in works for branch in work.next(abreast)]
        open_works = len({id(work) for work, _ in batch})
        if not batch:
            break
        spent += len(batch)
        _solve(batch)
    return [work.chosen() for work in works], spent


def _solve(batch: Sequence[tuple[_Work, _Branch]]) -> None:
    m = 1 + max(work.problem.rows.shape[0] for work, _ in batch)
    n = max(branch.lower.size for _, branch in batch)
    count = len(batch)
    rows = np.zeros((count, m, n))
    low, high = np.full((count, m), -np.inf), np.full((count, m), np.inf)
    lower, upper, cost = np.zeros((count, n)), np.zeros((count, n)), np.zeros((count, n))
    for k, (work, branch) in enumerate(batch):
        own, width = work.problem.rows.shape[0], branch.lower.size
        rows[k, :own, :width] = work.problem.rows
        low[k, :own], high[k, :own] = work.problem.low, work.problem.high
        rows[k, -1, :width] = low[k, -1] = high[k, -1] = 1.0
        lower[k, :width], upper[k, :width], cost[k, :width] = branch.lower, branch.upper, work.problem.cost
    solved = solve(make_stack(rows, low, high, lower=lower, upper=upper, cost=cost), alone=True)
    for k, (work, branch) in enumerate(batch):
        if solved.status[k] == OPTIMAL:
            _branched(work, branch, float(solved.value[k]), solved.x[k, : branch.lower.size])
        elif solved.status[k] != INFEASIBLE:
            work.lost = min(work.lost, branch.bound)


def _branched(work: _Work, branch: _Branch, value: float, x: Floats) -> None:
    """Keep shares that fit as the best, else split the branch on what they break."""
    if value >= work.value - work.slack:
        return
    problem = work.problem
    used = np.flatnonzero(x > NOTHING)
    for one, other in problem.apart:
        if one.intersection(used.tolist()) and other.intersection(used.tolist()):
            for lots in (one, other):
                work.push(_without(branch, lots, value))
            return
    small = [int(i) for i in used if x[i] < problem.least[i] - NOTHING]
    is_crowded = problem.most is not None and len(used) > problem.most
    if not small and not is_crowded:
        work.value, work.x = value, x
        return
    free = [int(i) for i in (used if is_crowded else small) if int(i) not in branch.inside]
    if not free:
        work.lost = min(work.lost, value)
        return
    chosen = max(free, key=lambda i: (x[i], -i))
    work.push(_without(branch, frozenset([chosen]), value))
    work.push(_with(problem, branch, chosen, value))


def _without(branch: _Branch, shares: frozenset[int], bound: float) -> _Branch:
    upper = branch.upper.copy()
    upper[sorted(shares)] = 0.0
    return _Branch(bound, 0, np.minimum(branch.lower, upper), upper, branch.inside)


def _with(problem: Choosing, branch: _Branch, share: int, bound: float) -> _Branch:
    """The branch on which a share is used; with as many as may be, all others are out."""
    lower, upper, inside = branch.lower.copy(), branch.upper.copy(), branch.inside | {share}
    lower[share] = max(lower[share], problem.least[share])
    if problem.most is not None and len(inside) >= problem.most:
        out = np.ones(upper.size, dtype=np.bool_)
        out[sorted(inside)] = False
        upper[out] = 0.0
    return _Branch(bound, 0, lower, upper, inside)
