"""The hull of a campaign's lots over its limited components, one for each basis."""

from __future__ import annotations

from collections.abc import Mapping

from generator.findings.lots import limited_components
from generator.findings.measures import Measure, reports, stated
from generator.findings.records import HalfPlane, HullFinding
from generator.findings.values import Table
from generator.geometry.hull import hull
from generator.intake.records import Campaign


def hull_findings(campaign: Campaign, table: Table, measures: Mapping[str, Measure]) -> tuple[HullFinding, ...]:
    """Hulls in index values on each limit basis, over the components that every lot reports.

    Stock and cost are disregarded; groups are no components.
    """
    bases: dict[str, list[str]] = {}
    components = {component.name: component for component in campaign.components}
    for name in limited_components(campaign, measures):
        if all(reports(measures[name], table, lot) is None for lot in range(len(campaign.lots))):
            bases.setdefault(components[name].limit_basis, []).append(name)
    return tuple(_finding(campaign, table, measures, basis, over) for basis, over in bases.items() if campaign.lots)


def _finding(
    campaign: Campaign, table: Table, measures: Mapping[str, Measure], basis: str, over: list[str]
) -> HullFinding:
    points = [
        tuple(
            stated(measures[name].numerator, table, lot) / stated(measures[name].denominator, table, lot)
            for name in over
        )
        for lot in range(len(campaign.lots))
    ]
    shape = hull(points)
    facets = None
    if shape.facets is not None:
        facets = tuple(
            HalfPlane(
                coefficients={name: float(a) for name, a in zip(over, facet.coefficients, strict=True) if a},
                at_most=float(facet.at_most),
            )
            for facet in shape.facets
        ) + tuple(
            HalfPlane(
                coefficients={name: float(sign * a) for name, a in zip(over, equation.coefficients, strict=True) if a},
                at_most=float(sign * equation.equals),
            )
            for equation in shape.equations
            for sign in (1, -1)
        )
    return HullFinding(
        basis=basis,
        over=tuple(over),
        dimension=shape.dimension,
        corners=tuple(campaign.lots[i].name for i in shape.corners),
        volume=None if shape.volume is None else float(shape.volume),
        facets=facets,
    )
