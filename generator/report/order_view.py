"""An order's page: the answer first, the evidence under it, the data last."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

from generator import numbers
from generator.findings.records import LimitFinding, OrderFinding, Recipe
from generator.findings.sentences import DIGITS
from generator.report import words
from generator.report.figures import strips
from generator.report.figures.canvas import finished
from generator.report.lookup import Lookup, as_typed, order_of
from generator.report.parts import Cell, Column, Fact, FigureView, Legend, Row, Section, Table, aligned, text_cell
from generator.report.planes import Planes
from generator.report.proofs import cost_bound_section, proof_section
from generator.report.shares import limit_cell, limit_key, lot_cell, recipe_table, values_table
from generator.report.trial import trial_section
from generator.report.ways_out import room, ways_out, without_lot, worth
from generator.report.wholes import Wholes

#: Recipes shown open, in this order; the others are folded.
_OPEN = ("cheapest", "assured")
_FOLDED = ("roomiest", "closest", "fewest")


def order_facts(lookup: Lookup, finding: OrderFinding) -> tuple[Fact, ...]:
    """What the order is, and what can be said of it in a word or two."""
    order = order_of(lookup, finding)
    settings = lookup.campaign.settings
    unit, currency = settings.quantity_unit, settings.currency
    facts = [] if lookup.hides("amount") else [Fact(name="Amount", value=amount_text(finding, unit))]
    if order is not None:
        if order.client:
            facts.append(Fact(name="Client", value=order.client))
        if order.due is not None:
            facts.append(Fact(name="Due", value=order.due.isoformat()))
        if order.price is not None:
            price = f"{numbers.money(order.price.value)} {currency} per {unit}"
            facts.append(Fact(name="Price", value=price))
        if len({other.priority for other in lookup.campaign.orders}) > 1:
            facts.append(Fact(name="Priority", value=str(order.priority)))
    cheapest = finding.recipes.get("cheapest")
    if cheapest is not None and cheapest.cost is not None:
        facts.append(Fact(name="Least cost", value=f"{numbers.money(cheapest.cost)} {currency} per {unit}"))
    if finding.room is not None and finding.room_unit == "sd":
        facts.append(Fact(name="Room", value=words.with_unit(numbers.significant(finding.room, 3), "sd")))
    if finding.verdict == "short" and finding.greatest_amount is not None:
        facts.append(Fact(name="Greatest amount", value=words.with_unit(_greatest_text(finding), unit)))
    if not lookup.campaign.has_stock and not lookup.hides("stock"):
        facts.append(Fact(name="Stock", value="not checked"))
    return tuple(facts)


def _greatest_text(finding: OrderFinding) -> str:
    """The greatest amount with as many digits as the order's sentence gives it."""
    return numbers.significant(finding.greatest_amount or 0, DIGITS)


def amount_text(finding: OrderFinding, unit: str) -> str:
    """The amount asked for: a number, a range, or "not given"."""
    low, high = finding.amount_low, finding.amount_high
    if low is None and high is None:
        if finding.amount is None:
            return "not given"
        low = high = finding.amount
    if low == high:
        return words.with_unit(words.window(low, high).removeprefix("exactly "), unit)
    return words.with_unit(words.window(low, high), unit)


def order_sections(
    lookup: Lookup, planes: Planes, wholes: Wholes, finding: OrderFinding, page: str
) -> tuple[Section, ...]:
    """All parts of an order's page that have something to show, in reading order."""
    found = (
        *_recipes(lookup, finding, page),
        ways_out(lookup, finding, page),
        _limits(lookup, finding),
        _hull(planes, wholes, finding),
        trial_section(lookup, finding),
        room(lookup, finding),
        _other_recipes(lookup, finding, page),
        without_lot(lookup, finding, page),
        worth(lookup, finding, page),
        _left_out(lookup, finding, page),
        _proof(lookup, finding),
        _assays(lookup, finding, page),
    )
    return tuple(section for section in found if section is not None)


# --- recipes


def _recipes(lookup: Lookup, finding: OrderFinding, page: str) -> tuple[Section, ...]:
    shown = [name for name in _OPEN if name in finding.recipes]
    sections = [_recipe(lookup, finding, name, finding.recipes[name], page) for name in shown]
    greatest = _greatest(lookup, finding, page)
    return (*([greatest] if greatest else []), *sections)


def _recipe(lookup: Lookup, finding: OrderFinding, name: str, recipe: Recipe, page: str) -> Section:
    # A remark says what could be had in place of what the recipe is meant to be.
    sentences = [recipe.remark or words.RECIPE_MEANINGS[name]]
    if recipe.conformity.all is not None:
        together = words.with_unit(words.percent(recipe.conformity.all), "%")
        told = f"All limits hold together with a probability of {together}."
        is_first = name == next(other for other in finding.recipes if finding.recipes[other].conformity.all is not None)
        sentences.append(f"{told} {words.ASSAY_ERROR}" if is_first else told)
    caption = words.RECIPE_WORDS[name]
    return Section(
        anchor=name,
        title=caption,
        sentences=tuple(sentences),
        tables=(
            recipe_table(lookup, finding, recipe, f"{name}-recipe", "What goes in", page),
            *([_recipe_values(lookup, finding, recipe, name)] if finding.limits else []),
        ),
        layout="beside",
    )


def _recipe_values(lookup: Lookup, finding: OrderFinding, recipe: Recipe, name: str) -> Table:
    """Limits and the blend's values, with the probability of each where it is known."""
    table = values_table(lookup, finding, recipe.values, f"{name}-values", "What comes out", "Blend")
    if not any(probability is not None for probability in recipe.conformity.each.values()):
        return table
    rows = []
    for row, limit in zip(table.rows, finding.limits, strict=True):
        probability = recipe.conformity.each.get(limit.on)
        text = numbers.UNKNOWN if probability is None else words.percent(probability)
        rows.append(Row(cells=(*row.cells, text_cell(text))))
    columns = (*table.columns, Column(title="Holds with", unit="%", kind="number"))
    return Table(anchor=table.anchor, caption=table.caption, columns=columns, rows=tuple(rows))


def _greatest(lookup: Lookup, finding: OrderFinding, page: str) -> Section | None:
    """What can be made of a short order, and which lots run out."""
    if finding.verdict != "short" or not finding.greatest_recipe or finding.greatest_amount is None:
        return None
    unit = lookup.campaign.settings.quantity_unit
    total = _greatest_text(finding)
    places = numbers.decimals([total])
    amounts = numbers.apportioned(
        {name: Fraction(share) for name, share in finding.greatest_recipe.items()},
        Fraction(round(Fraction(finding.greatest_amount) * 10**places), 10**places),
        places,
    )
    shares = {name: Fraction(share) for name, share in finding.greatest_recipe.items()}
    percent = numbers.percent_shares(shares, max(1, numbers.share_places(shares.values())))
    share_places = max(1, numbers.share_places(shares.values()))
    rows = []
    for name, amount in amounts.items():
        runs_out = "runs out" if name in finding.runs_out else ""
        cells = (
            lot_cell(lookup, name, page),
            text_cell(numbers.text(percent[name], share_places)),
            text_cell(numbers.text(amount, places)),
            text_cell(runs_out),
        )
        rows.append(Row(cells=cells))
    rows.append(
        Row(
            cells=(text_cell("Blend"), text_cell(numbers.text(100, share_places)), text_cell(total), text_cell("")),
            is_total=True,
        )
    )
    columns = (
        Column(title="Lot"),
        Column(title="Share", unit="%", kind="number"),
        Column(title="Amount", unit=unit, kind="number"),
        Column(title="Stock"),
    )
    table = Table(anchor="greatest-recipe", caption="Greatest amount", columns=columns, rows=tuple(rows))
    sentence = f"At most {words.with_unit(total, unit)} can be made within the limits from this stock."
    return Section(anchor="greatest", title="Greatest amount", sentences=(sentence,), tables=(table,))


def _other_recipes(lookup: Lookup, finding: OrderFinding, page: str) -> Section | None:
    folded = tuple(
        _recipe(lookup, finding, name, finding.recipes[name], page) for name in _FOLDED if name in finding.recipes
    )
    return Section(anchor="other-recipes", title="Other recipes", folded=folded) if folded else None


# --- limits and the hull


def _limits(lookup: Lookup, finding: OrderFinding) -> Section | None:
    if not finding.limits:
        return None
    return Section(
        anchor="limits",
        title="Limits",
        figures=(_strips(lookup, finding),),
        tables=(_limits_table(lookup, finding),),
        layout="beside",
    )


def _strips(lookup: Lookup, finding: OrderFinding) -> FigureView:
    shown = _shown_values(finding)
    drawn = [_strip(lookup, limit, shown[1].get(limit.on)) for limit in finding.limits]
    legend = [Legend(mark="window-strip", text="asked"), Legend(mark="range", text="range of the lots")]
    if any(strip.attainable is not None for strip in drawn):
        legend.append(Legend(mark="attainable", text="attainable, all other limits kept"))
    if any(strip.value is not None for strip in drawn):
        legend.append(Legend(mark="blend", text=shown[0]))
    caption = "Each limit on a scale of its own: what the lots have, what blends can attain, what is asked."
    told = " ".join(
        f"{lookup.labels.get(limit.on, limit.on)}: asked {words.window(limit.low, limit.high)}"
        + (f", {shown[0]} {strip.value_text}" if strip.value is not None else "")
        + "."
        for limit, strip in zip(finding.limits, drawn, strict=True)
    )
    keys = [limit_key(lookup, limit.on) for limit in finding.limits]
    svg = finished(strips.draw(drawn), "fig-strips", "Limit strips", f"{caption} {told}", strips.touch(keys))
    return FigureView(anchor="limit-strips", title="Limit strips", svg=svg, caption=caption, legend=tuple(legend))


def _shown_values(finding: OrderFinding) -> tuple[str, Mapping[str, float]]:
    """The blend whose values the strips show, and what it is called."""
    if "cheapest" in finding.recipes:
        return "cheapest recipe", finding.recipes["cheapest"].values
    if finding.nearest is not None:
        return "nearest blend", finding.nearest.values
    return "", {}


def _strip(lookup: Lookup, limit: LimitFinding, value: float | None) -> strips.Strip:
    places = lookup.places.get(limit.on, 2)
    broken = value is not None and (
        (limit.low is not None and value < limit.low) or (limit.high is not None and value > limit.high)
    )
    return strips.Strip(
        label=lookup.labels.get(limit.on, limit.on),
        unit=lookup.units.get(limit.on, ""),
        places=places,
        window=(limit.low, limit.high),
        lots=limit.lots_range,
        attainable=limit.attainable,
        value=value,
        value_text="" if value is None else words.beside(value, limit.low, limit.high, places),
        holds=not broken,
    )


def _limits_table(lookup: Lookup, finding: OrderFinding) -> Table:
    rows = []
    for limit in finding.limits:
        places = lookup.places.get(limit.on, 2)
        cells = (
            limit_cell(lookup, limit.on),
            text_cell(words.window(limit.low, limit.high)),
            _attainable_cell(limit, places),
            text_cell(words.span(limit.lots_range, places)),
        )
        rows.append(Row(cells=cells))
    columns = (
        Column(title="Limit"),
        Column(title="Asked", kind="number"),
        Column(title="Attainable", kind="number"),
        Column(title="Range of the lots", kind="number"),
    )
    note = (
        "Attainable: the least and greatest that a blend can have with all other limits kept, stock and this limit "
        "aside. “None” means that the other limits alone already block."
    )
    return Table(anchor="attainable", caption="What can be attained", columns=columns, rows=tuple(rows), note=note)


def _attainable_cell(limit: LimitFinding, places: int) -> Cell:
    if limit.attainable is None:
        return text_cell("none", tone="bad")
    least, greatest = limit.attainable
    misses = (limit.low is not None and greatest is not None and greatest < limit.low) or (
        limit.high is not None and least is not None and least > limit.high
    )
    return text_cell(words.span(limit.attainable, places), tone="bad" if misses else "")


def _hull(planes: Planes, wholes: Wholes, finding: OrderFinding) -> Section | None:
    figures = tuple(figure for figure in (planes.of_order(finding), wholes.of_order(finding)) if figure is not None)
    return Section(anchor="hull-section", title="Hull", figures=figures) if figures else None


# --- evidence and data


def _left_out(lookup: Lookup, finding: OrderFinding, page: str) -> Section | None:
    if not finding.left_out:
        return None
    rows = [Row(cells=(lot_cell(lookup, name, page), text_cell(reason))) for name, reason in finding.left_out.items()]
    table = Table(
        anchor="left-out-lots",
        caption="Lots left out",
        columns=(Column(title="Lot"), Column(title="Reason")),
        rows=tuple(rows),
    )
    return Section(anchor="left-out", title="Lots left out", tables=(table,))


def _proof(lookup: Lookup, finding: OrderFinding) -> Section | None:
    section = proof_section(lookup, finding)
    cheapest = finding.recipes.get("cheapest")
    if section is None and finding.verdict is not None:
        return Section(anchor="proof", title="Proof", sentences=(words.PROOF_WITHHELD,))
    if section is None or cheapest is None or cheapest.bound is None:
        return section
    lots = [lot.name for lot in lookup.campaign.lots if lot.name not in finding.left_out]
    bound = cost_bound_section(lookup, cheapest.bound, lots)
    return Section(
        anchor=section.anchor,
        title=section.title,
        sentences=section.sentences,
        tables=section.tables,
        folded=(*section.folded, bound),
        layout=section.layout,
    )


def _assays(lookup: Lookup, finding: OrderFinding, page: str) -> Section | None:
    """The limited components of every lot, as the laboratory typed them."""
    needed = {
        name for limit in finding.limits if limit.on in lookup.measures for name in lookup.measures[limit.on].needs()
    }
    components = [component for component in lookup.campaign.components if component.name in needed]
    if not components:
        return None
    columns = [Column(title="Lot")]
    texts = []
    for component in components:
        columns.append(Column(title=component.label or component.name, unit=component.unit, kind="number"))
        texts.append(aligned(as_typed(lot.assay.get(component.name)) for lot in lookup.campaign.lots))
    rows = [
        Row(cells=(lot_cell(lookup, lot.name, page), *(text_cell(column[position]) for column in texts)))
        for position, lot in enumerate(lookup.campaign.lots)
    ]
    table = Table(
        anchor="assays-table",
        caption="As typed",
        columns=tuple(columns),
        rows=tuple(rows),
        note=f"Typed on basis: {words.listed(sorted({component.basis for component in components}))}.",
    )
    return Section(anchor="assays", title="Assays", tables=(table,))
