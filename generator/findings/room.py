"""Room: how far all limits of an order can tighten together before it is lost; and what room costs.

Every limit that is not exact moves inwards by t times its scale.  ``room`` is the greatest t; below 0
where the order is lost already.  With equal carriers it is one linear program; else Dinkelbach's steps
(1967): each solves a linear program at t and moves t to what its shares allow, until nothing is gained.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Literal

from generator.findings.ask import Asking, answered, ask_best
from generator.findings.house import Offer, ask_best_within
from generator.findings.measures import own_value
from generator.findings.model import OrderModel, Row
from generator.findings.narrowing import Guide
from generator.findings.programs import ONE, ZERO, Rows, capped_upper, level_rows, share_program, share_rows
from generator.findings.rules import OutsideDomain
from generator.geometry.asked import Point
from generator.geometry.program import Bound, Program, Vector
from generator.intake.records import Component

#: Dinkelbach's steps stop when t grows by less than this: far below what any page shows.
STEP = Fraction(1, 10**9)
#: He converges superlinearly; a few steps are usual.
MOST_STEPS = 40


@dataclass(frozen=True, slots=True)
class Scales:
    """The scale of each model row in the limit's own unit, and whether all that can move are sds."""

    by_row: tuple[Fraction, ...]
    unit: Literal["sd", "scale"]


@dataclass(frozen=True, slots=True)
class Room:
    """The greatest t, and shares that stand at it; ``is_only``: no others do (False where that is not known)."""

    t: Fraction
    shares: Vector
    is_only: bool = False


def scales_of(model: OrderModel, components: dict[str, Component]) -> Scales:
    """Laboratory sd (relative: of the limit), else half the window, else 1 % of the limit, else of the lots' range."""
    scales, known = [], []
    for row in model.rows:
        component = components.get(row.on)
        sd = component.sd if component else None
        own = None if sd is None else (sd.value * abs(row.typed) if sd.relative else sd.value)
        if row.side != "exact":
            known.append(bool(own))
        scales.append(own or _other_scale(model, row))
    return Scales(tuple(scales), "sd" if all(known) else "scale")


def _other_scale(model: OrderModel, row: Row) -> Fraction:
    limit = model.limits[row.on]
    if limit.low is not None and limit.high is not None and limit.low != limit.high:
        return abs(limit.high - limit.low) / 2
    if row.typed != 0:
        return abs(row.typed) / 100
    rule = model.measures[row.on].rule
    pairs = zip(model.numerators[row.on], model.denominators[row.on], strict=True)
    values = [value for above, below in pairs if below and (value := own_value(rule, above / below)) is not None]
    return (max(values) - min(values)) / 100 if values and max(values) != min(values) else ONE


def tightened(model: OrderModel, scales: Scales, t: Fraction) -> OrderModel | None:
    """The order with every limit that is not exact moved inwards by t scales (outwards where t < 0).

    None where a limit leaves the domain of its blend rule: no blend is there.
    """
    rows = []
    for row, scale in zip(model.rows, scales.by_row, strict=True):
        if row.side == "exact":
            rows.append(row)
            continue
        rule = model.measures[row.on].rule
        typed = row.typed + t * scale * (1 if (row.side == "low") != rule.decreases else -1)
        try:
            rows.append(row.moved(rule.index(typed), typed))
        except OutsideDomain:
            if t > 0:
                return None
            # Wider than the domain: no limit at all on this side.
            continue
    return replace(model, rows=tuple(rows))


def ask_room(model: OrderModel, scales: Scales, *, in_amount: bool) -> Asking[Room | None]:
    """The greatest t, exactly with equal carriers; None where nothing can move or exact limits alone block.

    Within the house rules.  ``in_amount`` keeps the stock's caps on the shares in the order's amount.
    """
    if all(row.side == "exact" for row in model.rows):
        return None

    if is_linear(model):
        room = yield from _ask_step(model, model, scales, in_amount=in_amount)
    else:
        room = yield from _ask_dinkelbach(model, scales, in_amount=in_amount)
    if room is None:
        return None
    # Another branch of the rules may have as much room.
    return replace(room, is_only=False) if model.rules.names() else room


room_of = answered(ask_room)


def _ask_dinkelbach(model: OrderModel, scales: Scales, *, in_amount: bool) -> Asking[Room | None]:
    best = yield from _ask_any_room(model, scales, in_amount=in_amount)
    if best is None:
        return None
    for _ in range(MOST_STEPS):
        # Floor to a coarse grid: the next program's numbers stay short, and t still stands.
        at = _floored(best.t)
        moved = tightened(model, scales, at)
        if moved is None:
            return best
        step = yield from _ask_step(model, moved, scales, in_amount=in_amount)
        reached = None if step is None else allowed(model, scales, step.shares)
        if step is None or reached is None or reached <= best.t:
            return best
        gained = reached - best.t
        best = Room(reached, step.shares)
        if gained < STEP:
            break
    return best


def _ask_any_room(model: OrderModel, scales: Scales, *, in_amount: bool) -> Asking[Room | None]:
    """The room of any shares that keep the exact limits and the house rules; None where there are none."""
    exact_only = replace(model, rows=tuple(row for row in model.rows if row.side == "exact"))

    def program(branch: OrderModel) -> Program:
        upper = capped_upper(branch, branch.amount) if in_amount else branch.upper
        return share_program(branch, share_rows(exact_only), (ZERO,) * len(branch.lots), upper=upper)

    def ask(branch: OrderModel) -> Asking[Offer[Vector] | None]:
        point = yield from ask_best(program(branch))
        return Offer(point.x, (), point.x) if isinstance(point, Point) else None

    found = yield from ask_best_within(model, ask, guide=Guide(program(model), ()))
    t = None if found is None else allowed(model, scales, found.answer)
    return None if found is None or t is None else Room(t, found.answer)


def _floored(t: Fraction) -> Fraction:
    return Fraction((t / STEP).__floor__()) * STEP


def tight_rows(model: OrderModel, scales: Scales, t: Fraction) -> Rows:
    """The program rows of :func:`tightened` where moving the limits is linear: only their bounds move."""
    return share_rows(model).tightened(
        {
            k: t * scale * row.base[0]
            for k, (row, scale) in enumerate(zip(model.rows, scales.by_row, strict=True))
            if row.side != "exact"
        }
    )


def is_linear(model: OrderModel) -> bool:
    """Whether moving all limits at once is linear: linear rules, and denominators alike in all lots."""
    return all(
        model.measures[row.on].rule.name == "linear" and level
        for row, level in zip(model.rows, level_rows(model), strict=True)
        if row.side != "exact"
    )


def _ask_step(model: OrderModel, moved: OrderModel, scales: Scales, *, in_amount: bool) -> Asking[Room | None]:
    """The greatest μ with terms·x + μ·weight ≤ 0 over the rows of ``moved``, within the house rules; with equal
    carriers that is t itself.

    μ is the last column, free.
    """
    weight_of = {
        (row.on, row.side): weight_of_scale(model, row, scale)
        for row, scale in zip(model.rows, scales.by_row, strict=True)
    }
    extra: list[tuple[Vector, Bound, Bound]] = []
    for row in moved.rows:
        if row.side == "exact":
            extra.append(((*row.terms, ZERO), ZERO, ZERO))
        else:
            extra.append(((*row.terms, weight_of[row.on, row.side]), None, ZERO))
    cost = (*((ZERO,) * len(model.lots)), -ONE)

    def program(branch: OrderModel, low: Bound, top: Bound) -> Program:
        upper = capped_upper(branch, branch.amount) if in_amount else branch.upper
        bare = replace(branch, rows=())
        step = share_program(bare, share_rows(bare), cost, upper=(*upper, top), extra=extra)
        return replace(step, lower=(*branch.lower, low))

    def ask(branch: OrderModel) -> Asking[Offer[Room] | None]:
        best = yield from ask_best(program(branch, None, None))
        if not isinstance(best, Point):
            return None
        room = Room(-best.value, best.x[: len(model.lots)], best.is_only)
        return Offer(room.shares, (best.value,), room)

    # Every blend's μ lies between the least and the greatest that one lot alone has by some row.
    alone = [-term / row[-1] for row, _, _ in extra if row[-1] for term in row[:-1]]
    guide = Guide(program(model, min(alone), max(alone)), (cost,)) if alone else None
    found = yield from ask_best_within(model, ask, guide=guide)
    return None if found is None else found.answer


def weight_of_scale(model: OrderModel, row: Row, scale: Fraction) -> Fraction:
    """The scale in index values, times the mean denominator."""
    rule = model.measures[row.on].rule
    mean = sum(row.base, ZERO) / len(row.base) or ONE
    if rule.name == "linear":
        return scale * mean
    slope = Fraction(abs(rule.slope(row.typed))).limit_denominator(10**12)
    return (scale * slope or ONE) * mean


def allowed(model: OrderModel, scales: Scales, x: Sequence[Fraction]) -> Fraction | None:
    """The greatest t at which these shares still stand; None where nothing can move or has a value."""
    least: Fraction | None = None
    used = [(i, share) for i, share in enumerate(x) if share]
    is_whole = sum(share for _, share in used) == 1
    for row, scale, is_level in zip(model.rows, scales.by_row, level_rows(model), strict=True):
        if row.side == "exact":
            continue
        base = row.base[0] if is_level and is_whole else sum((row.base[i] * share for i, share in used), ZERO)
        over = sum((row.terms[i] * share for i, share in used), ZERO)
        if base <= 0:
            return None
        rule = model.measures[row.on].rule
        index = row.bound + over / base * (-1 if row.side == "low" else 1)
        value = own_value(rule, index)
        if value is None:
            return None
        inward = value - row.typed if (row.side == "low") != rule.decreases else row.typed - value
        t = inward / scale
        least = t if least is None else min(least, t)
    return least
