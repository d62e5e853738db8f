"""What would help an unreachable order: the nearest blend, and the lot that is wanted."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction

from generator.findings.ask import Asking, answered, ask_best, together
from generator.findings.house import Offer, ask_best_within
from generator.findings.measures import Measure, blend_value, own_value, reports, stated
from generator.findings.model import OrderModel, Row
from generator.findings.programs import ONE, ZERO
from generator.findings.recipes import NoSharesError, ask_best_shares
from generator.findings.records import Nearest, WantedLot
from generator.findings.room import Scales, weight_of_scale
from generator.findings.values import Table
from generator.geometry.asked import Point
from generator.geometry.program import Bound, Program, Vector
from generator.intake.records import Campaign, Component

#: Shares of the order at which a wanted lot is described.
WANTED_SHARES = (Fraction(5, 100), Fraction(10, 100), Fraction(20, 100), Fraction(30, 100))
#: The whole of a unit, for the units that can't exceed a whole.
WHOLES = {
    "%": Fraction(100),
    "g/kg": Fraction(1000),
    "ppm": Fraction(10**6),
    "g/t": Fraction(10**6),
    "mg/kg": Fraction(10**6),
    "ppb": Fraction(10**9),
}


def ask_nearest_blend(
    model: OrderModel, table: Table, measures: Mapping[str, Measure], scales: Scales
) -> Asking[Nearest | None]:
    """The blend that breaks the limits least: Σ row excess / (scale × mean carrier), exact limits too.

    Stock is aside.  Of equal ones, the one that takes the lots in file order.  None where the share bounds and
    house rules admit no blend at all, whatever its values.
    """
    n = len(model.lots)
    sides = [(row, scale, sign) for row, scale in zip(model.rows, scales.by_row, strict=True) for sign in _signs(row)]
    width = n + len(sides)
    extra: list[tuple[Vector, Bound, Bound]] = []
    for k, (row, scale, sign) in enumerate(sides):
        weight = weight_of_scale(model, row, scale)
        terms = [sign * term / weight for term in row.terms] + [ZERO] * (width - n)
        terms[n + k] = -ONE
        extra.append((tuple(terms), None, ZERO))
    excess = (*((ZERO,) * n), *((ONE,) * len(sides)))
    # Stock is aside: the counter-offer is about composition.
    freed = replace(model, rows=(), stock=(None,) * n)
    try:
        best = yield from ask_best_shares(freed, [excess], extra=extra, width=width)
    except NoSharesError:
        return None
    shares = {lot: x for lot, x in zip(model.lots, best.staged.x, strict=False) if x}
    names = dict(zip(model.lots, model.names, strict=True))
    values = {name: blend_value(measure, table, model.lots, shares) for name, measure in measures.items()}
    broken = {name: over for name in model.limits if (over := _broken_by(model, name, values[name]))}
    return Nearest(
        shares={names[lot]: float(x) for lot, x in shares.items()},
        values={name: float(value) for name, value in values.items() if value is not None},
        excess={name: float(over) for name, over in broken.items()},
    )


def _signs(row: Row) -> tuple[int, ...]:
    return (1, -1) if row.side == "exact" else (1,)


def _broken_by(model: OrderModel, name: str, value: Fraction | None) -> Fraction:
    """By how much the value leaves the limit, in its own unit."""
    limit = model.limits[name]
    if value is None:
        return ZERO
    below = ZERO if limit.low is None else limit.low - value
    above = ZERO if limit.high is None else value - limit.high
    return max(below, above, ZERO)


def ask_wanted_lots(
    campaign: Campaign, model: OrderModel, table: Table, measures: Mapping[str, Measure]
) -> Asking[tuple[WantedLot, ...]]:
    """For each share, the composition nearest to the hull that one further lot would need.

    The lot has the mean carriers of the order's lots, and is in no group; the distance is the sum of
    the components' differences over their scales.
    """
    names = _wanted_components(model, measures)
    found = yield from together(
        [_ask_wanted(campaign, model, table, measures, names, share) for share in WANTED_SHARES]
    )
    return tuple(
        WantedLot(share=float(share), values=values) for share, values in zip(WANTED_SHARES, found, strict=True)
    )


def ask_can_be_met_at_all(
    campaign: Campaign, model: OrderModel, table: Table, measures: Mapping[str, Measure]
) -> Asking[bool]:
    """Whether some composition, of any material, meets the limits on components."""
    names = _wanted_components(model, measures)
    return (yield from _ask_wanted(campaign, model, table, measures, names, ONE)) is not None


can_be_met_at_all = answered(ask_can_be_met_at_all)


def _wanted_components(model: OrderModel, measures: Mapping[str, Measure]) -> tuple[str, ...]:
    needed = {name for limit in model.limits for name in measures[limit].needs()}
    return tuple(name for name in measures if name in needed and not _is_group(measures[name]))


def _is_group(measure: Measure) -> bool:
    return measure.denominator.basis == "amount"


def _ask_wanted(
    campaign: Campaign,
    model: OrderModel,
    table: Table,
    measures: Mapping[str, Measure],
    names: Sequence[str],
    share: Fraction,
) -> Asking[dict[str, float] | None]:
    """The composition nearest to the hull, over the branches that keep apart what is kept apart."""

    def ask(branch: OrderModel) -> Asking[Offer[Vector] | None]:
        best = yield from ask_best(_wanted_program(campaign, branch, table, measures, names, share))
        if best is None:
            return None
        assert isinstance(best, Point), "a distance is at least 0"
        return Offer(best.x[: len(model.lots)], (best.value,), best.x)

    found = yield from ask_best_within(model, ask, model.rules.only_apart())
    if found is None:
        return None
    values = {}
    for k, name in enumerate(names):
        value = own_value(measures[name].rule, found.answer[len(model.lots) + k])
        if value is None:
            return None
        values[name] = float(value)
    return values


def _wanted_program(
    campaign: Campaign,
    model: OrderModel,
    table: Table,
    measures: Mapping[str, Measure],
    names: Sequence[str],
    share: Fraction,
) -> Program:
    """Columns: shares of the lots, p (the wanted composition), weights of the nearest hull point, and
    two columns of distance for each component."""
    n, d = len(model.lots), len(names)
    alone = share == 1
    width = n + d + (0 if alone else n + 2 * d)
    rows: list[tuple[Vector, Bound, Bound]] = []
    for row in model.rows:
        vector = list(row.terms) + [ZERO] * (width - n)
        constant = share * _new_lot_constant(model, measures[row.on], row, table)
        for k, name in enumerate(names):
            vector[n + k] = share * _new_lot_coefficient(model, measures[row.on], row, name, table)
        rows.append((tuple(vector), -constant if row.side == "exact" else None, -constant))
    total = ONE - share
    rows.append((tuple([ONE] * n + [ZERO] * (width - n)), total, total))
    rows.extend(_whole_rows(campaign, names, n, width))
    points = {name: [_point(measures[name], table, lot) for lot in model.lots] for name in names}
    if not alone:
        rows.append((tuple([ZERO] * (n + d) + [ONE] * n + [ZERO] * (2 * d)), ONE, ONE))
        for k, name in enumerate(names):
            scale = _component_scale(campaign, name, points[name])
            vector = [ZERO] * width
            vector[n + k] = ONE / scale
            vector[n + d : n + d + n] = [-value / scale for value in points[name]]
            vector[n + d + n + 2 * k], vector[n + d + n + 2 * k + 1] = -ONE, ONE
            rows.append((tuple(vector), ZERO, ZERO))
    ranges = [_value_range(campaign, name, points[name]) for name in names]
    rest = (None,) * (width - n - d)
    return Program(
        rows=tuple(vector for vector, _, _ in rows),
        row_low=tuple(low for _, low, _ in rows),
        row_high=tuple(high for _, _, high in rows),
        lower=(*((ZERO,) * n if alone else model.lower), *(low for low, _ in ranges), *((ZERO,) * len(rest))),
        upper=(*((ZERO,) * n if alone else model.upper), *(high for _, high in ranges), *rest),
        cost=(*((ZERO,) * (width - (0 if alone else 2 * d))), *((ONE,) * (0 if alone else 2 * d))),
    )


def _mean(values: Sequence[Fraction]) -> Fraction:
    return sum(values, ZERO) / len(values)


def _carrier_mean(model: OrderModel, table: Table, basis: str) -> Fraction:
    known = [carrier for lot in model.lots if (carrier := table.carriers[basis][lot]) is not None]
    return _mean(known) if known else ONE


def _new_lot_coefficient(model: OrderModel, measure: Measure, row: Row, name: str, table: Table) -> Fraction:
    sign = -1 if row.side == "low" else 1
    above = sum((c for n, c in measure.numerator.terms if n == name), ZERO)
    below = sum((c for n, c in measure.denominator.terms if n == name), ZERO)
    if not above and not below:
        return ZERO
    # The new lot's values stand on the basis that limits are on, so that they compare with blends.
    carrier = _carrier_mean(model, table, measure.numerator.basis)
    return sign * (above - row.bound * below) * carrier


def _new_lot_constant(model: OrderModel, measure: Measure, row: Row, table: Table) -> Fraction:
    sign = -1 if row.side == "low" else 1
    above = measure.numerator.constant * _carrier_mean(model, table, measure.numerator.basis)
    below = measure.denominator.constant * _carrier_mean(model, table, measure.denominator.basis)
    return sign * (above - row.bound * below)


def _point(measure: Measure, table: Table, lot: int) -> Fraction:
    assert reports(measure, table, lot) is None, "usable lots report what their limits need"
    return stated(measure.numerator, table, lot) / stated(measure.denominator, table, lot)


def _component(campaign: Campaign, name: str) -> Component:
    return next(component for component in campaign.components if component.name == name)


def _component_scale(campaign: Campaign, name: str, values: Sequence[Fraction]) -> Fraction:
    component = _component(campaign, name)
    if component.sd and not component.sd.relative and component.rule == "linear" and component.sd.value:
        return component.sd.value
    return (max(values) - min(values)) / 100 or ONE


def _value_range(campaign: Campaign, name: str, values: Sequence[Fraction]) -> tuple[Bound, Bound]:
    """What the wanted value may be, in index values: 0 to the unit's whole, or three lots' ranges about."""
    component = _component(campaign, name)
    span = 3 * (max(values) - min(values)) or abs(values[0]) or ONE
    if component.rule != "linear":
        return min(values) - span, max(values) + span
    low = ZERO if min(values) >= 0 else min(values) - span
    return low, WHOLES.get(component.unit)


def _whole_rows(campaign: Campaign, names: Sequence[str], n: int, width: int) -> list[tuple[Vector, Bound, Bound]]:
    """Σ of the whole's components: equal to the total where all are wanted, else at most."""
    parts = campaign.settings.whole
    asked = [name for name in parts if name in names]
    if not asked:
        return []
    vector = [ZERO] * width
    for name in asked:
        vector[n + names.index(name)] = ONE
    total = campaign.settings.whole_total
    return [(tuple(vector), total if len(asked) == len(parts) else None, total)]
