"""Sentences said anew from findings that have been changed since: as an edition for one audience needs them."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from fractions import Fraction

from generator.findings.measures import Measure, measures_of
from generator.findings.model import OrderModel, model_of
from generator.findings.records import BlockingProof, BranchProof, Findings, OrderFinding, RecipeProof
from generator.findings.sentences import answer_sentence
from generator.findings.values import Table, table_of
from generator.findings.verdicts import Greatest, Judgement
from generator.findings.ways_out import can_be_met_at_all
from generator.intake.records import Campaign, Order

_SHORT = "Short: the stock is too small for the amount asked for."
#: What is left to say where the reasons are not shown.
_VERDICT_ALONE = {
    "makeable": "Makeable.",
    "edge": "Makeable, but on the edge of what the lots can make.",
    "short": _SHORT,
    "barred": "Barred: these lots could make it, but not within the house rules.",
    "unreachable": "Not makeable from these lots.",
    None: "No answer: the order's own data have a problem.",
}


def retold(findings: Findings, campaign: Campaign, shown: Campaign, name_of: Callable[[str], str]) -> Findings:
    """The findings with every order's sentence made from what they hold now.

    ``campaign`` is as it was read, ``shown`` as its readers see it; ``name_of`` gives the shown name of a
    lot, under which ``findings`` have it.
    """
    table, measures = table_of(campaign), measures_of(campaign)
    orders = {order.name: order for order in campaign.orders}
    return replace(
        findings,
        orders=tuple(
            replace(item, sentence=_sentence(item, orders[item.order], campaign, shown, (table, measures), name_of))
            for item in findings.orders
        ),
    )


def _sentence(
    finding: OrderFinding,
    order: Order,
    campaign: Campaign,
    shown: Campaign,
    known: tuple[Table, Mapping[str, Measure]],
    name_of: Callable[[str], str],
) -> str:
    judgement = _judgement(finding)
    if judgement is None:
        return _VERDICT_ALONE[finding.verdict]
    model = model_of(campaign, order, *known)
    if not isinstance(model, OrderModel) or not {limit.on for limit in finding.limits} <= set(model.limits):
        return _VERDICT_ALONE[finding.verdict]  # the answers of an earlier version may not fit
    is_absurd = finding.verdict == "unreachable" and not can_be_met_at_all(campaign, model, *known)
    model = replace(model, names=tuple(map(name_of, model.names)))
    return answer_sentence(shown, model, judgement, finding, is_absurd)


def _judgement(finding: OrderFinding) -> Judgement | None:
    """The judgement that a finding was made from, as far as it shows; None where too little is left."""
    verdict, proof = finding.verdict, finding.proof
    if isinstance(proof, BlockingProof):
        return Judgement(verdict="unreachable", blocking=proof)
    if isinstance(proof, BranchProof):
        return Judgement(verdict="barred", branches=proof)
    if verdict == "short" and finding.greatest_amount is not None and isinstance(proof, RecipeProof):
        amount = proof.cap.greatest if proof.cap is not None else Fraction(finding.greatest_amount)
        return Judgement(
            verdict="short",
            greatest=Greatest(amount=amount, shares=proof.shares, runs_out=finding.runs_out, cap=proof.cap),
        )
    if verdict in ("makeable", "edge") and isinstance(proof, RecipeProof) and "cheapest" in finding.recipes:
        return None if verdict == "edge" and proof.face is None else Judgement(verdict=verdict, face=proof.face)
    return None
