"""Answers as CSV for spreadsheets: RFC 4180 with a byte order mark, and no cell that a spreadsheet would run.

Formula injection (CWE-1236): a text that begins like a formula gets an apostrophe before it.
"""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterable, Sequence

from generator import numbers
from generator.findings.records import Findings, OrderFinding, Plan
from generator.intake.records import Measured
from generator.report.loading import loading_turn
from generator.report.views import CampaignPages

Value = str | float | int | None

#: What makes a spreadsheet take a text for a formula, also in full width and behind space.
_FORMULA = re.compile(r"\s*[=+\-@\t\r\n\uff1d\uff0b\uff0d\uff20]")
_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?")


def exports(book: CampaignPages) -> dict[str, bytes]:
    """The CSV files of a campaign by address; none where it is stopped."""
    if book.campaign.is_stopped:
        return {}
    tables = {"orders": _orders(book), "lots": _lots(book), "recipes": _recipes(book.findings)}
    if book.findings.plan is not None:
        tables["plan"] = _plan(book.findings.plan)
    if book.findings.batches:
        tables["batches"] = _batches(book)
    return {f"{book.campaign.slug}/{name}.csv": csv_bytes(rows) for name, rows in tables.items()}


def csv_bytes(rows: Iterable[Sequence[Value]]) -> bytes:
    """Rows as the bytes of a CSV file: UTF-8 with a byte order mark, commas, CRLF."""
    stream = io.StringIO(newline="")
    csv.writer(stream, lineterminator="\r\n").writerows([_cell(value) for value in row] for row in rows)
    return b"\xef\xbb\xbf" + stream.getvalue().encode()


def _cell(value: Value) -> str:
    if value is None:
        return ""
    if isinstance(value, float):
        return repr(value)
    text = str(value).replace("\x00", "")
    return f"'{text}" if _FORMULA.match(text) and not _NUMBER.fullmatch(text) else text


def _orders(book: CampaignPages) -> list[list[Value]]:
    """One row for each order: its answer, and the low, high and reached value of everything limited."""
    findings = book.findings
    limited = list(dict.fromkeys(limit.on for order in findings.orders for limit in order.limits))
    clients = {order.name: order.client for order in book.campaign.orders}
    header: list[Value] = ["order", "client", "verdict", "amount min", "amount max", "cost", "room", "room unit"]
    header += [f"{name} {what}" for name in limited for what in ("min", "max", "cheapest")]
    return [header, *(_order(order, clients.get(order.order, ""), limited) for order in findings.orders)]


def _order(order: OrderFinding, client: str, limited: Sequence[str]) -> list[Value]:
    cheapest = order.recipes.get("cheapest")
    limits = {limit.on: limit for limit in order.limits}
    row: list[Value] = [order.order, client, order.verdict or "no answer", order.amount_low, order.amount_high]
    row += [cheapest.cost if cheapest else None, order.room, order.room_unit]
    for name in limited:
        limit = limits.get(name)
        value = cheapest.values.get(name) if cheapest and limit else None
        row += [limit.low if limit else None, limit.high if limit else None, value]
    return row


def _lots(book: CampaignPages) -> list[list[Value]]:
    """One row for each lot: role, stock, cost, and assays as typed."""
    roles = {lot.lot: lot for lot in book.findings.lots}
    components = book.campaign.components
    header: list[Value] = ["lot", "role", "stock", "cost"]
    header += [f"{component.name} [{component.unit}]" if component.unit else component.name for component in components]
    rows: list[list[Value]] = [header]
    for lot in book.campaign.lots:
        finding = roles.get(lot.name)
        row: list[Value] = [lot.name, finding.role if finding else None]
        row += [finding.stock if finding else None, finding.cost if finding else None]
        row += [_typed(lot.assay.get(component.name)) for component in components]
        rows.append(row)
    return rows


def _typed(measured: Measured | None) -> str | None:
    """Readings as typed, with a decimal point and an ASCII minus; replicates one after another."""
    if measured is None:
        return None
    texts = []
    for reading in measured.readings:
        digits = numbers.text(reading.value, numbers.typed_decimals(reading.value, reading.text))
        plain = digits.replace(numbers.MINUS, "-").replace(numbers.GROUP_SPACE, "")
        texts.append(f"<{plain}" if reading.below else plain)
    return "; ".join(texts)


def _plan(plan: Plan) -> list[list[Value]]:
    """One row for each lot of each order in the plan; an order that gets nothing has one row without a lot."""
    rows: list[list[Value]] = [["order", "priority", "asked", "accepted", "served", "lot", "amount"]]
    for name, planned in plan.orders.items():
        about: list[Value] = [name, planned.priority, planned.asked, planned.accepted, planned.state]
        takes: list[tuple[str | None, float | None]] = list(planned.amounts.items()) or [(None, None)]
        rows += [[*about, lot, amount] for lot, amount in takes]
    return rows


def _batches(book: CampaignPages) -> list[list[Value]]:
    """One row for each lot of each batch, in the order of loading; equal batches stand once."""
    places = {lot.name: (lot.location, lot.load_order) for lot in book.campaign.lots}
    rows: list[list[Value]] = [
        ["order", "batch", "to batch", "of", "turn", "place", "lot", "amount", "scale shows", "holds"]
    ]
    for batch in book.findings.batches:
        running = 0.0
        for lot in sorted(batch.amounts, key=lambda name: loading_turn(places.get(name, ("", ""))[1])):
            place, turn = places.get(lot, ("", ""))
            running = round(running + batch.amounts[lot], 9)
            about: list[Value] = [batch.order, batch.batch, batch.batch + batch.times - 1, batch.of]
            rows.append([*about, turn, place, lot, batch.amounts[lot], running, "yes" if batch.holds else "no"])
    return rows


def _recipes(findings: Findings) -> list[list[Value]]:
    """One row for each lot of each recipe: share in percent, and amount."""
    rows: list[list[Value]] = [["order", "recipe", "lot", "share %", "amount"]]
    for order in findings.orders:
        for name, recipe in order.recipes.items():
            amounts = recipe.amounts or {}
            rows += [[order.order, name, lot, share * 100, amounts.get(lot)] for lot, share in recipe.shares.items()]
    return rows
