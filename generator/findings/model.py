"""One order as a linear system over its usable lots.

In: a Campaign and its Table.  Out: an OrderModel with homogeneous rows g·x ≤ 0, share bounds, stock
and the lots left out with their reasons; problems of the order itself are returned beside.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from generator.findings.house_rules import Rules, holds_both, rules_of
from generator.findings.measures import Measure, excess, reports, stated, stated_forms
from generator.findings.records import Side
from generator.findings.rules import OutsideDomain
from generator.findings.values import Table
from generator.intake.patterns import matches
from generator.intake.records import Campaign, Limit, Lot, Order
from generator.problems import Problem

ZERO = Fraction(0)
HUNDRED = Fraction(100)


@dataclass(frozen=True, slots=True)
class Row:
    """One side of one limit: Σ terms·x ≤ 0 (= 0 if exact), one term for each usable lot.

    ``bound`` is in index values, ``typed`` in the quantity's own unit.  ``base`` is by how much the
    terms fall (side low: rise) for one unit more of ``bound``: the denominators as this row takes them.
    """

    on: str
    side: Side
    bound: Fraction
    typed: Fraction
    terms: tuple[Fraction, ...]
    base: tuple[Fraction, ...]

    def moved(self, bound: Fraction, typed: Fraction) -> Row:
        """The row of another bound of the same limit side."""
        step = (bound - self.bound) * (1 if self.side == "low" else -1)
        terms = tuple(term + step * base for term, base in zip(self.terms, self.base, strict=True))
        return replace(self, bound=bound, typed=typed, terms=terms)


@dataclass(frozen=True, slots=True, kw_only=True)
class OrderModel:
    """An order over its n usable lots; all tuples have n entries, ``rows`` one entry a limit side.

    ``lots`` are positions in the campaign; ``upper`` and ``stock`` None: no bound.  ``numerators`` and
    ``denominators`` by limited quantity are stated values, in ``limits`` order.
    """

    order: Order
    lots: tuple[int, ...]
    names: tuple[str, ...]
    lower: tuple[Fraction, ...]
    upper: tuple[Fraction | None, ...]
    stock: tuple[Fraction | None, ...]
    cost: tuple[Fraction | None, ...]
    limits: Mapping[str, Limit]
    measures: Mapping[str, Measure]
    rows: tuple[Row, ...]
    numerators: Mapping[str, tuple[Fraction, ...]]
    denominators: Mapping[str, tuple[Fraction, ...]]
    left_out: Mapping[str, str]
    rules: Rules

    @property
    def amount(self) -> Fraction | None:
        """The amount T that the verdict is about; None: stock aside."""
        return self.order.amount.low if self.order.amount else None

    @property
    def has_share_bounds(self) -> bool:
        """Whether a lot's share has a bound other than 0 to 1."""
        return any(self.lower) or any(bound is not None for bound in self.upper)


def model_of(
    campaign: Campaign,
    order: Order,
    table: Table,
    measures: Mapping[str, Measure],
) -> OrderModel | tuple[Problem, ...]:
    """The order's system, or the problems for which it has none."""
    limits = _limits(campaign, order, measures)
    left_out: dict[str, str] = {}
    usable: list[int] = []
    for position, lot in enumerate(campaign.lots):
        reason = _excluded(campaign, order, lot, limits) or _lacking(limits, measures, table, position)
        if reason is None:
            usable.append(position)
        else:
            left_out[lot.name] = reason
    try:
        bounds = {name: _index_bounds(measures[name], limit) for name, limit in limits.items()}
    except _UnfitLimit as unfit:
        return (unfit.problem,)
    lots = [campaign.lots[position] for position in usable]
    problems = _problems(order, lots, limits, measures, table, usable)
    if problems:
        return problems
    forms = {name: _Forms.of(measures[name], table, usable) for name in limits}
    return OrderModel(
        order=order,
        lots=tuple(usable),
        names=tuple(lot.name for lot in lots),
        lower=tuple(lot.min_share.value if lot.min_share else ZERO for lot in lots),
        upper=tuple(lot.max_share.value if lot.max_share and lot.max_share.value < 1 else None for lot in lots),
        stock=tuple(lot.stock.value if lot.stock else None for lot in lots),
        cost=tuple(lot.cost.value if lot.cost else None for lot in lots),
        limits=limits,
        measures=measures,
        rows=tuple(row for name in limits for row in _rows(limits[name], bounds[name], forms[name])),
        numerators={name: own.above for name, own in forms.items()},
        denominators={name: own.below for name, own in forms.items()},
        left_out=left_out,
        rules=rules_of(campaign, lots),
    )


def without_lot(model: OrderModel, name: str) -> OrderModel | None:
    """The same order with one of its lots held at a share of 0; None where that leaves no shares."""
    gone = model.names.index(name)
    lower = (*model.lower[:gone], ZERO, *model.lower[gone + 1 :])
    upper = (*model.upper[:gone], ZERO, *model.upper[gone + 1 :])
    tops = sum((Fraction(1) if top is None else top for top in upper), ZERO)
    return None if tops < 1 else replace(model, lower=lower, upper=upper)


def _limits(campaign: Campaign, order: Order, measures: Mapping[str, Measure]) -> dict[str, Limit]:
    """The order's limits and the group shares that hold for all orders, the tighter side of both."""
    limits = {name: limit for name, limit in order.limits.items() if name in measures}
    for group in campaign.groups:
        if group.share is None:
            continue
        own = limits.get(group.name)
        limits[group.name] = group.share if own is None else _tighter(own, group.share)
    return limits


def _tighter(one: Limit, other: Limit) -> Limit:
    lows = [low for low in (one.low, other.low) if low is not None]
    highs = [high for high in (one.high, other.high) if high is not None]
    return Limit(
        low=max(lows, default=None), high=min(highs, default=None), aim=one.aim, text=one.text, place=one.place
    )


def _excluded(campaign: Campaign, order: Order, lot: Lot, limits: Mapping[str, Limit]) -> str | None:
    """Why the lot may not be used in this order at all, or None."""
    if lot.stock is not None and lot.stock.value == 0:
        return "stock is 0"
    if order.only_lots and not any(matches(pattern, lot) for pattern in order.only_lots):
        return "not among the order's lots"
    if any(matches(pattern, lot) for pattern in order.without_lots):
        return "excluded by the order"
    if lot.available and order.due and order.due < lot.available:
        return f"not available before {lot.available.isoformat()}"
    if lot.max_share is not None and lot.max_share.value == 0:
        return "its greatest share is 0"
    both = holds_both(campaign, lot)
    if both is not None:
        return f"it is both {both[0]} and {both[1]}, which are kept apart"
    for group in campaign.groups:
        limit = limits.get(group.name)
        if limit is not None and limit.high == 0 and lot.name in group.lots:
            return f"{group.label} may not be used"
    return None


def _lacking(limits: Mapping[str, Limit], measures: Mapping[str, Measure], table: Table, lot: int) -> str | None:
    for name in limits:
        if stated_forms(measures[name], table)[lot] is not None:
            continue
        missing = reports(measures[name], table, lot)
        if missing is not None:
            return f"{missing} not reported"
    return None


class _UnfitLimit(Exception):  # noqa: N818  (carries a problem to its only catcher above)
    def __init__(self, problem: Problem) -> None:
        super().__init__(problem.message)
        self.problem = problem


def _index_bounds(measure: Measure, limit: Limit) -> tuple[Fraction | None, Fraction | None]:
    """Low and high in index values, flipped where the index decreases."""
    try:
        low = None if limit.low is None else measure.rule.index(limit.low)
        high = None if limit.high is None else measure.rule.index(limit.high)
    except OutsideDomain as outside:
        place = limit.place
        raise _UnfitLimit(
            Problem(
                file=place.file if place else "targets.csv",
                row=place.row if place else None,
                column=place.column if place else measure.name,
                found=limit.text,
                message=f"a limit under the blend rule {measure.rule.name!r} {outside}",
                remedy="write a limit inside the rule's domain",
                severity="drops",
            )
        ) from outside
    return (high, low) if measure.rule.decreases else (low, high)


@dataclass(frozen=True, slots=True)
class _Forms:
    """A limited quantity over the usable lots: stated numerators and denominators, and whether every value
    counts as stated, whichever side of a limit it stands on."""

    measure: Measure
    table: Table
    lots: Sequence[int]
    above: tuple[Fraction, ...]
    below: tuple[Fraction, ...]
    is_plain: bool

    @staticmethod
    def of(measure: Measure, table: Table, lots: Sequence[int]) -> _Forms:
        values = [table.values[name][lot] for name in measure.needs() for lot in lots]
        forms = stated_forms(measure, table)
        known = [form for lot in lots if (form := forms[lot]) is not None]
        assert len(known) == len(lots), "usable lots report what their limits need"
        return _Forms(
            measure,
            table,
            lots,
            tuple(above for above, _ in known),
            tuple(below for _, below in known),
            all(value is None or value.least == value.stated == value.most for value in values),
        )

    def row(self, side: Side, bound: Fraction, typed: Fraction) -> Row:
        """The row of one side."""
        sign = -1 if side == "low" else 1
        if self.is_plain or side == "exact":
            terms = tuple(sign * (n - bound * d) for n, d in zip(self.above, self.below, strict=True))
            return Row(self.measure.name, side, bound, typed, terms, self.below)
        terms = tuple(excess(self.measure, bound, side, self.table, lot) for lot in self.lots)
        further = (excess(self.measure, bound + 1, side, self.table, lot) for lot in self.lots)
        base = tuple(-sign * (more - term) for more, term in zip(further, terms, strict=True))
        return Row(self.measure.name, side, bound, typed, terms, base)


def _rows(limit: Limit, bounds: tuple[Fraction | None, Fraction | None], forms: _Forms) -> list[Row]:
    low, high = bounds
    typed_low, typed_high = (limit.high, limit.low) if forms.measure.rule.decreases else (limit.low, limit.high)
    sides: list[tuple[Side, Fraction, Fraction | None]] = []
    if low is not None and low == high:
        sides.append(("exact", low, typed_low))
    else:
        if low is not None:
            sides.append(("low", low, typed_low))
        if high is not None:
            sides.append(("high", high, typed_high))
    return [forms.row(side, bound, bound if typed is None else typed) for side, bound, typed in sides]


def _problems(
    order: Order,
    lots: Sequence[Lot],
    limits: Mapping[str, Limit],
    measures: Mapping[str, Measure],
    table: Table,
    usable: Sequence[int],
) -> tuple[Problem, ...]:
    def problem(message: str, remedy: str, column: str | None = None) -> Problem:
        return Problem(
            file=order.place.file,
            row=order.place.row,
            column=column,
            found=order.name,
            message=message,
            remedy=remedy,
            severity="drops",
        )

    if not lots:
        return (problem("no lot may be used for this order", "allow lots, or add some that report its limits"),)
    forced = sum((lot.min_share.value for lot in lots if lot.min_share), ZERO)
    if forced > 1:
        total = f"{float(forced * HUNDRED):g} %"
        return (problem(f"the least shares of its lots add up to {total}", "lower a min share"),)
    capped = [lot.max_share.value if lot.max_share else Fraction(1) for lot in lots]
    if sum(capped, ZERO) < 1:
        total = f"{float(sum(capped, ZERO) * HUNDRED):g} %"
        return (problem(f"the greatest shares of its lots add up to only {total}", "raise a max share"),)
    for name in limits:
        if not measures[name].is_ratio:
            continue
        for position, lot in zip(usable, lots, strict=True):
            if stated(measures[name].denominator, table, position) < 0:
                return (
                    problem(
                        f"the denominator of {name} is negative in lot {lot.name}",
                        "write the ratio so that its denominator is never negative",
                        name,
                    ),
                )
    return ()
