"""A limited quantity as a ratio of two linear forms over the lots.

A component, a derived quantity and a group all read: value of the blend = Σ N_i x_i / Σ D_i x_i, in
index values.  From that follow the homogeneous row of a limit and the value of a recipe.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache

from generator.findings.rules import OutsideDomain, Rule, rule_named
from generator.findings.same import Same
from generator.findings.values import AMOUNT, Table
from generator.intake.records import Campaign, Component, Derived, Group, LinearForm, Quantity

ZERO = Fraction(0)


@dataclass(frozen=True, slots=True)
class Form:
    """Σ coefficient·value·carrier(component's basis) + constant·carrier(``basis``)."""

    terms: tuple[tuple[str, Fraction], ...]
    constant: Fraction
    basis: str


@dataclass(frozen=True, slots=True)
class Measure:
    """A quantity that can be limited: its name, its two forms and its blend rule."""

    name: str
    numerator: Form
    denominator: Form
    rule: Rule

    def needs(self) -> frozenset[str]:
        """Names of the components (or the group) whose values it takes."""
        return frozenset(name for name, _ in (*self.numerator.terms, *self.denominator.terms))

    @property
    def is_ratio(self) -> bool:
        """Whether its denominator is made of components, and could vanish."""
        return bool(self.denominator.terms)


def measures_of(campaign: Campaign) -> dict[str, Measure]:
    """Every quantity of a campaign that can be limited, by name.

    Derived quantities over components of different limit bases, or with a rule other than linear,
    are left out: :func:`unfit_derived` tells why.
    """
    components = {component.name: component for component in campaign.components}
    measures: dict[str, Measure] = {}
    for quantity in campaign.quantities().values():
        measure = _measure(quantity, components)
        if measure is not None:
            measures[quantity.name] = measure
    return measures


def unfit_derived(derived: Derived, components: Mapping[str, Component]) -> str | None:
    """Why a derived quantity can't be computed over the blend, or None if it can."""
    used = [components[name] for name in sorted(_names(derived)) if name in components]
    bent = [component.name for component in used if component.rule != "linear"]
    if bent:
        return f"{bent[0]} does not blend linearly, and a derived quantity takes linear components only"
    bases = sorted({component.limit_basis for component in used})
    if len(bases) > 1:
        return f"its components are limited on different bases ({', '.join(bases)})"
    return None


def _names(derived: Derived) -> set[str]:
    forms = (derived.numerator, derived.denominator or LinearForm(()))
    return {name for form in forms for name, _ in form.terms}


def _measure(quantity: Quantity, components: Mapping[str, Component]) -> Measure | None:
    linear = rule_named("linear")
    if isinstance(quantity, Group):
        form = Form(((quantity.name, Fraction(1)),), ZERO, AMOUNT)
        return Measure(quantity.name, form, Form((), Fraction(1), AMOUNT), linear)
    if isinstance(quantity, Component):
        basis = quantity.limit_basis
        form = Form(((quantity.name, Fraction(1)),), ZERO, basis)
        return Measure(quantity.name, form, Form((), Fraction(1), basis), rule_named(quantity.rule))
    if unfit_derived(quantity, components) is not None:
        return None
    names = sorted(_names(quantity))
    basis = components[names[0]].limit_basis if names else "as received"
    numerator = Form(quantity.numerator.terms, quantity.numerator.constant, basis)
    below = quantity.denominator
    denominator = Form(below.terms, below.constant, basis) if below else Form((), Fraction(1), basis)
    return Measure(quantity.name, numerator, denominator, linear)


def reports(measure: Measure, table: Table, lot: int) -> str | None:
    """What the lot lacks for this measure (a name), or None if it has all."""
    for name in sorted(measure.needs()):
        if table.values[name][lot] is None:
            return name
        if table.carriers[table.bases[name]][lot] is None:
            return _carrier_name(table.bases[name])
    for form in (measure.numerator, measure.denominator):
        needed = form.constant != 0
        if needed and table.carriers[form.basis][lot] is None:
            return _carrier_name(form.basis)
    return None


def _carrier_name(basis: str) -> str:
    return {"volume": "density", "mole": "molar mass", "ignited": "moisture or LOI"}.get(basis, "moisture")


def stated(form: Form, table: Table, lot: int) -> Fraction:
    """The form's value at one lot, on stated values."""
    total = form.constant * _carrier(table, form.basis, lot) if form.constant else ZERO
    for name, coefficient in form.terms:
        value = table.values[name][lot]
        assert value is not None, "usable lots report what their limits need"
        total += coefficient * value.stated * _carrier(table, table.bases[name], lot)
    return total


def excess(measure: Measure, bound: Fraction, side: str, table: Table, lot: int) -> Fraction:
    """By how much one unit of the lot alone breaks the limit ``bound`` (in index values).

    ``side`` high: N − bound·D; low: bound·D − N; exact: N − bound·D on stated values.  Below
    detection, each value stands at the end that is safe for this row.
    """
    sign = -1 if side == "low" else 1
    coefficients: dict[str, Fraction] = {}
    for name, coefficient in measure.numerator.terms:
        coefficients[name] = coefficients.get(name, ZERO) + sign * coefficient
    for name, coefficient in measure.denominator.terms:
        coefficients[name] = coefficients.get(name, ZERO) - sign * bound * coefficient
    total = ZERO
    for form, weight in ((measure.numerator, Fraction(sign)), (measure.denominator, -sign * bound)):
        if form.constant and weight:
            total += weight * form.constant * _carrier(table, form.basis, lot)
    for name, coefficient in coefficients.items():
        value = table.values[name][lot]
        assert value is not None, "usable lots report what their limits need"
        chosen = value.stated if side == "exact" else (value.most if coefficient > 0 else value.least)
        total += coefficient * chosen * _carrier(table, table.bases[name], lot)
    return total


def stated_forms(measure: Measure, table: Table) -> tuple[tuple[Fraction, Fraction] | None, ...]:
    """(numerator, denominator) at every lot of the campaign, on stated values; None where it lacks something."""
    return _stated_forms(Same(measure), Same(table))


@lru_cache(maxsize=512)
def _stated_forms(measure: Same[Measure], table: Same[Table]) -> tuple[tuple[Fraction, Fraction] | None, ...]:
    forms, own = (measure.value.numerator, measure.value.denominator), table.value
    lots = range(len(own.carriers[AMOUNT]))
    return tuple(
        (stated(forms[0], own, lot), stated(forms[1], own, lot)) if reports(measure.value, own, lot) is None else None
        for lot in lots
    )


def _carrier(table: Table, basis: str, lot: int) -> Fraction:
    carrier = table.carriers[basis][lot]
    assert carrier is not None, "usable lots have the carriers that their limits need"
    return carrier


def blend_value(measure: Measure, table: Table, lots: Sequence[int], shares: Mapping[int, Fraction]) -> Fraction | None:
    """The blend's value in the quantity's own unit; None where it has none (no denominator, no data)."""
    used = [lot for lot in lots if shares.get(lot)]
    forms = stated_forms(measure, table)
    known = [(form, shares[lot]) for lot in used if (form := forms[lot]) is not None]
    if len(known) < len(used):
        return None
    below = sum((form[1] * share for form, share in known), ZERO)
    above = sum((form[0] * share for form, share in known), ZERO)
    return None if below == 0 else own_value(measure.rule, above / below)


def own_value(rule: Rule, index: Fraction) -> Fraction | None:
    """An index value back in the component's own unit; None where no value has it."""
    try:
        return rule.value(index)
    except OutsideDomain:
        return None
