"""Recipes as they are printed: shares that sum to 100, amounts that sum to the order's, values beside limits."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations
from math import lcm

from generator import numbers
from generator.findings.records import LimitFinding, OrderFinding, Recipe
from generator.report import words
from generator.report.lookup import Lookup
from generator.report.parts import Cell, Column, Row, Table, text_cell

#: More decimals of percent than this no scale follows.
MOST_SHARE_PLACES = 3
#: So many places behind the printed ones a slack is still worth a number.
_TELLING_PLACES = 3
#: With more lots than this only the nearest rounding is tried: the others are too many.
_MOST_TRIED_LOTS = 8


@dataclass(frozen=True, slots=True, kw_only=True)
class PrintedShares:
    """Percent by lot, its decimals, and whether the limits hold with the shares as printed."""

    percent: Mapping[str, Fraction]
    places: int
    holds: bool


def printed_shares(lookup: Lookup, finding: OrderFinding, shares: Mapping[str, Fraction]) -> PrintedShares:
    """Shares rounded for print: the fewest decimals with which all limits hold as printed, if any do.

    One decimal is rounded to the nearest only; from two on each share may be rounded up or down, such
    that they sum to 100, and the nearest rounding that holds is taken.
    """
    least = min(numbers.share_places(shares.values()), MOST_SHARE_PLACES)
    held = [_held(lookup, limit, shares) for limit in finding.limits]
    for places in range(least, MOST_SHARE_PLACES + 1):
        roundings = _roundings(shares, places) if places > 1 else [numbers.percent_shares(shares, places)]
        for percent in roundings:
            units = {lot: int(share * 10**places) for lot, share in percent.items()}
            if all(_holds(limit, units) for limit in held):
                return PrintedShares(percent=percent, places=places, holds=True)
    places = max(least, 2)
    return PrintedShares(percent=numbers.percent_shares(shares, places), places=places, holds=False)


def _roundings(shares: Mapping[str, Fraction], places: int) -> Iterator[dict[str, Fraction]]:
    """Percent shares that sum to 100, each rounded up or down, the nearest (largest remainder) first."""
    nearest = numbers.percent_shares(shares, places)
    yield nearest
    unit = Fraction(1, 10**places)
    total = sum(shares.values(), Fraction(0))
    wanted = {name: share * 100 / total for name, share in shares.items()} if total else {}
    below = {name: value // unit * unit for name, value in wanted.items()}
    between = [name for name, value in wanted.items() if value != below[name]]
    if len(between) > _MOST_TRIED_LOTS:
        return
    raised = int((100 - sum(below.values(), Fraction(0))) / unit)
    choices = combinations(between, raised)
    for chosen in sorted(choices, key=lambda names: -sum(wanted[name] - below[name] for name in names)):
        percent = {name: value + (unit if name in chosen else 0) for name, value in below.items()}
        if percent != nearest and all(value > 0 for name, value in percent.items() if shares[name]):
            yield percent


@dataclass(frozen=True, slots=True)
class _Held:
    """A limit for whole numbers of shares: each of ``sides`` over a blend is 0 or more where it holds.

    ``lacking`` lots report too little; of ``below``, the denominators, only whether they come to 0 is asked.
    """

    sides: tuple[Mapping[str, int], ...]
    below: Mapping[str, int]
    lacking: frozenset[str]


def _held(lookup: Lookup, limit: LimitFinding, lots: Iterable[str]) -> _Held:
    """A limit as integer factors of the lots' shares; one in index values is kept by its value alone."""
    parts = {lot: lookup.parts(limit.on, lot) for lot in lots}
    known = {lot: found for lot, found in parts.items() if found is not None}
    lacking = frozenset(parts.keys() - known.keys())
    measure = lookup.measures.get(limit.on)
    if measure is None or measure.rule.name != "linear":
        return _Held((), {}, lacking)
    low, high = (None if bound is None else words.decimal(bound) for bound in (limit.low, limit.high))
    sides = [{lot: above - low * below for lot, (above, below) in known.items()}] if low is not None else []
    if high is not None:
        sides.append({lot: high * below - above for lot, (above, below) in known.items()})
    whole = _whole({lot: below for lot, (_, below) in known.items()})
    return _Held(tuple(_whole(side) for side in sides), whole, lacking)


def _whole(factors: Mapping[str, Fraction]) -> dict[str, int]:
    """Factors times what makes them all integers."""
    common = lcm(*(factor.denominator for factor in factors.values()))
    return {lot: factor.numerator * (common // factor.denominator) for lot, factor in factors.items()}


def _holds(held: _Held, units: Mapping[str, int]) -> bool:
    """Whether a blend of these shares is within a limit, exactly."""
    if any(units[lot] for lot in held.lacking):
        return False
    if not held.sides or sum(units[lot] * factor for lot, factor in held.below.items()) == 0:
        return True
    return all(sum(units[lot] * factor for lot, factor in side.items()) >= 0 for side in held.sides)


def recipe_table(lookup: Lookup, finding: OrderFinding, recipe: Recipe, anchor: str, caption: str, page: str) -> Table:
    """Lot, share, amount, cost: what the recipe takes, and the sums."""
    printed = printed_shares(lookup, finding, recipe.exact)
    settings = lookup.campaign.settings
    amounts = _printed_amounts(recipe)
    costs = {name: lookup.lot(name).cost for name in recipe.exact}
    has_cost = any(cost is not None for cost in costs.values())
    columns = [Column(title="Lot"), Column(title="Share", unit="%", kind="number")]
    if amounts is not None:
        columns.append(Column(title="Amount", unit=settings.quantity_unit, kind="number"))
    if has_cost:
        per = f"{settings.currency} per {settings.quantity_unit}"
        columns.append(Column(title="Lot's cost", unit=per, kind="number"))
        columns.append(Column(title="Share × cost", unit=per, kind="number"))
    rows = []
    for name, share in recipe.exact.items():
        cells = [lot_cell(lookup, name, page), text_cell(_share_text(printed, name))]
        if amounts is not None:
            cells.append(text_cell(amounts[name]))
        if has_cost:
            cost = costs[name]
            cells.append(text_cell(numbers.money(cost.value) if cost else "unknown"))
            cells.append(text_cell(numbers.money(cost.value * share) if cost else numbers.UNKNOWN))
        rows.append(Row(cells=tuple(cells)))
    rows.append(Row(cells=_recipe_totals(recipe, printed, amounts, has_cost), is_total=True))
    note = "" if printed.holds else "Shares are rounded; the exact ones, which hold every limit, stand in the proof."
    return Table(anchor=anchor, caption=caption, columns=tuple(columns), rows=tuple(rows), note=note)


def _share_text(printed: PrintedShares, name: str) -> str:
    """A share as printed; one that rounds to nothing is told as less than the last place."""
    percent = printed.percent[name]
    return (
        numbers.text(percent, printed.places)
        if percent
        else f"< {numbers.text(Fraction(1, 10**printed.places), printed.places)}"
    )


def _recipe_totals(
    recipe: Recipe, printed: PrintedShares, amounts: Mapping[str, str] | None, has_cost: bool
) -> tuple[Cell, ...]:
    cells = [text_cell("Blend"), text_cell(numbers.text(100, printed.places))]
    if amounts is not None:
        total = sum((Fraction(amount) for amount in (recipe.amounts or {}).values()), Fraction(0))
        cells.append(text_cell(numbers.text(total, amount_places(total))))
    if has_cost:
        cells.append(text_cell(""))
        cells.append(text_cell("unknown" if recipe.cost is None else numbers.money(recipe.cost)))
    return tuple(cells)


amount_places = numbers.amount_places


def _printed_amounts(recipe: Recipe) -> dict[str, str] | None:
    """Amounts by lot as text, which sum to the order's amount as printed."""
    if recipe.amounts is None:
        return None
    total = sum((Fraction(amount) for amount in recipe.amounts.values()), Fraction(0))
    places = amount_places(total)
    rounded = Fraction(round(total * 10**places), 10**places)
    parts = numbers.apportioned(recipe.exact, rounded, places)
    return {name: numbers.text(part, places) for name, part in parts.items()}


def lot_cell(lookup: Lookup, name: str, page: str) -> Cell:
    """A lot's name, leading to its page, with the sign of its role."""
    found = lookup.lot_findings.get(name)
    mark = found.role if found and found.role else ""
    href = lookup.link(page, lookup.lot_addresses.get(name, ""))
    return Cell(text=name, href=href, mark=mark, key=lot_key(name))


def lot_key(name: str) -> str:
    """What rows and marks of a lot are found by."""
    return f"lot {name}"


def limit_cell(lookup: Lookup, quantity: str) -> Cell:
    """A limited quantity's label and unit, as the first cell of a row."""
    return text_cell(lookup.name_with_unit(quantity), key=limit_key(lookup, quantity))


def limit_key(lookup: Lookup, quantity: str) -> str:
    """What rows and marks of a limit are found by."""
    return f"limit {lookup.labels.get(quantity, quantity)}"


def values_table(
    lookup: Lookup, finding: OrderFinding, values: Mapping[str, float], anchor: str, caption: str, value_title: str
) -> Table:
    """Each limit with what a blend has, and what is to spare."""
    rows = []
    for limit in finding.limits:
        places, value = lookup.places.get(limit.on, 2), values.get(limit.on)
        spare = None if value is None else spare_of(limit, value)
        is_broken = spare is not None and spare < 0
        rows.append(
            Row(
                cells=(
                    limit_cell(lookup, limit.on),
                    text_cell(words.window(limit.low, limit.high)),
                    text_cell(
                        numbers.UNKNOWN if value is None else words.beside(value, limit.low, limit.high, places),
                        tone="bad" if is_broken else "",
                    ),
                    text_cell(_spare_text(spare, places), tone="bad" if is_broken else ""),
                )
            )
        )
    columns = (
        Column(title="Limit"),
        Column(title="Asked", kind="number"),
        Column(title=value_title, kind="number"),
        Column(title="To spare", kind="number"),
    )
    return Table(anchor=anchor, caption=caption, columns=columns, rows=tuple(rows))


def spare_of(limit: LimitFinding, value: float) -> float:
    """How far a value is inside its limit (negative: outside)."""
    sides = [value - limit.low] if limit.low is not None else []
    if limit.high is not None:
        sides.append(limit.high - value)
    return min(sides, default=0.0)


def _spare_text(spare: float | None, places: int) -> str:
    if spare is None:
        return numbers.UNKNOWN
    if abs(spare) < 1e-9:
        return "none"
    if round(Fraction(spare), places):
        return numbers.text(spare, places)
    return numbers.significant(spare, 1) if round(Fraction(spare), places + _TELLING_PLACES) else "almost none"
