"""The numbers of the lots as the rows need them: carriers, and values through their blend rule.

Shapes: one entry for each lot of the campaign, in file order; None where a lot can't be given one.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache

from generator.findings.rules import OutsideDomain, Rule, rule_named
from generator.findings.same import Same
from generator.intake.records import Basis, Below, Campaign, Component, Lot, Measured
from generator.problems import Problem

HUNDRED = Fraction(100)
#: The carrier of groups: shares of the order's amount itself, whatever its basis.
AMOUNT = "amount"


@dataclass(frozen=True, slots=True)
class Value:
    """What a lot's component counts for: as stated, and its safe ends where it lies below detection.

    All three are index values times nothing (no carrier yet).  ``least`` serves where a smaller value
    breaks a limit, ``most`` where a greater one does; they differ only under ``below_detection =
    "limit"``.
    """

    stated: Fraction
    least: Fraction
    most: Fraction


@dataclass(frozen=True, slots=True)
class Table:
    """Every lot's carriers and values.

    ``carriers[basis][i]`` is the amount of the basis in one unit of lot i (``AMOUNT``: always 1),
    ``values[name][i]`` the index value of component or group ``name``; ``bases`` and ``rules`` by name.
    """

    carriers: Mapping[str, tuple[Fraction | None, ...]]
    values: Mapping[str, tuple[Value | None, ...]]
    bases: Mapping[str, str]
    rules: Mapping[str, Rule]
    problems: tuple[Problem, ...]


def table_of(campaign: Campaign, *, wet_known: bool | None = None) -> Table:
    """The carriers and values of a campaign; values outside a rule's domain are problems.

    ``wet_known``: whether any lot at all has a moisture; None: whether one of these has.
    """
    problems: list[Problem] = []
    rules = {component.name: rule_named(component.rule) for component in campaign.components}
    if wet_known is None:
        wet_known = is_wet_known(campaign)
    carriers = {
        basis: tuple(_carrier(lot, basis, campaign.settings.quantity_basis, wet_known) for lot in campaign.lots)
        for basis in ("as received", "dry", "ignited", "volume", "mole")
    }
    values: dict[str, tuple[Value | None, ...]] = {
        component.name: tuple(
            _value(lot, component, rules[component.name], campaign.settings.below_detection, problems)
            for lot in campaign.lots
        )
        for component in campaign.components
    }
    carriers[AMOUNT] = (Fraction(1),) * len(campaign.lots)
    bases: dict[str, str] = {component.name: component.basis for component in campaign.components}
    for group in campaign.groups:
        members = set(group.lots)
        shares = (HUNDRED if lot.name in members else Fraction(0) for lot in campaign.lots)
        values[group.name] = tuple(Value(share, share, share) for share in shares)
        rules[group.name], bases[group.name] = rule_named("linear"), AMOUNT
    return Table(carriers, values, bases, rules, tuple(problems))


def is_wet_known(campaign: Campaign) -> bool:
    """Whether any lot has a moisture: then one without is not dry, but not known."""
    return any(lot.moisture is not None for lot in campaign.lots)


def _carrier(lot: Lot, basis: Basis | str, quantity_basis: Basis, wet_known: bool) -> Fraction | None:
    """The amount of ``basis`` in one unit of the lot's amount."""
    moisture = lot.moisture.value / HUNDRED if lot.moisture else None
    if quantity_basis == "dry":
        if basis == "dry":
            return Fraction(1)
        # Without any moisture column all material is dry: wet and dry amounts are one.
        wet = None if moisture is None and wet_known else 1 / (1 - (moisture or Fraction(0)))
    else:
        wet = Fraction(1)
    dry = Fraction(1) if quantity_basis == "dry" else (None if moisture is None else 1 - moisture)
    if basis == "as received":
        return wet
    if basis == "dry":
        return dry
    if basis == "ignited":
        return None if dry is None or lot.loi is None else dry * (1 - lot.loi.value / HUNDRED)
    divisor = lot.density if basis == "volume" else lot.molar_mass
    return None if wet is None or divisor is None else wet / divisor.value


def typed_values(measured: Measured, below: Below) -> Value:
    """The mean of the readings in the component's own unit."""
    return _typed_values(Same(measured), below)


@lru_cache(maxsize=4096)
def _typed_values(same: Same[Measured], below: Below) -> Value:
    measured = same.value
    share = Fraction(1, len(measured.readings))
    stated = least = most = Fraction(0)
    for reading in measured.readings:
        if not reading.below:
            ends = (reading.value, reading.value, reading.value)
        elif below == "zero":
            ends = (Fraction(0), Fraction(0), Fraction(0))
        elif below == "half":
            ends = (reading.value / 2, reading.value / 2, reading.value / 2)
        else:
            ends = (reading.value / 2, Fraction(0), reading.value)
        stated, least, most = stated + ends[0] * share, least + ends[1] * share, most + ends[2] * share
    return Value(stated, least, most)


def _value(lot: Lot, component: Component, rule: Rule, below: Below, problems: list[Problem]) -> Value | None:
    measured = lot.assay.get(component.name)
    if measured is None:
        return None
    typed = typed_values(measured, below)
    if rule.name == "linear":
        return typed
    try:
        ends = sorted((rule.index(typed.least), rule.index(typed.most)))
        return Value(rule.index(typed.stated), ends[0], ends[1])
    except OutsideDomain as outside:
        reading = measured.readings[0]
        place = reading.place or lot.place
        problems.append(
            Problem(
                file=place.file,
                row=place.row,
                column=place.column or component.name,
                found=reading.text,
                message=f"the blend rule {component.rule!r} has no index for this value: it {outside}",
                remedy="write the measured value, or n/a if it was not measured",
                severity="drops",
            )
        )
        return None
