"""Answers as one audience may see them: what was computed from hidden inputs is taken out.

Cost hides the least cost and its bound, the curve, worths and prices of lots; stock hides greatest amounts,
what runs out and the plan; a hidden component hides every answer of the orders that limit it but the
verdict.  Lots stand under the names they are shown by.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import TypeVar

from generator.findings.records import (
    Batch,
    BlockingProof,
    Branch,
    BranchProof,
    Cap,
    Conformity,
    CostBound,
    Face,
    Findings,
    LimitFinding,
    LotFinding,
    Multiplier,
    Nearest,
    OrderFinding,
    Plan,
    PlannedOrder,
    Proof,
    Recipe,
    RecipeProof,
)
from generator.intake.records import Campaign
from generator.report.redaction import by_shown_lot, shown_problems
from generator.report.veil import CARRIERS, NOT_ON_OFFER, Veil

T = TypeVar("T")

_SHARE_OF = "share of "
#: Reasons for leaving out a lot that tell an input, by how they begin.
_TELLING_REASONS = {
    "stock is": "stock",
    "its greatest share": "max share",
    "not available before": "available",
    "it is both": "material",
}
#: An amount this near to the stock is the stock.
_ALL_OF_IT = 1 - 1e-9


def redacted_findings(findings: Findings, campaign: Campaign, veil: Veil) -> Findings:
    """The answers without what is hidden; ``campaign`` is as read.  Sentences are still the old ones."""
    if veil.is_clear:
        return findings
    orders = {order.name: order for order in campaign.orders}
    shown = [item for item in findings.orders if item.order in orders and veil.shows_client(orders[item.order].client)]
    names = {item.order for item in shown}
    return replace(
        findings,
        title=veil.text(findings.title),
        components=tuple(item for item in findings.components if not veil.hides(item.name)),
        hulls=tuple(
            replace(hull, corners=tuple(map(veil.lot, hull.corners)))
            for hull in findings.hulls
            if not veil.hides(*hull.over)
        ),
        lots=tuple(_lot(item, names, veil) for item in findings.lots),
        orders=tuple(_order(item, campaign, veil) for item in shown),
        plan=_plan(findings.plan, veil),
        batches=() if veil.hides("stock", "amount") else _batches(findings.batches, names, veil),
        read=(),
        problems=shown_problems(findings.problems, veil),
    )


def _lot(finding: LotFinding, orders: set[str], veil: Veil) -> LotFinding:
    hides_hull = any(veil.hides(name) for name in finding.assay) or veil.hides(*CARRIERS)
    imitated = None if finding.imitated_by is None or hides_hull else by_shown_lot(finding.imitated_by, veil)
    return replace(
        finding,
        lot=veil.lot(finding.lot),
        stock=None if veil.hides("stock") else finding.stock,
        cost=None if veil.hides("cost") else finding.cost,
        assay=_shown(finding.assay, veil),
        imitated_by=imitated,
        stock_worth=None if veil.hides("stock", "cost", "price") or veil.client else finding.stock_worth,
        needed_by=tuple(name for name in finding.needed_by if name in orders),
        used_by=tuple(name for name in finding.used_by if name in orders),
    )


def _order(finding: OrderFinding, campaign: Campaign, veil: Veil) -> OrderFinding:
    finding = _under_shown_names(finding, veil)
    if veil.hides("cost"):
        finding = _without_cost(finding)
    if veil.hides("stock"):
        finding = _without_stock(finding, campaign, veil)
    if veil.hides("amount"):
        finding = _without_amount(finding)
    if veil.hides(*(limit.on for limit in finding.limits)) or veil.hides(*CARRIERS):
        finding = _without_quantities(finding, veil)
    elif veil.hides("min share", "max share") and _names_shares(finding.proof):
        finding = replace(finding, proof=None)
    return finding


# --- what each hidden input takes with it


def _without_cost(finding: OrderFinding) -> OrderFinding:
    return replace(
        finding,
        recipes={name: replace(recipe, cost=None, bound=None) for name, recipe in finding.recipes.items()},
        limits=tuple(replace(limit, worth=None, worth_holds=None) for limit in finding.limits),
        without_lot={name: (verdict, None) for name, (verdict, _) in finding.without_lot.items()},
        lifted={name: (verdict, None) for name, (verdict, _) in finding.lifted.items()},
        enters_at={},
        stays_up_to={},
        curve=(),
    )


def _without_stock(finding: OrderFinding, campaign: Campaign, veil: Veil) -> OrderFinding:
    """Without greatest amounts; a recipe's amounts that are a lot's whole stock would tell it, as a short
    order's proof would."""
    stocks = {veil.lot(lot.name): float(lot.stock.value) for lot in campaign.lots if lot.stock is not None}
    proof = finding.proof
    if isinstance(proof, RecipeProof):
        proof = None if finding.verdict == "short" else replace(proof, cap=None)
    return replace(
        finding,
        greatest_amount=None,
        greatest_recipe=None,
        runs_out=(),
        recipes={
            name: replace(recipe, amounts=None) if _tells_stock(recipe, stocks) else recipe
            for name, recipe in finding.recipes.items()
        },
        proof=proof,
    )


def _tells_stock(recipe: Recipe, stocks: Mapping[str, float]) -> bool:
    amounts = recipe.amounts or {}
    return any(amount >= stocks[name] * _ALL_OF_IT for name, amount in amounts.items() if name in stocks)


def _without_amount(finding: OrderFinding) -> OrderFinding:
    proof = finding.proof
    if isinstance(proof, RecipeProof):
        proof = replace(proof, cap=None)
    return replace(
        finding,
        amount=None,
        amount_low=None,
        amount_high=None,
        greatest_amount=None,
        greatest_recipe=None,
        runs_out=(),
        recipes={name: replace(recipe, amounts=None) for name, recipe in finding.recipes.items()},
        proof=proof,
    )


def _without_quantities(finding: OrderFinding, veil: Veil) -> OrderFinding:
    """Without everything that an order's hidden limits or values had a part in; verdict and shares stay."""
    return replace(
        finding,
        room=None,
        room_unit=None,
        recipes={name: _without_values(recipe, veil) for name, recipe in finding.recipes.items()},
        limits=tuple(_bounds_alone(limit) for limit in finding.limits if not veil.hides(limit.on)),
        nearest=None,
        wanted_lot=(),
        without_lot={},
        enters_at={},
        stays_up_to={},
        curve=(),
        left_out=dict.fromkeys(finding.left_out, NOT_ON_OFFER),
        proof=None,
    )


def _without_values(recipe: Recipe, veil: Veil) -> Recipe:
    return replace(
        recipe,
        conformity=Conformity(each=_shown(recipe.conformity.each, veil)),
        bound=None,
        room=None,
        remark="",
    )


def _bounds_alone(limit: LimitFinding) -> LimitFinding:
    return LimitFinding(on=limit.on, low=limit.low, high=limit.high, lots_range=limit.lots_range)


# --- names


def _under_shown_names(finding: OrderFinding, veil: Veil) -> OrderFinding:
    nearest = finding.nearest
    return replace(
        finding,
        barred_by=tuple(map(veil.text, finding.barred_by)),
        lifted={veil.text(name): value for name, value in finding.lifted.items()},
        greatest_recipe=None if finding.greatest_recipe is None else by_shown_lot(finding.greatest_recipe, veil),
        runs_out=tuple(map(veil.lot, finding.runs_out)),
        recipes={name: _recipe(recipe, veil) for name, recipe in finding.recipes.items()},
        nearest=None
        if nearest is None
        else Nearest(
            shares=by_shown_lot(nearest.shares, veil),
            values=_shown(nearest.values, veil),
            excess=_shown(nearest.excess, veil),
        ),
        wanted_lot=tuple(
            replace(wanted, values=None if wanted.values is None else _shown(wanted.values, veil))
            for wanted in finding.wanted_lot
        ),
        without_lot=by_shown_lot(finding.without_lot, veil),
        enters_at=by_shown_lot(finding.enters_at, veil),
        stays_up_to=by_shown_lot(finding.stays_up_to, veil),
        curve=tuple(replace(point, shares=by_shown_lot(point.shares, veil)) for point in finding.curve),
        left_out={veil.lot(name): _reason(reason, veil) for name, reason in finding.left_out.items()},
        proof=None if finding.proof is None else _proof(finding.proof, veil),
    )


def _reason(reason: str, veil: Veil) -> str:
    if any(veil.hides(name) for start, name in _TELLING_REASONS.items() if reason.startswith(start)):
        return NOT_ON_OFFER
    return veil.text(reason)


def _recipe(recipe: Recipe, veil: Veil) -> Recipe:
    bound = recipe.bound
    return replace(
        recipe,
        shares=by_shown_lot(recipe.shares, veil),
        exact=by_shown_lot(recipe.exact, veil),
        amounts=None if recipe.amounts is None else by_shown_lot(recipe.amounts, veil),
        bound=None
        if bound is None
        else CostBound(multipliers=_multipliers(bound.multipliers, veil), floor=bound.floor),
        values=_shown(recipe.values, veil),
        remark=veil.text(recipe.remark),
    )


def _shown(values: Mapping[str, T], veil: Veil) -> dict[str, T]:
    """A mapping by quantity without those that are hidden."""
    return {name: value for name, value in values.items() if not veil.hides(name)}


def _proof(proof: Proof, veil: Veil) -> Proof:
    if isinstance(proof, RecipeProof):
        return RecipeProof(
            shares=by_shown_lot(proof.shares, veil),
            face=None if proof.face is None else _face(proof.face, veil),
            cap=None if proof.cap is None else _cap(proof.cap, veil),
        )
    if isinstance(proof, BlockingProof):
        return replace(
            proof, multipliers=_multipliers(proof.multipliers, veil), scores=by_shown_lot(proof.scores, veil)
        )
    return BranchProof(branches=tuple(_branch(branch, veil) for branch in proof.branches))


def _face(face: Face, veil: Veil) -> Face:
    return Face(
        multipliers=_multipliers(face.multipliers, veil),
        scores=by_shown_lot(face.scores, veil),
        stuck=by_shown_lot(face.stuck, veil),
        on_face=tuple(map(veil.lot, face.on_face)),
    )


def _cap(cap: Cap, veil: Veil) -> Cap:
    return Cap(
        multipliers=_multipliers(cap.multipliers, veil),
        stock_weights=by_shown_lot(cap.stock_weights, veil),
        greatest=cap.greatest,
    )


def _branch(branch: Branch, veil: Veil) -> Branch:
    return replace(
        branch,
        rules=tuple(map(veil.text, branch.rules)),
        multipliers=_multipliers(branch.multipliers, veil),
        scores=by_shown_lot(branch.scores, veil),
    )


def _multipliers(multipliers: tuple[Multiplier, ...], veil: Veil) -> tuple[Multiplier, ...]:
    return tuple(
        replace(item, on=_shown_row(item.on, veil), terms=by_shown_lot(item.terms, veil)) for item in multipliers
    )


def _shown_row(name: str, veil: Veil) -> str:
    return _SHARE_OF + veil.lot(name.removeprefix(_SHARE_OF)) if name.startswith(_SHARE_OF) else name


def _names_shares(proof: Proof | None) -> bool:
    """Whether a proof rests on least or greatest shares of lots."""
    if proof is None:
        return False
    parts: Sequence[Face | Cap | BlockingProof | Branch]
    if isinstance(proof, RecipeProof):
        parts = [part for part in (proof.face, proof.cap) if part is not None]
        is_bounded = proof.face is not None and any(bound != "zero" for bound in proof.face.stuck.values())
    else:
        blocking = [proof] if isinstance(proof, BlockingProof) else list(proof.branches)
        parts, is_bounded = blocking, any(part.least is not None for part in blocking)
    return is_bounded or any(item.on.startswith(_SHARE_OF) for part in parts for item in part.multipliers)


# --- all orders together


def _plan(plan: Plan | None, veil: Veil) -> Plan | None:
    """The plan made anew from what may be shown of it; none where stock is hidden or orders of others are."""
    if plan is None or veil.client or veil.hides("stock", "amount"):
        return None
    hides_money = veil.hides("cost", "price")
    return Plan(
        value=None if hides_money else plan.value,
        orders={name: _planned(item, hides_money, veil) for name, item in plan.orders.items()},
        left=by_shown_lot(plan.left, veil),
        runs_out=tuple(map(veil.lot, plan.runs_out)),
        status=plan.status,
        gap=None if hides_money else plan.gap,
        measure=plan.measure,
        nodes=plan.nodes,
        one_more={} if hides_money else by_shown_lot(plan.one_more, veil),
        never_used=tuple(map(veil.lot, plan.never_used)),
        leftover=plan.leftover,
        unchecked=tuple(map(veil.lot, plan.unchecked)),
    )


def _planned(order: PlannedOrder, hides_money: bool, veil: Veil) -> PlannedOrder:
    return replace(
        order,
        amounts=by_shown_lot(order.amounts, veil),
        exact=by_shown_lot(order.exact, veil),
        priority=1 if veil.hides("priority") else order.priority,
        income=None if hides_money else order.income,
        cost=None if hides_money else order.cost,
        values=_shown(order.values, veil),
    )


def _batches(batches: tuple[Batch, ...], orders: set[str], veil: Veil) -> tuple[Batch, ...]:
    return tuple(
        replace(
            batch,
            amounts=by_shown_lot(batch.amounts, veil),
            values=_shown(batch.values, veil),
            exact=by_shown_lot(batch.exact, veil),
            steps={} if veil.hides("weigh step") else by_shown_lot(batch.steps, veil),
            breaks=tuple(map(veil.text, batch.breaks)),
            remark=veil.text(batch.remark),
        )
        for batch in batches
        if batch.order in orders and not veil.hides(*batch.values)
    )
