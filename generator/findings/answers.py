"""A Campaign becomes Findings: the one door of this room."""

from __future__ import annotations

from dataclasses import replace

from generator.findings.ask import both, run, together
from generator.findings.batches import batches_of
from generator.findings.hulls import hull_findings
from generator.findings.lots import ask_roles, lot_findings
from generator.findings.measures import measures_of, unfit_derived
from generator.findings.orders import Desk, ask_order
from generator.findings.plan import plan_of, verdicts_of, with_worth
from generator.findings.records import ComponentFinding, Findings
from generator.findings.uncertainty import uncertainty_of
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
    desk = Desk(campaign, table, measures, uncertainty_of(campaign, table))
    # Orders and lots wait for their answers together: what all of them ask is solved side by side.
    reported, roles = run(
        both(
            together([ask_order(desk, order) for order in campaign.orders]),
            ask_roles(campaign, table, measures),
        )
    )
    orders = tuple(one.finding for one in reported)
    problems.extend(problem for one in reported for problem in one.problems)
    plan, left_out = plan_of(campaign, table, measures, verdicts_of(orders))
    problems.extend(left_out)
    return replace(
        findings,
        hulls=hull_findings(campaign, table, measures),
        lots=with_worth(lot_findings(campaign, roles, orders), plan),
        orders=orders,
        plan=plan,
        batches=batches_of(campaign, table, measures, plan) if plan else (),
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
    """Derived quantities that have no meaning over a blend."""
    problems = []
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
