"""Recipes of one order: shares that meet every limit, best by a stated aim.

``cheapest``: least share of lots of unknown cost first, then least cost; where several recipes cost
the same, the one that takes the lots in file order as early as it can (least Σ position·share, then
least share of the last lot, of the one before, …), so that a recipe doesn't jump between equals.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from generator.findings.fewest import fewest_lots
from generator.findings.house import Offer, best_within
from generator.findings.measures import Measure, blend_value
from generator.findings.model import OrderModel
from generator.findings.programs import (
    ONE,
    ZERO,
    Rows,
    capped_upper,
    combined,
    least_over_shares,
    share_program,
    share_rows,
)
from generator.findings.records import CostBound, Recipe
from generator.findings.room import Room, Scales, tightened
from generator.findings.values import Table
from generator.findings.verdicts import multipliers_of
from generator.geometry.decide import decide
from generator.geometry.elimination import cleared, independent_rows
from generator.geometry.program import Bound, Optimum, Program, Vector
from generator.intake.records import Limit


@dataclass(frozen=True, slots=True)
class Staged:
    """The end of a lexicographic search: the point, and each stage's optimum in turn."""

    x: Vector
    stages: tuple[Optimum, ...]


@dataclass(frozen=True, slots=True)
class Best:
    """Best shares within the house rules: ``staged`` on the winning ``branch``, a whole order if there
    are no rules in the way (``is_whole``)."""

    staged: Staged
    branch: OrderModel
    is_whole: bool


def cheapest(model: OrderModel, table: Table, measures: Mapping[str, Measure]) -> Recipe:
    """The cheapest recipe in the order's amount; where no cost at all is known, the closest one.

    ValueError if no shares meet the limits and the house rules in that amount.
    """
    if all(cost is None for cost in model.cost):
        return closest(model, table, measures)
    best = cheapest_shares(model)
    has_bound = best.is_whole and all(cost is not None for cost in model.cost)
    bound = _cost_bound(model, share_rows(model), best.staged.stages[0]) if has_bound else None
    return recipe_of(model, table, measures, named_shares(model, best.staged.x), bound)


def cheapest_shares(model: OrderModel) -> Best:
    """Least share of lots of unknown cost, then least cost; ValueError if there are none."""
    return best_shares(model, _costs_in_turn(model))


def _costs_in_turn(model: OrderModel) -> list[Vector]:
    unknown = tuple(ONE if cost is None else ZERO for cost in model.cost)
    known = tuple(cost or ZERO for cost in model.cost)
    return [unknown, known] if any(unknown) else [known]


def closest(model: OrderModel, table: Table, measures: Mapping[str, Measure]) -> Recipe:
    """The recipe nearest the aims, else the middles of the windows.

    Least Σ |value − aim| / scale over the limits that have an aim or two sides, each difference taken
    in its row (N − aim·D, over the mean denominator); the scale is half the window, or 1 % of the
    aim where that is 0, or 1.
    """
    n = len(model.lots)
    extra: list[tuple[Vector, Bound, Bound]] = []
    aims = [(name, aim) for name, limit in model.limits.items() if (aim := _aim(model, name, limit)) is not None]
    width = n + 2 * len(aims)
    for k, (name, aim) in enumerate(aims):
        above, below = model.numerators[name], model.denominators[name]
        mean = sum(below, ZERO) / n or ONE
        scale = _scale(model, name) * mean
        row = [(a - aim * d) / scale for a, d in zip(above, below, strict=True)] + [ZERO] * (width - n)
        row[n + 2 * k], row[n + 2 * k + 1] = -ONE, ONE
        extra.append((tuple(row), ZERO, ZERO))
    distance = (*((ZERO,) * n), *((ONE,) * (width - n)))
    best = best_shares(model, [distance], extra=extra, width=width)
    return recipe_of(model, table, measures, named_shares(model, best.staged.x))


def roomiest(model: OrderModel, table: Table, measures: Mapping[str, Measure], scales: Scales, room: Room) -> Recipe:
    """The cheapest recipe among those with the greatest room."""
    moved = tightened(model, scales, room.t)
    assert moved is not None, "the greatest room is inside every rule's domain"
    try:
        best = cheapest_shares(moved)
    except ValueError:
        # A blend rule rounds its indices to 15 digits: the last one can cost these shares their place.
        return recipe_of(model, table, measures, named_shares(model, room.shares))
    return recipe_of(model, table, measures, named_shares(model, best.staged.x))


def fewest(model: OrderModel, table: Table, measures: Mapping[str, Measure]) -> Recipe:
    """The cheapest recipe among those of the fewest lots."""
    support = fewest_lots(model)
    upper = tuple(top if i in support else ZERO for i, top in enumerate(model.upper))
    try:
        best = cheapest_shares(replace(model, upper=upper))
    except ValueError:
        # The search is in floats: what it found a hair outside the limits does not count.
        best = cheapest_shares(model)
    return recipe_of(model, table, measures, named_shares(model, best.staged.x))


def _aim(model: OrderModel, name: str, limit: Limit) -> Fraction | None:
    """The aim, or the middle of the window, in index values; None for a one-sided or an exact limit."""
    rule = model.measures[name].rule
    if limit.is_exact:
        return None
    if limit.aim is not None:
        return rule.index(limit.aim)
    if limit.low is None or limit.high is None:
        return None
    return (rule.index(limit.low) + rule.index(limit.high)) / 2


def _scale(model: OrderModel, name: str) -> Fraction:
    rule, limit = model.measures[name].rule, model.limits[name]
    if limit.low is not None and limit.high is not None:
        return abs(rule.index(limit.high) - rule.index(limit.low)) / 2
    aim = limit.aim or ZERO
    return abs(rule.index(aim)) / 100 or ONE if limit.aim else ONE


def named_shares(model: OrderModel, x: Sequence[Fraction]) -> dict[str, Fraction]:
    """Shares by lot, used lots only."""
    return {name: share for name, share in zip(model.names, x, strict=False) if share}


def best_shares(
    model: OrderModel,
    objectives: Sequence[Vector],
    *,
    extra: Sequence[tuple[Vector, Bound, Bound]] = (),
    width: int | None = None,
) -> Best:
    """Shares in the order's amount, within the house rules, best by each objective in turn.

    Ties by file order.  ``width`` columns in all: those beyond the lots are ≥ 0 and stand in ``extra``
    rows only.  ValueError if no shares meet the limits and rules in that amount.
    """
    n = len(model.lots)
    more = (width or n) - n
    rows = share_rows(model)
    positions = tuple(Fraction(i) for i in range(n))
    one_by_one = [tuple(ONE if j == i else ZERO for j in range(n)) for i in reversed(range(n))]
    every = [*objectives, positions, *one_by_one]

    def solve(branch: OrderModel) -> Offer[Staged] | None:
        upper = (*capped_upper(branch, branch.amount), *((None,) * more))
        staged = lexicographic(share_program(branch, rows, (ZERO,) * (n + more), upper=upper, extra=extra), every)
        if staged is None:
            return None
        key = tuple(_dot(objective, staged.x) for objective in every)
        return Offer(staged.x[:n], key, staged)

    found = best_within(model, solve)
    if found is None:
        raise ValueError(f"no shares meet the limits of order {model.order.name} in its amount")
    return Best(found.answer, found.branch.model, not found.branch.path)


def _dot(one: Vector, other: Vector) -> Fraction:
    return sum((a * b for a, b in zip(one, other, strict=False) if a and b), ZERO)


def lexicographic(program: Program, objectives: Sequence[Vector]) -> Staged | None:
    """The best point by each objective in turn (least first); None if there is no point at all.

    After each stage the program is cut down to its optimal face: columns with a reduced cost are held
    where they are, rows with a multiplier are held tight.  It ends as soon as the face is one point.
    """
    stages: list[Optimum] = []
    for objective in objectives:
        cost = (*objective, *((ZERO,) * (len(program.cost) - len(objective))))
        program = _with_cost(program, cost)
        answer = decide(program)
        if not isinstance(answer, Optimum):
            return None
        stages.append(answer)
        program = _optimal_face(program, answer)
        if _is_one_point(program):
            break
    return Staged(stages[-1].x, tuple(stages))


def _with_cost(program: Program, cost: Vector) -> Program:
    return Program(
        rows=program.rows,
        row_low=program.row_low,
        row_high=program.row_high,
        lower=program.lower,
        upper=program.upper,
        cost=cost,
    )


def _optimal_face(program: Program, answer: Optimum) -> Program:
    lower, upper = list(program.lower), list(program.upper)
    for j, cost in enumerate(program.cost):
        reduced = cost - sum((y * row[j] for y, row in zip(answer.multipliers, program.rows, strict=True) if y), ZERO)
        if reduced != 0:
            lower[j] = upper[j] = answer.x[j]
    low: list[Bound] = list(program.row_low)
    high: list[Bound] = list(program.row_high)
    for k, y in enumerate(answer.multipliers):
        if y > 0:
            high[k] = low[k]
        elif y < 0:
            low[k] = high[k]
    return Program(
        rows=program.rows,
        row_low=tuple(low),
        row_high=tuple(high),
        lower=tuple(lower),
        upper=tuple(upper),
        cost=program.cost,
    )


def _is_one_point(program: Program) -> bool:
    """Whether the equalities alone leave the free columns no choice (enough, not necessary)."""
    free = [
        j for j, (low, top) in enumerate(zip(program.lower, program.upper, strict=True)) if low is None or low != top
    ]
    if not free:
        return True
    tight = [
        tuple(row[j] for j in free)
        for row, low, high in zip(program.rows, program.row_low, program.row_high, strict=True)
        if low is not None and low == high
    ]
    if len(tight) < len(free):
        return False
    return len(independent_rows([cleared(row)[0] for row in tight])[0]) == len(free)


def _cost_bound(model: OrderModel, rows: Rows, optimum: Optimum) -> CostBound:
    weights = rows.weights(optimum.multipliers)
    scores = combined(model.rows, weights, len(model.lots))
    known = [cost or ZERO for cost in model.cost]
    floor = least_over_shares(
        [cost + score for cost, score in zip(known, scores, strict=True)],
        model.lower,
        capped_upper(model, model.amount),
    )
    assert floor == optimum.value, "the multipliers prove the least cost"
    return CostBound(multipliers=multipliers_of(model.rows, weights, model.names), floor=floor)


def recipe_of(
    model: OrderModel,
    table: Table,
    measures: Mapping[str, Measure],
    shares: Mapping[str, Fraction],
    bound: CostBound | None = None,
    remark: str = "",
) -> Recipe:
    """The published form of exact shares: amounts, cost and the blend's value of every quantity."""
    by_lot = {model.lots[i]: shares[name] for i, name in enumerate(model.names) if name in shares}
    costs = dict(zip(model.names, model.cost, strict=True))
    cost = ZERO
    known = True
    for name, share in shares.items():
        price = costs[name]
        if price is None:
            known = False
        else:
            cost += price * share
    values = {}
    for name, measure in measures.items():
        value = blend_value(measure, table, model.lots, by_lot)
        if value is not None:
            values[name] = float(value)
    amount = model.amount
    return Recipe(
        shares={name: float(share) for name, share in shares.items()},
        exact=dict(shares),
        amounts=None if amount is None else {name: float(share * amount) for name, share in shares.items()},
        cost=float(cost) if known else None,
        values=values,
        bound=bound,
        remark=remark,
    )
