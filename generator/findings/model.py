"""One order as a linear system over its usable lots.

In: a Campaign and its Table.  Out: an OrderModel with homogeneous rows g·x ≤ 0, share bounds, stock
and the lots left out with their reasons; problems of the order itself are returned beside.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from generator.findings.columns import Column, Heading, column_of, heading_of
from generator.findings.house_rules import Rules, rules_of
from generator.findings.measures import Measure
from generator.findings.records import Side
from generator.findings.values import Table
from generator.intake.records import Campaign, Limit, Order
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
    heading = heading_of(campaign, order, measures)
    columns = [column_of(campaign, order, heading, table, position) for position in range(len(campaign.lots))]
    return assembled(campaign, order, heading, columns)


def assembled(
    campaign: Campaign, order: Order, heading: Heading, columns: Sequence[Column]
) -> OrderModel | tuple[Problem, ...]:
    """The order's system from its columns, one for each lot of the campaign."""
    usable = [position for position, column in enumerate(columns) if column.reason is None]
    if heading.problem is not None:
        return (heading.problem,)
    chosen = [columns[position] for position in usable]
    lots = [column.lot for column in chosen]
    problems = _problems(order, heading, chosen)
    if problems:
        return problems
    above, below = _by_row([column.above for column in chosen]), _by_row([column.below for column in chosen])
    terms, base = _by_row([column.terms for column in chosen]), _by_row([column.base for column in chosen])
    return OrderModel(
        order=order,
        lots=tuple(usable),
        names=tuple(lot.name for lot in lots),
        lower=tuple(lot.min_share.value if lot.min_share else ZERO for lot in lots),
        upper=tuple(lot.max_share.value if lot.max_share and lot.max_share.value < 1 else None for lot in lots),
        stock=tuple(lot.stock.value if lot.stock else None for lot in lots),
        cost=tuple(lot.cost.value if lot.cost else None for lot in lots),
        limits=heading.limits,
        measures=heading.measures,
        rows=tuple(
            Row(side.on, side.side, side.bound, side.typed, own, carried)
            for side, own, carried in zip(heading.sides, terms, base, strict=True)
        ),
        numerators=dict(zip(heading.limits, above, strict=True)),
        denominators=dict(zip(heading.limits, below, strict=True)),
        left_out={column.lot.name: column.reason for column in columns if column.reason is not None},
        rules=rules_of(campaign, lots),
    )


def _by_row(columns: Sequence[tuple[Fraction, ...]]) -> list[tuple[Fraction, ...]]:
    return list(zip(*columns, strict=True))


def without_lot(model: OrderModel, name: str) -> OrderModel | None:
    """The same order with one of its lots held at a share of 0; None where that leaves no shares."""
    gone = model.names.index(name)
    lower = (*model.lower[:gone], ZERO, *model.lower[gone + 1 :])
    upper = (*model.upper[:gone], ZERO, *model.upper[gone + 1 :])
    tops = sum((Fraction(1) if top is None else top for top in upper), ZERO)
    return None if tops < 1 else replace(model, lower=lower, upper=upper)


def _problems(order: Order, heading: Heading, columns: Sequence[Column]) -> tuple[Problem, ...]:
    """Why no shares at all could be asked for, lots and limits aside."""
    lots = [column.lot for column in columns]

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
    for name in heading.limits:
        for column in columns:
            if name in column.negative:
                return (
                    problem(
                        f"the denominator of {name} is negative in lot {column.lot.name}",
                        "write the ratio so that its denominator is never negative",
                        name,
                    ),
                )
    return ()
