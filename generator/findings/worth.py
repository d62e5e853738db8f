"""What changes are worth to one order: a limit loosened, a lot's price, a lot taken away.

All are read off the cheapest recipe's cost as a function of one number, exactly.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from generator.findings.ask import Asking, ask_all_best, ask_answer, together
from generator.findings.model import OrderModel, Row
from generator.findings.programs import ONE, ZERO, ProgramRow, capped_upper, level_rows, share_program, share_rows
from generator.findings.records import Range, Recipe
from generator.findings.rules import OutsideDomain
from generator.geometry.asked import Point
from generator.geometry.program import Bound, Optimum, Program, Vector

#: A limit is first loosened by this part of its scale to see which way the cost leaves (one-sided).
NUDGE = Fraction(1, 10**6)


@dataclass(frozen=True, slots=True)
class Worth:
    """What loosening a limit by one unit saves per unit of amount, and the bounds between which it holds.

    ``holds`` is None where the saving is no straight line (carriers that differ, a blend rule).
    """

    saving: Fraction
    holds: Range | None


def has_all_costs(model: OrderModel) -> bool:
    """Whether every usable lot's cost is known, without which no price comparison is meant."""
    return all(cost is not None for cost in model.cost)


def ask_lot_prices(
    model: OrderModel, recipe: Recipe, costs_without: Mapping[str, Fraction | None], optimum: Optimum
) -> Asking[tuple[dict[str, float | None], dict[str, float | None]]]:
    """At what price each unused lot enters, and up to what price each used one stays.

    The threshold of lot j is the greatest (reference − cost of the other lots) per share of j, over all
    blends that use j: with the least cost as reference for an unused lot, and with the least cost
    without j (``costs_without``; None: there is none, it stays at any price) for a used one.  Scaled so
    that x_j = 1 that is one linear program (Charnes and Cooper 1962), and no degeneracy blurs it.  Where the
    ``optimum`` of the cheapest recipe has one set of multipliers only, an unused lot's is its cost less
    its reduced cost.
    """
    prices = _prices_by_multipliers(model, optimum)
    enters: dict[str, float | None] = {}
    stays: dict[str, float | None] = {}
    best = sum((cost * recipe.exact.get(name, ZERO) for name, cost in _costs(model).items()), ZERO)
    asked: list[tuple[str, Program]] = []
    for j, name in enumerate(model.names):
        used = name in recipe.exact
        reference = costs_without.get(name) if used else best
        if used and reference is None:
            stays[name] = None
            continue
        if not used and prices is not None:
            enters[name] = prices[j]
            continue
        asked.append((name, _threshold_program(model, j, reference or ZERO)))
    answers = yield from ask_all_best([program for _, program in asked])
    for (name, _), answer in zip(asked, answers, strict=True):
        price = -float(answer.value) if isinstance(answer, Point) else None
        if name in recipe.exact:
            stays[name] = price
        else:
            enters[name] = price
    return enters, stays


def _costs(model: OrderModel) -> dict[str, Fraction]:
    return {name: cost or ZERO for name, cost in zip(model.names, model.cost, strict=True)}


def _prices_by_multipliers(model: OrderModel, optimum: Optimum) -> list[float | None] | None:
    """For each lot the cost at which its reduced cost would be 0; None where it can't be used at all.

    No list where the optimum is degenerate: then other multipliers may serve as well.
    """
    rows = share_rows(model).entries
    upper = capped_upper(model, model.amount)
    if not _is_single(rows, model.lower, upper, optimum):
        return None
    held = [(y, entry.terms) for y, entry in zip(optimum.multipliers, rows, strict=False) if y]
    level = optimum.multipliers[len(rows)]
    return [None if top == 0 else float(sum((y * terms[j] for y, terms in held), level)) for j, top in enumerate(upper)]


def _is_single(rows: Sequence[ProgramRow], lower: Vector, upper: Sequence[Bound], optimum: Optimum) -> bool:
    """Whether exactly as many columns and rows rest at a bound as must: then the multipliers are the only ones."""
    if optimum.basis is None:
        return False
    basic, n = set(optimum.basis.basic), len(lower)
    shares = all(
        low != x != top for j, (low, x, top) in enumerate(zip(lower, optimum.x, upper, strict=True)) if j in basic
    )
    loose = [entry for k, entry in enumerate(rows) if n + k in basic]
    used = [(j, x) for j, x in enumerate(optimum.x) if x]
    values = [sum((entry.terms[j] * x for j, x in used), ZERO) for entry in loose]
    free = all(entry.low != value != entry.high for entry, value in zip(loose, values, strict=True))
    return shares and free and n + len(rows) not in basic


def _threshold_program(model: OrderModel, j: int, reference: Fraction) -> Program:
    """Most reference·λ − Σ cost·x over x = λ·shares with x_j = 1; columns: lots, λ."""
    n = len(model.lots)
    costs = list(_costs(model).values())
    costs[j] = ZERO
    upper = capped_upper(model, model.amount)
    rows: list[tuple[Vector, Bound, Bound]] = [
        ((*row.terms, ZERO), ZERO if row.side == "exact" else None, ZERO) for row in model.rows
    ]
    rows.append(((*((ONE,) * n), -ONE), ZERO, ZERO))
    for i in range(n):
        unit = [ONE if k == i else ZERO for k in range(n)]
        top = upper[i]
        if model.lower[i]:
            rows.append(((*unit, -model.lower[i]), ZERO, None))
        # A top of 1 or more is no bound: the shares sum to 1.
        if top is not None and top < 1:
            rows.append(((*unit, -top), None, ZERO))
    fixed = tuple(ONE if k == j else ZERO for k in range(n))
    return Program(
        rows=tuple(vector for vector, _, _ in rows),
        row_low=tuple(low for _, low, _ in rows),
        row_high=tuple(high for _, _, high in rows),
        lower=(*fixed, ZERO),
        upper=(*(ONE if k == j else None for k in range(n)), None),
        cost=(*costs, -reference),
    )


def ask_worths(
    model: OrderModel, recipe: Recipe, scales: Sequence[Fraction], optimum: Optimum
) -> Asking[dict[str, Worth]]:
    """What loosening each binding limit by one unit saves, on its loose side.

    The cost is convex in a bound (equal carriers: piecewise linear), so that under degeneracy the worth
    differs by side; this is the side on which the limit gives way.  ``optimum`` is the cheapest recipe's:
    where its multipliers are the only ones, they are the worths.
    """
    found: dict[str, Worth] = {}
    best = sum((cost * recipe.exact.get(name, ZERO) for name, cost in _costs(model).items()), ZERO)
    rows = share_rows(model)
    is_single = _is_single(rows.entries, model.lower, capped_upper(model, model.amount), optimum)
    weights = rows.weights(optimum.multipliers) if is_single else {}
    slopes = {k: weight * model.rows[k].base[0] for k, weight in weights.items() if level_rows(model)[k]}
    binding = [k for k, row in enumerate(model.rows) if row.side != "exact" and _binds(model, row, recipe)]
    asked = yield from together([_ask_worth(model, k, scales[k], best, slopes.get(k)) for k in binding])
    for k, worth in zip(binding, asked, strict=True):
        if worth is not None and worth.saving != 0:
            found[model.rows[k].on] = worth
    return found


def _binds(model: OrderModel, row: Row, recipe: Recipe) -> bool:
    return (
        sum((term * recipe.exact.get(name, ZERO) for name, term in zip(model.names, row.terms, strict=True)), ZERO) == 0
    )


def _ask_worth(
    model: OrderModel, k: int, scale: Fraction, best: Fraction, slope: Fraction | None
) -> Asking[Worth | None]:
    row = model.rows[k]
    loose = -1 if (row.side == "low") != model.measures[row.on].rule.decreases else 1
    first = scale * NUDGE
    if slope is None or model.measures[row.on].rule.name != "linear":
        near = yield from _ask_line(model, k, loose * first)
        if near is None:
            return None
        slope = (best - near.cost) / first
    if not slope or model.measures[row.on].rule.name != "linear" or not level_rows(model)[k]:
        return Worth(slope, None)
    reach = yield from _ask_reach(model, k, loose, best, slope, first)
    ends = (row.typed, row.typed + loose * reach)
    return Worth(slope, (float(min(ends)), float(max(ends))))


@dataclass(frozen=True, slots=True)
class _Line:
    """The least cost at a moved bound, and what one unit further out saves."""

    cost: Fraction
    slope: Fraction


def _ask_line(model: OrderModel, k: int, move: Fraction) -> Asking[_Line | None]:
    """The least cost with row k's typed bound moved by ``move``; None outside the rule's domain."""
    row = model.rows[k]
    rule, typed = model.measures[row.on].rule, row.typed + move
    if rule.name == "linear" and level_rows(model)[k]:
        # Only the bound of its program row moves.
        rows = share_rows(model).tightened({k: (move if row.side == "low" else -move) * row.base[0]})
    else:
        try:
            moved = row.moved(rule.index(typed), typed)
        except OutsideDomain:
            return None
        rows = share_rows(replace(model, rows=(*model.rows[:k], moved, *model.rows[k + 1 :])))
    program = share_program(model, rows, tuple(_costs(model).values()), upper=capped_upper(model, model.amount))
    answer = yield from ask_answer(program, to_publish=False)
    assert isinstance(answer, Optimum), "a loosened order stays reachable"
    return _Line(answer.value, rows.weights(answer.multipliers).get(k, ZERO) * row.base[0])


def _ask_reach(
    model: OrderModel, k: int, loose: int, best: Fraction, slope: Fraction, first: Fraction
) -> Asking[Fraction]:
    """How far the saving grows by ``slope``: where the tangents from further out meet it, exactly.

    The saving is concave in the move, so a tangent lies above it; where the tangent at a farther move
    crosses the first line and the saving still is on that line, the line ends.
    """
    row = model.rows[k]
    above, below = model.numerators[row.on], model.denominators[row.on]
    values = above if len(set(below)) == 1 else [a / b for a, b in zip(above, below, strict=True) if b]
    furthest = (max(values) if loose > 0 else min(values)) / (below[0] if values is above else ONE)
    step = max(first, loose * (furthest - row.typed))
    while True:
        line = yield from _ask_line(model, k, loose * step)
        assert line is not None, "a linear rule has no edge"
        saving = best - line.cost
        if saving == slope * step:
            return step
        # saving + line.slope·(s − step) = slope·s
        step = (saving - line.slope * step) / (slope - line.slope)
