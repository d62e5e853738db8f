"""Checkers: is this answer proven?  In exact arithmetic, and sharing no code with any solver.

Each takes a program and a claimed answer of :mod:`generator.geometry.program` and is true only where
the numbers in the claim prove it; a claim of the wrong shape proves nothing.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from fractions import Fraction
from math import lcm

from generator.geometry.program import Bound, Infeasible, Optimum, Program, Sparse, Unbounded, Vector


def proves_optimum(program: Program, optimum: Optimum) -> bool:
    """Whether ``optimum.x`` is feasible and no feasible point costs less.

    By weak duality: with d = cost − rowsᵀ·y, every feasible x costs cost·x = d·x + y·(rows·x), which
    is at least the sum of the least values of its terms within their bounds.  If that sum is the
    value claimed, nothing is cheaper.
    """
    x, value = optimum.x, optimum.value
    if len(x) != len(program.cost) or len(optimum.multipliers) != len(program.rows):
        return False
    if sum((c * v for c, v in zip(program.cost, x, strict=True) if v and c), Fraction(0)) != value:
        return False
    return _is_feasible(program, x) and _least(program, program.cost, optimum.multipliers) == value


def proven_prices(
    program: Sparse,
    cost: Mapping[int, int],
    x: Mapping[int, Fraction],
    multipliers: Mapping[int, Fraction],
    free: Collection[int] | None = None,
) -> dict[int, int] | None:
    """The reduced costs by column, all times one positive number, if ``x`` is feasible and none costs less; else None.

    ``x`` by column and ``multipliers`` by row, absent for 0.  By complementary slackness: all reduced costs are
    ≥ 0, those of used columns 0, and a row with a multiplier is at its low bound if that is > 0, at its high one
    if it is < 0.  With ``free`` columns, all others are held at 0.
    """
    columns = range(program.width) if free is None else free
    below = lcm(*{value.denominator for value in x.values()})
    scaled = {j: value.numerator * (below // value.denominator) for j, value in x.items()}
    if min(scaled.values(), default=0) < 0 or not all(j in columns and 0 <= j < program.width for j in scaled):
        return None
    shared = lcm(*{weight.denominator for weight in multipliers.values()})
    weights = {k: weight.numerator * (shared // weight.denominator) for k, weight in multipliers.items() if weight}
    prices = {j: cost.get(j, 0) * shared for j in columns}
    for k, (row, low, high) in enumerate(zip(program.rows, program.low, program.high, strict=True)):
        total = sum(a * scaled[j] for j, a in row.items() if j in scaled)
        if (low is not None and total < low * below) or (high is not None and total > high * below):
            return None
        weight = weights.pop(k, 0)
        bound = low if weight > 0 else high
        if weight:
            if bound is None or total != bound * below:
                return None
            for j, a in row.items():
                if j in prices:
                    prices[j] -= weight * a
    is_proven = not weights and all(price == 0 or (price > 0 and not scaled.get(j)) for j, price in prices.items())
    return prices if is_proven else None


def proves_infeasible(program: Program, infeasible: Infeasible) -> bool:
    """Whether the multipliers prove that no point is feasible.

    With cost 0, weak duality says that 0 is at least the sum of the least values of the terms: a
    positive sum is a contradiction.  Where the bounds of a column or of a row cross, nothing more is needed.
    """
    if len(infeasible.multipliers) != len(program.rows):
        return False
    if _crossed(program.lower, program.upper) or _crossed(program.row_low, program.row_high):
        return True
    least = _least(program, (Fraction(0),) * len(program.cost), infeasible.multipliers)
    return least is not None and least > 0


def proves_unbounded(program: Program, unbounded: Unbounded) -> bool:
    """Whether ``x`` is feasible, and ``ray`` leads from it for ever within all bounds at falling cost."""
    x, ray = unbounded.x, unbounded.ray
    if len(x) != len(program.cost) or len(ray) != len(program.cost) or not _is_feasible(program, x):
        return False
    falls = sum((c * r for c, r in zip(program.cost, ray, strict=True)), Fraction(0)) < 0
    along = [_product(row, ray) for row in program.rows]
    return (
        falls
        and all(map(_stays_within, ray, program.lower, program.upper))
        and all(map(_stays_within, along, program.row_low, program.row_high))
    )


def _stays_within(rate: Fraction, low: Bound, high: Bound) -> bool:
    return (rate >= 0 or low is None) and (rate <= 0 or high is None)


def _crossed(lows: tuple[Bound, ...], highs: tuple[Bound, ...]) -> bool:
    return any(low is not None and high is not None and low > high for low, high in zip(lows, highs, strict=True))


def _is_feasible(program: Program, x: Vector) -> bool:
    for value, low, high in zip(x, program.lower, program.upper, strict=True):
        if (low is not None and value < low) or (high is not None and value > high):
            return False
    scale = lcm(*{value.denominator for value in x})
    used = [(j, value.numerator * (scale // value.denominator)) for j, value in enumerate(x) if value]
    for row, low, high in zip(program.rows, program.row_low, program.row_high, strict=True):
        total, below = _dot(row, used)
        below *= scale
        if low is not None and total * low.denominator < low.numerator * below:
            return False
        if high is not None and total * high.denominator > high.numerator * below:
            return False
    return True


def _dot(row: Vector, used: list[tuple[int, int]]) -> tuple[int, int]:
    """The sum of row[j]·weight over ``used`` as a numerator and a positive denominator."""
    entries = [(*row[j].as_integer_ratio(), weight) for j, weight in used]
    below = lcm(*{denominator for _, denominator, _ in entries})
    return sum(numerator * (below // denominator) * weight for numerator, denominator, weight in entries), below


def _product(row: Vector, x: Vector) -> Fraction:
    return sum((a * v for a, v in zip(row, x, strict=True) if a and v), Fraction(0))


def _least(program: Program, cost: Vector, multipliers: Vector) -> Fraction | None:
    """The bound of weak duality that the multipliers give; None where a term has no least value."""
    terms: list[tuple[Fraction, Fraction]] = []
    for weight, low, high in zip(multipliers, program.row_low, program.row_high, strict=True):
        bound = low if weight > 0 else high
        if weight:
            if bound is None:
                return None
            terms.append((weight, bound))
    for rate, low, high in zip(_reduced(program, cost, multipliers), program.lower, program.upper, strict=True):
        bound = low if rate > 0 else high
        if rate:
            if bound is None:
                return None
            if bound:
                terms.append((rate, bound))
    return sum((weight * bound for weight, bound in terms), Fraction(0))


def _reduced(program: Program, cost: Vector, multipliers: Vector) -> list[Fraction]:
    """Reduced costs: cost − rowsᵀ·multipliers, summed in whole numbers over one denominator."""
    held = [(row, weight) for row, weight in zip(program.rows, multipliers, strict=True) if weight]
    ratios = [[entry.as_integer_ratio() for entry in row] for row, _ in held]
    belows = [lcm(*{below for _, below in row}) for row in ratios]
    below = lcm(
        *{own * weight.denominator for own, (_, weight) in zip(belows, held, strict=True)},
        *{value.denominator for value in cost},
    )
    totals = [value.numerator * (below // value.denominator) for value in cost]
    for row, own, (_, weight) in zip(ratios, belows, held, strict=True):
        factor = weight.numerator * (below // (own * weight.denominator))
        totals = [
            total - factor * numerator * (own // entry_below) if numerator else total
            for total, (numerator, entry_below) in zip(totals, row, strict=True)
        ]
    return [Fraction(total, below) for total in totals]
