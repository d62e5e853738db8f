"""Limits with weights as tables: each row can be added up again with a pocket calculator."""

from __future__ import annotations

import functools
from collections.abc import Callable, Mapping, Sequence
from fractions import Fraction

from generator import numbers
from generator.findings.records import Multiplier
from generator.report import words
from generator.report.lookup import Lookup
from generator.report.parts import Cell, Column, Row, Table, text_cell

#: Digits of a number that has no short decimal form: as many as a pocket calculator shows.
DIGITS = 7
#: A longer fraction helps nobody in a column of products.
_LONGEST_FRACTION = 14
LOT = Column(title="Lot")
_SIDE_WORDS = {"low": "at least", "high": "at most", "exact": "exactly"}


@functools.lru_cache(maxsize=4096)
def exact_cell(value: Fraction, tone: str = "") -> Cell:
    """An exact number; a fraction that has no short decimal form has its rounded value below it."""
    if numbers.exact_places(value) is not None:
        return Cell(text=numbers.exact(value), tone=tone)
    if len(str(value.numerator)) + len(str(value.denominator)) > _LONGEST_FRACTION:
        return Cell(text=f"≈ {shown(value)}", tone=tone)
    return Cell(text=numbers.weight(value), detail=f"≈ {shown(value)}", tone=tone)


@functools.lru_cache(maxsize=4096)
def shown(value: Fraction) -> str:
    """A number as a calculator shows it: exact where it has a short decimal form, else with ``DIGITS`` digits."""
    return numbers.exact(value) if numbers.exact_places(value) is not None else numbers.significant(value, DIGITS)


def multiplier_words(lookup: Lookup, multiplier: Multiplier) -> str:
    """Words such as "K₂O at most 4.5 %"."""
    label = lookup.labels.get(multiplier.on, multiplier.on)
    bound, unit = multiplier.bound, lookup.units.get(multiplier.on, "")
    return words.with_unit(f"{label} {_SIDE_WORDS[multiplier.side]} {shown(bound)}", unit)


def weights_table(lookup: Lookup, multipliers: Sequence[Multiplier], anchor_text: str, caption: str) -> Table:
    """The limits that count, each with its weight."""
    rows = [
        Row(cells=(text_cell(multiplier_words(lookup, multiplier)), exact_cell(multiplier.weight)))
        for multiplier in multipliers
    ]
    columns = (Column(title="Limit"), Column(title="Weight", kind="number"))
    return Table(anchor=anchor_text, caption=caption, columns=columns, rows=tuple(rows))


def weighed_table(
    lookup: Lookup,
    multipliers: Sequence[Multiplier],
    lots: Sequence[str],
    anchor_text: str,
    caption: str,
    total: tuple[str, Callable[[str], Fraction]],
    before: Sequence[tuple[str, Mapping[str, Fraction]]] = (),
) -> Table:
    """For each lot, weight × how much it breaks each limit, and the total of the row.

    ``before`` are further columns (title, value by lot) that the total contains.
    """
    columns = [LOT, *(Column(title=title, kind="number") for title, _ in before)]
    columns += [Column(title=multiplier_words(lookup, multiplier), kind="number") for multiplier in multipliers]
    columns.append(Column(title=total[0], kind="number"))
    rows = []
    for lot in lots:
        cells = [text_cell(lot), *(exact_cell(values.get(lot, Fraction(0))) for _, values in before)]
        cells += [_product_cell(multiplier, lot) for multiplier in multipliers]
        cells.append(exact_cell(total[1](lot)))
        rows.append(Row(cells=tuple(cells)))
    return Table(anchor=anchor_text, caption=caption, columns=tuple(columns), rows=tuple(rows))


def _product_cell(multiplier: Multiplier, lot: str) -> Cell:
    term = multiplier.terms.get(lot, Fraction(0))
    product = exact_cell(multiplier.weight * term)
    factor = shown(term) if term >= 0 else f"({shown(term)})"
    return Cell(text=product.text, detail=f"{shown(multiplier.weight)} × {factor}")


def combined_words(lookup: Lookup, multipliers: Sequence[Multiplier], lots: Sequence[str]) -> str:
    """The blocking proof in one sentence, where its limits share one basis; else empty.

    Σ ± weight·value must be at least what the bounds come to, and is less in every lot.
    """
    measures = [lookup.measures.get(multiplier.on) for multiplier in multipliers]
    if any(measure is None or measure.is_ratio or measure.rule.name != "linear" for measure in measures):
        return ""
    if len({measure.denominator.basis for measure in measures if measure}) != 1:
        return ""
    signs = [Fraction(1) if multiplier.side == "low" else Fraction(-1) for multiplier in multipliers]
    factors = [sign * multiplier.weight for sign, multiplier in zip(signs, multipliers, strict=True)]
    asked = sum((f * multiplier.bound for f, multiplier in zip(factors, multipliers, strict=True)), Fraction(0))
    flip = -1 if all(factor < 0 for factor in factors) else 1
    had = []
    for lot in lots:
        values = [lookup.value(multiplier.on, lot) for multiplier in multipliers]
        had.append(sum((flip * f * (v or 0) for f, v in zip(factors, values, strict=True)), Fraction(0)))
    form = _form_words(lookup, [flip * factor for factor in factors], [multiplier.on for multiplier in multipliers])
    best = max(had) if flip > 0 else min(had)
    must, reached = ("at least", "at most") if flip > 0 else ("at most", "at least")
    reached = "" if min(had) == max(had) else reached + " "
    return f"{form} must be {must} {shown(flip * asked)}, and is {reached}{shown(best)} in every lot."


def _form_words(lookup: Lookup, factors: Sequence[Fraction], names: Sequence[str]) -> str:
    text = ""
    for factor, name in zip(factors, names, strict=True):
        label, size = lookup.labels.get(name, name), abs(factor)
        term = label if size == 1 else f"{shown(size)}\N{NO-BREAK SPACE}{label}"
        sign = (numbers.MINUS if factor < 0 else "") if not text else (f" {numbers.MINUS} " if factor < 0 else " + ")
        text += sign + term
    return text
