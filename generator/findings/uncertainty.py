"""Assay error: each lot's standard uncertainty by component, and what it does to a limit's row.

Errors of lots and of components are independent but for a component's common bias (JCGM 100, 5.1 and
5.2).  Only assay error is in it: sampling and segregation are not, unless the typed sd includes them.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import sqrt

from generator.findings.measures import Measure
from generator.findings.model import Row
from generator.findings.values import Table, typed_values
from generator.intake.records import Campaign, Component, Lot, Measured

#: Digits kept of a standard uncertainty, which is never known to so many.
_DIGITS = 12


@dataclass(frozen=True, slots=True)
class Uncertainty:
    """By component: each lot's standard uncertainty in index values (None: unknown), and its bias sd.

    ``bias[name][i]`` is the common laboratory bias as it shows in lot i's index value.
    """

    of: Mapping[str, tuple[Fraction | None, ...]]
    bias: Mapping[str, tuple[Fraction, ...]]


@dataclass(frozen=True, slots=True)
class RowError:
    """What a row's terms are uncertain by, lot by lot: one entry for each component in it.

    ``parts[c][i]``: standard uncertainty of lot i's term from component c; ``biases[c][i]`` likewise of
    its common bias.  Components are told apart so that rows that share one are correlated.
    """

    parts: Mapping[str, tuple[Fraction, ...]]
    biases: Mapping[str, tuple[Fraction, ...]]

    def variances(self) -> tuple[Fraction, ...]:
        """Σ over components of the squared parts, for each lot."""
        columns = zip(*self.parts.values(), strict=True)
        return tuple(sum((part * part for part in column), Fraction(0)) for column in columns)


def uncertainty_of(campaign: Campaign, table: Table) -> Uncertainty:
    """Standard uncertainties from replicates, else the row's sd, else the component's; bias beside."""
    of: dict[str, tuple[Fraction | None, ...]] = {}
    bias: dict[str, tuple[Fraction, ...]] = {}
    for component in campaign.components:
        pooled = _pooled(component, campaign.lots)
        below = campaign.settings.below_detection
        us: list[Fraction | None] = []
        biases: list[Fraction] = []
        for lot in campaign.lots:
            measured = lot.assay.get(component.name)
            if measured is None:
                us.append(None)
                biases.append(Fraction(0))
                continue
            value = typed_values(measured, below).stated
            slope = _slope(table, component.name, value)
            own = _standard_uncertainty(component, measured, pooled, is_half=below == "half")
            us.append(None if own is None or slope is None else _kept(own * slope))
            shift = _spread(component.bias_sd.value, component.bias_sd.relative, value) if component.bias_sd else 0.0
            biases.append(_kept(shift * (slope or 0.0)))
        of[component.name], bias[component.name] = tuple(us), tuple(biases)
    for group in campaign.groups:
        of[group.name] = bias[group.name] = (Fraction(0),) * len(campaign.lots)
    return Uncertainty(of, bias)


def _kept(value: float) -> Fraction:
    return Fraction(f"{value:.{_DIGITS}g}")


def _spread(sd: Fraction, relative: bool, value: Fraction) -> float:
    return float(sd * abs(value)) if relative else float(sd)


def _slope(table: Table, name: str, value: Fraction) -> float | None:
    """|dI/da|; None where the index has no slope that could carry an error."""
    slope = abs(table.rules[name].slope(value)) if table.rules[name].name != "linear" else 1.0
    return slope if slope != float("inf") else None


def _pooled(component: Component, lots: Sequence[Lot]) -> float | None:
    """√(Σ(n−1)s² / Σ(n−1)) over the lots with replicates; readings below detection left out."""
    squares, freedom = Fraction(0), 0
    for lot in lots:
        measured = lot.assay.get(component.name)
        values = [reading.value for reading in measured.readings if not reading.below] if measured else []
        if len(values) > 1:
            mean = sum(values, Fraction(0)) / len(values)
            squares += sum(((value - mean) ** 2 for value in values), Fraction(0))
            freedom += len(values) - 1
    return sqrt(squares / freedom) if freedom else None


def _standard_uncertainty(
    component: Component, measured: Measured, pooled: float | None, *, is_half: bool
) -> float | None:
    """√(Σ u_r²)/n over the lot's n readings; None where one has no known uncertainty.

    A reading below detection L counts L/√12 under ``half`` (uniform on [0, L]), else nothing: its row
    takes the safe end, or 0 is what the site has decided.
    """
    total = 0.0
    n = len(measured.readings)
    for reading in measured.readings:
        if reading.below:
            total += float(reading.value) ** 2 / 12.0 if is_half else 0.0
            continue
        if n > 1 and pooled is not None:
            own: float | None = pooled
        elif measured.sds:
            own = sqrt(sum(float(sd.value) ** 2 for sd in measured.sds) / len(measured.sds))
        elif component.sd is not None:
            own = _spread(component.sd.value, component.sd.relative, reading.value)
        else:
            own = pooled
        if own is None:
            return None
        total += own**2
    return sqrt(total) / n


def row_error(
    row: Row, measure: Measure, table: Table, uncertainty: Uncertainty, lots: Sequence[int]
) -> RowError | None:
    """The error of a row's terms; None where a lot's uncertainty is unknown, or there is none at all."""
    sign = -1 if row.side == "low" else 1
    coefficients: dict[str, Fraction] = {}
    for form, weight in ((measure.numerator, Fraction(sign)), (measure.denominator, -sign * row.bound)):
        for name, coefficient in form.terms:
            coefficients[name] = coefficients.get(name, Fraction(0)) + weight * coefficient
    parts: dict[str, tuple[Fraction, ...]] = {}
    biases: dict[str, tuple[Fraction, ...]] = {}
    for name, coefficient in coefficients.items():
        known = [uncertainty.of[name][lot] for lot in lots]
        if any(u is None for u in known):
            return None
        carriers = [table.carriers[table.bases[name]][lot] or Fraction(0) for lot in lots]
        parts[name] = tuple(coefficient * c * (u or Fraction(0)) for c, u in zip(carriers, known, strict=True))
        biases[name] = tuple(
            coefficient * c * uncertainty.bias[name][lot] for c, lot in zip(carriers, lots, strict=True)
        )
    if not any(any(part) for part in (*parts.values(), *biases.values())):
        return None
    return RowError(parts, biases)
