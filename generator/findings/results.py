"""Findings to and from JSON: the format ``hullbook-results-1``.

``from_json(to_json(findings)) == findings``.  Reading is lenient towards older files: a key that is
not there yet reads as "no answer", so that a revision written by an earlier version still shows.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from fractions import Fraction
from typing import Any

from generator.findings.records import (
    Batch,
    BlockingProof,
    Branch,
    BranchProof,
    Cap,
    ComponentFinding,
    Conformity,
    CostBound,
    CurvePoint,
    Face,
    Findings,
    HalfPlane,
    HullFinding,
    LimitFinding,
    Loser,
    LotFinding,
    Multiplier,
    Nearest,
    OrderFinding,
    Plan,
    PlannedOrder,
    PlanStage,
    Proof,
    Recipe,
    RecipeProof,
    RevisionMark,
    Verdict,
    WantedLot,
)
from generator.intake.records import ReadNote
from generator.problems import HullbookError, Problem

FORMAT = "hullbook-results-1"
Json = dict[str, Any]


class UnreadableResultsError(HullbookError):
    """A results file is no JSON of this format, or of a newer one."""


def dumps(findings: Findings) -> bytes:
    """The findings as the bytes of a results.json: UTF-8, keys in the order of the format."""
    return (json.dumps(to_json(findings), ensure_ascii=False, indent=1, allow_nan=False) + "\n").encode()


def loads(data: bytes) -> Findings:
    """The findings of a results.json; UnreadableResultsError if it is none."""
    try:
        return from_json(json.loads(data))
    except (ValueError, KeyError, TypeError, AttributeError) as error:
        raise UnreadableResultsError(f"results.json is not of the format {FORMAT}: {error}") from error


def to_json(findings: Findings) -> Json:
    """Plain JSON values, exact numbers as "p/q"."""
    revision = findings.revision
    return {
        "format": FORMAT,
        "campaign": {
            "slug": findings.slug,
            "title": findings.title,
            "quantity_unit": findings.quantity_unit,
            "currency": findings.currency,
        },
        "revision": None
        if revision is None
        else {"number": revision.number, "digest": revision.digest, "recorded": revision.recorded},
        "components": [_plain(component, _COMPONENT) for component in findings.components],
        "hulls": [_hull_to(hull) for hull in findings.hulls],
        "lots": [_lot_to(lot) for lot in findings.lots],
        "orders": [_order_to(order) for order in findings.orders],
        "plan": None if findings.plan is None else _plan_to(findings.plan),
        "batches": [_batch_to(batch) for batch in findings.batches],
        "read": [{"file": note.file, "row": note.row, "what": note.what} for note in findings.read],
        "problems": [_plain(problem, _PROBLEM) for problem in findings.problems],
    }


def from_json(data: Json) -> Findings:
    """The findings of a JSON value; ValueError for another format."""
    if data.get("format") != FORMAT:
        raise ValueError(f"found the format {data.get('format')!r}")
    campaign, revision, plan = data["campaign"], data.get("revision"), data.get("plan")
    return Findings(
        slug=campaign["slug"],
        title=campaign["title"],
        quantity_unit=campaign["quantity_unit"],
        currency=campaign["currency"],
        components=tuple(ComponentFinding(**_named(item, _COMPONENT)) for item in data.get("components", [])),
        hulls=tuple(_hull_from(item) for item in data.get("hulls", [])),
        lots=tuple(_lot_from(item) for item in data.get("lots", [])),
        orders=tuple(_order_from(item) for item in data.get("orders", [])),
        plan=None if plan is None else _plan_from(plan),
        batches=tuple(_batch_from(item) for item in data.get("batches", [])),
        read=tuple(ReadNote(item["file"], item["row"], item["what"]) for item in data.get("read", [])),
        problems=tuple(Problem(**_named(item, _PROBLEM)) for item in data.get("problems", [])),
        revision=None if revision is None else RevisionMark(**_named(revision, ("number", "digest", "recorded"))),
    )


_COMPONENT = ("name", "label", "unit", "rule", "basis", "limit_basis", "sd")
_BATCH = ("order", "batch", "amounts", "values", "holds", "of", "times", "steps", "remark")
_PROBLEM = ("file", "row", "column", "found", "message", "remedy", "severity")
_LOT = ("lot", "role", "stock", "cost", "assay", "imitated_by", "stock_worth")
_LIMIT = ("on", "low", "high", "worth")


def _plain(record: object, keys: tuple[str, ...]) -> Json:
    return {key: getattr(record, key) for key in keys}


def _named(item: Json, keys: tuple[str, ...]) -> Json:
    return {key: item[key] for key in keys if key in item}


def _exact(values: Mapping[str, Fraction]) -> dict[str, str]:
    return {name: str(value) for name, value in values.items()}


def _fractions(values: Mapping[str, str] | None) -> dict[str, Fraction]:
    return {name: Fraction(value) for name, value in (values or {}).items()}


def _maybe(value: Any, read: Callable[[Any], Any]) -> Any:
    return None if value is None else read(value)


def _hull_to(hull: HullFinding) -> Json:
    facets = None
    if hull.facets is not None:
        facets = [{"coefficients": facet.coefficients, "at_most": facet.at_most} for facet in hull.facets]
    return {
        "basis": hull.basis,
        "over": list(hull.over),
        "dimension": hull.dimension,
        "corners": list(hull.corners),
        "volume": hull.volume,
        "facets": facets,
    }


def _hull_from(item: Json) -> HullFinding:
    facets = _maybe(
        item.get("facets"),
        lambda planes: tuple(HalfPlane(coefficients=p["coefficients"], at_most=p["at_most"]) for p in planes),
    )
    return HullFinding(
        basis=item["basis"],
        over=tuple(item["over"]),
        dimension=item["dimension"],
        corners=tuple(item["corners"]),
        volume=item.get("volume"),
        facets=facets,
    )


def _lot_to(lot: LotFinding) -> Json:
    return {**_plain(lot, _LOT), "needed_by": list(lot.needed_by), "used_by": list(lot.used_by)}


def _lot_from(item: Json) -> LotFinding:
    return LotFinding(
        **_named(item, _LOT), needed_by=tuple(item.get("needed_by", ())), used_by=tuple(item.get("used_by", ()))
    )


def _order_to(order: OrderFinding) -> Json:
    prices: dict[str, Json] = {}
    for key, table in (("enters_at", order.enters_at), ("stays_up_to", order.stays_up_to)):
        for lot, price in table.items():
            prices.setdefault(lot, {})[key] = price
    return {
        "order": order.order,
        "amount": order.amount,
        "amount_low": order.amount_low,
        "amount_high": order.amount_high,
        "sentence": order.sentence,
        "verdict": order.verdict,
        "barred_by": list(order.barred_by),
        "lifted": _verdicts_to(order.lifted),
        "room": order.room,
        "room_unit": order.room_unit,
        "greatest_amount": order.greatest_amount,
        "greatest_recipe": order.greatest_recipe,
        "runs_out": list(order.runs_out),
        "recipes": {name: _recipe_to(recipe) for name, recipe in order.recipes.items()},
        "limits": [
            {**_plain(limit, _LIMIT), **{key: _listed(getattr(limit, key)) for key in _RANGES}}
            for limit in order.limits
        ],
        "nearest": None if order.nearest is None else _plain(order.nearest, ("shares", "values", "excess")),
        "wanted_lot": [{"share": wanted.share, "values": wanted.values} for wanted in order.wanted_lot],
        "without_lot": _verdicts_to(order.without_lot),
        "lot_prices": prices,
        "curve": [_plain(point, ("room", "cost", "shares")) for point in order.curve],
        "left_out": dict(order.left_out),
        "proof": None if order.proof is None else _proof_to(order.proof),
    }


_RANGES = ("attainable", "lots_range", "worth_holds")
_ORDER = ("order", "amount", "amount_low", "amount_high", "sentence", "room", "room_unit", "greatest_amount")


def _listed(ends: tuple[float | None, float | None] | None) -> list[float | None] | None:
    return None if ends is None else list(ends)


def _order_from(item: Json) -> OrderFinding:
    prices = item.get("lot_prices", {})
    nearest = item.get("nearest")
    return OrderFinding(
        **_named(item, _ORDER),
        verdict=item["verdict"],
        barred_by=tuple(item.get("barred_by", ())),
        lifted=_verdicts_from(item.get("lifted")),
        greatest_recipe=item.get("greatest_recipe"),
        runs_out=tuple(item.get("runs_out", ())),
        recipes={name: _recipe_from(recipe) for name, recipe in item.get("recipes", {}).items()},
        limits=tuple(
            LimitFinding(**_named(limit, _LIMIT), **{key: _maybe(limit.get(key), tuple) for key in _RANGES})
            for limit in item.get("limits", [])
        ),
        nearest=None if nearest is None else Nearest(**_named(nearest, ("shares", "values", "excess"))),
        wanted_lot=tuple(WantedLot(**_named(wanted, ("share", "values"))) for wanted in item.get("wanted_lot", [])),
        without_lot=_verdicts_from(item.get("without_lot")),
        enters_at={lot: price["enters_at"] for lot, price in prices.items() if "enters_at" in price},
        stays_up_to={lot: price["stays_up_to"] for lot, price in prices.items() if "stays_up_to" in price},
        curve=tuple(CurvePoint(**_named(point, ("room", "cost", "shares"))) for point in item.get("curve", [])),
        left_out=item.get("left_out", {}),
        proof=_maybe(item.get("proof"), _proof_from),
    )


def _verdicts_to(answers: Mapping[str, tuple[Verdict | None, float | None]]) -> Json:
    return {name: {"verdict": verdict, "cost": cost} for name, (verdict, cost) in answers.items()}


def _verdicts_from(items: Json | None) -> dict[str, tuple[Verdict | None, float | None]]:
    return {name: (item["verdict"], item["cost"]) for name, item in (items or {}).items()}


def _recipe_to(recipe: Recipe) -> Json:
    bound = recipe.bound
    return {
        **_plain(recipe, ("shares", "amounts", "cost", "values")),
        "conformity": {"all": recipe.conformity.all, "each": recipe.conformity.each},
        "exact": _exact(recipe.exact),
        "room": recipe.room,
        "remark": recipe.remark,
        "bound": None
        if bound is None
        else {"multipliers": _multipliers_to(bound.multipliers), "floor": str(bound.floor)},
    }


def _recipe_from(item: Json) -> Recipe:
    conformity, bound = item.get("conformity") or {}, item.get("bound")
    return Recipe(
        **_named(item, ("shares", "amounts", "cost", "values", "room", "remark")),
        exact=_fractions(item.get("exact")),
        conformity=Conformity(all=conformity.get("all"), each=conformity.get("each", {})),
        bound=None
        if bound is None
        else CostBound(multipliers=_multipliers_from(bound["multipliers"]), floor=Fraction(bound["floor"])),
    )


def _multipliers_to(multipliers: tuple[Multiplier, ...]) -> list[Json]:
    return [
        {"on": m.on, "side": m.side, "weight": str(m.weight), "bound": str(m.bound), "terms": _exact(m.terms)}
        for m in multipliers
    ]


def _multipliers_from(items: list[Json]) -> tuple[Multiplier, ...]:
    return tuple(
        Multiplier(
            on=item["on"],
            side=item["side"],
            weight=Fraction(item["weight"]),
            bound=Fraction(item["bound"]),
            terms=_fractions(item.get("terms")),
        )
        for item in items
    )


def _proof_to(proof: Proof) -> Json:
    if isinstance(proof, RecipeProof):
        face, cap = proof.face, proof.cap
        return {
            "kind": proof.kind,
            "shares": _exact(proof.shares),
            "face": None
            if face is None
            else {
                "multipliers": _multipliers_to(face.multipliers),
                "scores": _exact(face.scores),
                "stuck": face.stuck,
                "on_face": list(face.on_face),
            },
            "cap": None
            if cap is None
            else {
                "multipliers": _multipliers_to(cap.multipliers),
                "stock_weights": _exact(cap.stock_weights),
                "greatest": str(cap.greatest),
            },
        }
    if isinstance(proof, BlockingProof):
        return {"kind": proof.kind, **_blocking_to(proof)}
    return {
        "kind": proof.kind,
        "branches": [{"rules": list(branch.rules), **_blocking_to(branch)} for branch in proof.branches],
    }


def _blocking_to(proof: BlockingProof | Branch) -> Json:
    return {
        "multipliers": _multipliers_to(proof.multipliers),
        "scores": _exact(proof.scores),
        "least": None if proof.least is None else str(proof.least),
    }


def _proof_from(item: Json) -> Proof:
    if item["kind"] == "recipe":
        return RecipeProof(
            shares=_fractions(item["shares"]),
            face=_maybe(item.get("face"), _face_from),
            cap=_maybe(
                item.get("cap"),
                lambda cap: Cap(
                    multipliers=_multipliers_from(cap["multipliers"]),
                    stock_weights=_fractions(cap["stock_weights"]),
                    greatest=Fraction(cap["greatest"]),
                ),
            ),
        )
    if item["kind"] == "blocking":
        return BlockingProof(**_blocking_from(item))
    return BranchProof(branches=tuple(Branch(rules=tuple(b["rules"]), **_blocking_from(b)) for b in item["branches"]))


def _face_from(face: Json) -> Face:
    return Face(
        multipliers=_multipliers_from(face["multipliers"]),
        scores=_fractions(face["scores"]),
        stuck=face["stuck"],
        on_face=tuple(face["on_face"]),
    )


def _blocking_from(item: Json) -> Json:
    return {
        "multipliers": _multipliers_from(item["multipliers"]),
        "scores": _fractions(item["scores"]),
        "least": _maybe(item.get("least"), Fraction),
    }


_PLANNED = ("accepted", "amounts", "asked", "priority", "income", "cost", "values")
_PLAN = ("value", "left", "status", "gap", "measure", "nodes", "one_more", "leftover")
_PLAN_LISTS = ("runs_out", "never_used", "unchecked", "unpriced", "uncosted")
_STAGE = ("aim", "priority", "best", "gap")
_LOSER = ("order", "alone", "reason", "is_together", "instead", "remark")


def _plan_to(plan: Plan) -> Json:
    return {
        **_plain(plan, _PLAN),
        "orders": {
            name: {**_plain(order, _PLANNED), "exact": _exact(order.exact)} for name, order in plan.orders.items()
        },
        **{key: list(getattr(plan, key)) for key in _PLAN_LISTS},
        "stages": [_plain(stage, _STAGE) for stage in plan.stages],
        "losers": [{**_plain(loser, _LOSER), "short": list(loser.short)} for loser in plan.losers],
    }


def _plan_from(item: Json) -> Plan:
    lists: dict[str, Any] = {key: tuple(item.get(key, ())) for key in _PLAN_LISTS}
    return Plan(
        **_named(item, _PLAN),
        orders={
            name: PlannedOrder(**_named(order, _PLANNED), exact=_fractions(order.get("exact")))
            for name, order in item["orders"].items()
        },
        **lists,
        stages=tuple(PlanStage(**_named(stage, _STAGE)) for stage in item.get("stages", [])),
        losers=tuple(
            Loser(**_named(loser, _LOSER), short=tuple(loser.get("short", ()))) for loser in item.get("losers", [])
        ),
    )


def _batch_to(batch: Batch) -> Json:
    return {**_plain(batch, _BATCH), "exact": _exact(batch.exact), "breaks": list(batch.breaks)}


def _batch_from(item: Json) -> Batch:
    return Batch(**_named(item, _BATCH), exact=_fractions(item.get("exact")), breaks=tuple(item.get("breaks", ())))
