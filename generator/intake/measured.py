"""Component cells of one lot become what was measured, in the component's own unit."""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction

from generator.intake.cells import Typed, parse_reading, suggest_number
from generator.intake.entries import Cells, value_of
from generator.intake.faults import Faults
from generator.intake.records import Component, Measured, Number, Place, Reading
from generator.intake.sheets import Cell
from generator.intake.units import conversion, is_fraction_unit, split_cell

_MESSAGES = {
    "undetected": (
        'may mean "not detected" or "not determined"',
        'write "<0.01" with the detection limit, or leave the cell blank where it was not measured',
    ),
    "above": ("says only that the value is greater", "write the measured value, or leave the cell blank"),
    "error": ("is an error of a spreadsheet", "mend its formula, or leave the cell blank where it was not measured"),
}


def read_assay(entry: Cells, components: Iterable[Component], faults: Faults) -> dict[str, Measured]:
    """What was measured of each component; a component not measured is absent."""
    assay = {}
    for component in components:
        readings = [
            reading for cell in entry.get(component.name) if (reading := _reading(cell, component, faults)) is not None
        ]
        if not readings and component.blank_is_zero:
            readings = [Reading(Fraction(0), "")]
        if readings:
            # Standard deviations are in the unit of the values beside them unless their own header says otherwise.
            unit = next((cell.unit for cell in entry.get(component.name)), None)
            sds = (_spread(cell, unit, component, faults) for cell in entry.get(component.name, "sd"))
            assay[component.name] = Measured(tuple(readings), tuple(sd for sd in sds if sd is not None))
    return assay


def unit_factor(unit: str | None, component: Component, place: Place, faults: Faults) -> Fraction | None:
    """The factor from a column's or cell's unit into the component's; a problem where they don't convert."""
    if unit is None:
        return Fraction(1)
    factor = conversion(unit, component.unit)
    if factor is None:
        faults.stops_once(
            place,
            f"is in {unit or 'no unit'}, and {component.name} is in {component.unit or 'no unit'}",
            f'write the values in one unit, or declare unit under [components."{component.name}"] in campaign.toml',
            found=unit,
        )
    return factor


def _reading(cell: Cell, component: Component, faults: Faults) -> Reading | None:
    text, unit = split_cell(cell.text)
    typed = parse_reading(text, cell.decimal)
    if typed.kind == "not measured":
        return None
    if typed.kind not in ("value", "below"):
        _refuse(cell, typed, faults)
        return None
    factor = unit_factor(unit or cell.unit, component, cell.place, faults)
    if factor is None:
        return None
    value = typed.value if factor == 1 else typed.value * factor
    if typed.kind == "below" and value <= 0:
        faults.drops(
            cell.place, "is below a detection limit that is not above 0", "write the detection limit", found=cell.text
        )
        return None
    percent = conversion(component.unit, "%") if is_fraction_unit(component.unit) else None
    if percent is not None and not 0 <= value * percent <= 100:
        faults.drops(cell.place, "is outside 0 to 100 percent", "write the measured value", found=cell.text)
        return None
    return Reading(value, cell.text, cell.place, below=typed.kind == "below")


def _refuse(cell: Cell, typed: Typed, faults: Faults) -> None:
    otherwise = "write a number, or leave the cell blank where it was not measured"
    message, remedy = _MESSAGES.get(typed.kind, ("is not a number", suggest_number(cell.text, cell.decimal, otherwise)))
    faults.drops(cell.place, message, remedy, found=cell.text)


def _spread(cell: Cell, unit: str | None, component: Component, faults: Faults) -> Number | None:
    if parse_reading(cell.text, cell.decimal).kind == "not measured":
        return None
    factor = unit_factor(cell.unit or unit, component, cell.place, faults)
    number = value_of(cell, faults, least=0)
    return None if number is None or factor is None else Number(number.value * factor, number.text, number.place)
