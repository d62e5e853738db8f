"""Recipes of one order: shares that meet every limit, best by a stated aim.

``cheapest``: least share of lots of unknown cost first, then least cost; where several recipes cost
the same, the one that takes the lots in file order as early as it can (least Σ position·share, then
least share of the last lot, of the one before, …), so that a recipe doesn't jump between equals.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import lru_cache

from generator.findings.ask import Asking, answered, ask_best, ask_proven
from generator.findings.fewest import fewest_lots
from generator.findings.house import Offer, ask_best_within
from generator.findings.measures import Measure, blend_value
from generator.findings.model import OrderModel
from generator.findings.narrowing import Guide
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
from generator.findings.room import Room, Scales, is_linear, tight_rows, tightened
from generator.findings.values import Table
from generator.findings.verdicts import multipliers_of
from generator.geometry.asked import Point
from generator.geometry.elimination import cleared, independent_rows
from generator.geometry.integral import integral
from generator.geometry.program import Bound, Optimum, Program, Vector
from generator.intake.records import Limit


class NoSharesError(ValueError):
    """No shares meet what is asked of them."""


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


@dataclass(frozen=True, slots=True)
class LeastCost:
    """The least cost per unit of amount; None where a lot of unknown cost is needed."""

    cost: Fraction | None


def ask_cheapest(model: OrderModel, table: Table, measures: Mapping[str, Measure]) -> Asking[tuple[Recipe, Best]]:
    """The cheapest recipe in the order's amount; where no cost at all is known, the closest one.

    ValueError if no shares meet the limits and the house rules in that amount.
    """
    best = yield from ask_first_shares(model, on_widest=True)
    if all(cost is None for cost in model.cost):
        return recipe_of(model, table, measures, named_shares(model, best.staged.x)), best
    has_bound = best.is_whole and all(cost is not None for cost in model.cost)
    bound = _cost_bound(model, share_rows(model), best.staged.stages[0]) if has_bound else None
    return recipe_of(model, table, measures, named_shares(model, best.staged.x), bound), best


def ask_first_shares(model: OrderModel, *, to_publish: bool = True, on_widest: bool = False) -> Asking[Best]:
    """The shares of the recipe that stands first: the cheapest, the closest where no cost at all is known.

    ValueError if no shares meet the limits and the house rules in the amount; ``to_publish`` as in ``ask``,
    ``on_widest`` as in ``house``.
    """
    if all(cost is None for cost in model.cost):
        return (yield from _ask_closest_shares(model, to_publish=to_publish))
    costs = _costs_in_turn(model)
    return (yield from ask_best_shares(model, costs, to_publish=to_publish, on_widest=on_widest))


def ask_cheapest_shares(model: OrderModel, rows: Rows | None = None, *, to_publish: bool = True) -> Asking[Best]:
    """Least share of lots of unknown cost, then least cost; ValueError if there are none.

    ``rows`` instead of the model's own: the same limits moved.  ``to_publish``: as in ``ask``.
    """
    return (yield from ask_best_shares(model, _costs_in_turn(model), rows=rows, to_publish=to_publish))


cheapest_shares = answered(ask_cheapest_shares)


def ask_least_cost(model: OrderModel) -> Asking[LeastCost | None]:
    """What the cheapest recipe costs; None where no shares meet the limits and rules in the amount."""
    if any(cost is None for cost in model.cost):
        try:
            best = yield from ask_cheapest_shares(model)
        except ValueError:
            return None
        used = [(cost, x) for cost, x in zip(model.cost, best.staged.x, strict=False) if x]
        if any(cost is None for cost, _ in used):
            return LeastCost(None)
        return LeastCost(sum(((cost or ZERO) * x for cost, x in used), ZERO))
    costs = tuple(cost or ZERO for cost in model.cost)

    def ask(branch: OrderModel) -> Asking[Offer[Fraction] | None]:
        program = share_program(branch, share_rows(branch), costs, upper=capped_upper(branch, branch.amount))
        best = yield from ask_best(program)
        return Offer(best.x, (best.value,), best.value) if isinstance(best, Point) else None

    program = share_program(model, share_rows(model), costs, upper=capped_upper(model, model.amount))
    found = yield from ask_best_within(model, ask, guide=Guide(program, (costs,)))
    return None if found is None else LeastCost(found.answer)


def _costs_in_turn(model: OrderModel) -> list[Vector]:
    unknown = tuple(ONE if cost is None else ZERO for cost in model.cost)
    known = tuple(cost or ZERO for cost in model.cost)
    return [unknown, known] if any(unknown) else [known]


def ask_closest(model: OrderModel, table: Table, measures: Mapping[str, Measure]) -> Asking[Recipe]:
    """The recipe nearest the aims, else the middles of the windows.

    Least Σ |value − aim| / scale over the limits that have an aim or two sides, each difference taken
    in its row (N − aim·D, over the mean denominator); the scale is half the window, or 1 % of the
    aim where that is 0, or 1.
    """
    best = yield from _ask_closest_shares(model)
    return recipe_of(model, table, measures, named_shares(model, best.staged.x))


def _ask_closest_shares(model: OrderModel, *, to_publish: bool = True) -> Asking[Best]:
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
    return (yield from ask_best_shares(model, [distance], to_publish=to_publish, extra=extra, width=width))


def ask_roomiest(
    model: OrderModel, table: Table, measures: Mapping[str, Measure], scales: Scales, room: Room
) -> Asking[Recipe]:
    """The cheapest recipe among those with the greatest room."""
    if room.is_only:
        return recipe_of(model, table, measures, named_shares(model, room.shares))
    try:
        best = yield from ask_shares_at(model, scales, room.t)
    except ValueError:
        # A blend rule rounds its indices to 15 digits: the last one can cost these shares their place.
        return recipe_of(model, table, measures, named_shares(model, room.shares))
    return recipe_of(model, table, measures, named_shares(model, best.staged.x))


def ask_shares_at(model: OrderModel, scales: Scales, t: Fraction) -> Asking[Best]:
    """The cheapest shares at room t; ValueError if there are none."""
    if is_linear(model):
        return (yield from ask_cheapest_shares(model, tight_rows(model, scales, t), to_publish=False))
    moved = tightened(model, scales, t)
    if moved is None:
        raise ValueError(f"room {t} is outside the domain of a blend rule")
    return (yield from ask_cheapest_shares(moved, to_publish=False))


def ask_fewest(model: OrderModel, table: Table, measures: Mapping[str, Measure], cheapest: Recipe) -> Asking[Recipe]:
    """The cheapest recipe among those of the fewest lots: the cheapest of all where it takes no more."""
    has_costs = any(cost is not None for cost in model.cost)
    support = fewest_lots(model, len(cheapest.exact) - has_costs)
    if support is None:
        return replace(cheapest, bound=None)
    upper = tuple(top if i in support else ZERO for i, top in enumerate(model.upper))
    try:
        best = yield from ask_cheapest_shares(replace(model, upper=upper))
    except ValueError:
        # The search is in floats: what it found a hair outside the limits does not count.
        return replace(cheapest, bound=None)
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


def ask_best_shares(
    model: OrderModel,
    objectives: Sequence[Vector],
    *,
    rows: Rows | None = None,
    to_publish: bool = True,
    extra: Sequence[tuple[Vector, Bound, Bound]] = (),
    width: int | None = None,
    on_widest: bool = False,
) -> Asking[Best]:
    """Shares in the order's amount, within the house rules, best by each objective in turn.

    Ties by file order.  ``width`` columns in all: those beyond the lots are ≥ 0 and stand in ``extra``
    rows only; ``rows`` stand for the model's own; ``on_widest`` as in ``house``.  NoSharesError if no shares
    meet the limits and rules in that amount.
    """
    n = len(model.lots)
    more = (width or n) - n
    rows = rows or share_rows(model)
    positions = tuple(Fraction(i) for i in range(n))
    every = [*objectives, positions, *_one_by_one(n)]

    def ask(branch: OrderModel) -> Asking[Offer[Staged] | None]:
        upper = (*capped_upper(branch, branch.amount), *((None,) * more))
        program = share_program(branch, rows, (ZERO,) * (n + more), upper=upper, extra=extra)
        staged = yield from ask_lexicographic(program, every, to_publish=to_publish)
        if staged is None:
            return None
        key = (*(_dot(objective, staged.x) for objective in (*objectives, positions)), *reversed(staged.x[:n]))
        return Offer(staged.x[:n], key, staged)

    aims = (*(tuple(objective) for objective in objectives), positions)
    upper = (*capped_upper(model, model.amount), *_reach(extra, n, n + more))
    guide = Guide(share_program(model, rows, (ZERO,) * (n + more), upper=upper, extra=extra), aims)
    found = yield from ask_best_within(model, ask, guide=guide, on_widest=on_widest)
    if found is None:
        raise NoSharesError(f"no shares meet the limits of order {model.order.name} in its amount")
    return Best(found.answer, found.branch.model, not found.branch.path)


def _reach(extra: Sequence[tuple[Vector, Bound, Bound]], n: int, width: int) -> list[Fraction]:
    """A bound on each column beyond the n lots that no shares need more of: the most that they make of its rows."""
    return [
        max((max(abs(a) for a in row[:n]) / abs(row[column]) for row, _, _ in extra if row[column]), default=ZERO)
        for column in range(n, width)
    ]


@lru_cache(maxsize=16)
def _one_by_one(n: int) -> tuple[Vector, ...]:
    """The share of the last lot, of the one before, …"""
    return tuple(tuple(ONE if j == i else ZERO for j in range(n)) for i in reversed(range(n)))


def _dot(one: Vector, other: Vector) -> Fraction:
    return sum((a * b for a, b in zip(one, other, strict=False) if a and b), ZERO)


def ask_lexicographic(
    program: Program, objectives: Sequence[Vector], *, to_publish: bool = True
) -> Asking[Staged | None]:
    """The best point by each objective in turn (least first); None if there is no point at all.

    After each stage the program is cut down to its optimal face: columns with a reduced cost are held
    where they are, rows with a multiplier are held tight.  It ends as soon as the face is one point.
    """
    stages: list[Optimum] = []
    for objective in objectives:
        program = replace(program, cost=(*objective, *((ZERO,) * (len(program.cost) - len(objective)))))
        proven = yield from ask_proven(program, to_publish=to_publish)
        if not isinstance(proven.answer, Optimum):
            return None
        stages.append(proven.answer)
        if proven.is_only:
            break
        program = _optimal_face(program, proven.answer)
        if _is_one_point(program):
            break
    return Staged(stages[-1].x, tuple(stages))


lexicographic = answered(ask_lexicographic)


def _optimal_face(program: Program, answer: Optimum) -> Program:
    lower, upper = list(program.lower), list(program.upper)
    for j in _priced(program, answer):
        lower[j] = upper[j] = answer.x[j]
    low: list[Bound] = list(program.row_low)
    high: list[Bound] = list(program.row_high)
    for k, y in enumerate(answer.multipliers):
        if y > 0:
            high[k] = low[k]
        elif y < 0:
            low[k] = high[k]
    return replace(program, row_low=tuple(low), row_high=tuple(high), lower=tuple(lower), upper=tuple(upper))


def _priced(program: Program, answer: Optimum) -> list[int]:
    """The columns with a reduced cost, reckoned in whole numbers."""
    form = integral(program)
    weights, below = cleared([y / scale for y, scale in zip(answer.multipliers, form.row_scale, strict=True)])
    held = [(weight * form.cost_scale, row) for weight, row in zip(weights, form.rows, strict=True) if weight]
    return [j for j, cost in enumerate(form.cost) if cost * below != sum(weight * row[j] for weight, row in held)]


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
