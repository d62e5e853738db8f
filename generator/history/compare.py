"""What changed between the answers of two revisions: a pure function of two Findings.

``changes(a, a) == ()``.  A difference counts as a change when it shows at the precision that pages
print; an answer that an older program did not give (null) is no change.  In a sentence the newer
answer comes first.
"""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import asdict, dataclass
from typing import Literal, get_args

from generator import numbers
from generator.findings.records import Findings, HullFinding, LotFinding, OrderFinding, Plan, Recipe

Kind = Literal[
    "verdict",
    "order gone",
    "order new",
    "accepted",
    "amount",
    "cost",
    "room",
    "recipe",
    "lot gone",
    "lot new",
    "role",
    "hull",
]
Value = str | float | None

#: Gravest first: the order in which changes are listed, and from which the headline is taken.
_GRAVITY: tuple[Kind, ...] = get_args(Kind)
_BETTER_FIRST = ("makeable", "edge", "short", "barred", "unreachable", None)
#: Costs and amounts are told to so many significant digits, enough to see a change worth telling.
_DIGITS = 5
_ROOM_DIGITS = 3
#: A recipe has moved when a share did by as much as pages print: 0.1 %.
_SHARE_MOVED = 0.001

NO_CHANGE = "No answer changed."
FIRST = "First answers."


@dataclass(frozen=True, slots=True, kw_only=True)
class Change:
    """One answer that differs: of which order, lot or hull, what it was and what it is."""

    kind: Kind
    subject: str
    old: Value
    new: Value
    sentence: str


def changes(old: Findings, new: Findings) -> tuple[Change, ...]:
    """Every answer that differs, gravest kind first, then in the order of the newer findings."""
    found = [
        *_order_changes(old, new),
        *_plan_changes(old.plan, new.plan, new.quantity_unit),
        *_lot_changes(old.lots, new.lots),
        *_hull_changes(old.hulls, new.hulls),
    ]
    return tuple(sorted(found, key=lambda change: (_GRAVITY.index(change.kind), _loss(change))))


def headline(found: Sequence[Change]) -> str:
    """One sentence for a list of changes: the gravest one, and how many more there are."""
    if not found:
        return NO_CHANGE
    more = len(found) - 1
    if more == 0:
        return found[0].sentence
    return f"{found[0].sentence.removesuffix('.')}, and {more} more change{'s' if more > 1 else ''}."


def to_bytes(found: Iterable[Change]) -> bytes:
    """Make the content of ``changes.json``."""
    return json.dumps([asdict(change) for change in found], indent=1, ensure_ascii=False).encode() + b"\n"


def from_bytes(data: bytes) -> tuple[Change, ...]:
    """Read what :func:`to_bytes` made; ValueError if it is something else."""
    try:
        return tuple(Change(**item) for item in json.loads(data))
    except TypeError as error:
        raise ValueError("changes.json is not a list of changes") from error


def _loss(change: Change) -> int:
    """Lost verdicts come before gained ones; of other kinds all are alike."""
    if change.kind != "verdict":
        return 0
    return 0 if _rank(change.new) > _rank(change.old) else 1


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
        *_recipe_changes(old, new, f" {findings.currency} per {findings.quantity_unit}"),
        *_room_changes(old, new),
    ]


def _amount_changes(old: OrderFinding, new: OrderFinding, unit: str) -> list[Change]:
    """Tell of the greatest amount; null is "no bound"."""
    before, after = old.greatest_amount, new.greatest_amount
    if (before is None) == (after is None):
        return _moved("amount", new.order, "greatest amount", before, after, f" {unit}", _DIGITS)
    if after is None:
        sentence = f"Order {new.order}: the amount has no bound now."
    else:
        amount = numbers.significant(after, _DIGITS)
        sentence = f"Order {new.order}: the greatest amount is now {amount} {unit}; it had no bound."
    return [Change(kind="amount", subject=new.order, old=before, new=after, sentence=sentence)]


def _recipe_changes(old: OrderFinding, new: OrderFinding, unit: str) -> list[Change]:
    """Tell of the cheapest recipe: its cost (null is "not known"), and the share that moved most."""
    before, after = old.recipes.get("cheapest"), new.recipes.get("cheapest")
    if before is None or after is None:
        return []
    return [*_cost_changes(new.order, before.cost, after.cost, unit), *_share_changes(new.order, before, after)]


def _cost_changes(order: str, before: float | None, after: float | None, unit: str) -> list[Change]:
    if (before is None) == (after is None):
        return _moved("cost", order, "cheapest cost", before, after, unit, _DIGITS)
    if after is None:
        sentence = f"Order {order}: the cheapest cost is not known any more."
    else:
        sentence = f"Order {order}: the cheapest cost is now known: {numbers.significant(after, _DIGITS)}{unit}."
    return [Change(kind="cost", subject=order, old=before, new=after, sentence=sentence)]


def _share_changes(order: str, before: Recipe, after: Recipe) -> list[Change]:
    lots = dict.fromkeys([*after.shares, *before.shares])
    moves = {lot: after.shares.get(lot, 0.0) - before.shares.get(lot, 0.0) for lot in lots}
    most = max(moves, key=lambda lot: abs(moves[lot]), default=None)
    if most is None or abs(moves[most]) < _SHARE_MOVED:
        return []
    was, now = before.shares.get(most, 0.0), after.shares.get(most, 0.0)
    shown = f"{numbers.text(100 * now, 1)} % from {numbers.text(100 * was, 1)} %"
    sentence = f"Order {order}: the cheapest recipe moved, most of all lot {most}, to {shown}."
    return [Change(kind="recipe", subject=order, old=was, new=now, sentence=sentence)]


def _room_changes(old: OrderFinding, new: OrderFinding) -> list[Change]:
    if old.room_unit != new.room_unit:
        return []
    unit = " sd" if new.room_unit == "sd" else ""
    return _moved("room", new.order, "room", old.room, new.room, unit, _ROOM_DIGITS)


def _moved(
    kind: Kind, order: str, what: str, old: float | None, new: float | None, unit: str, digits: int
) -> list[Change]:
    """Tell of a number that was known and is known, and prints differently."""
    if old is None or new is None:
        return []
    before, after = numbers.significant(old, digits), numbers.significant(new, digits)
    if before == after:
        return []
    direction = "rose" if new > old else "fell"
    sentence = f"Order {order}: {what} {direction} to {after}{unit} from {before}{unit}."
    return [Change(kind=kind, subject=order, old=old, new=new, sentence=sentence)]


def _plan_changes(old: Plan | None, new: Plan | None, unit: str) -> list[Change]:
    """Tell what the plan gives each order that both plans know."""
    if old is None or new is None:
        return []
    found: list[Change] = []
    for name, planned in new.orders.items():
        if name in old.orders:
            was = old.orders[name].accepted
            found += _moved("accepted", name, "amount in the plan", was, planned.accepted, f" {unit}", _DIGITS)
    return found


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
    """Tell of hulls over the same components whose dimension changed."""
    before = {(hull.basis, hull.over): hull.dimension for hull in old}
    found: list[Change] = []
    for hull in new:
        was = before.get((hull.basis, hull.over))
        if was is not None and was != hull.dimension:
            over = ", ".join(hull.over)
            sentence = (
                f"The hull over {over} ({hull.basis}) is now of dimension {hull.dimension}; it was of dimension {was}."
            )
            found.append(Change(kind="hull", subject=over, old=was, new=hull.dimension, sentence=sentence))
    return found
