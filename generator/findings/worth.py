"""What changes are worth to one order: a limit loosened, a lot's price, a lot taken away.

All are read off the cheapest recipe's cost as a function of one number, exactly.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from generator.findings.model import OrderModel, Row
from generator.findings.programs import ONE, ZERO, capped_upper, share_program, share_rows
from generator.findings.records import Range, Recipe
from generator.findings.rules import OutsideDomain
from generator.geometry.decide import decide, decide_many
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


def lot_prices(
    model: OrderModel, recipe: Recipe, costs_without: Mapping[str, Fraction | None]
) -> tuple[dict[str, float | None], dict[str, float | None]]:
    """At what price each unused lot enters, and up to what price each used one stays.

    The threshold of lot j is the greatest (reference − cost of the other lots) per share of j, over all
    blends that use j: with the least cost as reference for an unused lot, and with the least cost
    without j (``costs_without``; None: there is none, it stays at any price) for a used one.  Scaled so
    that x_j = 1 that is one linear program (Charnes and Cooper 1962), and no degeneracy blurs it.
    """
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
        asked.append((name, _threshold_program(model, j, reference or ZERO)))
    for (name, _), answer in zip(asked, decide_many([program for _, program in asked]), strict=True):
        price = -float(answer.value) if isinstance(answer, Optimum) else None
        if name in recipe.exact:
            stays[name] = price
        else:
            enters[name] = price
    return enters, stays


def _costs(model: OrderModel) -> dict[str, Fraction]:
    return {name: cost or ZERO for name, cost in zip(model.names, model.cost, strict=True)}


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
        if top is not None:
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


def worths(model: OrderModel, recipe: Recipe, scales: Sequence[Fraction]) -> dict[str, Worth]:
    """What loosening each binding limit by one unit saves, on its loose side.

    The cost is convex in a bound (equal carriers: piecewise linear), so that under degeneracy the worth
    differs by side; this is the side on which the limit gives way.
    """
    found: dict[str, Worth] = {}
    best = sum((cost * recipe.exact.get(name, ZERO) for name, cost in _costs(model).items()), ZERO)
    for k, (row, scale) in enumerate(zip(model.rows, scales, strict=True)):
        if row.side == "exact" or not _binds(model, row, recipe):
            continue
        worth = _worth(model, k, scale, best)
        if worth is not None and worth.saving != 0:
            found[row.on] = worth
    return found


def _binds(model: OrderModel, row: Row, recipe: Recipe) -> bool:
    return (
        sum((term * recipe.exact.get(name, ZERO) for name, term in zip(model.names, row.terms, strict=True)), ZERO) == 0
    )


def _worth(model: OrderModel, k: int, scale: Fraction, best: Fraction) -> Worth | None:
    row = model.rows[k]
    loose = -1 if (row.side == "low") != model.measures[row.on].rule.decreases else 1
    first = scale * NUDGE
    near = _line(model, k, loose * first)
    if near is None:
        return None
    slope = (best - near.cost) / first
    if not slope or model.measures[row.on].rule.name != "linear" or len(set(row.base)) != 1:
        return Worth(slope, None)
    reach = _reach(model, k, loose, best, slope, first)
    ends = (row.typed, row.typed + loose * reach)
    return Worth(slope, (float(min(ends)), float(max(ends))))


@dataclass(frozen=True, slots=True)
class _Line:
    """The least cost at a moved bound, and what one unit further out saves."""

    cost: Fraction
    slope: Fraction


def _line(model: OrderModel, k: int, move: Fraction) -> _Line | None:
    """The least cost with row k's typed bound moved by ``move``; None outside the rule's domain."""
    row = model.rows[k]
    typed = row.typed + move
    try:
        moved = row.moved(model.measures[row.on].rule.index(typed), typed)
    except OutsideDomain:
        return None
    other = replace(model, rows=tuple(moved if i == k else kept for i, kept in enumerate(model.rows)))
    rows = share_rows(other)
    costs = tuple(_costs(model).values())
    answer = decide(share_program(other, rows, costs, upper=capped_upper(model, model.amount)))
    assert isinstance(answer, Optimum), "a loosened order stays reachable"
    return _Line(answer.value, rows.weights(answer.multipliers).get(k, ZERO) * row.base[0])


def _reach(model: OrderModel, k: int, loose: int, best: Fraction, slope: Fraction, first: Fraction) -> Fraction:
    """How far the saving grows by ``slope``: where the tangents from further out meet it, exactly.

    The saving is concave in the move, so a tangent lies above it; where the tangent at a farther move
    crosses the first line and the saving still is on that line, the line ends.
    """
    row = model.rows[k]
    values = [
        above / below
        for above, below in zip(model.numerators[row.on], model.denominators[row.on], strict=True)
        if below
    ]
    step = max(first, loose * ((max(values) if loose > 0 else min(values)) - row.typed))
    while True:
        line = _line(model, k, loose * step)
        assert line is not None, "a linear rule has no edge"
        saving = best - line.cost
        if saving == slope * step:
            return step
        # saving + line.slope·(s − step) = slope·s
        step = (saving - line.slope * step) / (slope - line.slope)
