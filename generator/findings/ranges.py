"""Attainable range: how far one quantity can go while all other limits are kept.

Stock, and the quantity's own limit, are aside.  Where the denominator is the same for every lot it is
a linear program over shares, else one after Charnes and Cooper (1962): x scaled so that D·x = 1.
"""

from __future__ import annotations

from fractions import Fraction

from generator.findings.ask import Asking, ask_all_best
from generator.findings.measures import own_value
from generator.findings.model import OrderModel
from generator.findings.programs import ONE, ZERO, amount_rows, share_bound_rows, share_program, share_rows
from generator.findings.records import LimitFinding, Range
from generator.geometry.asked import Point
from generator.geometry.program import Program, Unbounded

#: One end of a range as it is answered: unbounded, or None where the other limits block.
End = Point | Unbounded | None


def ask_limit_findings(model: OrderModel) -> Asking[tuple[LimitFinding, ...]]:
    """Every limit of the order with its attainable range and the range of its lots."""
    names = list(model.limits)
    programs = [program for name in names for program in _programs(model, name)]
    answers = yield from ask_all_best(programs)
    found = []
    for k, name in enumerate(names):
        limit = model.limits[name]
        found.append(
            LimitFinding(
                on=name,
                low=None if limit.low is None else float(limit.low),
                high=None if limit.high is None else float(limit.high),
                attainable=_range(model, name, answers[2 * k], answers[2 * k + 1]),
                lots_range=_lots_range(model, name),
            )
        )
    return tuple(found)


def _programs(model: OrderModel, name: str) -> tuple[Program, Program]:
    """Least and greatest index value of the quantity, both as least cost."""
    above, below = model.numerators[name], model.denominators[name]
    if len(set(below)) == 1 and below[0] > 0:
        rows = share_rows(model).without(name)
        cost = tuple(value / below[0] for value in above)
        return share_program(model, rows, cost), share_program(model, rows, tuple(-c for c in cost))
    rows = amount_rows(model).without(name)
    bounds = share_bound_rows(model)
    programs = [
        Program(
            rows=(*(entry.terms for entry in rows.entries), *(terms for _, terms in bounds), below),
            row_low=(*(entry.low for entry in rows.entries), *(None for _ in bounds), ONE),
            row_high=(*(entry.high for entry in rows.entries), *(ZERO for _ in bounds), ONE),
            lower=(ZERO,) * len(below),
            upper=(None,) * len(below),
            cost=tuple(sign * value for value in above),
        )
        for sign in (ONE, -ONE)
    ]
    return programs[0], programs[1]


def _range(model: OrderModel, name: str, least: End, greatest: End) -> Range | None:
    if least is None or greatest is None:
        return None
    low = _own(model, name, least.value) if isinstance(least, Point) else None
    high = _own(model, name, -greatest.value) if isinstance(greatest, Point) else None
    return (high, low) if model.measures[name].rule.decreases else (low, high)


def _own(model: OrderModel, name: str, index: Fraction) -> float | None:
    value = own_value(model.measures[name].rule, index)
    return None if value is None else float(value)


def _lots_range(model: OrderModel, name: str) -> Range | None:
    values = []
    for above, below in zip(model.numerators[name], model.denominators[name], strict=True):
        value = None if below == 0 else own_value(model.measures[name].rule, above / below)
        if value is not None:
            values.append(value)
    return (float(min(values)), float(max(values))) if values else None
