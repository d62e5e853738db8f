"""What would make an order possible, what more room costs, and what lots and limits are worth."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

from generator import numbers
from generator.findings.records import LimitFinding, OrderFinding, Range
from generator.report import words
from generator.report.figures import curve
from generator.report.figures.canvas import finished
from generator.report.lookup import Lookup
from generator.report.parts import Cell, Column, FigureView, Row, Section, Table, aligned, text_cell
from generator.report.shares import limit_cell, lot_cell, values_table

#: With more lots than this the shares of the curve's recipes are told in words.
_MOST_CURVE_LOTS = 6
#: A longer list of prices is folded.
_MOST_OPEN = 12
_STEP = (
    "Not every limit here has a laboratory sd, so room is counted in steps. One step tightens every limit at once: by "
    "its sd where it has one, else a window by half its width and a one-sided limit by 1 % of its bound."
)


def ways_out(lookup: Lookup, finding: OrderFinding, page: str) -> Section | None:
    """Show the nearest blend and the wanted lot; None where neither is known."""
    tables = []
    sentences = []
    if finding.nearest is not None:
        tables += _nearest_tables(lookup, finding, page)
        missed = words.listed(_miss(lookup, name, excess) for name, excess in finding.nearest.excess.items() if excess)
        if missed:
            sentences.append(f"The nearest blend breaks the limits least: it misses {missed}.")
    if any(wanted.values is not None for wanted in finding.wanted_lot):
        tables.append(_wanted_table(lookup, finding))
    elif finding.wanted_lot:
        sentences.append("No further lot, of whatever composition, would make the order possible at a usual share.")
    if not tables and not sentences:
        return None
    return Section(
        anchor="ways-out", title="Ways out", sentences=tuple(sentences), tables=tuple(tables), layout="beside"
    )


def _miss(lookup: Lookup, name: str, excess: float) -> str:
    """Words such as "K₂O by 1.8 %"."""
    size = numbers.text(abs(excess), lookup.places.get(name, 2))
    if not size.strip("0."):
        size = numbers.significant(abs(excess), 1)
    return f"{lookup.labels.get(name, name)} by {words.with_unit(size, lookup.units.get(name, ''))}"


def _nearest_tables(lookup: Lookup, finding: OrderFinding, page: str) -> list[Table]:
    assert finding.nearest is not None, "asked only of orders with a nearest blend"
    shares = {name: Fraction(share) for name, share in finding.nearest.shares.items()}
    places = numbers.share_places(shares.values())
    percent = numbers.percent_shares(shares, places)
    rows = [
        Row(cells=(lot_cell(lookup, name, page), text_cell(numbers.text(value, places))))
        for name, value in percent.items()
    ]
    rows.append(Row(cells=(text_cell("Blend"), text_cell(numbers.text(100, places))), is_total=True))
    columns = (Column(title="Lot"), Column(title="Share", unit="%", kind="number"))
    shares_table = Table(anchor="nearest-shares", caption="Nearest blend", columns=columns, rows=tuple(rows))
    values = values_table(
        lookup, finding, finding.nearest.values, "nearest-values", "Nearest blend, against the limits", "Blend"
    )
    return [shares_table, values]


def _wanted_table(lookup: Lookup, finding: OrderFinding) -> Table:
    """What one further lot would have to be, at several shares."""
    names = list(dict.fromkeys(name for wanted in finding.wanted_lot for name in wanted.values or {}))
    columns = [Column(title="At a share of", kind="number")]
    columns += [
        Column(title=lookup.labels.get(name, name), unit=lookup.units.get(name, ""), kind="number") for name in names
    ]
    rows = []
    for wanted in finding.wanted_lot:
        share = text_cell(words.with_unit(numbers.significant(wanted.share * 100, 3), "%"))
        if wanted.values is None:
            cells = [text_cell("no lot would do" if position == 0 else "") for position in range(len(names))]
        else:
            cells = [
                text_cell(
                    numbers.text(wanted.values[name], lookup.places.get(name, 2))
                    if name in wanted.values
                    else numbers.UNKNOWN
                )
                for name in names
            ]
        rows.append(Row(cells=(share, *cells)))
    return Table(
        anchor="wanted-lot",
        caption="Wanted lot",
        columns=tuple(columns),
        rows=tuple(rows),
        note="The composition that one further lot would need, for the share that it would have of the order.",
    )


def room(lookup: Lookup, finding: OrderFinding) -> Section | None:
    """Show the cost–room curve and its corners; None where there is none."""
    if not finding.curve:
        return None
    settings = lookup.campaign.settings
    unit = "sd" if finding.room_unit == "sd" else "steps"
    money = f"{settings.currency} per {settings.quantity_unit}"
    caption = "What more room costs: each mark on the line is a recipe."
    svg = finished(
        curve.draw([(point.room, point.cost) for point in finding.curve], unit, money),
        "fig-curve",
        "Cost–room curve",
        f"{caption} The table beside it has every one.",
    )
    figure = FigureView(anchor="curve", title="Cost–room curve", svg=svg, caption=caption)
    table = _curve_table(finding, unit, money)
    sentences = () if finding.room_unit == "sd" else (_STEP,)
    return Section(
        anchor="room", title="Room and cost", sentences=sentences, figures=(figure,), tables=(table,), layout="beside"
    )


def _curve_table(finding: OrderFinding, unit: str, money: str) -> Table:
    """Every recipe of the curve: its shares lot by lot where few lots take part, else in words."""
    lots = list(dict.fromkeys(lot for point in finding.curve for lot in point.shares))
    columns = [Column(title="Room", unit=unit, kind="number"), Column(title="Cost", unit=money, kind="number")]
    rooms = aligned(numbers.significant(point.room, 3) for point in finding.curve)
    rows = []
    is_wide = len(lots) > _MOST_CURVE_LOTS
    columns += [Column(title="Shares")] if is_wide else [Column(title=lot, unit="%", kind="number") for lot in lots]
    for room_text, point in zip(rooms, finding.curve, strict=True):
        percent = numbers.percent_shares({name: Fraction(share) for name, share in point.shares.items()}, 1)
        texts = [numbers.text(percent[lot], 1) if lot in percent else numbers.UNKNOWN for lot in lots]
        shares = [_shares_in_words(point.shares)] if is_wide else texts
        rows.append(Row(cells=tuple(map(text_cell, (room_text, numbers.money(point.cost), *shares)))))
    return Table(anchor="curve-corners", caption="The recipes", columns=tuple(columns), rows=tuple(rows))


def _shares_in_words(shares: Mapping[str, float]) -> str:
    exact = {name: Fraction(share) for name, share in shares.items()}
    percent = numbers.percent_shares(exact, 1)
    return ", ".join(f"{name} {numbers.text(value, 1)} %" for name, value in percent.items())


def without_lot(lookup: Lookup, finding: OrderFinding, page: str) -> Section | None:
    """Show verdict and cost without each lot of the recipe; None where not asked."""
    if not finding.without_lot:
        return None
    settings = lookup.campaign.settings
    rows = []
    for name, (verdict, cost) in finding.without_lot.items():
        mark = verdict or "none"
        cells = [lot_cell(lookup, name, page), Cell(text=words.VERDICT_WORDS[mark], mark=mark)]
        if not lookup.hides("cost"):
            cells.append(text_cell(numbers.UNKNOWN if cost is None else numbers.money(cost)))
        rows.append(Row(cells=tuple(cells)))
    columns = [Column(title="Without lot"), Column(title="Verdict")]
    if not lookup.hides("cost"):
        per = f"{settings.currency} per {settings.quantity_unit}"
        columns.append(Column(title="Least cost", unit=per, kind="number"))
    table = Table(anchor="without", caption="If a lot were missing", columns=tuple(columns), rows=tuple(rows))
    return Section(anchor="without-lot", title="If a lot were missing", tables=(table,))


def worth(lookup: Lookup, finding: OrderFinding, page: str) -> Section | None:
    """Show what looser limits save, and the prices at which lots enter or leave; None where not known."""
    tables = []
    settings = lookup.campaign.settings
    money = f"{settings.currency} per {settings.quantity_unit}"
    limits = [limit for limit in finding.limits if limit.worth is not None]
    if limits:
        rows = [_worth_row(lookup, limit) for limit in limits]
        columns = (
            Column(title="Limit"),
            Column(title="Saves", unit=f"{money}, for one unit looser", kind="number"),
            Column(title="Holds from … to", kind="number"),
        )
        tables.append(
            Table(anchor="worth-limits", caption="What loosening a limit saves", columns=columns, rows=tuple(rows))
        )
    folded = []
    for prices, name, caption, title in (
        (finding.stays_up_to, "stays-up-to", "Lots in the recipe", "Stays up to"),
        (finding.enters_at, "enters-at", "Lots not in it", "Would enter at"),
    ):
        if not prices:
            continue
        table = _prices_table(lookup, prices, name, (caption, title), money, page)
        if len(prices) > _MOST_OPEN:
            folded.append(Section(anchor=f"{name}-lots", title=caption, tables=(table,)))
        else:
            tables.append(table)
    if not tables and not folded:
        return None
    return Section(
        anchor="worth",
        title="What limits and lots are worth",
        tables=tuple(tables),
        folded=tuple(folded),
        layout="beside",
    )


def _worth_row(lookup: Lookup, limit: LimitFinding) -> Row:
    holds: Range = limit.worth_holds or (None, None)
    return Row(
        cells=(
            limit_cell(lookup, limit.on),
            text_cell(numbers.significant(limit.worth or 0, 3)),
            text_cell(words.span(holds, lookup.places.get(limit.on, 2))),
        )
    )


def _prices_table(
    lookup: Lookup, prices: Mapping[str, float | None], anchor: str, titles: tuple[str, str], money: str, page: str
) -> Table:
    """What each lot costs, and the price at which the cheapest recipe would change; ``titles``: caption, column."""
    caption, title = titles
    rows = []
    for name, price in prices.items():
        own = lookup.lot(name).cost if name in lookup.positions else None
        cells = (
            lot_cell(lookup, name, page),
            text_cell(numbers.money(own.value) if own else numbers.UNKNOWN),
            text_cell("any" if price is None else numbers.money(price)),
        )
        rows.append(Row(cells=cells))
    columns = (
        Column(title="Lot"),
        Column(title="Costs now", unit=money, kind="number"),
        Column(title=title, unit=money, kind="number"),
    )
    return Table(anchor=anchor, caption=caption, columns=columns, rows=tuple(rows))
