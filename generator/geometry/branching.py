"""Branch and bound over a choice among columns, in floats, with bounds that hold.

Many open boxes are solved side by side as one stack of linear programs.  A box is closed only where its
emptiness or its least value is proven with a bound on the rounding errors (``rigour``), so what is closed
holds nothing that matters; what floats can't tell from the best is left to exact arithmetic.

Besides its own rows each box keeps Σ x_j / ceiling_j ≤ most − (columns in) over the columns still open, which any
point that uses at most so many columns keeps (Land and Doig 1960 for the search; the row is that of a used-or-not
column z_j with x_j ≤ ceiling_j·z_j and Σ z_j ≤ most, projected).
"""

from __future__ import annotations

import heapq
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from math import inf, nextafter

import numpy as np

from generator.geometry.asked import Point, Question, answer_all
from generator.geometry.choice import FREE, IN, OUT, Box, Choice, Left, Marks, closed_box
from generator.geometry.program import Bound, Program, Vector
from generator.geometry.rigour import Certified, certify
from generator.geometry.simplex import INFEASIBLE, OPTIMAL, Start, solve_scaled
from generator.geometry.stack import Flags, Floats, Indices, Stack

#: A scaled share below this is taken for none, and a value this near to the best known for as good: far above
#: rounding.  Both only steer the search; what is decided is decided by error bounds.
NOTHING = 1e-9
#: Boxes solved together: enough to make each step of the solver worth its while.
ABREAST = 48
#: Columns in a box, relative to the whole, whose leasts are kept as rows; a column beyond is held to 0 only.
_SLOTS = 8


@dataclass(order=True, slots=True)
class _Node:
    """An open box, sorted by the bound of the box that it came from, deeper ones first."""

    bound: float
    depth: int
    number: int
    marks: Marks = field(compare=False)
    basic: Indices | None = field(compare=False, default=None)
    at_upper: Flags | None = field(compare=False, default=None)
    is_trial: bool = field(compare=False, default=False)
    parent: _Node | None = field(compare=False, default=None)

    def path(self) -> list[Marks]:
        """The marks of all boxes from the root to this one."""
        return [*(self.parent.path() if self.parent else ()), self.marks]


@dataclass(slots=True)
class _Search:
    """One choice under way; values are scaled."""

    choice: Choice
    value: float
    first_will_do: bool
    floor: float = -inf
    best: Box | None = None
    heap: list[_Node] = field(default_factory=list)
    trials: list[_Node] = field(default_factory=list)
    aside: list[_Node] = field(default_factory=list)
    closed: list[_Node] = field(default_factory=list)
    tried: set[bytes] = field(default_factory=set)
    count: int = 0
    steps: int = 0

    def push(self, bound: float, marks: Marks, like: _Node | None = None, *, is_trial: bool = False) -> None:
        """Keep a box for later, to start from the basis of the one it came from."""
        self.count += 1
        depth = -int(np.count_nonzero(marks))
        node = _Node(bound, depth, self.count, marks, is_trial=is_trial)
        if like is not None:
            node.basic, node.at_upper, node.parent = like.basic, like.at_upper, like
        if is_trial:
            self.trials.append(node)
        else:
            heapq.heappush(self.heap, node)

    def next(self) -> list[_Node]:
        """Trials first, then the most promising boxes; those that can't be better are dropped."""
        wave, self.trials = self.trials[:ABREAST], self.trials[ABREAST:]
        while self.heap and len(wave) < ABREAST:
            node = heapq.heappop(self.heap)
            if node.bound <= self.value:
                wave.append(node)
        return wave

    @property
    def is_over(self) -> bool:
        """Whether nothing is left to do."""
        return self.is_found or not (self.heap or self.trials)

    @property
    def is_found(self) -> bool:
        """Whether a point is known that will do."""
        return self.best is not None and (self.first_will_do or self.value <= self.floor + NOTHING)


def branch(
    choice: Choice,
    roots: Sequence[Box] = (Box(),),
    *,
    known: float = inf,
    floor: float = -inf,
    nodes: int,
    first_will_do: bool = False,
) -> Left:
    """What of the ``roots`` may hold the best point, after at most about so many boxes.

    ``known``: some allowed point costs no more.  ``floor``: none costs less, so that one that costs about as much
    ends the search; ``first_will_do``: any allowed point does.  Then its box alone is left.
    """
    n = choice.n
    if not choice.is_sound:
        return Left(tuple(roots), None, known, is_done=False, steps=0)
    search = _Search(choice, known / choice.unit[1], first_will_do, floor / choice.unit[1])
    for root in roots:
        search.push(-inf, root.marks(n))
    layout = _Layout.of(choice)
    while not search.is_over and search.steps < nodes:
        wave = search.next()
        if not wave:
            break
        search.steps += len(wave)
        _solve(search, layout, wave)
    return _left(search)


def closed_paths(choice: Choice, *, nodes: int) -> list[list[Marks]] | None:
    """Boxes that each hold no point even where all open columns may be used, and that leave out no allowed point.

    Each as the marks of all boxes from the root to it.  None where a box may hold a point, or past so many nodes.
    """
    if not choice.is_sound:
        return None
    search = _Search(choice, inf, first_will_do=True)
    search.push(-inf, Box().marks(choice.n))
    layout = replace(_Layout.of(choice), counts=np.zeros(choice.n))
    while not search.is_over and search.steps < nodes:
        wave = search.next()
        search.steps += len(wave)
        _solve(search, layout, wave)
    if search.best is not None or search.heap or search.aside:
        return None
    return [node.path() for node in search.closed if not node.is_trial]


def _left(search: _Search) -> Left:
    value = search.value * search.choice.unit[1]
    if search.is_found and search.best is not None:
        return Left((search.best,), search.best, value, is_done=True, steps=search.steps, is_cut=True)
    kept = [node for node in (*search.aside, *search.heap) if node.bound <= search.value]
    kept.sort(key=lambda node: (node.bound, node.number))
    boxes = dict.fromkeys(Box.of(node.marks) for node in kept)
    is_done = not any(node.bound <= search.value for node in search.heap)
    return Left(tuple(boxes), search.best, value, is_done=is_done, steps=search.steps)


@dataclass(frozen=True, slots=True)
class _Layout:
    """What the stacks of all boxes have in common: bounds in scaled shares, the counting row, the rows of leasts."""

    low: Floats
    high: Floats
    least: Floats
    counts: Floats
    count_scale: float
    slots: int

    @staticmethod
    def of(choice: Choice) -> _Layout:
        n, stack, unit = choice.n, choice.stack, choice.unit[0]
        low, high = stack.lower[0], stack.upper[0]
        ceilings = high[:n] if choice.is_relative else np.minimum(high[:n], 1.0 / unit)
        least = low[:n].copy()
        if not choice.is_relative:
            lower = choice.program.lower
            exact = [max(lower[j] or Fraction(0), own or Fraction(0)) for j, own in enumerate(choice.least)]
            least = np.array([float(value) for value in exact]) / unit
        known = (ceilings > 0.0) & np.isfinite(ceilings)
        counts = np.zeros(n)
        # rounded down, twice as the ceiling is rounded as well: the row then asks no more than the true one
        counts[known] = np.nextafter(np.nextafter(1.0 / ceilings[known], 0.0), 0.0)
        scale = float(np.ldexp(1.0, -int(np.frexp(counts.max(initial=0.0))[1])))
        slots = 0
        if choice.is_relative and choice.parts.any():
            slots = min(n, _SLOTS, choice.most or n)
        return _Layout(low, high, least, counts * scale, scale, slots)

    def stack(self, choice: Choice, wave: Sequence[_Node]) -> Stack:
        """The programs of the boxes, all of one shape."""
        base, n, count = choice.stack, choice.n, len(wave)
        m, width = base.shape
        marks = np.array([node.marks for node in wave])
        total = m + (choice.most is not None) + self.slots
        rows = np.zeros((count, total, width))
        rows[:, :m] = base.rows if base.is_shared else base.rows[0]
        low, high = np.full((count, total), -inf), np.full((count, total), inf)
        low[:, :m], high[:, :m] = base.row_low[0], base.row_high[0]
        if choice.most is not None:
            rows[:, m, :n] = np.where(marks == FREE, self.counts, 0.0)
            high[:, m] = (choice.most - (marks == IN).sum(axis=1)) * self.count_scale
        lower, upper = np.tile(self.low, (count, 1)), np.tile(self.high, (count, 1))
        upper[:, :n][marks == OUT] = 0.0
        lower[:, :n] = np.where(marks == IN, self.least, lower[:, :n])
        if self.slots:
            self._relate(choice, marks, rows, low)
        return Stack(
            rows=rows, row_low=low, row_high=high, lower=lower, upper=upper, cost=np.tile(base.cost[0], (count, 1))
        )

    def _relate(self, choice: Choice, marks: Marks, rows: Floats, low: Floats) -> None:
        """Rows x_j − least_j·Σx ≥ 0 for the first columns in."""
        n, begin = choice.n, rows.shape[1] - self.slots
        for k, own in enumerate(marks):
            inside = [int(j) for j in np.flatnonzero(own == IN) if choice.least[j]]
            for slot, j in enumerate(inside[: self.slots]):
                part = choice.least[j] or Fraction(0)
                rows[k, begin + slot, :n] = -float(part)
                rows[k, begin + slot, j] = float(1 - part)
                low[k, begin + slot] = 0.0


def _solve(search: _Search, layout: _Layout, wave: Sequence[_Node]) -> None:
    stack = layout.stack(search.choice, wave)
    total, width = stack.shape
    cold = [node.basic is None for node in wave]
    start = None
    if not all(cold):
        # a cold one starts from all slacks, as it would without a start
        slacks = np.arange(width, width + total)
        start = Start(
            np.array([slacks if node.basic is None else node.basic for node in wave]),
            np.array([np.zeros(width + total, np.bool_) if node.at_upper is None else node.at_upper for node in wave]),
        )
    solved = solve_scaled(stack, start, alone=True)
    proven = certify(stack, solved)
    for k, node in enumerate(wave):
        node.basic, node.at_upper = solved.basic[k], solved.at_upper[k]
        if solved.status[k] == INFEASIBLE and proven.decided[k]:
            search.closed.append(node)
            continue
        if node.is_trial:
            _learn(search, node, proven, k)
        elif solved.status[k] == OPTIMAL:
            _look_into(search, node, proven, k)
        else:
            _split_unseen(search, layout, node)
    if search.best is None or len(wave) > 1:
        _try_supports(search, wave, proven)


def _learn(search: _Search, node: _Node, proven: Certified, k: int) -> None:
    """A box without open columns: its best point is allowed, and may be the best known."""
    if proven.solved.status[k] != OPTIMAL or proven.solved.value[k] >= search.value - NOTHING:
        return
    value = float(proven.most[k])
    if not np.isfinite(value):
        value = exact_value(search.choice, Box.of(node.marks))
    if value < search.value:
        search.value, search.best = value, Box.of(node.marks)


def exact_value(choice: Choice, box: Box) -> float:
    """The scaled least value in a box, rounded up; inf where it holds no point."""
    (reply,) = answer_all([Question(program_of(choice, box), "best")])
    return nextafter(float(reply.value), inf) / choice.unit[1] if isinstance(reply, Point) else inf


def program_of(choice: Choice, box: Box) -> Program:
    """The exact program of a box, with the row that counts its open columns."""
    program, n = choice.program, choice.n
    lower: list[Bound] = list(program.lower)
    upper: list[Bound] = list(program.upper)
    rows: list[Vector] = []
    for j in sorted(box.out):
        # a column that must be used can't be out: its bounds then cross
        upper[j] = Fraction(0)
    for j in sorted(box.inside):
        part = choice.least[j]
        if part and choice.is_relative:
            rows.append(tuple(Fraction(j == i) - part if i < n else Fraction(0) for i in range(len(program.cost))))
        elif part:
            lower[j] = max(part, lower[j] or Fraction(0))
    low: list[Bound] = [Fraction(0)] * len(rows)
    high: list[Bound] = [None] * len(rows)
    counted = [j for j in range(n) if j not in box.out and j not in box.inside and upper[j] != 0]
    if choice.most is not None and counted:
        row = [Fraction(0)] * len(program.cost)
        for j in counted:
            top = upper[j] if choice.is_relative else min(upper[j] or Fraction(1), Fraction(1))
            row[j] = Fraction(0) if top is None else 1 / top
        rows.append(tuple(row))
        low.append(None)
        high.append(Fraction(choice.most - len(box.inside)))
    return replace(
        program,
        rows=(*program.rows, *rows),
        row_low=(*program.row_low, *low),
        row_high=(*program.row_high, *high),
        lower=tuple(lower),
        upper=tuple(upper),
    )


def _look_into(search: _Search, node: _Node, proven: Certified, k: int) -> None:
    """Close a box, put it aside, or split it on what its best point breaks."""
    node.bound = max(node.bound, float(proven.least[k]))
    if node.bound > search.value:
        return
    x = proven.solved.x[k, : search.choice.n]
    halves = halves_of(search.choice, node.marks, x)
    if halves is None:
        search.aside.append(node)
        if proven.best[k]:
            # its only best point: the box of the columns that are not at rest at 0 has no other
            held = (x > 0.0) | (node.marks == IN)
            held[[int(j) for j in node.basic if j < held.size] if node.basic is not None else []] = True
            used = np.flatnonzero(held)
            node.marks = closed_box([int(j) for j in used], held.size).marks(held.size)
        else:
            used = np.flatnonzero((x > NOTHING) | (node.marks == IN))
        _try(search, [int(j) for j in used], node)
    elif node.bound >= search.value - NOTHING * max(1.0, abs(search.value)) and not search.first_will_do:
        search.aside.append(node)
    else:
        for half in halves:
            search.push(node.bound, half, node)


def _split_unseen(search: _Search, layout: _Layout, node: _Node) -> None:
    """Split a box of which nothing is known on a column without ceiling, which may be why; else put it aside."""
    endless = np.flatnonzero((node.marks == FREE) & np.isinf(layout.high[: search.choice.n]))
    if search.choice.is_relative and endless.size:
        for half in (
            _without(node.marks, frozenset([int(endless[0])])),
            _with(search.choice, node.marks, int(endless[0])),
        ):
            search.push(node.bound, half)
    else:
        search.aside.append(node)


def halves_of(choice: Choice, marks: Marks, x: Floats) -> list[Marks] | None:
    """The two halves of a box by a rule that the point breaks; None where it breaks none that can be split on."""
    used = [int(j) for j in np.flatnonzero(x > NOTHING)]
    held = frozenset(used)
    for one, other in choice.apart:
        if held & one and held & other:
            return [_without(marks, one), _without(marks, other)]
    whole = float(x.sum()) if choice.is_relative else 1.0 / choice.unit[0]
    small = [j for j in used if x[j] < choice.parts[j] * whole - NOTHING]
    is_crowded = choice.most is not None and len(used) > choice.most
    open_ones = [j for j in (used if is_crowded else small) if marks[j] == FREE]
    if not open_ones:
        return None
    chosen = max(open_ones, key=lambda j: (x[j], -j))
    return [_without(marks, frozenset([chosen])), _with(choice, marks, chosen)]


def _without(marks: Marks, columns: frozenset[int]) -> Marks:
    half = marks.copy()
    half[sorted(columns)] = OUT
    return half


def _with(choice: Choice, marks: Marks, column: int) -> Marks:
    """The half in which a column is used; with as many as may be, all others are out."""
    half = marks.copy()
    half[column] = IN
    for one, other in choice.apart:
        for mine, others in ((one, other), (other, one)):
            if column in mine:
                half[sorted(others)] = OUT
    if choice.most is not None and np.count_nonzero(half == IN) >= choice.most:
        half[half == FREE] = OUT
    return half


def _try_supports(search: _Search, wave: Sequence[_Node], proven: Certified) -> None:
    """Columns that the best points use most, as boxes that may hold an allowed point."""
    asked = [k for k, node in enumerate(wave) if not node.is_trial and proven.solved.status[k] == OPTIMAL]
    for k in asked if search.best is None else asked[:1]:
        x = proven.solved.x[k, : search.choice.n]
        chosen: list[int] = []
        barred: set[int] = set()
        for j in np.argsort(-x, kind="stable").tolist():
            is_full = search.choice.most is not None and len(chosen) >= search.choice.most
            if is_full or (x[j] <= NOTHING and wave[k].marks[j] != IN):
                break
            if j in barred or wave[k].marks[j] == OUT:
                continue
            chosen.append(j)
            for one, other in search.choice.apart:
                barred |= (other if j in one else set()) | (one if j in other else set())
        _try(search, chosen, wave[k])


def _try(search: _Search, used: list[int], like: _Node) -> None:
    marks = closed_box(used, search.choice.n).marks(search.choice.n)
    key = marks.tobytes()
    # a point of the box uses all that is in
    is_inside = set(np.flatnonzero(like.marks == IN).tolist()) <= set(used)
    if key not in search.tried and used and is_inside:
        search.tried.add(key)
        search.push(-inf, marks, like, is_trial=True)
