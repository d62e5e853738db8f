"""The own history of an order and of a lot, on their pages: when they were edited or their answers changed."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

from generator import numbers
from generator.history.chronicle import Line
from generator.history.headlines import with_cause
from generator.history.records import OrderPoint, Story
from generator.report import addresses, words
from generator.report.history_trends import assay_figure, day, lines_figure, moved_by
from generator.report.history_view import history_index, revision_address
from generator.report.lookup import Lookup
from generator.report.parts import Cell, Column, FigureView, Row, Section, Table, text_cell

#: Rows of an order's or a lot's own history: the newest.
MOST_OWN = 10
_MOST_CHANGES_TOLD = 4
#: Changes whose subject is no order.
_NOT_OF_ORDERS = frozenset({"lot gone", "lot new", "role", "hull", "volume", "plan"})

_Told = Sequence[tuple[Line, Story]]


def order_history(lookup: Lookup, order: str, page: str) -> tuple[Section, ...]:
    """The revisions in which an order was edited or its answer changed, newest first; its cost and room drawn."""
    settings = lookup.campaign.settings
    money = f"{settings.currency} per {settings.quantity_unit}"
    told = _told(lookup)
    rows = []
    before: OrderPoint | None = None
    for line, story in told:
        point, sentences = story.summary.orders.get(order), _of_order(story, order)
        if point is not None and (point != before or sentences):
            rows.append(_order_row(lookup, line, point, sentences, page))
        before = point
    if len(rows) < 2:
        return ()
    columns = (
        Column(title="Revision"),
        Column(title="Verdict"),
        Column(title="Least cost", unit=money, kind="number"),
        Column(title="Room", unit="sd", kind="number"),
        Column(title="What happened"),
    )
    figures = _order_trends(told, order, money)
    kept = [
        position
        for position, column in enumerate(columns)
        if column.kind == "text" or any(row.cells[position].text != numbers.UNKNOWN for row in rows)
    ]
    rows = [Row(cells=tuple(row.cells[position] for position in kept)) for row in rows]
    table = _own_table(lookup, rows, tuple(columns[position] for position in kept), page)
    return (Section(anchor="history", title="History", tables=(table,), folded=_folded(figures)),)


def lot_history(lookup: Lookup, lot: str, page: str) -> tuple[Section, ...]:
    """The revisions in which a lot was edited, newest first; its assay and stock drawn where they moved."""
    told = _told(lookup)
    rows = [
        Row(cells=(_revision_cell(lookup, line, page), text_cell(sentences, tone="sentence")))
        for line, story in told
        if (sentences := _of_lot(story, lot))
    ]
    if not rows:
        return ()
    columns = (Column(title="Revision"), Column(title="What happened"))
    figures = tuple(_lot_trends(lookup, told, lot))
    table = _own_table(lookup, rows, columns, page)
    layout: Literal["beside", "plain"] = "beside" if figures else "plain"
    return (Section(anchor="history", title="History", tables=(table,), figures=figures, layout=layout),)


def _told(lookup: Lookup) -> _Told:
    return [(line, line.story) for line in lookup.book.past if line.story is not None]


def _folded(figures: Sequence[FigureView]) -> tuple[Section, ...]:
    if not figures:
        return ()
    return (Section(anchor="own-trends", title="Trends", figures=tuple(figures), layout="grid"),)


def _order_trends(told: _Told, order: str, money: str) -> list[FigureView]:
    points = [story.summary.orders.get(order) for _, story in told]
    costs = [point.cost if point else None for point in points]
    rooms = [point.room if point else None for point in points]
    figures = (
        lines_figure("own-costs", "Cost of the cheapest recipe", money, {order: costs}, _dates(told)),
        lines_figure("own-rooms", "Room", "sd", {order: rooms}, _dates(told)),
    )
    return [figure for figure in figures if figure is not None]


def _lot_trends(lookup: Lookup, told: _Told, lot: str) -> list[FigureView]:
    points = [story.summary.lots.get(lot) for _, story in told]
    figures = []
    for component in dict.fromkeys(name for point in points if point for name in point.assay):
        pairs = [point.assay.get(component, (None, None)) if point else (None, None) for point in points]
        if moved_by([pair[0] for pair in pairs]) > 0:
            figures.append(assay_figure(component, lookup.name_with_unit(component), pairs, _dates(told)))
    stocks = [point.stock if point else None for point in points]
    unit = lookup.campaign.settings.quantity_unit
    stock = lines_figure("own-stock", "Stock", unit, {lot: stocks}, _dates(told))
    return [*figures, *([stock] if stock else [])]


def _dates(told: _Told) -> list[str]:
    return [day(line.recorded) for line, _ in told]


def _order_row(lookup: Lookup, line: Line, point: OrderPoint, sentences: str, page: str) -> Row:
    return Row(
        cells=(
            _revision_cell(lookup, line, page),
            Cell(text=words.VERDICT_WORDS[point.verdict], mark=point.verdict),
            text_cell(numbers.UNKNOWN if point.cost is None else numbers.money(point.cost)),
            text_cell(numbers.UNKNOWN if point.room is None else numbers.significant(point.room, 3)),
            text_cell(sentences, tone="sentence"),
        )
    )


def _of_order(story: Story, order: str) -> str:
    """What a story says of an order: its edits, then its changed answers and their causes."""
    told = [edit.sentence for edit in story.edits if (edit.kind, edit.name) == ("order", order)]
    own = [change for change in story.changes if change.subject == order and change.kind not in _NOT_OF_ORDERS]
    told += [with_cause(change, story.edits) for change in own[:_MOST_CHANGES_TOLD]]
    return " ".join(_at_home(sentence, f"Order {order}") for sentence in told)


def _of_lot(story: Story, lot: str) -> str:
    told = [edit.sentence for edit in story.edits if (edit.kind, edit.name) == ("lot", lot)]
    return " ".join(_at_home(sentence, f"Lot {lot}") for sentence in told)


def _at_home(sentence: str, name: str) -> str:
    """A sentence on the page of what it is about, which it need not name: "Its stock fell from 40 to 0 t."."""
    for opening, instead in ((f"{name}: ", ""), (f"{name}'s ", "Its "), (f"{name} ", "")):
        if sentence.startswith(opening):
            return words.capitalised(instead + sentence.removeprefix(opening))
    return sentence


def _revision_cell(lookup: Lookup, line: Line, page: str) -> Cell:
    target = revision_address(lookup.campaign.slug, line.number)
    return Cell(text=f"{line.number}", href=addresses.relative(page, target), detail=words.moment(line.recorded))


def _own_table(lookup: Lookup, rows: Sequence[Row], columns: tuple[Column, ...], page: str) -> Table:
    """The newest rows first; the last one leads to the whole history."""
    shown = list(reversed(rows))[:MOST_OWN]
    left = len(rows) - len(shown)
    index = addresses.relative(page, history_index(lookup.campaign.slug))
    more = f"All revisions ({left} more of these)" if left else "All revisions"
    closing = Row(cells=(Cell(text=more, href=index), *([text_cell("")] * (len(columns) - 1))))
    return Table(anchor="history-table", caption="History", columns=columns, rows=(*shown, closing), stacks=True)
