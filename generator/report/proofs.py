"""Proofs as tables that a reader can add up again with a pocket calculator.

Numbers with a short decimal form are exact; others stand with as many digits as a calculator shows,
and the shares once more as fractions.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from generator import numbers
from generator.findings.records import (
    BlockingProof,
    Branch,
    BranchProof,
    Cap,
    CostBound,
    Face,
    LimitFinding,
    Multiplier,
    OrderFinding,
    RecipeProof,
)
from generator.report import words
from generator.report.addresses import anchor
from generator.report.lookup import Lookup
from generator.report.parts import Column, Row, Section, Table, text_cell
from generator.report.weighed import DIGITS, LOT, combined_words, exact_cell, shown, weighed_table, weights_table

_BASIS_PARTS = {
    "as received": "amount",
    "dry": "dry part",
    "ignited": "ignited part",
    "volume": "volume",
    "mole": "moles",
}


def proof_section(lookup: Lookup, finding: OrderFinding) -> Section | None:
    """The proof of an order's verdict; None where there is no verdict."""
    proof = finding.proof
    if proof is None:
        return None
    if isinstance(proof, RecipeProof):
        return _recipe_section(lookup, finding, proof)
    if isinstance(proof, BlockingProof):
        return _blocking_section(lookup, proof)
    return _branches_section(lookup, proof)


# --- a recipe: shares times values


def _recipe_section(lookup: Lookup, finding: OrderFinding, proof: RecipeProof) -> Section:
    sums = (_sum_table(lookup, limit, proof.shares) for limit in finding.limits)
    folded = [Section(anchor="proof-exact", title="The shares exactly", tables=(_share_table(proof.shares),))]
    if proof.face is not None:
        folded.append(_face_section(lookup, proof.face))
    if proof.cap is not None:
        folded.append(_cap_section(lookup, finding, proof.cap))
    sentence = (
        "These shares meet every limit. Multiply each lot's share by its value and add: the sum is what the blend has. "
        f"Lots that have none of it are left out. Numbers without a short decimal form stand with {DIGITS} digits."
        if finding.limits
        else "The order has no limits: any blend will do."
    )
    return Section(
        anchor="proof",
        title="Proof",
        sentences=(sentence,),
        tables=tuple(table for table in sums if table is not None),
        folded=tuple(folded),
        layout="grid",
    )


def _share_table(shares: Mapping[str, Fraction]) -> Table:
    """The shares themselves, never rounded."""
    rows = [
        Row(
            cells=(
                text_cell(lot),
                text_cell(numbers.weight(share), tone="long"),
                text_cell(shown(share)),
            )
        )
        for lot, share in shares.items()
    ]
    total = sum(shares.values(), Fraction(0))
    rows.append(Row(cells=(text_cell("Sum"), text_cell(numbers.weight(total)), text_cell(shown(total))), is_total=True))
    columns = (LOT, Column(title="Exactly", kind="number"), Column(title="Share", kind="number"))
    return Table(anchor="proof-shares", caption="Shares of 1", columns=columns, rows=tuple(rows))


def _sum_table(lookup: Lookup, limit: LimitFinding, shares: Mapping[str, Fraction]) -> Table | None:
    """Share × value by lot and its sum for one limited quantity; two sums where the basis differs by lot."""
    quantity = limit.on
    parts = {lot: found for lot in shares if (found := lookup.parts(quantity, lot)) is not None}
    if len(parts) < len(shares):
        return None
    above = sum((share * parts[lot][0] for lot, share in shares.items()), Fraction(0))
    below = sum((share * parts[lot][1] for lot, share in shares.items()), Fraction(0))
    is_plain = all(part[1] == 1 for part in parts.values())
    counted = {lot: share for lot, share in shares.items() if not is_plain or parts[lot][0]}
    titles = ("Share", "× value", "= product") if is_plain else _ratio_titles(lookup, quantity)
    rows = [_sum_row(lot, share, parts[lot], is_plain) for lot, share in counted.items()]
    totals = [text_cell("Sum"), *([text_cell("")] * 2 if is_plain else []), exact_cell(above)]
    notes = []
    if not is_plain:
        totals.append(exact_cell(below))
        if below:
            notes.append(f"{shown(above)} ÷ {shown(below)} = {shown(above / below)}")
    rule = lookup.measures[quantity].rule
    if rule.name != "linear":
        notes.append(f"In index values of the blend rule “{rule.name}”; the limits pass through the same index.")
    rows.append(Row(cells=tuple(totals), is_total=True))
    asked = words.with_unit(words.window(limit.low, limit.high), lookup.units.get(quantity, ""))
    return Table(
        anchor=anchor("proof", quantity),
        caption=f"{lookup.labels.get(quantity, quantity)}: {asked}",
        columns=(LOT, *(Column(title=title, kind="number") for title in titles)),
        rows=tuple(rows),
        note=" ".join(notes),
    )


def _sum_row(lot: str, share: Fraction, parts: tuple[Fraction, Fraction], is_plain: bool) -> Row:
    if is_plain:
        values = (share, parts[0], share * parts[0])
        return Row(cells=(text_cell(lot), *(text_cell(shown(value)) for value in values)))
    products = (text_cell(shown(share * part), detail=f"{shown(share)} × {shown(part)}") for part in parts)
    return Row(cells=(text_cell(lot), *products))


def _ratio_titles(lookup: Lookup, quantity: str) -> tuple[str, ...]:
    measure = lookup.measures[quantity]
    basis = _BASIS_PARTS.get(measure.denominator.basis, measure.denominator.basis)
    names = ("numerator", "denominator") if measure.is_ratio else (lookup.labels.get(quantity, quantity), basis)
    return tuple(f"Share × {name}" for name in names)


# --- the kinds of proof made of multipliers


def _blocking_section(lookup: Lookup, proof: BlockingProof) -> Section:
    sentences, tables = _blocked(lookup, "proof", "", proof.multipliers, proof.scores, proof.least)
    return Section(anchor="proof", title="Proof", sentences=sentences, tables=tables)


def _blocked(
    lookup: Lookup,
    anchor_text: str,
    title: str,
    multipliers: Sequence[Multiplier],
    scores: Mapping[str, Fraction],
    least: Fraction | None,
) -> tuple[tuple[str, ...], tuple[Table, ...]]:
    in_words = combined_words(lookup, multipliers, list(scores)) if least is None else ""
    if least is None:
        why = (
            "Add the limits with these weights. The sum says by how much each lot breaks the combined limit: it is "
            "above 0 for every lot, so it is above 0 for every blend of them, and no blend can be within all limits."
        )
    else:
        why = (
            "Add the limits with these weights. Within the least and greatest shares allowed, the least that the "
            f"combined limit is broken by is {shown(least)}, which is above 0: no blend can be within all limits."
        )
    tables = (
        weights_table(lookup, multipliers, f"{anchor_text}-weights", f"{title}Limits that block, with their weights"),
        weighed_table(
            lookup,
            multipliers,
            list(scores),
            f"{anchor_text}-scores",
            f"{title}How much each lot breaks the combined limit",
            ("Total", lambda lot: scores[lot]),
        ),
    )
    return tuple(sentence for sentence in (in_words, why) if sentence), tables


def _branches_section(lookup: Lookup, proof: BranchProof) -> Section:
    folded = tuple(_branch_section(lookup, number, branch) for number, branch in enumerate(proof.branches, 1))
    sentence = (
        f"The house rules leave {words.plural(len(folded), 'way', 'ways')} to choose lots. "
        "Each is closed by a weighted combination of limits that all its lots break."
    )
    return Section(anchor="proof", title="Proof", sentences=(sentence,), folded=folded)


def _branch_section(lookup: Lookup, number: int, branch: Branch) -> Section:
    name = f"proof-branch-{number}"
    sentences, tables = _blocked(lookup, name, f"Way {number}: ", branch.multipliers, branch.scores, branch.least)
    title = f"{number}: {words.listed(branch.rules)}" if branch.rules else f"{number}"
    return Section(anchor=name, title=title, sentences=sentences, tables=tables)


def _face_section(lookup: Lookup, face: Face) -> Section:
    bounds = {"zero": "at 0", "min": "at its least share", "max": "at its greatest share"}
    stuck = words.listed(f"{lot} ({bounds[bound]})" for lot, bound in face.stuck.items())
    sentence = (
        "With these weights the total is 0 or more for every lot. A blend within the limits needs a total of 0, so the "
        f"share of a lot whose total is above 0 can't move: {stuck}. Only {words.listed(face.on_face) or 'no lot'} "
        f"{'is' if len(face.on_face) == 1 else 'are'} free."
    )
    tables = (
        weights_table(lookup, face.multipliers, "proof-face-weights", "The limits that make the edge"),
        weighed_table(
            lookup,
            face.multipliers,
            list(face.scores),
            "proof-face-scores",
            "How far each lot stands off the edge",
            ("Total", lambda lot: face.scores[lot]),
        ),
    )
    return Section(anchor="proof-face", title="Why it is the edge", sentences=(sentence,), tables=tables)


def _cap_section(lookup: Lookup, finding: OrderFinding, cap: Cap) -> Section:
    unit = lookup.campaign.settings.quantity_unit
    lots = [lot.name for lot in lookup.campaign.lots if lot.name not in finding.left_out]

    def total(lot: str) -> Fraction:
        rows = sum((m.weight * m.terms.get(lot, Fraction(0)) for m in cap.multipliers), Fraction(0))
        return rows + cap.stock_weights.get(lot, Fraction(0))

    weighed = weighed_table(
        lookup,
        cap.multipliers,
        lots,
        "proof-cap-rows",
        "Each lot's total, at least 1",
        ("Total", total),
        before=[("Stock weight", cap.stock_weights)],
    )
    rows = []
    for lot, share in cap.stock_weights.items():
        stock = lookup.lot(lot).stock
        if share and stock is not None:
            cells = (text_cell(lot), exact_cell(share), exact_cell(stock.value), exact_cell(share * stock.value))
            rows.append(Row(cells=cells))
    sums = (text_cell("Sum"), text_cell(""), text_cell(""), exact_cell(cap.greatest))
    rows.append(Row(cells=sums, is_total=True))
    columns = (
        LOT,
        Column(title="Stock weight", kind="number"),
        Column(title="× stock", unit=unit, kind="number"),
        Column(title="= product", unit=unit, kind="number"),
    )
    stock_table = Table(anchor="proof-cap-stock", caption="What the stock allows", columns=columns, rows=tuple(rows))
    sentence = (
        "Within the limits the first part of each total is 0 or less over a blend. So every unit made uses up at least "
        f"1 of weighted stock, and no more than {words.with_unit(shown(cap.greatest), unit)} can be made."
    )
    return Section(
        anchor="proof-cap", title="Why no more can be made", sentences=(sentence,), tables=(weighed, stock_table)
    )


def cost_bound_section(lookup: Lookup, bound: CostBound, lots: Sequence[str]) -> Section:
    """Why nothing is cheaper: each lot's cost and weighted limits, at least the floor."""
    costs = {lot.name: lot.cost.value for lot in lookup.campaign.lots if lot.cost is not None}
    priced = [lot for lot in lots if lot in costs]

    def total(lot: str) -> Fraction:
        return costs[lot] + sum((m.weight * m.terms.get(lot, Fraction(0)) for m in bound.multipliers), Fraction(0))

    settings = lookup.campaign.settings
    unit = f"{settings.currency} per {settings.quantity_unit}"
    sentence = (
        f"For every lot, its cost and the weighted limits come to at least {shown(bound.floor)} {unit}. Within the "
        "limits their second part is 0 or less over a blend, so no blend costs less."
    )
    table = weighed_table(
        lookup,
        bound.multipliers,
        priced,
        "proof-cost-rows",
        f"Each lot's total, at least {shown(bound.floor)}",
        ("Total", total),
        before=[("Cost", costs)],
    )
    return Section(anchor="proof-cost", title="Why nothing is cheaper", sentences=(sentence,), tables=(table,))
