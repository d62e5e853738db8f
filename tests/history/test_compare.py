from dataclasses import replace
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from generator.findings.records import (
    Conformity,
    Findings,
    HullFinding,
    LotFinding,
    OrderFinding,
    Plan,
    PlannedOrder,
    Recipe,
)
from generator.history.compare import changes, is_lost


def make_recipe(cost: float | None = 100.0, **shares: float) -> Recipe:
    shares = shares or {"A": 0.5, "B": 0.5}
    exact = {lot: Fraction(share) for lot, share in shares.items()}
    return Recipe(shares=shares, exact=exact, amounts=None, cost=cost, values={})


def make_order(name: str = "1042", **fields: object) -> OrderFinding:
    given_fields = {"sentence": "", "verdict": "makeable", "recipes": {"cheapest": make_recipe()}, **fields}
    return OrderFinding(order=name, **given_fields)


def make_lot(name: str = "A", role: str | None = "corner") -> LotFinding:
    return LotFinding(lot=name, role=role, stock=None, cost=None, assay={})


def make_findings(*orders: OrderFinding, **fields: object) -> Findings:
    return Findings(slug="s", title="S", quantity_unit="t", currency="EUR", orders=orders, **fields)


def sentences(old: Findings, new: Findings) -> list[str]:
    return [change.sentence for change in changes(old, new)]


VERDICTS = st.sampled_from(["makeable", "edge", "short", "barred", "unreachable", None])
COSTS = st.one_of(st.none(), st.floats(0, 1000))
ORDERS = st.builds(
    lambda name, verdict, cost, room, amount: make_order(
        name,
        verdict=verdict,
        room=room,
        room_unit="sd",
        greatest_amount=amount,
        recipes={"cheapest": make_recipe(cost)} if verdict else {},
    ),
    st.sampled_from("1234"),
    VERDICTS,
    COSTS,
    st.one_of(st.none(), st.floats(-3, 3)),
    COSTS,
)
FINDINGS = st.builds(
    lambda orders, lots: make_findings(*orders, lots=tuple(lots)),
    st.lists(ORDERS, unique_by=lambda order: order.order),
    st.lists(
        st.builds(make_lot, st.sampled_from("ABC"), st.sampled_from(["corner", "inner", None])),
        unique_by=lambda lot: lot.lot,
    ),
)


@given(FINDINGS)
def test_nothing_changes_from_itself(findings: Findings) -> None:
    """changes(a, a) is empty."""
    assert changes(findings, findings) == ()


@given(FINDINGS, FINDINGS)
def test_changes_back_are_of_the_same_things(old: Findings, new: Findings) -> None:
    """Going back changes the same subjects, with old and new exchanged."""
    there = {(change.subject, change.old, change.new) for change in changes(old, new)}
    back = {(change.subject, change.new, change.old) for change in changes(new, old)}
    assert there == back


@given(FINDINGS, FINDINGS)
def test_every_changed_verdict_is_told(old: Findings, new: Findings) -> None:
    """An order in both whose verdict differs has a change of kind verdict, and no other has."""
    before = {order.order: order.verdict for order in old.orders}
    differ = {order.order for order in new.orders if before.get(order.order, order.verdict) != order.verdict}
    assert {change.subject for change in changes(old, new) if change.kind == "verdict"} == differ


def test_a_lost_verdict_in_words() -> None:
    """A verdict that changed is one sentence, and hides the smaller changes of that order."""
    old, new = make_order(), make_order(verdict="unreachable", recipes={}, greatest_amount=0.0)
    assert sentences(make_findings(old), make_findings(new)) == ["Order 1042 is now unreachable; it was makeable."]


@pytest.mark.parametrize(
    "fields, old, new, sentence",
    [
        ("greatest_amount", 120.0, 80.5, "Order 1042: greatest amount fell to 80.5 t from 120.0 t."),
        ("greatest_amount", None, 80.5, "Order 1042: the greatest amount is now 80.50 t; it had no bound."),
        ("greatest_amount", 80.5, None, "Order 1042: the amount has no bound now."),
        ("room", 0.8, 1.25, "Order 1042: room rose to 1.25 scale steps from 0.80 scale steps."),
    ],
)
def test_numbers_in_words(fields: str, old: float | None, new: float | None, sentence: str) -> None:
    """A number that changed is told with its unit, the newer value first."""
    before, after = make_order(**{fields: old}), make_order(**{fields: new})
    assert sentences(make_findings(before), make_findings(after)) == [sentence]


@pytest.mark.parametrize(
    "old, new, sentence",
    [
        (100.0, 112.5, "Order 1042: cheapest cost rose to 112.50 EUR per t from 100.00 EUR per t."),
        (100.0, None, "Order 1042: the cheapest cost is not known any more."),
        (None, 99.0, "Order 1042: the cheapest cost is now known: 99.00 EUR per t."),
    ],
)
def test_costs_in_words(old: float | None, new: float | None, sentence: str) -> None:
    """A cost that moved, got lost or became known is told as such."""
    before = make_order(recipes={"cheapest": make_recipe(old)})
    after = make_order(recipes={"cheapest": make_recipe(new)})
    assert sentences(make_findings(before), make_findings(after)) == [sentence]


def test_a_moved_recipe_in_words() -> None:
    """Of a recipe that moved the share that moved most is told; less than is printed is no move."""
    before = make_findings(make_order(recipes={"cheapest": make_recipe(A=0.5, B=0.5)}))
    after = make_findings(make_order(recipes={"cheapest": make_recipe(A=0.7, B=0.25, C=0.05)}))
    near = make_findings(make_order(recipes={"cheapest": make_recipe(A=0.5004, B=0.4996)}))
    assert sentences(before, after) == [
        "Order 1042: the cheapest recipe moved, most of all lot B, to 25.0 % from 50.0 % (3 lots moved)."
    ]
    assert sentences(before, near) == []


def test_what_prints_alike_is_no_change() -> None:
    """A difference behind the printed digits is not told."""
    before = make_order(recipes={"cheapest": make_recipe(100.0)})
    after = make_order(recipes={"cheapest": make_recipe(100.000001)})
    assert changes(make_findings(before), make_findings(after)) == ()


def test_what_an_older_program_did_not_answer_is_no_change() -> None:
    """Room, recipe and plan that only the newer findings have are not changed answers."""
    before = make_findings(make_order(recipes={}))
    planned = Plan(value=1.0, orders={}, left={}, runs_out=(), status="optimal", gap=0.0)
    assert changes(before, make_findings(make_order(room=1.0, room_unit="sd"), plan=planned)) == ()


def test_orders_and_lots_that_come_and_go() -> None:
    """New and gone orders and lots are told, orders before lots."""
    before = make_findings(make_order("1"), lots=(make_lot("A"), make_lot("B")))
    after = make_findings(make_order("2", verdict="short"), lots=(make_lot("A", "inner"), make_lot("C")))
    assert sentences(before, after) == [
        "Order 1 is no longer in the campaign. It was makeable.",
        "Order 2 is new: short.",
        "Lot B is no longer there.",
        "Lot C is new, a corner lot.",
        "Lot A is now an inner lot; it was a corner lot.",
    ]


def test_the_plan_in_words() -> None:
    """An order that the plan serves with another amount is told."""

    def plan(accepted: float) -> Plan:
        orders = {"1042": PlannedOrder(accepted=accepted, amounts={})}
        return Plan(value=0.0, orders=orders, left={}, runs_out=(), status="optimal", gap=0.0)

    before, after = make_findings(make_order(), plan=plan(50.0)), make_findings(make_order(), plan=plan(0.0))
    assert sentences(before, after) == ["Order 1042: amount in the plan fell to 0.00 t from 50.00 t."]


def test_a_flat_hull_in_words() -> None:
    """A hull that lost a dimension is told."""

    def hull(dimension: int) -> HullFinding:
        return HullFinding(basis="dry", over=("N", "K"), dimension=dimension, corners=())

    before, after = make_findings(hulls=(hull(2),)), make_findings(hulls=(hull(1),))
    assert sentences(before, after) == ["The hull over N, K (dry) is now of dimension 1; it was of dimension 2."]


def test_corners_and_volume_in_words() -> None:
    """Corners that a hull gained and lost, and a volume that prints differently, are told."""

    def hull(corners: tuple[str, ...], volume: float) -> HullFinding:
        return HullFinding(basis="dry", over=("N", "K"), dimension=2, corners=corners, volume=volume)

    before = make_findings(hulls=(hull(("A", "B"), 12.0),))
    assert sentences(before, make_findings(hulls=(hull(("A", "C"), 15.5),))) == [
        "The hull over N, K (dry) gained C as a corner and lost B.",
        "The hull over N, K (dry): its volume grew to 15.5 from 12.",
    ]
    assert sentences(before, make_findings(hulls=(hull(("A",), 12.000001),))) == ["The hull over N, K (dry) lost B."]


def test_conformity_in_words() -> None:
    """A probability that prints differently is told."""

    def order(together: float) -> OrderFinding:
        return make_order(recipes={"cheapest": replace(make_recipe(), conformity=Conformity(all=together))})

    assert sentences(make_findings(order(0.95)), make_findings(order(0.912))) == [
        "Order 1042: the cheapest recipe holds all limits with 91.2 %; it was 95.0 %."
    ]


def test_a_renamed_order_and_lot_are_compared_under_their_new_names() -> None:
    """What was only renamed is neither gone nor new, and its answers are compared."""
    before = make_findings(make_order("1"), lots=(make_lot("A"), make_lot("B")))
    after = make_findings(
        make_order("2", recipes={"cheapest": make_recipe(110.0, Z=0.5, B=0.5)}), lots=(make_lot("Z"), make_lot("B"))
    )
    found = changes(before, after, renamed_orders={"1": "2"}, renamed_lots={"A": "Z"})
    assert [change.sentence for change in found] == [
        "Order 2: cheapest cost rose to 110.00 EUR per t from 100.00 EUR per t."
    ]


def test_lost_verdicts_come_first() -> None:
    """Lost verdicts head the list, before gained ones."""
    before = make_findings(make_order("1", verdict="short"), make_order("2"))
    after = make_findings(make_order("1"), make_order("2", verdict="unreachable"))
    found = changes(before, after)
    assert [(change.subject, is_lost(change)) for change in found] == [("2", True), ("1", False)]


@pytest.mark.parametrize(
    "old, new, told",
    [
        (42.4953, 41.3861, "fell to 41.39 EUR per t from 42.50 EUR per t"),
        (0.0123, 0.0148, "rose to 0.015 EUR per t from 0.012 EUR per t"),
        (0.5, 0.56, "rose to 0.56 EUR per t from 0.50 EUR per t"),
        (
            12345.0,
            12345.5,
            "rose to 12\N{NARROW NO-BREAK SPACE}345.50 EUR per t from 12\N{NARROW NO-BREAK SPACE}345.00",
        ),
    ],
)
def test_costs_have_no_false_digits(old: float, new: float, told: str) -> None:
    """A cost is told to hundredths as pages print it, a very small one to as many places as it takes."""
    before, after = (make_findings(make_order(recipes={"cheapest": make_recipe(cost)})) for cost in (old, new))
    (change,) = changes(before, after)
    assert told in change.sentence
    assert (change.unit, change.places) == ("EUR per t", 3 if old < 0.1 else 2)


@pytest.mark.parametrize(
    "old, new, unit, told",
    [
        (21.0, 20.9, "scale", "fell to 20.9 scale steps from 21.0 scale steps"),
        (1.0, 0.998, "scale", "fell to 0.998 scale steps from 1.000 scale steps"),
        (-2.84, 1.25, "sd", "rose to 1.25 sd from −2.84 sd"),
        (123.4, 123.3, "sd", ""),
    ],
)
def test_rooms_are_told_in_one_number_of_places(old: float, new: float, unit: str, told: str) -> None:
    """Both rooms have the places of the greater one to three digits, more only where pages tell them apart."""
    before, after = (make_findings(make_order(room=room, room_unit=unit)) for room in (old, new))
    found = sentences(before, after)
    assert [told in sentence for sentence in found] == ([True] if told else [])


def test_the_value_of_the_plan_in_words() -> None:
    """What a plan is worth, or accepts in all, is told where both plans measure the same."""

    def plan(value: float | None, measure: str = "value") -> Plan:
        return Plan(value=value, measure=measure, orders={}, left={}, runs_out=(), status="proven", gap=0.0)

    def found(old: Plan, new: Plan) -> list[str]:
        return sentences(make_findings(plan=old), make_findings(plan=new))

    assert found(plan(812.5), plan(900.0)) == ["The plan: its value rose to 900.00 EUR from 812.50 EUR."]
    space = "\N{NARROW NO-BREAK SPACE}"
    assert found(plan(20000.25), plan(19000.0)) == [
        f"The plan: its value fell to 19{space}000 EUR from 20{space}000 EUR."
    ]
    assert found(plan(80.0, "amount"), plan(50.0, "amount")) == [
        "The plan: the amount accepted in all fell to 50.00 t from 80.00 t."
    ]
    assert found(plan(80.0, "amount"), plan(50.0)) == []
    assert found(plan(None), plan(50.0)) == []
