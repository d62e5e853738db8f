"""A Campaign becomes Findings: the one door of this room."""

from __future__ import annotations

from dataclasses import replace

from generator.findings.hulls import hull_findings
from generator.findings.lots import lot_findings
from generator.findings.measures import measures_of, unfit_derived
from generator.findings.orders import Desk, order_finding
from generator.findings.records import ComponentFinding, Findings
from generator.findings.values import table_of
from generator.intake.records import Campaign, Component
from generator.problems import Problem, stopping


def find(campaign: Campaign) -> Findings:
    """All answers of a campaign.  One that is stopped gets its problems and no answers."""
    problems = [*campaign.problems, *_refused(campaign)]
    findings = Findings(
        slug=campaign.slug,
        title=campaign.settings.title,
        quantity_unit=campaign.settings.quantity_unit,
        currency=campaign.settings.currency,
        components=tuple(_component(component) for component in campaign.components),
        read=campaign.read,
        problems=tuple(problems),
    )
    if stopping(problems):
        return findings
    table = table_of(campaign)
    measures = measures_of(campaign)
    problems.extend(table.problems)
    desk = Desk(campaign, table, measures)
    orders = tuple(order_finding(desk, order, problems) for order in campaign.orders)
    return replace(
        findings,
        hulls=hull_findings(campaign, table, measures),
        lots=lot_findings(campaign, table, measures, orders),
        orders=orders,
        problems=tuple(problems),
    )


def _component(component: Component) -> ComponentFinding:
    sd: float | str | None = None
    if component.sd is not None:
        sd = f"{float(component.sd.value * 100):g} %" if component.sd.relative else float(component.sd.value)
    return ComponentFinding(
        name=component.name,
        label=component.label,
        unit=component.unit,
        rule=component.rule,
        basis=component.basis,
        limit_basis=component.limit_basis,
        sd=sd,
    )


def _refused(campaign: Campaign) -> list[Problem]:
    """What was read and can't be obeyed: a house rule, or a derived quantity without a meaning."""
    problems = []
    house = campaign.house
    set_rules = {
        "max_lots": house.max_lots,
        "least_if_used": house.least_if_used or any(lot.least_if_used for lot in campaign.lots) or None,
        "keep_apart": house.keep_apart or None,
    }
    for rule, value in set_rules.items():
        if value is not None:
            problems.append(
                Problem(
                    file="campaign.toml",
                    column=f"house.{rule}",
                    message="this version does not obey this house rule, and answers that break it could do harm",
                    remedy="take the rule out to get answers without it, or keep it and get none",
                    severity="stops",
                )
            )
    components = {component.name: component for component in campaign.components}
    for derived in campaign.derived:
        reason = unfit_derived(derived, components)
        if reason is not None:
            problems.append(
                Problem(
                    file="campaign.toml",
                    column=f"derived.{derived.name}",
                    found=derived.text,
                    message=reason,
                    remedy="write it over linear components of one basis",
                    severity="stops",
                )
            )
    return problems
