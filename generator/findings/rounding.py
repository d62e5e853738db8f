"""Amounts of one batch as multiples of weigh steps, near given ones, that keep limits and rules."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import ceil, floor, inf

from generator.findings.house_rules import breach
from generator.findings.model import OrderModel
from generator.findings.programs import ONE, ZERO, amount_rows, share_bound_rows
from generator.geometry.mixed import Mixed, SparseRow, search

#: How many steps up and down from the given amounts are looked at: first few, then many.
REACHES = (2, 40)
#: Rows are tightened by this (of the batch) so that what floats call held is held exactly.
MARGIN = 1e-9
NODES, SECONDS = 2000, 10.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Weighing:
    """The question: amounts by lot position near ``aims``, multiples of ``steps``, at most ``caps``
    (absent: no cap), together between ``low`` and ``high`` (None: anything).

    Lots whose aim is 0 may be added, as few as will do, and within the house rules.
    """

    model: OrderModel
    aims: Mapping[int, Fraction]
    steps: Mapping[int, Fraction]
    caps: Mapping[int, Fraction]
    low: Fraction | None
    high: Fraction | None


@dataclass(frozen=True, slots=True)
class Rounded:
    """Weighable amounts by lot position, and the names of what they break."""

    amounts: Mapping[int, Fraction]
    breaks: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class _Line:
    """low ≤ Σ terms·x ≤ high over amounts by lot position, and what the line is about."""

    name: str
    terms: Mapping[int, Fraction]
    low: Fraction | None
    high: Fraction | None


def rounded(weighing: Weighing, *, is_elastic: bool = False) -> Rounded | None:
    """The nearest weighable amounts that hold everything, exactly; None if none were found.

    ``is_elastic`` lets limits and rules give way by as little as may be, never caps; where no total is
    asked it always answers.
    """
    nearest = {i: round(x / weighing.steps[i]) * weighing.steps[i] for i, x in weighing.aims.items()}
    if any(nearest.values()) and _holds(weighing, nearest):
        return Rounded(nearest, ())
    for reach in REACHES:
        found = _searched(weighing, reach, is_elastic=is_elastic)
        if found is None or not _is_capped(weighing, found):
            continue
        breaks = broken(weighing.model, found)
        if is_elastic or _holds(weighing, found):
            return Rounded(found, breaks)
    if not is_elastic or weighing.low is not None:
        return None
    down = {
        i: floor(min(x, weighing.caps.get(i, x)) / weighing.steps[i]) * weighing.steps[i]
        for i, x in weighing.aims.items()
    }
    return Rounded(down, broken(weighing.model, down))


def broken(model: OrderModel, amounts: Mapping[int, Fraction]) -> tuple[str, ...]:
    """What amounts break, exactly: names of limited quantities, of lots' shares, of house rules."""
    used = {i: x for i, x in amounts.items() if x}
    found = []
    for line in _lines(model, used):
        value = sum((line.terms.get(i, ZERO) * x for i, x in used.items()), ZERO)
        if (line.low is not None and value < line.low) or (line.high is not None and value > line.high):
            found.append(line.name)
    total = sum(used.values(), ZERO)
    rule = breach(model.rules, model.names, {model.names[i]: x / total for i, x in used.items()}) if total else None
    return tuple(dict.fromkeys([*found, *([rule] if rule else [])]))


def _lines(model: OrderModel, used: Mapping[int, Fraction]) -> list[_Line]:
    """Limits, share bounds and least shares over the used lots; which lots are used is the plan's choice."""
    names = [row.on for row in model.rows]
    lines = []
    for entry in amount_rows(model).entries:
        place = entry.high_of if entry.high_of is not None else entry.low_of
        assert place is not None, "an entry stands for a row"
        lines.append(_Line(names[place], {i: entry.terms[i] for i in used}, entry.low, entry.high))
    lines += [_Line(row.on, {i: terms[i] for i in used}, None, ZERO) for row, terms in share_bound_rows(model)]
    for i, amount in used.items():
        least = model.rules.least[i]
        if least and amount:
            terms = {j: least - (ONE if j == i else ZERO) for j in used}
            lines.append(_Line(f"least share of {model.names[i]}", terms, None, ZERO))
    return lines


def _holds(weighing: Weighing, amounts: Mapping[int, Fraction]) -> bool:
    return _is_capped(weighing, amounts) and _is_in_window(weighing, amounts) and not broken(weighing.model, amounts)


def _is_capped(weighing: Weighing, amounts: Mapping[int, Fraction]) -> bool:
    return all(x <= weighing.caps.get(i, x) for i, x in amounts.items())


def _is_in_window(weighing: Weighing, amounts: Mapping[int, Fraction]) -> bool:
    total = sum(amounts.values(), ZERO)
    return (weighing.low is None or total >= weighing.low) and (weighing.high is None or total <= weighing.high)


def _searched(weighing: Weighing, reach: int, *, is_elastic: bool) -> dict[int, Fraction] | None:
    """Steps above a base by lot, then what each amount lacks or has too much, then what each line gives."""
    lots = sorted(weighing.aims)
    size = float(sum(weighing.aims.values(), ZERO)) or 1.0
    base = {i: _base(weighing, i, reach) for i in lots}
    upper = [float(_top(weighing, i, reach) - base[i]) for i in lots]
    if min(upper, default=0.0) < 0:
        return None
    n = len(lots)
    cost = [0.0] * n
    rows: list[SparseRow] = []
    for position, i in enumerate(lots):
        step = float(weighing.steps[i])
        off = float(weighing.aims[i] - base[i] * weighing.steps[i])
        more, less = len(upper), len(upper) + 1
        upper += [inf, inf]
        cost += [1.0 / size, 1.0 / size]
        rows.append(SparseRow({position: step, more: -1.0, less: 1.0}, off, off))
    flags = {}
    for position, i in enumerate(lots):
        if not weighing.aims[i]:
            flags[i] = len(upper)
            rows.append(SparseRow({position: 1.0, flags[i]: -upper[position]}, -inf, 0.0))
            upper.append(1.0)
            cost.append(1.0)
    rows += _added_rows(weighing, flags)
    for line in _lines(weighing.model, weighing.aims):
        held = sum((line.terms[i] * base[i] * weighing.steps[i] for i in lots), ZERO)
        terms = {p: float(line.terms[i] * weighing.steps[i]) for p, i in enumerate(lots) if line.terms[i]}
        scale = max((abs(float(value)) for value in line.terms.values()), default=1.0) * size
        low = -inf if line.low is None else float(line.low - held)
        high = inf if line.high is None else float(line.high - held)
        if is_elastic:
            for sign in (1.0, -1.0):
                terms[len(upper)] = sign * scale
                upper.append(inf)
                cost.append(1e4)
        elif line.low != line.high:
            low, high = low + MARGIN * scale, high - MARGIN * scale
        rows.append(SparseRow(terms, low, high))
    fixed = sum((base[i] * weighing.steps[i] for i in lots), ZERO)
    total = {p: float(weighing.steps[i]) for p, i in enumerate(lots)}
    if weighing.low is not None or weighing.high is not None:
        slack = MARGIN * size
        low = -inf if weighing.low is None else float(weighing.low - fixed) - slack
        high = inf if weighing.high is None else float(weighing.high - fixed) + slack
        rows.append(SparseRow(total, low, high))
    found = search(
        Mixed(cost=cost, upper=upper, rows=rows, whole=frozenset([*range(n), *flags.values()])),
        nodes=NODES,
        seconds=SECONDS,
        gap=1e-3,
    )
    if found.x is None:
        return None
    return {i: (base[i] + round(float(found.x[p]))) * weighing.steps[i] for p, i in enumerate(lots)}


def _added_rows(weighing: Weighing, flags: Mapping[int, int]) -> list[SparseRow]:
    """House rules over added lots (by the column that says so), the others being used."""
    rules = weighing.model.rules
    used = frozenset(i for i, aim in weighing.aims.items() if aim)
    rows = []
    if rules.max_lots is not None and flags:
        rows.append(SparseRow(dict.fromkeys(flags.values(), 1.0), -inf, float(rules.max_lots - len(used))))
    for pair in rules.apart:
        sides = (pair.first_lots, pair.second_lots)
        for one, other in (sides, sides[::-1]):
            for i in one & flags.keys():
                if used & other:
                    rows.append(SparseRow({flags[i]: 1.0}, -inf, 0.0))
                rows += [SparseRow({flags[i]: 1.0, flags[j]: 1.0}, -inf, 1.0) for j in other & flags.keys() if i < j]
    return rows


def _base(weighing: Weighing, i: int, reach: int) -> int:
    """The least number of steps looked at; a lot of which the plan uses a step is weighed at least once."""
    steps = floor(weighing.aims[i] / weighing.steps[i])
    return max(min(1, steps), steps - reach)


def _top(weighing: Weighing, i: int, reach: int) -> int:
    top = ceil(weighing.aims[i] / weighing.steps[i]) + reach
    cap = weighing.caps.get(i)
    return top if cap is None else min(top, floor(cap / weighing.steps[i]))
