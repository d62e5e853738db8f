"""What changed between the answers of two revisions: a pure function of two Findings.

``changes(a, a) == ()``.  A difference counts as a change when it shows at the precision that pages
print, a share when it moved by at least ``SHARE_MOVED``; an answer that an older program did not give
(null) is no change.  In a sentence the newer answer comes first.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import TypeVar

from generator import numbers
from generator.findings.records import Findings, HullFinding, LotFinding, OrderFinding, Plan, Recipe
from generator.history.records import GRAVITY, Change, ChangeKind, Value

_BETTER_FIRST = ("makeable", "edge", "short", "barred", "unreachable", None)
_ROOM_DIGITS = 3
#: From here on hundredths of money say nothing.
_WHOLE_FROM = 10_000
_VOLUME_DIGITS = 4
#: The unit of a difference of probabilities.
PERCENT = "percentage points"
#: A recipe has moved when a share did by as much as pages print: 0.1 %.
SHARE_MOVED = 0.001

_Value = TypeVar("_Value")


def changes(
    old: Findings,
    new: Findings,
    *,
    renamed_orders: Mapping[str, str] | None = None,
    renamed_lots: Mapping[str, str] | None = None,
) -> tuple[Change, ...]:
    """Every answer that differs, gravest kind first, then in the order of the newer findings.

    Orders and lots that were renamed (older name → newer) are compared under their newer names.
    """
    old = _under_new_names(old, renamed_orders or {}, renamed_lots or {})
    found = [
        *_order_changes(old, new),
        *_plan_changes(old.plan, new.plan, new),
        *_lot_changes(old.lots, new.lots),
        *_hull_changes(old.hulls, new.hulls),
    ]
    return tuple(sorted(found, key=lambda change: (GRAVITY.index(change.kind), _loss(change))))


def is_lost(change: Change) -> bool:
    """Whether a changed verdict is worse than it was."""
    return change.kind == "verdict" and _rank(change.new) > _rank(change.old)


def _under_new_names(old: Findings, orders: Mapping[str, str], lots: Mapping[str, str]) -> Findings:
    """The older findings with renamed orders and lots under their newer names, where answers are compared."""
    if not orders and not lots:
        return old
    renamed = [replace(order, order=orders.get(order.order, order.order)) for order in old.orders]
    plan = old.plan
    return replace(
        old,
        orders=tuple(
            replace(order, recipes={name: _recipe_under(recipe, lots) for name, recipe in order.recipes.items()})
            for order in renamed
        ),
        lots=tuple(replace(lot, lot=lots.get(lot.lot, lot.lot)) for lot in old.lots),
        hulls=tuple(replace(hull, corners=tuple(lots.get(lot, lot) for lot in hull.corners)) for hull in old.hulls),
        plan=None if plan is None else replace(plan, orders=_keys_renamed(plan.orders, orders)),
    )


def _recipe_under(recipe: Recipe, lots: Mapping[str, str]) -> Recipe:
    return replace(recipe, shares=_keys_renamed(recipe.shares, lots))


def _keys_renamed(mapping: Mapping[str, _Value], names: Mapping[str, str]) -> dict[str, _Value]:
    return {names.get(key, key): value for key, value in mapping.items()}


def _loss(change: Change) -> int:
    """Lost verdicts come before gained ones; of other kinds all are alike."""
    return 0 if change.kind != "verdict" or is_lost(change) else 1


def _rank(verdict: Value) -> int:
    return _BETTER_FIRST.index(verdict) if isinstance(verdict, str) else len(_BETTER_FIRST)


def _order_changes(old: Findings, new: Findings) -> list[Change]:
    before, after = {order.order: order for order in old.orders}, {order.order: order for order in new.orders}
    found = [_appeared(order) for name, order in after.items() if name not in before]
    found += [_gone(order) for name, order in before.items() if name not in after]
    for name, order in after.items():
        if name in before:
            found += _one_order(before[name], order, new)
    return found


def _appeared(order: OrderFinding) -> Change:
    answer = order.verdict or "without an answer"
    return Change(
        kind="order new",
        subject=order.order,
        old=None,
        new=order.verdict,
        sentence=f"Order {order.order} is new: {answer}.",
    )


def _gone(order: OrderFinding) -> Change:
    was = f" It was {order.verdict}." if order.verdict else ""
    return Change(
        kind="order gone",
        subject=order.order,
        old=order.verdict,
        new=None,
        sentence=f"Order {order.order} is no longer in the campaign.{was}",
    )


def _one_order(old: OrderFinding, new: OrderFinding, findings: Findings) -> list[Change]:
    name = new.order
    if old.verdict != new.verdict:
        is_now = f"is now {new.verdict}" if new.verdict else "has no answer now"
        was = f"it was {old.verdict}" if old.verdict else "it had no answer"
        sentence = f"Order {name} {is_now}; {was}."
        return [Change(kind="verdict", subject=name, old=old.verdict, new=new.verdict, sentence=sentence)]
    if new.verdict is None:
        return []
    return [
        *_amount_changes(old, new, findings.quantity_unit),
        *_recipe_changes(old, new, f"{findings.currency} per {findings.quantity_unit}"),
        *_room_changes(old, new),
    ]


def _amount_changes(old: OrderFinding, new: OrderFinding, unit: str) -> list[Change]:
    """Tell of the greatest amount; null is "no bound"."""
    before, after = old.greatest_amount, new.greatest_amount
    places = _amount_places(before, after)
    if (before is None) == (after is None):
        return _moved("amount", f"Order {new.order}: greatest amount", new.order, before, after, unit, places)
    if after is None:
        sentence = f"Order {new.order}: the amount has no bound now."
    else:
        amount = numbers.text(after, places)
        sentence = f"Order {new.order}: the greatest amount is now {amount} {unit}; it had no bound."
    return [Change(kind="amount", subject=new.order, old=before, new=after, sentence=sentence)]


def _recipe_changes(old: OrderFinding, new: OrderFinding, unit: str) -> list[Change]:
    """Tell of the cheapest recipe: its cost (null is "not known"), and the share that moved most."""
    before, after = old.recipes.get("cheapest"), new.recipes.get("cheapest")
    if before is None or after is None:
        return []
    return [
        *_cost_changes(new.order, before.cost, after.cost, unit),
        *_conformity_changes(new.order, before.conformity.all, after.conformity.all),
        *_share_changes(new.order, before, after),
    ]


def _conformity_changes(order: str, before: float | None, after: float | None) -> list[Change]:
    if before is None or after is None:
        return []
    was, now = numbers.text(100 * before, 1), numbers.text(100 * after, 1)
    if was == now:
        return []
    sentence = f"Order {order}: the cheapest recipe holds all limits with {now} %; it was {was} %."
    return [Change(kind="conformity", subject=order, old=before, new=after, sentence=sentence, unit=PERCENT, places=1)]


def _cost_changes(order: str, before: float | None, after: float | None, unit: str) -> list[Change]:
    places = _cost_places(before, after)
    if (before is None) == (after is None):
        return _moved("cost", f"Order {order}: cheapest cost", order, before, after, unit, places)
    if after is None:
        sentence = f"Order {order}: the cheapest cost is not known any more."
    else:
        sentence = f"Order {order}: the cheapest cost is now known: {numbers.text(after, places)} {unit}."
    return [Change(kind="cost", subject=order, old=before, new=after, sentence=sentence)]


def _share_changes(order: str, before: Recipe, after: Recipe) -> list[Change]:
    lots = dict.fromkeys([*after.shares, *before.shares])
    moves = {lot: after.shares.get(lot, 0.0) - before.shares.get(lot, 0.0) for lot in lots}
    moved = [lot for lot, by in moves.items() if abs(by) >= SHARE_MOVED]
    if not moved:
        return []
    most = max(moved, key=lambda lot: abs(moves[lot]))
    was, now = before.shares.get(most, 0.0), after.shares.get(most, 0.0)
    shown = f"{numbers.text(100 * now, 1)} % from {numbers.text(100 * was, 1)} %"
    others = f" ({len(moved)} lots moved)" if len(moved) > 2 else ""
    sentence = f"Order {order}: the cheapest recipe moved, most of all lot {most}, to {shown}{others}."
    return [Change(kind="recipe", subject=order, old=was, new=now, sentence=sentence)]


def _room_changes(old: OrderFinding, new: OrderFinding) -> list[Change]:
    if old.room_unit != new.room_unit:
        return []
    # Only where every limit's standard deviation is known is it counted in these.
    unit = "sd" if new.room_unit == "sd" else "scale steps"
    places = _room_places(old.room, new.room)
    return _moved("room", f"Order {new.order}: room", new.order, old.room, new.room, unit, places)


def _moved(
    kind: ChangeKind, what: str, subject: str, old: float | None, new: float | None, unit: str, places: int
) -> list[Change]:
    """Tell of a number that was known and is known, and prints differently."""
    if old is None or new is None:
        return []
    before, after = numbers.text(old, places), numbers.text(new, places)
    if before == after:
        return []
    direction = "rose" if new > old else "fell"
    sentence = f"{what} {direction} to {after} {unit} from {before} {unit}."
    return [Change(kind=kind, subject=subject, old=old, new=new, sentence=sentence, unit=unit, places=places)]


def _amount_places(*amounts: float | None) -> int:
    """Decimals in which amounts are told, as pages print the greater one."""
    return numbers.amount_places(max((abs(amount) for amount in amounts if amount is not None), default=0.0))


def _cost_places(*costs: float | None) -> int:
    """Decimals in which a cost is told: two, as pages print it, more where that would leave less than two digits."""
    greatest = max((abs(cost) for cost in costs if cost is not None), default=0.0)
    return max(2, numbers.amount_places(greatest) - 2)


def _room_places(old: float | None, new: float | None) -> int:
    """Decimals in which rooms are told: those of the greater one to three digits, more where only more tell them
    apart and pages do."""
    if old is None or new is None:
        return 0
    known: list[float] = [old, new]
    less, greater = (_behind_point(numbers.significant(room, _ROOM_DIGITS)) for room in sorted(known, key=abs))
    return greater if numbers.text(old, greater) != numbers.text(new, greater) else max(less, greater)


def _behind_point(text: str) -> int:
    return len(text.partition(".")[2])


def _plan_changes(old: Plan | None, new: Plan | None, findings: Findings) -> list[Change]:
    """Tell what the plan gives each order that both plans know, and what it is worth in all."""
    if old is None or new is None:
        return []
    found: list[Change] = []
    unit = findings.quantity_unit
    for name, planned in new.orders.items():
        if name in old.orders:
            was, now = old.orders[name].accepted, planned.accepted
            what = f"Order {name}: amount in the plan"
            found += _moved("accepted", what, name, was, now, unit, _amount_places(was, now))
    return [*found, *_plan_value(old, new, findings)]


def _plan_value(old: Plan, new: Plan, findings: Findings) -> list[Change]:
    if old.measure != new.measure or old.value is None or new.value is None:
        return []
    if new.measure == "amount":
        what, unit, places = "the amount accepted in all", findings.quantity_unit, _amount_places(old.value, new.value)
    else:
        is_great = max(abs(old.value), abs(new.value)) >= _WHOLE_FROM
        what, unit, places = "its value", findings.currency, 0 if is_great else 2
    return _moved("plan", f"The plan: {what}", "", old.value, new.value, unit, places)


def _lot_changes(old: Sequence[LotFinding], new: Sequence[LotFinding]) -> list[Change]:
    before, after = _by_name(old), _by_name(new)
    found = [
        Change(kind="lot new", subject=name, old=None, new=lot.role, sentence=f"Lot {name} is new{_as_role(lot)}.")
        for name, lot in after.items()
        if name not in before
    ]
    found += [
        Change(kind="lot gone", subject=name, old=lot.role, new=None, sentence=f"Lot {name} is no longer there.")
        for name, lot in before.items()
        if name not in after
    ]
    for name, lot in after.items():
        was = before[name].role if name in before else None
        if was and lot.role and was != lot.role:
            sentence = f"Lot {name} is now {_article(lot.role)}; it was {_article(was)}."
            found.append(Change(kind="role", subject=name, old=was, new=lot.role, sentence=sentence))
    return found


def _by_name(lots: Sequence[LotFinding]) -> Mapping[str, LotFinding]:
    return {lot.lot: lot for lot in lots}


def _as_role(lot: LotFinding) -> str:
    return f", {_article(lot.role)}" if lot.role else ""


def _article(role: str) -> str:
    return {"corner": "a corner lot", "inner": "an inner lot"}[role]


def _hull_changes(old: Sequence[HullFinding], new: Sequence[HullFinding]) -> list[Change]:
    """Tell of hulls over the same components: their dimension, corners gained and lost, their volume."""
    before = {(hull.basis, hull.over): hull for hull in old}
    found: list[Change] = []
    for hull in new:
        was = before.get((hull.basis, hull.over))
        if was is not None:
            found += _one_hull(was, hull)
    return found


def _one_hull(old: HullFinding, new: HullFinding) -> list[Change]:
    over = ", ".join(new.over)
    name = f"The hull over {over} ({new.basis})"
    found: list[Change] = []
    if old.dimension != new.dimension:
        sentence = f"{name} is now of dimension {new.dimension}; it was of dimension {old.dimension}."
        found.append(Change(kind="hull", subject=over, old=old.dimension, new=new.dimension, sentence=sentence))
    lost = ", ".join(lot for lot in old.corners if lot not in new.corners)
    gained = ", ".join(lot for lot in new.corners if lot not in old.corners)
    if lost or gained:
        said = [f"gained {gained} as a corner" if gained else "", f"lost {lost}" if lost else ""]
        sentence = f"{name} {' and '.join(part for part in said if part)}."
        found.append(Change(kind="hull", subject=over, old=lost or None, new=gained or None, sentence=sentence))
    return found + _volume_changes(name, over, old.volume, new.volume)


def _volume_changes(name: str, over: str, old: float | None, new: float | None) -> list[Change]:
    if old is None or new is None:
        return []
    before, after = numbers.significant(old, _VOLUME_DIGITS), numbers.significant(new, _VOLUME_DIGITS)
    if before == after:
        return []
    sentence = f"{name}: its volume {'grew' if new > old else 'shrank'} to {after} from {before}."
    return [Change(kind="volume", subject=over, old=old, new=new, sentence=sentence)]
