"""The plan's page: which orders are served together, who loses to whom, what is left."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from generator import numbers
from generator.findings.records import OrderFinding, Plan, PlannedOrder
from generator.report import plan_words, words
from generator.report.lookup import Lookup
from generator.report.parts import Cell, Column, Fact, Row, Section, Table, text_cell
from generator.report.shares import amount_places, lot_cell

#: With more served orders than this the amounts are listed instead of laid out as a matrix.
MOST_COLUMNS = 7
WHOLE_FROM = 10_000
_STATES = {"full": "in full", "part": "in part", "none": "not served"}
_SIGNS = {"full": "good", "part": "", "none": "bad"}


def plan_address(lookup: Lookup) -> str:
    """The address of the plan's page."""
    return f"{lookup.campaign.slug}/plan.html"


def plan_summary(lookup: Lookup, page: str) -> Section | None:
    """The plan on the campaign's page: makeable alone against served together, and where to read on."""
    plan = lookup.book.findings.plan
    if plan is None or not plan.orders:
        return None
    unit, places = lookup.campaign.settings.quantity_unit, _places(plan)
    rows = [
        Row(
            cells=(
                _order_cell(lookup, name, page),
                _state_cell(planned),
                text_cell(_amount(planned.asked, places)),
                text_cell(_amount(planned.accepted, places)),
            )
        )
        for name, planned in plan.orders.items()
    ]
    link = Cell(text="The whole plan", href=lookup.link(page, plan_address(lookup)))
    rows.append(Row(cells=(link, *(text_cell("") for _ in range(3)))))
    columns = (
        Column(title="Order"),
        Column(title="Together"),
        Column(title="Asked", unit=unit, kind="number"),
        Column(title="Accepted", unit=unit, kind="number"),
    )
    table = Table(anchor="plan-table", caption="All orders from one stock", columns=columns, rows=tuple(rows))
    sentences = (plan_lead(lookup, plan), plan_words.certainty(plan))
    return Section(anchor="plan", title="Plan", sentences=sentences, tables=(table,))


def plan_lead(lookup: Lookup, plan: Plan) -> str:
    """The plan in a sentence or two."""
    settings = lookup.campaign.settings
    text = f"{words.together(lookup.book.findings)}."
    if plan.runs_out:
        text += f" {words.listed(plan.runs_out)} {'runs' if len(plan.runs_out) == 1 else 'run'} out."
    if plan.value is not None and plan.measure == "value":
        text += f" Prices less costs come to {words.with_unit(_money(plan.value), settings.currency)}."
    return text


def plan_value(lookup: Lookup) -> str:
    """What the plan comes to, in a word or two: its value, else the amount accepted."""
    plan = lookup.book.findings.plan
    if plan is not None and plan.value is not None and plan.measure == "value":
        return words.with_unit(_money(plan.value), lookup.campaign.settings.currency)
    return _accepted(lookup, plan) if plan else ""


def _accepted(lookup: Lookup, plan: Plan) -> str:
    accepted = sum(planned.accepted for planned in plan.orders.values())
    return words.with_unit(numbers.text(accepted, amount_places(accepted)), lookup.campaign.settings.quantity_unit)


def plan_facts(lookup: Lookup, plan: Plan) -> tuple[Fact, ...]:
    """What can be said of the plan in a word or two."""
    facts = [
        Fact(name="Accepted", value=_accepted(lookup, plan)),
        Fact(name="Search", value=plan_words.certainty_short(plan)),
    ]
    if plan.value is not None and plan.measure == "value":
        facts.insert(0, Fact(name="Value", value=plan_value(lookup)))
    facts.append(Fact(name="Lots that run out", value=str(len(plan.runs_out))))
    if not lookup.campaign.has_stock and not lookup.hides("stock"):
        facts.append(Fact(name="Stock", value="not checked"))
    return tuple(facts)


def plan_sections(lookup: Lookup, plan: Plan, page: str, cards: Mapping[str, str]) -> tuple[Section, ...]:
    """All parts of the plan's page; ``cards`` are the addresses of batch cards by order."""
    found = (
        _orders(lookup, plan, page, cards),
        _losers(lookup, plan, page),
        _amounts(lookup, plan, page),
        _stock(lookup, plan, page),
        _leftover(lookup, plan, page),
        _search(lookup, plan),
    )
    return tuple(section for section in found if section is not None)


def order_in_plan(lookup: Lookup, finding: OrderFinding, page: str, cards: Mapping[str, str]) -> tuple[Section, ...]:
    """What the plan gives one order, for the order's own page."""
    plan = lookup.book.findings.plan
    planned = plan.orders.get(finding.order) if plan else None
    if plan is None or planned is None or len(plan.orders) < 2:
        return ()
    settings = lookup.campaign.settings
    loser = next((item for item in plan.losers if item.order == finding.order), None)
    # Why an order fails that fails alone stands on this page already.
    is_told = loser is not None and loser.reason != "alone"
    sentences = (
        plan_words.loser_sentences(loser, plan, settings.quantity_unit, settings.currency) if loser and is_told else ()
    )
    facts = [Fact(name="Beside the other orders", value=f"{_STATES[planned.state]}", tone=_SIGNS[planned.state])]
    if planned.accepted:
        accepted = words.with_unit(_amount(planned.accepted, _places(plan)), settings.quantity_unit)
        facts.append(Fact(name="Accepted", value=accepted))
    if finding.order in cards:
        facts.append(Fact(name="To weigh", value="Batch card", href=lookup.link(page, cards[finding.order])))
    facts.append(Fact(name="All orders", value="The whole plan", href=lookup.link(page, plan_address(lookup))))
    return (Section(anchor="in-plan", title="In the plan", sentences=sentences, facts=tuple(facts)),)


def _order_cell(lookup: Lookup, name: str, page: str) -> Cell:
    return Cell(text=name, href=lookup.link(page, lookup.order_addresses.get(name, "")))


def _state_cell(planned: PlannedOrder) -> Cell:
    return text_cell(_STATES[planned.state], tone=_SIGNS[planned.state])


def _amount(value: float | None, places: int) -> str:
    return numbers.UNKNOWN if value is None else numbers.text(value, places)


def _places(plan: Plan) -> int:
    """Decimals of the plan's amounts, by the greatest order."""
    sizes = [max(planned.asked or 0.0, planned.accepted) for planned in plan.orders.values()]
    return min(2, amount_places(max(sizes, default=0.0)))


def _money(value: float | None) -> str:
    """An amount of money; from 10 000 on its hundredths say nothing."""
    return _moneys([value])[0]


def _moneys(values: Sequence[float | None]) -> list[str]:
    """Amounts of money of one column: without hundredths where one of them is too great for them."""
    places = 0 if any(value is not None and abs(value) >= WHOLE_FROM for value in values) else 2
    return [numbers.UNKNOWN if value is None else numbers.money(value, places) for value in values]


def _orders(lookup: Lookup, plan: Plan, page: str, cards: Mapping[str, str]) -> Section:
    settings = lookup.campaign.settings
    verdicts = {finding.order: finding.verdict or "none" for finding in lookup.book.findings.orders}
    has_classes = len({planned.priority for planned in plan.orders.values()}) > 1
    has_money = any(planned.income is not None for planned in plan.orders.values())
    has_cost = any(planned.cost is not None for planned in plan.orders.values())
    columns = [
        Column(title="Order"),
        *([Column(title="Priority", kind="number")] if has_classes else []),
        Column(title="Alone"),
        Column(title="Together"),
        Column(title="Asked", unit=settings.quantity_unit, kind="number"),
        Column(title="Accepted", unit=settings.quantity_unit, kind="number"),
    ]
    if has_money:
        columns.append(Column(title="Income", unit=settings.currency, kind="number"))
    if has_cost:
        columns.append(Column(title="Cost", unit=settings.currency, kind="number"))
    if has_money and has_cost:
        columns.append(Column(title="Gain", unit=settings.currency, kind="number"))
    if cards:
        columns.append(Column(title="Batch card"))
    rows, places = [], _places(plan)
    incomes, costs, gains = _money_columns(plan)
    for position, (name, planned) in enumerate(plan.orders.items()):
        verdict = verdicts.get(name, "none")
        cells = [
            _order_cell(lookup, name, page),
            *([text_cell(str(planned.priority))] if has_classes else []),
            Cell(text=words.VERDICT_WORDS[verdict], mark=verdict),
            _state_cell(planned),
            text_cell(_amount(planned.asked, places)),
            text_cell(_amount(planned.accepted, places)),
        ]
        if has_money:
            cells.append(text_cell(incomes[position]))
        if has_cost:
            cells.append(text_cell(costs[position]))
        if has_money and has_cost:
            cells.append(text_cell(gains[position]))
        if cards:
            link = lookup.link(page, cards[name]) if name in cards else ""
            cells.append(Cell(text="card" if link else "", href=link))
        rows.append(Row(cells=tuple(cells)))
    table = Table(
        anchor="together-table",
        caption="Orders together",
        columns=tuple(columns),
        rows=tuple(rows),
        note="Alone: the verdict with all stock to itself. Together: what the plan gives it beside the others."
        + (" Income: price × accepted." if has_money else ""),
    )
    return Section(anchor="together", title="Orders together", tables=(table,))


def _money_columns(plan: Plan) -> tuple[list[str], list[str], list[str]]:
    """Income, cost and gain of every order, alike in their decimals."""
    orders = plan.orders.values()
    gains = [None if one.income is None or one.cost is None else one.income - one.cost for one in orders]
    count = len(gains)
    texts = _moneys([*(one.income for one in orders), *(one.cost for one in orders), *gains])
    return texts[:count], texts[count : 2 * count], texts[2 * count :]


def _losers(lookup: Lookup, plan: Plan, page: str) -> Section | None:
    if not plan.losers:
        return None
    settings = lookup.campaign.settings
    rows = []
    for loser in plan.losers:
        planned = plan.orders[loser.order]
        told = " ".join(plan_words.loser_sentences(loser, plan, settings.quantity_unit, settings.currency))
        cells = (_order_cell(lookup, loser.order, page), _state_cell(planned), text_cell(told, tone="sentence"))
        rows.append(Row(cells=cells))
    columns = (Column(title="Order"), Column(title="Together"), Column(title="Why, and what would have to give way"))
    table = Table(
        anchor="losers-table",
        caption="Orders that are not served in full",
        columns=columns,
        rows=tuple(rows),
        stacks=True,
        note="Each question keeps the plan as it is but for one thing: the other orders get what they got, "
        "from the lots that they use. Answered in floating point, to about seven digits.",
    )
    return Section(anchor="losers", title="Who loses to whom", tables=(table,))


def _served(plan: Plan) -> dict[str, PlannedOrder]:
    return {name: planned for name, planned in plan.orders.items() if planned.accepted > 0}


def _amounts(lookup: Lookup, plan: Plan, page: str) -> Section | None:
    served = _served(plan)
    if not served:
        return None
    unit = lookup.campaign.settings.quantity_unit
    if len(served) > MOST_COLUMNS:
        return _amounts_listed(lookup, served, page, unit)
    places = min(2, amount_places(max(planned.accepted for planned in served.values())))
    lots = [lot.name for lot in lookup.campaign.lots if any(lot.name in planned.amounts for planned in served.values())]
    rows = []
    for lot in lots:
        own = [planned.amounts.get(lot) for planned in served.values()]
        total = sum(amount for amount in own if amount is not None)
        texts = ["" if amount is None else numbers.text(amount, places) for amount in own]
        rows.append(
            Row(cells=(lot_cell(lookup, lot, page), *map(text_cell, texts), text_cell(numbers.text(total, places))))
        )
    totals = [numbers.text(planned.accepted, places) for planned in served.values()]
    everything = numbers.text(sum(planned.accepted for planned in served.values()), places)
    rows.append(Row(cells=(text_cell("All lots"), *map(text_cell, totals), text_cell(everything)), is_total=True))
    columns = (
        Column(title="Lot"),
        *(Column(title=name, kind="number") for name in served),
        Column(title="All orders", kind="number"),
    )
    table = Table(anchor="amounts-table", caption=f"By lot and order, {unit}", columns=columns, rows=tuple(rows))
    return Section(anchor="amounts", title="Amounts", tables=(table,))


def _amounts_listed(lookup: Lookup, served: Mapping[str, PlannedOrder], page: str, unit: str) -> Section:
    rows = []
    for name, planned in served.items():
        places = min(2, amount_places(planned.accepted))
        parts = ", ".join(f"{lot} {numbers.text(amount, places)}" for lot, amount in planned.amounts.items())
        rows.append(Row(cells=(_order_cell(lookup, name, page), text_cell(parts))))
    columns = (Column(title="Order"), Column(title=f"Amounts by lot, {unit}"))
    table = Table(anchor="amounts-table", caption="What each order takes", columns=columns, rows=tuple(rows))
    return Section(anchor="amounts", title="Amounts", tables=(table,))


def _stock(lookup: Lookup, plan: Plan, page: str) -> Section | None:
    lots = [lot for lot in lookup.campaign.lots if lot.name in plan.left]
    if not lots:
        return None
    settings = lookup.campaign.settings
    used: dict[str, float] = {}
    for planned in plan.orders.values():
        for name, amount in planned.amounts.items():
            used[name] = used.get(name, 0.0) + amount
    is_money = plan.measure == "value"
    rows = []
    places = min(2, amount_places(max(used.get(lot.name, 0.0) + plan.left[lot.name] for lot in lots)))
    for lot in lots:
        gain = plan.one_more.get(lot.name)
        worth = numbers.UNKNOWN if not gain else numbers.money(gain) if is_money else numbers.significant(gain, 3)
        cells = (
            lot_cell(lookup, lot.name, page),
            text_cell(numbers.text(lot.stock.value, places) if lot.stock else numbers.UNKNOWN),
            text_cell(numbers.text(used.get(lot.name, 0.0), places)),
            text_cell(numbers.text(plan.left[lot.name], places)),
            text_cell(
                plan_words.left_words(plan.left, lot.name, plan), tone="bad" if lot.name in plan.runs_out else ""
            ),
            text_cell(worth),
        )
        rows.append(Row(cells=cells))
    unit = settings.quantity_unit
    columns = (
        Column(title="Lot"),
        Column(title="Stock", unit=unit, kind="number"),
        Column(title="Used", unit=unit, kind="number"),
        Column(title="Left", unit=unit, kind="number"),
        Column(title="After the plan"),
        Column(title="One more is worth", unit=settings.currency if is_money else unit, kind="number"),
    )
    note = (
        f"One more is worth: what one {unit} more of the lot would add to the plan, the accepted orders and the lots "
        "of each kept. It is one-sided: a further order that could then be accepted is not in it."
    )
    table = Table(anchor="stock-table", caption="Stock after the plan", columns=columns, rows=tuple(rows), note=note)
    unused = [lot.name for lot in lookup.campaign.lots if lot.name in plan.never_used]
    sentences = (f"Never used: {words.listed(unused)}.",) if unused else ()
    return Section(anchor="stock", title="Stock after the plan", sentences=sentences, tables=(table,))


def _leftover(lookup: Lookup, plan: Plan, page: str) -> Section | None:
    if not plan.leftover:
        return None
    unit, places = lookup.campaign.settings.quantity_unit, _places(plan)
    rows = [
        Row(
            cells=(
                _order_cell(lookup, name, page),
                text_cell(_amount(amount, places) if amount else "nothing", tone="" if amount else "quiet"),
            )
        )
        for name, amount in plan.leftover.items()
    ]
    columns = (
        Column(title="Within the limits of order"),
        Column(title="Could still be made", unit=unit, kind="number"),
    )
    table = Table(
        anchor="leftover-table",
        caption="What the rest can make",
        columns=columns,
        rows=tuple(rows),
        note="Each line alone: the greatest amount from the stock that the plan leaves, within the order's limits "
        "and the house rules.",
    )
    return Section(anchor="leftover", title="What the rest can make", tables=(table,))


def _search(lookup: Lookup, plan: Plan) -> Section:
    settings = lookup.campaign.settings
    sentences: Sequence[str] = (
        "Orders of a lower priority number come strictly first. " + plan_words.certainty(plan),
        *plan_words.notes(plan, settings.currency),
    )
    units = {"value": settings.currency, "cost": settings.currency, "lots": "lots in orders"}
    rows = []
    for number, stage in enumerate(plan.stages, 1):
        unit = units.get(stage.aim, settings.quantity_unit)
        best = numbers.text(stage.best, 0) if stage.aim == "lots" else _money(stage.best)
        gap = "not searched" if stage.gap is None else "none" if stage.gap == 0 else _gap(stage.gap)
        cells = (
            text_cell(str(number)),
            text_cell("all" if stage.priority is None else str(stage.priority)),
            text_cell(plan_words.AIMS[stage.aim]),
            text_cell(words.with_unit(best, unit)),
            text_cell(gap),
        )
        rows.append(Row(cells=cells))
    columns = (
        Column(title="Stage"),
        Column(title="Priority"),
        Column(title="Aim"),
        Column(title="Reached", kind="number"),
        Column(title="Could be better by", kind="number"),
    )
    table = Table(
        anchor="stages-table",
        caption="What was sought, one after another",
        columns=columns,
        rows=tuple(rows),
        note="While a stage is searched, those before it are held within one millionth of their best; a choice of "
        "orders and lots counts only if it is no worse in any of them, in exact numbers. That no choice is better "
        "is the claim of a search in floating point; the amounts are exact.",
    )
    return Section(
        anchor="search", title="How it was found", sentences=tuple(sentences), tables=(table,) if rows else ()
    )


def _gap(gap: float) -> str:
    return f"{numbers.significant(gap * 100, 2)} %"
