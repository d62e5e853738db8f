"""The campaign's page: every order's answer, the lots, the hull, what changed, what was read."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

from generator import numbers
from generator.findings.records import HalfPlane, HullFinding, LotFinding, OrderFinding
from generator.intake.records import Lot, Number
from generator.problems import Problem
from generator.report import words
from generator.report.history_view import history_index, revision_address
from generator.report.lookup import Lookup, as_typed, order_of
from generator.report.order_view import amount_text
from generator.report.parts import Cell, Column, Fact, Row, Section, Table, aligned, text_cell
from generator.report.plan_view import plan_address, plan_summary, plan_value
from generator.report.planes import Planes
from generator.report.shares import lot_cell
from generator.report.wholes import Wholes

#: Revisions listed on the campaign's page; the history has them all.
_MOST_REVISIONS = 10
#: More changes than this are folded.
_MOST_CHANGES = 6
_SEVERITIES = {"stops": "stops the campaign", "drops": "left out", "note": "note"}


def campaign_facts(lookup: Lookup) -> tuple[Fact, ...]:
    """What a campaign has, and where its plan and its history stand."""
    findings, home = lookup.book.findings, lookup.home
    corners = sum(1 for lot in findings.lots if lot.role == "corner")
    lots = str(len(findings.lots))
    if corners:
        lots += ", all corner lots" if corners == len(findings.lots) else f", {corners} of them corner lots"
    facts = [Fact(name="Lots", value=lots)]
    if not lookup.campaign.has_stock and not lookup.hides("stock"):
        facts.append(Fact(name="Stock", value="not checked"))
    if findings.plan is not None and findings.plan.orders:
        facts.append(Fact(name="Plan", value=plan_value(lookup), href=lookup.link(home, plan_address(lookup))))
    if lookup.book.revisions:
        last = lookup.book.revisions[-1]
        href = lookup.link(home, history_index(lookup.campaign.slug)) if lookup.book.past else ""
        facts.append(Fact(name="Revision", value=f"{last.number}, {words.moment(last.recorded)}", href=href))
    return tuple(facts)


def campaign_sections(lookup: Lookup, planes: Planes, wholes: Wholes) -> tuple[Section, ...]:
    """All parts of a campaign's page that have something to show, but for the notes, in reading order."""
    page = lookup.home
    found = (
        _orders(lookup, page),
        _changes(lookup),
        _hull(lookup, planes, wholes),
        plan_summary(lookup, page),
        _lots(lookup, page),
    )
    return tuple(section for section in found if section is not None)


def record_sections(lookup: Lookup) -> tuple[Section, ...]:
    """What stands at the end of a campaign's page: revisions, what was read, problems."""
    found = (_revisions(lookup), _read(lookup), problems_section(lookup.campaign.problems))
    return tuple(section for section in found if section is not None)


# --- orders


def _orders(lookup: Lookup, page: str) -> Section | None:
    findings = lookup.book.findings.orders
    if not findings:
        return None
    settings = lookup.campaign.settings
    per = f"{settings.currency} per {settings.quantity_unit}"
    columns = {
        "order": Column(title="Order"),
        "verdict": Column(title="Verdict"),
        "client": Column(title="Client"),
        "amount": Column(title="Amount", unit=settings.quantity_unit, kind="number"),
        "cost": Column(title="Least cost", unit=per, kind="number"),
        "room": Column(title="Room", unit="sd", kind="number"),
        "sentence": Column(title="In a sentence"),
    }
    cells = [_order_cells(lookup, finding, page) for finding in findings]
    # Without sds a step of room is another one for each limit: no number to compare orders by.
    is_shown = {
        "client": any(row["client"].text for row in cells),
        "amount": not lookup.hides("amount"),
        "cost": not lookup.hides("cost"),
        "room": any(finding.room is not None and finding.room_unit == "sd" for finding in findings),
    }
    shown = [name for name in columns if is_shown.get(name, True)]
    table = Table(
        anchor="orders-table",
        caption="Each taken alone",
        columns=tuple(columns[name] for name in shown),
        rows=tuple(Row(cells=tuple(row[name] for name in shown)) for row in cells),
        stacks=True,
    )
    return Section(anchor="orders", title="Orders", tables=(table,))


def _order_cells(lookup: Lookup, finding: OrderFinding, page: str) -> dict[str, Cell]:
    order, cheapest = order_of(lookup, finding), finding.recipes.get("cheapest")
    verdict = finding.verdict or "none"
    amount = amount_text(finding, "") if (finding.amount_low, finding.amount_high) != (None, None) else ""
    cost = numbers.money(cheapest.cost) if cheapest and cheapest.cost is not None else numbers.UNKNOWN
    is_in_sd = finding.room is not None and finding.room_unit == "sd"
    return {
        "order": Cell(text=finding.order, href=lookup.link(page, lookup.order_addresses.get(finding.order, ""))),
        "verdict": Cell(text=words.VERDICT_WORDS[verdict], mark=verdict),
        "client": text_cell(order.client if order else ""),
        "amount": text_cell(amount or numbers.UNKNOWN),
        "cost": text_cell(cost),
        "room": text_cell(numbers.significant(finding.room or 0, 3) if is_in_sd else numbers.UNKNOWN),
        "sentence": text_cell(words.beside_verdict(finding.sentence), tone="sentence"),
    }


def _changes(lookup: Lookup) -> Section | None:
    if not lookup.book.revisions:
        return None
    last = lookup.book.revisions[-1]
    told, changes = f"Revision {last.number}, recorded {words.moment(last.recorded)}.", lookup.book.changes
    if not changes:
        why = "This is the first revision: there is none before it to compare with."
        if len(lookup.book.revisions) > 1:
            what = "Nothing that these pages show" if lookup.book.hidden else "No answer"
            why = f"{what} changed from revision {last.number - 1} to revision {last.number}."
        return Section(anchor="changes", title="What changed last", sentences=(told, why))
    rest = changes[_MOST_CHANGES:]
    more = Section(anchor="more-changes", title=words.plural(len(rest), "more change"), points=rest)
    return Section(
        anchor="changes",
        title="What changed last",
        sentences=(told,),
        points=changes[:_MOST_CHANGES],
        folded=(more,) if rest else (),
    )


# --- hull and lots


def _hull(lookup: Lookup, planes: Planes, wholes: Wholes) -> Section | None:
    hulls = lookup.book.findings.hulls
    triangle = wholes.of_campaign()
    figures = (*planes.of_campaign(), *([triangle] if triangle else []))
    if not hulls and not figures:
        return None
    sentences = tuple(_hull_sentence(lookup, hull) for hull in hulls)
    tables = tuple(
        table for number, hull in enumerate(hulls, 1) if (table := _facets_table(lookup, hull, number)) is not None
    )
    return Section(
        anchor="hull",
        title="Hull",
        sentences=sentences,
        figures=figures,
        tables=tables,
        layout="beside" if tables else "plain",
    )


def _hull_sentence(lookup: Lookup, hull: HullFinding) -> str:
    if len(hull.over) == 1 and hull.facets:
        return _reach_sentence(lookup, hull)
    names = words.listed(lookup.labels.get(name, name) for name in hull.over)
    corners = words.plural(len(hull.corners), "corner lot")
    text = f"Over {names} ({hull.basis} basis) the hull has {corners} and {words.plural(hull.dimension, 'dimension')}"
    text += f", volume {numbers.significant(hull.volume, 4)}." if hull.volume is not None else "."
    if hull.dimension < len(hull.over):
        text += " It is flat: the lots' values depend on each other."
    return text + " Stock and cost are disregarded."


def _reach_sentence(lookup: Lookup, hull: HullFinding) -> str:
    """A hull over one component in words: from where to where."""
    name = hull.over[0]
    ends = sorted(
        plane.at_most * plane.coefficients[name]
        for plane in map(_plainest, hull.facets or ())
        if name in plane.coefficients
    )
    places = lookup.places.get(name, 2)
    reach = words.with_unit(words.span((ends[0], ends[-1]), places), lookup.units.get(name, ""))
    return f"{words.capitalised(lookup.labels.get(name, name))} ({hull.basis} basis) of a blend can be {reach}."


def _facets_table(lookup: Lookup, hull: HullFinding, number: int) -> Table | None:
    if not hull.facets or len(hull.over) == 1:
        return None
    rows = [_half_plane_row(lookup, _plainest(half_plane)) for half_plane in hull.facets]
    return Table(
        anchor=f"half-planes-{number}",
        caption="The hull as inequalities",
        columns=(Column(title="Every blend has"), Column(title="Bound", kind="number")),
        rows=tuple(rows),
    )


def _half_plane_row(lookup: Lookup, plane: HalfPlane) -> Row:
    """A half-plane as a lower bound where every sign is minus: "N at least 10"."""
    is_lower = all(coefficient <= 0 for coefficient in plane.coefficients.values())
    sign = -1 if is_lower else 1
    shown = HalfPlane(
        coefficients={name: sign * coefficient for name, coefficient in plane.coefficients.items()},
        at_most=sign * plane.at_most,
    )
    bound = f"at {'least' if is_lower else 'most'} {numbers.significant(shown.at_most, 5)}"
    return Row(cells=(text_cell(_form_text(lookup, shown)), text_cell(bound)))


def _plainest(half_plane: HalfPlane) -> HalfPlane:
    """A bound on one component alone, with a coefficient of 1 or −1."""
    sizes = [abs(coefficient) for coefficient in half_plane.coefficients.values() if coefficient]
    if len(sizes) != 1:
        return half_plane
    return HalfPlane(
        coefficients={name: coefficient / sizes[0] for name, coefficient in half_plane.coefficients.items()},
        at_most=half_plane.at_most / sizes[0],
    )


def _form_text(lookup: Lookup, half_plane: HalfPlane) -> str:
    """Words such as "3 N − 4 K"."""
    text = ""
    for name, coefficient in half_plane.coefficients.items():
        if not coefficient:
            continue
        sign = numbers.MINUS if coefficient < 0 else "+"
        size = numbers.significant(abs(coefficient), 5)
        term = ("" if size == "1" else size + "\N{NO-BREAK SPACE}") + lookup.labels.get(name, name)
        text += f" {sign} {term}" if text else (sign if coefficient < 0 else "") + term
    return text


def _lots(lookup: Lookup, page: str) -> Section | None:
    lots = lookup.campaign.lots
    if not lots:
        return None
    settings = lookup.campaign.settings
    columns = [Column(title="Lot"), Column(title="Role")]
    texts: list[list[str]] = []
    if lookup.campaign.has_stock:
        columns.append(Column(title="Stock", unit=settings.quantity_unit, kind="number"))
        texts.append(aligned(_stock_text(lot) for lot in lots))
    if any(lot.cost is not None for lot in lots):
        unit = f"{settings.currency} per {settings.quantity_unit}"
        columns.append(Column(title="Cost", unit=unit, kind="number"))
        texts.append(aligned(_typed(lot.cost, "unknown") for lot in lots))
    for component in lookup.campaign.components:
        columns.append(Column(title=component.label or component.name, unit=component.unit, kind="number"))
        texts.append(aligned(as_typed(lot.assay.get(component.name)) for lot in lots))
    rows = [
        Row(
            cells=(
                lot_cell(lookup, lot.name, page),
                text_cell(_role(lookup.lot_findings.get(lot.name))),
                *(text_cell(column[position]) for column in texts),
            )
        )
        for position, lot in enumerate(lots)
    ]
    note = (
        "A corner lot is one that the others can't imitate; an inner lot could be blended from them. "
        "Assays stand as typed."
    )
    if any(reading.below for lot in lots for measured in lot.assay.values() for reading in measured.readings):
        rule = {"half": "half of it", "zero": "0", "limit": "whichever end is safe"}[settings.below_detection]
        note += f" “<” is below the detection limit, and counts as {rule}."
    table = Table(anchor="lots-table", caption="Lots", columns=tuple(columns), rows=tuple(rows), note=note)
    return Section(anchor="lots", title="Lots", tables=(table,))


def _stock_text(lot: Lot) -> str:
    return "unlimited" if lot.is_unlimited else _typed(lot.stock, numbers.UNKNOWN)


def _typed(number: Number | None, otherwise: str) -> str:
    return numbers.as_typed(number.value, number.text) if number else otherwise


def _role(finding: LotFinding | None) -> str:
    return finding.role if finding and finding.role else numbers.UNKNOWN


# --- records


def _revisions(lookup: Lookup) -> Section | None:
    if not lookup.book.revisions:
        return None
    rows = [
        Row(
            cells=(
                _revision_cell(lookup, line.number),
                text_cell(words.moment(line.recorded)),
                text_cell(line.headline),
                text_cell(line.program),
                text_cell(line.digest[:12], tone="code"),
            )
        )
        for line in reversed(lookup.book.revisions[-_MOST_REVISIONS:])
    ]
    if lookup.book.past:
        home = lookup.link(lookup.home, history_index(lookup.campaign.slug))
        rows.append(Row(cells=(Cell(text="All revisions", href=home), *([text_cell("")] * 4))))
    columns = (
        Column(title="Revision"),
        Column(title="Recorded"),
        Column(title="What happened"),
        Column(title="Program"),
        Column(title="Digest"),
    )
    table = Table(anchor="revisions-table", caption="Newest first", columns=columns, rows=tuple(rows), stacks=True)
    return Section(anchor="revisions", title="Revisions", tables=(table,))


def _revision_cell(lookup: Lookup, number: int) -> Cell:
    """A revision's number, which leads to its page where the newest ones' stories are told."""
    if not any(line.number == number for line in lookup.book.past):
        return text_cell(str(number))
    return Cell(text=str(number), href=lookup.link(lookup.home, revision_address(lookup.campaign.slug, number)))


def _read(lookup: Lookup) -> Section | None:
    notes = lookup.campaign.read
    if not notes:
        return None
    rows = [
        Row(
            cells=(
                text_cell(note.file),
                text_cell("" if note.row is None else str(note.row)),
                text_cell(note.what),
            )
        )
        for note in notes
    ]
    columns = (Column(title="File"), Column(title="Row", kind="number"), Column(title="What was read"))
    table = Table(
        anchor="read-table", caption="Rows left out or read in a special way", columns=columns, rows=tuple(rows)
    )
    return Section(anchor="read", title="What was read", tables=(table,))


def trouble_words(problems: Sequence[Problem]) -> str:
    """What the problems of the input mean for every answer, in a sentence; empty where nothing is left out."""
    count = sum(1 for problem in problems if problem.severity == "drops")
    if not count:
        return ""
    them = "it leaves" if count == 1 else "they leave"
    return f"{words.plural(count, 'problem')} in the input: {them} out lots or orders that these answers would need."


def problems_section(problems: Sequence[Problem], anchor: str = "problems") -> Section | None:
    """Problems as a table: where, what was found, what is wrong, what to write instead."""
    if not problems:
        return None
    rows = [
        Row(
            cells=(
                text_cell(problem.file),
                text_cell("" if problem.row is None else str(problem.row)),
                text_cell(problem.column or ""),
                text_cell(problem.found or "", tone="code"),
                text_cell(problem.message),
                text_cell(problem.remedy),
                text_cell(_SEVERITIES[problem.severity], tone="" if problem.severity == "note" else "bad"),
            )
        )
        for problem in problems
    ]
    titles: Iterable[str] = ("File", "Row", "Column", "Found", "What is wrong", "What to write instead", "Effect")
    columns = tuple(Column(title=title, kind="number" if title == "Row" else "text") for title in titles)
    table = Table(
        anchor=f"{anchor}-table", caption="Problems of the input", columns=columns, rows=tuple(rows), stacks=True
    )
    return Section(anchor=anchor, title="Problems", tables=(table,))


def verdict_counts(findings: Iterable[OrderFinding]) -> Mapping[str, int]:
    """How many orders have each verdict ("none": no answer)."""
    counts: dict[str, int] = {}
    for finding in findings:
        counts[finding.verdict or "none"] = counts.get(finding.verdict or "none", 0) + 1
    return counts
