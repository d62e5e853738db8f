"""The cost–room curve of one order: what each further bit of room costs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from generator.findings.ask import Asking, both, together
from generator.findings.model import OrderModel
from generator.findings.programs import ZERO, share_rows
from generator.findings.recipes import ask_shares_at
from generator.findings.room import Scales, is_linear

#: Samples of a curve that has no straight corners (carriers that differ, blend rules, house rules).
SAMPLES = 9
#: Corners of a curve at most; a curve has about as many as the order has lots.
MOST_CORNERS = 60


@dataclass(frozen=True, slots=True)
class CostPoint:
    """The cheapest shares with room ``t``: cost per unit of amount, and its rise for one unit of room."""

    t: Fraction
    cost: Fraction
    slope: Fraction
    shares: tuple[tuple[str, Fraction], ...]


def ask_cost_at(model: OrderModel, scales: Scales, t: Fraction) -> Asking[CostPoint | None]:
    """The cheapest shares at room t; None where there are none.  Every cost must be known."""
    try:
        best = yield from ask_shares_at(model, scales, t)
    except ValueError:
        return None
    staged, first = best.staged, best.staged.stages[0]
    slope = ZERO
    if is_linear(model):
        for k, weight in share_rows(model).weights(first.multipliers).items():
            if model.rows[k].side != "exact":
                slope += weight * scales.by_row[k] * model.rows[k].base[0]
    shares = tuple((name, x) for name, x in zip(model.names, staged.x, strict=False) if x)
    return CostPoint(t, first.value, slope, shares)


def ask_curve(model: OrderModel, scales: Scales, first: Fraction, last: Fraction) -> Asking[tuple[CostPoint, ...]]:
    """The curve from room ``first`` to ``last``: exact corners with equal carriers, else samples.

    With equal carriers and no house rules the cost is convex and piecewise linear in t: tangents from
    two ends meet at a corner, or at a point that splits the search.
    """
    if first >= last:
        only = yield from ask_cost_at(model, scales, last)
        return () if only is None else (only,)
    if not is_linear(model) or model.rules.names():
        steps = [first + (last - first) * k / (SAMPLES - 1) for k in range(SAMPLES)]
        points = yield from together([ask_cost_at(model, scales, t) for t in steps])
        return tuple(point for point in points if point is not None)
    left, right = yield from both(ask_cost_at(model, scales, first), ask_cost_at(model, scales, last))
    if left is None or right is None:
        return ()
    between = yield from _ask_between(model, scales, left, right, MOST_CORNERS)
    return tuple(_bends([left, *between, right]))


def _ask_between(
    model: OrderModel, scales: Scales, left: CostPoint, right: CostPoint, budget: int
) -> Asking[list[CostPoint]]:
    if budget <= 0 or left.slope == right.slope:
        return []
    # left.cost + left.slope·(t − left.t) = right.cost + right.slope·(t − right.t)
    t = (right.cost - left.cost + left.slope * left.t - right.slope * right.t) / (left.slope - right.slope)
    if not left.t < t < right.t:
        return []
    middle = yield from ask_cost_at(model, scales, t)
    assert middle is not None, "between two rooms there is a blend"
    if middle.cost == left.cost + left.slope * (t - left.t):
        return [middle]
    half = (budget - 1) // 2
    before, after = yield from both(
        _ask_between(model, scales, left, middle, half), _ask_between(model, scales, middle, right, half)
    )
    return [*before, middle, *after]


def _bends(points: Sequence[CostPoint]) -> list[CostPoint]:
    """The points at which the line through them bends, with both ends."""
    kept: list[CostPoint] = []
    for point in points:
        while len(kept) >= 2 and _is_straight(kept[-2], kept[-1], point):
            kept.pop()
        kept.append(point)
    return kept


def _is_straight(a: CostPoint, b: CostPoint, c: CostPoint) -> bool:
    return (b.cost - a.cost) * (c.t - b.t) == (c.cost - b.cost) * (b.t - a.t)
