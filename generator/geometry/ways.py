"""Further questions about windows, each for many windows at once: room, greatest total, nearest miss,
the wanted point, the cost of room, and which shares are stuck.

Each builds one program of the same shape for every window and asks :func:`generator.geometry.reach.reach`
(verdict proven, value within proven bounds, exact answer on demand) or answers exactly.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from generator.geometry.program import Bound, Optimum, Program, Vector
from generator.geometry.reach import Reached, Window, cheapest_many, reach
from generator.geometry.settle import answer_many

_ZERO, _ONE = Fraction(0), Fraction(1)


def room_many(windows: Sequence[Window], steps: Sequence[Vector]) -> Reached:
    """How far all bounds can move inwards together: the greatest t with low + t·step ≤ rows·x ≤ high − t·step.

    ``steps`` (K × d) are ≥ 0; a row of step 0 keeps its bounds.  In the answer x has n + 1 entries,
    the last is t, and value = −t; t < 0 where the window is out of reach; infeasible where the rows
    that don't move block alone.  Raises ValueError where nothing bounds t.
    """
    return reach([_room(window, step) for window, step in zip(windows, steps, strict=True)])


def _room(window: Window, step: Vector) -> Program:
    d, n = len(window.rows), len(window.rows[0])
    still = [not s for s in step]
    base = window.program((_ZERO,) * n)
    return Program(
        rows=(
            *((*row, -s) for row, s in zip(window.rows, step, strict=True)),
            *((*row, s) for row, s in zip(window.rows, step, strict=True)),
            (*base.rows[-1], _ZERO),
        ),
        row_low=(*window.low, *(None,) * d, window.total),
        row_high=(
            *(high if fixed else None for high, fixed in zip(window.high, still, strict=True)),
            *(None if fixed else high for high, fixed in zip(window.high, still, strict=True)),
            window.total,
        ),
        lower=(*base.lower, None),
        upper=(*base.upper, None),
        cost=(*(_ZERO,) * n, -_ONE),
    )


def greatest_many(windows: Sequence[Window], most: Sequence[tuple[Bound, ...]]) -> Reached:
    """The greatest total amount Σz with the values of the window, where amounts are z ≤ ``most`` (K × n).

    z / Σz are the shares; value = −Σz; 0 is always possible.  Raises ValueError where it grows for ever.
    """
    bounded = any(window.lower is not None or window.upper is not None for window in windows)
    programs = [_greatest(window, bound, bounded) for window, bound in zip(windows, most, strict=True)]
    return reach(programs, ask_best=False)


def _greatest(window: Window, most: tuple[Bound, ...], bounded: bool) -> Program:
    n, total = len(most), window.total
    rows: list[Vector] = []
    low: list[Bound] = []
    high: list[Bound] = []
    # rows·(total·z/Σz) ≥ low is (total·rows − low)·z ≥ 0
    for row, least, greatest in zip(window.rows, window.low, window.high, strict=True):
        for bound, is_low in ((least, True), (greatest, False)):
            rows.append(tuple(total * value - (bound or _ZERO) for value in row))
            low.append(_ZERO if is_low and bound is not None else None)
            high.append(_ZERO if not is_low and bound is not None else None)
    if bounded:
        base = window.program((_ZERO,) * n)
        for side, bounds in ((True, base.lower), (False, base.upper)):
            for i, bound in enumerate(bounds):
                rows.append(tuple((total if i == j else _ZERO) - (bound or _ZERO) for j in range(n)))
                low.append(_ZERO if side else None)
                high.append(None if side or bound is None else _ZERO)
    return Program(
        rows=tuple(rows),
        row_low=tuple(low),
        row_high=tuple(high),
        lower=(_ZERO,) * n,
        upper=most,
        cost=(-_ONE,) * n,
    )


def nearest_many(windows: Sequence[Window], weights: Sequence[Vector]) -> Reached:
    """The shares whose rows miss their bounds least: Σ weight·miss (``weights`` K × d, positive).

    In the answer x has n + 2d entries: the shares, how much each row falls short, how much it exceeds.
    """
    return reach([_nearest(window, weight) for window, weight in zip(windows, weights, strict=True)])


def _nearest(window: Window, weight: Vector) -> Program:
    d, n = len(window.rows), len(window.rows[0])
    base = window.program((_ZERO,) * n)
    return replace(
        base,
        rows=(
            *((*row, *_unit(k, d), *_unit(k, d, -1)) for k, row in enumerate(window.rows)),
            (*base.rows[-1], *(_ZERO,) * (2 * d)),
        ),
        lower=(*base.lower, *(_ZERO,) * (2 * d)),
        upper=(*base.upper, *(None,) * (2 * d)),
        cost=(*base.cost, *weight, *weight),
    )


def _unit(k: int, d: int, sign: int | Fraction = 1) -> Vector:
    return tuple(Fraction(sign) if j == k else _ZERO for j in range(d))


@dataclass(frozen=True, slots=True)
class Wanted:
    """A further point: its d ``values``, and its weighted ``distance`` from the hull of the n points at hand."""

    values: Vector
    distance: Fraction


def wanted_many(
    windows: Sequence[Window],
    share: Fraction,
    weights: Sequence[Vector],
    least: Sequence[Bound],
    greatest: Sequence[Bound],
) -> list[Wanted | None]:
    """The point nearest to the hull that, with this share, brings each window within reach; exact.

    ``weights`` (K × d) measure the distance, ``least`` and ``greatest`` (d) bound the point's values.
    The others' shares keep their bounds and sum to the rest; None where no point will do.
    """
    programs = [
        _wanted(window, share, weight, tuple(least), tuple(greatest))
        for window, weight in zip(windows, weights, strict=True)
    ]
    answers, _ = answer_many(programs)
    found: list[Wanted | None] = []
    for window, answer in zip(windows, answers, strict=True):
        if not isinstance(answer, Optimum):
            found.append(None)
            continue
        d, n = len(window.rows), len(window.rows[0])
        near, up, down = answer.x[n : 2 * n], answer.x[2 * n : 2 * n + d], answer.x[2 * n + d :]
        values = tuple(_dot(row, near) + up[k] - down[k] for k, row in enumerate(window.rows))
        found.append(Wanted(values, answer.value))
    return found


def _wanted(
    window: Window, share: Fraction, weight: Vector, least: Sequence[Bound], greatest: Sequence[Bound]
) -> Program:
    """Columns: n shares, n weights of the hull's nearest point, d steps up and d steps down from there."""
    d, n = len(window.rows), len(window.rows[0])
    base = window.program((_ZERO,) * n)
    ones, nothing = (_ONE,) * n, (_ZERO,) * n
    part = share * window.total
    return Program(
        rows=(
            *(
                (*row, *(part * value for value in row), *_unit(k, d, part), *_unit(k, d, -part))
                for k, row in enumerate(window.rows)
            ),
            *((*nothing, *row, *_unit(k, d), *_unit(k, d, -1)) for k, row in enumerate(window.rows)),
            (*ones, *nothing, *(_ZERO,) * (2 * d)),
            (*nothing, *ones, *(_ZERO,) * (2 * d)),
        ),
        row_low=(*window.low, *least, window.total - part, _ONE),
        row_high=(*window.high, *greatest, window.total - part, _ONE),
        lower=(*base.lower, *nothing, *(_ZERO,) * (2 * d)),
        upper=(*base.upper, *ones, *(None,) * (2 * d)),
        cost=(*nothing, *nothing, *weight, *weight),
    )


def _dot(row: Vector, x: Sequence[Fraction]) -> Fraction:
    return sum((a * b for a, b in zip(row, x, strict=True) if b), _ZERO)


@dataclass(frozen=True, slots=True)
class CurvePoint:
    """The least cost when all bounds have moved inwards by ``room`` steps, and cheapest shares there; exact."""

    room: Fraction
    cost: Fraction
    x: Vector


def curve(window: Window, cost: Vector, step: Vector, first: Fraction, last: Fraction) -> tuple[CurvePoint, ...]:
    """The corners of the least cost as a function of room, from ``first`` to ``last``, both included; exact.

    The function is convex and straight between corners: two tangents either meet in a corner or find
    a new piece (Eisner and Severance 1976).  Empty where the window moved to ``first`` or ``last`` is
    out of reach.
    """
    ends = [_on_curve(window, cost, step, room) for room in ((first, last) if first < last else (first,))]
    found = _evaluated(ends, step)
    if any(tangent is None for tangent in found):
        return ()
    points = [tangent for tangent in found if tangent is not None]
    spans = [(points[0], points[1])] if len(points) == 2 else []
    while spans:
        crossings = [(left, right, _meeting(left, right)) for left, right in spans]
        open_ones = [(left, right, room) for left, right, room in crossings if room is not None]
        middles = _evaluated([_on_curve(window, cost, step, room) for *_, room in open_ones], step)
        spans = []
        for (left, right, room), middle in zip(open_ones, middles, strict=True):
            if middle is None:
                raise ArithmeticError("a window between two that are within reach is not")
            points.append(middle)
            if middle.point.cost != left.at(room):
                spans += [(left, middle), (middle, right)]
    return _corners_of(sorted((tangent.point for tangent in points), key=lambda point: point.room))


@dataclass(frozen=True, slots=True)
class _Tangent:
    point: CurvePoint
    slope: Fraction

    def at(self, room: Fraction) -> Fraction:
        return self.point.cost + self.slope * (room - self.point.room)


def _on_curve(window: Window, cost: Vector, step: Vector, room: Fraction) -> tuple[Fraction, Program]:
    low = tuple(None if b is None else b + room * s for b, s in zip(window.low, step, strict=True))
    high = tuple(None if b is None else b - room * s for b, s in zip(window.high, step, strict=True))
    return room, replace(window, low=low, high=high).program(cost)


def _evaluated(asked: Sequence[tuple[Fraction, Program]], step: Vector) -> list[_Tangent | None]:
    """Value and a slope of the curve at each room asked; None where out of reach."""
    if not asked:
        return []
    answers, _ = answer_many([program for _, program in asked])
    found: list[_Tangent | None] = []
    for (room, _), answer in zip(asked, answers, strict=True):
        if isinstance(answer, Optimum):
            # a bound that moves inwards by s makes |y|·s dearer
            slope = sum((abs(y) * s for y, s in zip(answer.multipliers, step, strict=False)), _ZERO)
            found.append(_Tangent(CurvePoint(room, answer.value, answer.x), slope))
        else:
            found.append(None)
    return found


def _meeting(left: _Tangent, right: _Tangent) -> Fraction | None:
    """Where two tangents cross between their points; None where one of them passes through both points."""
    if left.at(right.point.room) == right.point.cost or right.at(left.point.room) == left.point.cost:
        return None
    rise = left.point.cost - left.slope * left.point.room - right.point.cost + right.slope * right.point.room
    return rise / (right.slope - left.slope)


def _corners_of(points: list[CurvePoint]) -> tuple[CurvePoint, ...]:
    """The points without those on the straight line between their neighbours."""
    kept: list[CurvePoint] = []
    for point in points:
        while len(kept) >= 2 and _is_straight(kept[-2], kept[-1], point):
            kept.pop()
        kept.append(point)
    return tuple(kept)


def _is_straight(a: CurvePoint, b: CurvePoint, c: CurvePoint) -> bool:
    return (b.cost - a.cost) * (c.room - b.room) == (c.cost - b.cost) * (b.room - a.room)


@dataclass(frozen=True, slots=True)
class Stuck:
    """Shares that rest at a bound wherever the window is met, though their bounds alone would let them vary.

    ``low`` and ``high`` name the columns; the multipliers (d + 1) prove each: no feasible x has a greater
    Σ of the low ones' shares, or a smaller one of the high ones'.  None where there is nothing to prove.
    """

    low: tuple[int, ...]
    high: tuple[int, ...]
    low_multipliers: Vector | None = None
    high_multipliers: Vector | None = None


def stuck_many(windows: Sequence[Window]) -> list[Stuck | None]:
    """Which shares are stuck in each window, proven; None for windows out of reach.

    With some low ones stuck, the values asked for lie on a face of the hull.
    """
    bases = [window.program((_ZERO,) * len(window.rows[0])) for window in windows]
    loose = [[lo != up for lo, up in zip(base.lower, base.upper, strict=True)] for base in bases]
    low_left = [{i for i, can in enumerate(can_vary) if can} for can_vary in loose]
    high_left = [{i for i in left if _can_bind(base, i)} for left, base in zip(low_left, bases, strict=True)]
    low_proofs = _freed(windows, low_left, high_left, sign=-1)
    high_proofs = _freed(windows, high_left, low_left, sign=1)
    return [
        None
        if low_proofs[k] is _OUT or high_proofs[k] is _OUT
        else Stuck(
            tuple(sorted(low_left[k])),
            tuple(sorted(high_left[k])),
            low_proofs[k] if low_left[k] else None,
            high_proofs[k] if high_left[k] else None,
        )
        for k in range(len(windows))
    ]


#: Stands for "the window is out of reach".
_OUT: Vector = ()


def _can_bind(base: Program, i: int) -> bool:
    """Whether the high bound of share i can be met with room to spare elsewhere: else it says nothing of its own."""
    bound, total = base.upper[i], base.row_high[-1]
    others = sum((low for j, low in enumerate(base.lower) if j != i and low), _ZERO)
    return bound is not None and total is not None and bound < total - others


def _freed(windows: Sequence[Window], asked: list[set[int]], other: list[set[int]], sign: int) -> list[Vector | None]:
    """Take out of ``asked`` every column that some feasible x holds off its bound, until the rest is proven stuck.

    ``sign`` −1 asks for greater shares, +1 for smaller ones.  ``other`` loses the columns that are
    seen strictly between their bounds.  The multipliers prove the last step.
    """
    proofs: list[Vector | None] = [None] * len(windows)
    # the first pass also tells which windows are within reach at all
    work = [k for k in range(len(windows)) if asked[k] or sign < 0]
    while work:
        costs = [
            tuple(Fraction(sign) if i in asked[k] else _ZERO for i in range(len(windows[k].rows[0]))) for k in work
        ]
        reached = cheapest_many([windows[k] for k in work], costs, ask_best=False)
        more = []
        for place, k in enumerate(work):
            if not reached.is_feasible[place]:
                proofs[k] = _OUT
                continue
            moved, inside, proof = _moved(reached, place, windows[k], asked[k], sign)
            asked[k] -= moved
            other[k] -= inside
            proofs[k] = proof
            if moved and asked[k]:
                more.append(k)
        work = more
    return proofs


def _moved(
    reached: Reached, place: int, window: Window, asked: set[int], sign: int
) -> tuple[set[int], set[int], Vector | None]:
    """(asked columns off their bound, columns strictly inside, multipliers where exact) at the optimum found."""
    n = len(window.rows[0])
    certified = reached.certified
    if certified.decided[place] and place not in reached.settled:
        # a proven vertex: its basic columns are strictly inside
        inside = {int(j) for j in certified.solved.basic[place] if j < n}
        if asked & inside:
            return asked & inside, inside, None
    answer = reached.answer(place)
    if not isinstance(answer, Optimum):
        raise ArithmeticError("a window proven within reach is not")
    base = window.program((_ZERO,) * n)
    bounds = base.lower if sign < 0 else base.upper
    off = {i for i in asked if answer.x[i] != bounds[i]}
    inside = {i for i in range(n) if base.lower[i] != answer.x[i] != base.upper[i]}
    return off, inside, answer.multipliers
