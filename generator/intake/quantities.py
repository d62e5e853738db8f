"""What is limited: components, derived quantities and groups."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from fractions import Fraction
from typing import Any

from generator.intake.cells import NOT_MEASURED, parse_reading
from generator.intake.columns import CARRIERS, LOT_COLUMNS, ORDER_COLUMNS, Column
from generator.intake.expressions import ExpressionError, Ratio, parse_expression
from generator.intake.faults import Faults, did_you_mean, fold
from generator.intake.limits import LimitFault, parse_limit
from generator.intake.patterns import matches
from generator.intake.records import Basis, Component, Derived, Group, Limit, LinearForm, Lot, Place
from generator.intake.settings import Options
from generator.intake.sheets import Sheet
from generator.intake.units import conversion, is_fraction_unit, split_cell

#: A column that nothing names is a component if at least this share of its cells are readings; the others then are
#: mistakes in it.  Below, it is text.
NUMERIC_SHARE = Fraction(4, 5)


def names_in(expression: str) -> tuple[str, ...]:
    """Every name that an expression writes; none where it can't be read."""
    names: dict[str, None] = {}

    def note(name: str) -> str:
        names[name] = None
        return name

    try:
        parse_expression(expression, note)
    except ExpressionError:
        return tuple(names)
    return tuple(names)


def find_components(assays: Sheet, targets: Sheet | None, options: Options, faults: Faults) -> tuple[Component, ...]:
    """The components of a campaign, in the order of the assays' columns, then limited carriers.

    A column is a component if the settings declare it, an order or a derived quantity names it, its header has a unit
    or a column of standard deviations, or (nearly) all of its cells are readings.  Others are remarks.
    """
    wanted = _names_wanted(targets, options)
    declared = {fold(name): name for name in options.section("components")}
    components = []
    for column in assays.columns:
        if column.suffix and assays.find(column.name) is None:
            place = Place(assays.file, assays.header_row, column.header)
            faults.notes(place, f"there is no column {column.name} beside it", "add it, or leave this one out")
        if column.suffix or column.is_known:
            continue
        if fold(column.name) not in declared and not _is_component(assays, column, wanted):
            faults.tell(assays.file, assays.header_row, f"column {column.header}: not numbers, kept as a remark")
            continue
        components.append(_component(declared.get(fold(column.name), column.name), column.unit, options))
    for name in CARRIERS:
        if fold(name) in wanted or fold(name) in declared:
            carrier = assays.find(name)
            components.append(_carrier(name, carrier.unit if carrier is not None else None, options, faults))
    _check_declared(components, options, faults)
    return tuple(components)


def _names_wanted(targets: Sheet | None, options: Options) -> frozenset[str]:
    names: list[str] = []
    if targets is not None:
        names += [column.name for column in targets.columns if not column.is_known]
    for expression in options.section("derived").values():
        names += names_in(expression)
    names += options.settings.whole
    for plane in options.settings.planes:
        names += plane
    return frozenset(fold(name) for name in names)


def _is_component(assays: Sheet, column: Column, wanted: frozenset[str]) -> bool:
    cells = [cell.text for cell in assays.cells(column) if cell.text.casefold() not in NOT_MEASURED]
    readable = sum(parse_reading(text, assays.decimal).kind != "no number" for text in cells)
    if fold(column.name) in wanted or column.unit is not None or assays.find(column.name, "sd") is not None:
        return not cells or readable > 0
    return bool(cells) and readable >= NUMERIC_SHARE * len(cells)


def _component(name: str, header_unit: str | None, options: Options) -> Component:
    told: Mapping[str, Any] = options.section("components").get(name, {})
    unit = told.get("unit")
    if unit is None:
        unit = header_unit or ""
    basis: Basis = told.get("basis", options.settings.basis)
    return Component(
        name=name,
        label=told.get("label", name),
        unit=unit,
        basis=basis,
        limit_basis=told.get("limit_basis", basis),
        rule=told.get("rule", "linear"),
        sd=told.get("sd"),
        bias_sd=told.get("bias_sd"),
        tolerance=told.get("tolerance"),
        blank_is_zero=told.get("blank") == "zero",
    )


#: Unit, basis and rule of a carrier that is itself limited.  Density and molar mass per unit of mass are harmonic
#: means: volumes and moles add, and each is mass over the value (from the definitions).
_OF_CARRIER: Mapping[str, tuple[str | None, Basis, str]] = {
    "moisture": ("%", "as received", "linear"),
    "LOI": ("%", "dry", "linear"),
    "density": (None, "as received", "harmonic"),
    "molar mass": (None, "as received", "harmonic"),
}


def _carrier(name: str, header_unit: str | None, options: Options, faults: Faults) -> Component:
    unit, basis, rule = _OF_CARRIER[name]
    spelled = next((key for key in options.section("components") if fold(key) == fold(name)), name)
    told: Mapping[str, Any] = options.section("components").get(spelled, {})
    for key, fixed in (("basis", basis), ("rule", rule), ("unit", unit), ("blank", "unknown")):
        if fixed is not None and told.get(key, fixed) != fixed:
            faults.stops(
                options.place("components", spelled, key),
                f'can\'t be set: for {name} it is "{fixed}"',
                "leave this key out",
                found=str(told[key]),
            )
    return Component(
        name=name,
        label=told.get("label", name),
        unit=unit if unit is not None else told.get("unit", header_unit or ""),
        basis=basis,
        limit_basis=told.get("limit_basis", basis),
        rule=rule,
        sd=told.get("sd"),
        bias_sd=told.get("bias_sd"),
        tolerance=told.get("tolerance"),
    )


def _check_declared(components: Iterable[Component], options: Options, faults: Faults) -> None:
    """A problem for every declared component that no column is: a slip of the pen would unset its basis and sd."""
    found = [component.name for component in components]
    columns = {fold(name) for name in (*LOT_COLUMNS, *ORDER_COLUMNS)} - {fold(name) for name in CARRIERS}
    for name in options.section("components"):
        place = options.place("components", name)
        if fold(name) in columns:
            faults.stops(place, "is the name of a column that is no component", "choose another name", found=name)
        elif name not in found and fold(name) not in {fold(carrier) for carrier in CARRIERS}:
            if not options.is_of_campaign("components", name):
                continue
            slip = next((other for other in found if _lookalike(other) == _lookalike(name)), None)
            if slip is not None:
                faults.stops(place, "is no column of assays.csv", f'did you mean "{slip}"?', found=name)
            else:
                remedy = did_you_mean(name, found, "add the column, or leave this table out")
                faults.notes(place, "is no column of assays.csv", remedy, found=name)


def _lookalike(name: str) -> str:
    """The name with characters that are taken for each other made one: K20 is K2O mistyped, TiO2 is not SiO2."""
    return fold(name).translate(str.maketrans("01i|", "olll")).replace(" ", "").replace("_", "").replace("-", "")


def find_derived(components: tuple[Component, ...], options: Options, faults: Faults) -> tuple[Derived, ...]:
    """The derived quantities; a problem for each that is not linear, nor linear over linear, in components."""
    derived = []
    for name, text in options.section("derived").items():
        place = options.place("derived", name)
        taken = next((c.name for c in components if fold(c.name) == fold(name)), None)
        if taken is not None or fold(name) in {fold(known) for known in (*LOT_COLUMNS, *ORDER_COLUMNS)}:
            faults.stops(place, "is already the name of a column", "choose another name", found=name)
            continue
        made = _derive(name, text, place, components, faults)
        if made is not None:
            derived.append(made)
    return tuple(derived)


def _derive(name: str, text: str, place: Place, components: tuple[Component, ...], faults: Faults) -> Derived | None:
    spelled = {fold(component.name): component.name for component in components}
    try:
        ratio = parse_expression(text, lambda written: spelled.get(fold(written)))
    except ExpressionError as error:
        remedy = error.remedy or did_you_mean(
            error.found or "", spelled.values(), f"write one of {', '.join(spelled.values()) or 'the components'}"
        )
        faults.stops(place, error.message, remedy, found=error.found or text)
        return None
    used = {c.name: c for c in components if c.name in {n for form in _forms(ratio) for n, _ in form.terms}}
    fault = _mismatch(used.values())
    if fault is not None:
        faults.stops(place, *fault, found=text)
        return None
    units = [_common_unit(form, used) for form in _forms(ratio)]
    if len(units) == 2 and all(unit is None or is_fraction_unit(unit) for unit in units):
        units = [units[0] or units[1]] * 2
    if any(
        conversion(used[term].unit, unit or "") is None
        for form, unit in zip(_forms(ratio), units, strict=True)
        for term, _ in form.terms
    ):
        listed = ", ".join(f"{c.name} in {c.unit or 'no unit'}" for c in used.values())
        faults.stops(
            place, f"mixes units that don't convert ({listed})", "declare units of one kind in [components]", found=text
        )
        return None
    forms = [_in_unit(form, used, unit or "") for form, unit in zip(_forms(ratio), units, strict=True)]
    shown = (units[0] or "") if len(units) == 1 or units[1] is None else _quotient_unit(units[0], units[1])
    return Derived(
        name=name,
        label=name,
        unit=shown,
        text=text,
        numerator=forms[0],
        denominator=forms[1] if len(forms) == 2 else None,
    )


def _forms(ratio: Ratio) -> tuple[LinearForm, ...]:
    return (ratio.numerator,) if ratio.denominator is None else (ratio.numerator, ratio.denominator)


def _common_unit(form: LinearForm, used: Mapping[str, Component]) -> str | None:
    return next((used[name].unit for name, _ in form.terms), None)


def _in_unit(form: LinearForm, used: Mapping[str, Component], unit: str) -> LinearForm:
    """The form over components in their own units whose value is in ``unit``."""
    return LinearForm(
        tuple((name, value * (conversion(used[name].unit, unit) or Fraction(1))) for name, value in form.terms),
        form.constant,
    )


def _quotient_unit(above: str | None, below: str | None) -> str:
    if (above or "") == (below or ""):
        return ""
    return f"{above or '1'}/{below}" if below else above or ""


def _mismatch(used: Iterable[Component]) -> tuple[str, str] | None:
    """Why these components can't stand in one expression: message and remedy."""
    used = tuple(used)
    for component in used:
        if component.rule != "linear":
            return (
                f"holds {component.name}, which blends by the rule {component.rule}",
                "write it in components that blend linearly",
            )
    bases = {component.limit_basis: component.name for component in used}
    if len(bases) > 1:
        listed = ", ".join(f"{name} ({basis})" for basis, name in bases.items())
        return f"mixes bases: {listed}", "declare one limit_basis for them in [components]"
    return None


def find_groups(
    lots: tuple[Lot, ...], seen: tuple[Lot, ...], taken: Iterable[str], options: Options, faults: Faults
) -> tuple[Group, ...]:
    """The groups with their member lots among ``lots``; ``seen`` are all lots read, those left out too."""
    names = {fold(name) for name in (*taken, *LOT_COLUMNS, *ORDER_COLUMNS)}
    groups = []
    for name, told in options.section("groups").items():
        place = options.place("groups", name)
        if fold(name) in names:
            faults.stops(
                place, "is already the name of a component, derived quantity or column", "choose another", found=name
            )
            continue
        patterns: tuple[str, ...] = told.get("lots", ())
        if not patterns:
            faults.stops(place, "names no lots", 'write lots = ["name*"]', found=name)
            continue
        for pattern in patterns:
            if not any(matches(pattern, lot) for lot in seen):
                faults.stops(
                    options.place("groups", name, "lots"),
                    "matches no lot and no material",
                    did_you_mean(
                        pattern, _lot_words(seen), "write a lot's name, a material or a wildcard such as scrap*"
                    ),
                    found=pattern,
                )
        groups.append(
            Group(
                name=name,
                label=name,
                lots=tuple(lot.name for lot in lots if any(matches(pattern, lot) for pattern in patterns)),
                patterns=patterns,
                share=_share(told.get("share", ()), options.place("groups", name, "share"), faults),
            )
        )
    return tuple(groups)


def _lot_words(lots: Iterable[Lot]) -> Iterator[str]:
    for lot in lots:
        yield lot.name
        yield from lot.materials


def _share(texts: tuple[str, ...], place: Place, faults: Faults) -> Limit | None:
    """The tightest of the share limits, in percent."""
    lows, highs = [], []
    for text in texts:
        rest, unit = split_cell(text)
        bounds = parse_limit(rest) if unit in (None, "%") else LimitFault("is no share in percent", 'write "<= 30"')
        if isinstance(bounds, LimitFault):
            faults.stops(place, bounds.message, bounds.remedy, found=text)
        elif bounds is not None:
            lows += [bounds.low] if bounds.low is not None else []
            highs += [bounds.high] if bounds.high is not None else []
    if any(not 0 <= bound <= 100 for bound in (*lows, *highs)):
        faults.stops(
            place, "is a share outside 0 to 100 percent", 'write "<= 30" for at most 30 percent', found="; ".join(texts)
        )
        return None
    if not lows and not highs:
        return None
    low, high = max(lows, default=None), min(highs, default=None)
    if low is not None and high is not None and low > high:
        faults.stops(place, "has its low bound above its high bound", "make room between them", found="; ".join(texts))
        return None
    return Limit(low=low, high=high, text="; ".join(texts), place=place)
