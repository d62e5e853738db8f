"""The plan of all orders together, by hand and against brute force and an independent solver."""

from __future__ import annotations

import random
from dataclasses import replace
from fractions import Fraction
from itertools import product

import numpy as np
import pytest
from scipy.optimize import Bounds, LinearConstraint, linprog, milp

from generator.findings import plan_dives, plan_search, results
from generator.findings.answers import find
from generator.findings.plan_exact import settle
from generator.findings.plan_model import plan_model
from tests.findings.making import make_campaign
from tests.findings.planning import Planned, planned

TWO_LOTS = "lot,stock,cost,N\nA,100,10,10\nB,60,20,30\n"


def test_orders_share_the_stock() -> None:
    """Two orders that could each be made alone, but not both, are served by value."""
    found = planned(TWO_LOTS, "order,amount,price,N\ncheap,100,40,>= 20\ndear,100,50,>= 20\n")
    assert found.accepted() == {"cheap": 0, "dear": 100}
    assert found.plan.value == 100 * 50 - 50 * 10 - 50 * 20
    assert found.plan.left == {"A": 50, "B": 10}


def test_an_order_in_part_takes_what_there_is() -> None:
    """An order accepted in part gets the rest of the stock, and a whole one nothing."""
    targets = "order,amount,price,accept,N\ndear,100,50,whole,>= 20\ncheap,100,40,{},>= 20\n"
    assert planned(TWO_LOTS, targets.format("whole")).accepted()["cheap"] == 0
    assert planned(TWO_LOTS, targets.format("part")).accepted()["cheap"] == 20


def test_classes_come_strictly_first() -> None:
    """An order of the first class is served, whatever those of the second would bring."""
    targets = "order,amount,price,priority,N\nlate,100,5000,2,>= 20\nearly,100,31,1,>= 20\n"
    found = planned(TWO_LOTS, targets)
    assert found.accepted() == {"late": 0, "early": 100}
    assert [(stage.aim, stage.priority) for stage in found.plan.stages[:2]] == [("value", 1), ("value", 2)]


def test_without_prices_the_amount_counts() -> None:
    """Without any price the plan accepts as much as it can, then at the least cost."""
    found = planned("lot,stock,cost,N\nA,100,10,10\nB,100,5,10\n", "order,amount,N\nx,60,10\ny,70,10\n")
    assert found.plan.measure == "amount"
    assert found.plan.value == 130
    assert found.cost() == 100 * 5 + 30 * 10


def test_a_loss_is_not_taken() -> None:
    """An order that brings less than its lots cost is left, and said to be left for its price."""
    found = planned(TWO_LOTS, "order,amount,price,N\nx,50,5,>= 10\n")
    assert found.accepted() == {"x": 0}
    (loser,) = found.plan.losers
    assert loser.reason == "price"


def test_an_amount_in_a_range() -> None:
    """A range is accepted between its ends, as much as pays; whole means at least the low end."""
    found = planned(TWO_LOTS, "order,amount,price,N\nx,20..500,30,10\n")
    assert found.accepted() == {"x": 100}
    loss = planned(TWO_LOTS, "order,amount,price,N\nx,20..500,9,10\n")
    assert loss.accepted() == {"x": 0}
    assert planned(TWO_LOTS, "order,amount,price,N\nx,120..500,30,10\n").accepted() == {"x": 0}


def test_an_order_without_amount_joins_only_if_priced() -> None:
    """Without an amount a priced order takes what pays, and one without a price stays out, which is told."""
    found = planned(TWO_LOTS, "order,amount,price,N\nfree,,30,10\nplain,,,10\n")
    assert found.accepted() == {"free": 100, "plain": 0}
    (loser,) = found.plan.losers
    assert (loser.order, loser.reason, loser.remark) == ("plain", "left out", "no amount and no price")


def test_gain_without_bound_is_a_problem() -> None:
    """A priced order without amount and stock without bound is a problem; where it gains nothing, it is none."""
    assays = "lot,stock,cost,N\nA,unlimited,10,10\n"
    found = planned(assays, "order,amount,price,N\nx,,30,10\ny,5,30,10\n")
    (problem,) = found.problems
    assert (problem.file, problem.row, problem.severity) == ("targets.csv", 2, "drops")
    assert found.accepted() == {"x": 0, "y": 5}
    assert planned(assays, "order,amount,price,N\nx,,9,10\n").problems == ()


def test_a_price_among_none() -> None:
    """Of orders without a price, among others that have one, the plan accepts what is left for them, and says so."""
    found = planned(TWO_LOTS, "order,amount,price,accept,N\npriced,60,50,whole,>= 20\nplain,100,,part,>= 20\n")
    assert found.accepted() == {"priced": 60, "plain": 60}
    assert found.plan.unpriced == ("plain",)


def test_stock_not_checked_is_said() -> None:
    """Lots whose stock is not given count as unlimited and are named."""
    found = planned("lot,cost,N\nA,10,10\n", "order,amount,N\nx,1000,10\n")
    assert found.accepted() == {"x": 1000}
    assert found.plan.unchecked == ("A",)
    assert found.plan.left == {}


def test_ties_go_to_fewer_lots() -> None:
    """Of plans alike in value and cost, the one that uses the fewest lots is taken."""
    assays = "lot,stock,cost,N\nA,30,10,10\nB,30,10,10\nC,100,10,10\n"
    found = planned(assays, "order,amount,N\nx,60,10\n")
    assert found.plan.orders["x"].amounts == {"C": 60}
    assert found.plan.stages[-1].aim == "lots"
    assert found.plan.stages[-1].best == 1


def test_one_more_and_short() -> None:
    """Who loses is told for want of which lot, what one more of it is worth, and who could give way."""
    targets = "order,amount,price,accept,N\ndear,100,50,whole,>= 20\ncheap,100,40,part,>= 20\n"
    found = planned(TWO_LOTS, targets)
    (loser,) = found.plan.losers
    assert (loser.order, loser.alone, loser.reason, loser.short) == ("cheap", "makeable", "stock", ("B",))
    # One more unit of B makes two of the cheap order: B and A at 20 and 10, sold at 40.
    assert found.plan.one_more == {"B": pytest.approx(2 * 40 - 20 - 10)}
    assert loser.instead == {"dear": pytest.approx(100)}
    assert found.plan.runs_out == ("B",)


def test_short_of_two_lots_together() -> None:
    """Where no lot alone would do, the lots that together would are named."""
    assays = "lot,stock,N,K\nA,10,10,0\nB,10,0,10\n"
    targets = "order,amount,priority,N,K\nfirst,20,1,5,5\nlast,10,2,5,5\n"
    (loser,) = planned(assays, targets).plan.losers
    assert (loser.order, loser.short, loser.is_together) == ("last", ("A", "B"), True)
    assert loser.instead == {"first": pytest.approx(20)}


def test_cut_instead_of_drop() -> None:
    """An order accepted in part has to give up only what the other lacks."""
    assays = "lot,stock,N\nA,100,10\n"
    targets = "order,amount,priority,accept,N\nfirst,80,1,part,10\nlast,50,2,whole,10\n"
    (loser,) = planned(assays, targets).plan.losers
    assert loser.instead == {"first": pytest.approx(30, rel=1e-5)}


def test_stock_after_the_plan() -> None:
    """What is left, what runs out, what is never used, and what the rest alone can still make."""
    assays = "lot,stock,cost,N\nA,100,10,10\nB,60,20,30\nC,40,5,0\n"
    found = planned(assays, "order,amount,price,N\nx,80,100,>= 30\ny,60,100,>= 30\n", verdicts={})
    assert found.accepted() == {"x": 0, "y": 60}
    assert found.plan.left == {"A": 100, "B": 0, "C": 40}
    assert found.plan.runs_out == ("B",)
    assert found.plan.never_used == ("A", "C")
    assert found.plan.leftover == {"x": 0, "y": 0}
    more = planned(assays, "order,amount,price,N\nx,30,100,>= 20\n")
    # B and C made it: of the rest, 40 of B with as much of A.
    assert more.plan.leftover == {"x": 80}


def test_rules_hold_in_what_is_left() -> None:
    """What the leftover can make keeps the house rules."""
    assays = "lot,stock,cost,material,N\nA,50,1,salt,10\nB,50,1,acid,10\n"
    free = planned(assays, "order,amount,N\nx,20,10\n")
    assert free.plan.leftover == {"x": 80}
    apart = planned(assays, "order,amount,N\nx,20,10\n", '[house]\nkeep_apart = [["salt", "acid"]]\n')
    assert apart.plan.leftover == {"x": 50}


def test_kept_apart_lots_never_meet() -> None:
    """No order of the plan has both materials, though together they would make more."""
    assays = "lot,stock,cost,material,N\nA,50,1,salt,10\nB,50,1,Acid; strong,10\nC,10,1,filler,10\n"
    targets = "order,amount,accept,N\nx,100,part,10\ny,10,part,10\n"
    assert planned(assays, targets).plan.value == 110
    found = planned(assays, targets, '[house]\nkeep_apart = [["SALT*", "acid"]]\n')
    assert found.accepted() == {"x": 60, "y": 10}
    for order in found.plan.orders.values():
        assert not {"A", "B"} <= order.amounts.keys()


def test_least_of_a_lot_and_of_the_house() -> None:
    """The larger of a lot's and the house's least share holds for every used lot."""
    assays = "lot,stock,cost,least if used,N\nA,1000,1,,10\nB,1000,5,40,20\n"
    found = planned(assays, "order,amount,N\nx,100,>= 11\n", "[house]\nleast_if_used = 20\n")
    assert found.plan.orders["x"].amounts == {"A": 60, "B": 40}


def test_the_plan_is_the_same_each_time() -> None:
    """The same campaign has the same plan, digit by digit, whatever was solved before."""
    text = random_campaign(random.Random(5), orders=4, lots=5)
    assert planned(*text).plan == planned(*text).plan


def test_effort_that_ends_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    """A search that is stopped gives the best plan it has, with its gap."""
    monkeypatch.setattr(plan_search, "DIRECT_USES", 0)
    monkeypatch.setattr(plan_dives, "TURNS", 0)
    found = planned(*random_campaign(random.Random(11), orders=4, lots=6))
    assert found.plan.status == "within gap"
    assert found.plan.gap is None or found.plan.gap > 0


def test_time_that_ends_is_told() -> None:
    """A plan that ran out of time says so, and is still a plan."""
    text = random_campaign(random.Random(3), orders=4, lots=6)
    found = planned(*text, plan_seconds=Fraction(0))
    assert found.plan.status in ("proven", "out of time")
    check_exactly(found)


def test_findings_hold_the_plan() -> None:
    """The answers hold plan, batches and the worth of stock, and come back whole from JSON."""
    targets = "order,amount,price,accept,N\ndear,100,50,whole,>= 20\ncheap,100,40,part,>= 20\n"
    findings = find(make_campaign(TWO_LOTS, targets))
    assert findings.plan is not None
    assert findings.batches
    assert {lot.lot: lot.stock_worth for lot in findings.lots} == {"A": 0, "B": pytest.approx(50)}
    assert results.loads(results.dumps(findings)) == findings


# --- against brute force, and against an independent solver


def random_campaign(
    rng: random.Random, *, orders: int, lots: int, rules: bool = True, priced: bool = True
) -> tuple[str, str, str]:
    """Lots of three components in two materials, orders around blends of them, and house rules."""
    values = [[rng.randint(0, 20) for _ in range(3)] for _ in range(lots)]
    assays = "lot,stock,cost,material,N,P,K\n"
    for i, row in enumerate(values):
        cells = f"{rng.randint(10, 60)},{rng.randint(1, 30)},{rng.choice(['salt', 'acid', 'plain', 'plain'])}"
        assays += f"L{i},{cells},{','.join(map(str, row))}\n"
    targets = "order,amount,price,accept,N min,N max,P min,K max\n"
    for k in range(orders):
        shares = [rng.random() ** 3 for _ in range(lots)]
        blend = [sum(s * row[j] for s, row in zip(shares, values, strict=True)) / sum(shares) for j in range(3)]
        price = rng.randint(15, 45) if priced else ""
        targets += f"O{k},{rng.randint(10, 60)},{price},{rng.choice(['whole', 'part'])},"
        targets += (
            f"{max(0, round(blend[0] - 2))},{round(blend[0] + 2)},{max(0, round(blend[1] - 2))},{round(blend[2] + 2)}\n"
        )
    house = '[house]\nmax_lots = 2\nleast_if_used = 20\nkeep_apart = [["salt", "acid"]]\n' if rules else ""
    return assays, targets, house if "salt" in assays and "acid" in assays else house.split("keep")[0]


def check_exactly(found: Planned) -> None:
    """Limits, shares, amounts, rules and stock of a plan, from the inputs and in exact numbers."""
    campaign = found.campaign
    stock = {lot.name: lot.stock.value for lot in campaign.lots if lot.stock}
    for lot, used in found.used().items():
        assert used <= stock.get(lot, used)
    for order in campaign.orders:
        exact = found.plan.orders[order.name].exact
        total = sum(exact.values(), Fraction(0))
        if not total:
            continue
        assert order.amount is not None
        assert total <= order.amount.high
        assert order.accept == "part" or total >= order.amount.low
        for name, limit in order.limits.items():
            value = sum(campaign.lot(lot).assay[name].readings[0].value * x for lot, x in exact.items()) / total
            assert limit.low is None or value >= limit.low
            assert limit.high is None or value <= limit.high
        house = campaign.house
        assert house.max_lots is None or len(exact) <= house.max_lots
        assert house.least_if_used is None or min(exact.values()) >= house.least_if_used * total
        kinds = {kind for lot in exact for kind in campaign.lot(lot).materials}
        assert not house.keep_apart or not {"salt", "acid"} <= kinds


def own_rows(found: Planned, k: int) -> list[list[float]]:
    """Rows g·x ≤ 0 of an order over all lots, from the values as typed."""
    campaign = found.campaign
    rows = []
    for name, limit in campaign.orders[k].limits.items():
        values = [float(lot.assay[name].readings[0].value) for lot in campaign.lots]
        if limit.high is not None:
            rows.append([value - float(limit.high) for value in values])
        if limit.low is not None:
            rows.append([float(limit.low) - value for value in values])
    return rows


def best_by_force(found: Planned) -> float:
    """The greatest value over every choice of a set of lots for every order (the empty set: not accepted)."""
    campaign = found.campaign
    n, house = len(campaign.lots), campaign.house
    kinds = [set(lot.materials) for lot in campaign.lots]
    sets = []
    for bits in range(2**n):
        chosen = [i for i in range(n) if bits >> i & 1]
        both = {kind for i in chosen for kind in kinds[i]}
        if len(chosen) <= (house.max_lots or n) and not (house.keep_apart and {"salt", "acid"} <= both):
            sets.append(chosen)
    least = float(house.least_if_used or 0)
    best = 0.0
    for choice in product(sets, repeat=len(campaign.orders)):
        value = _best_for(found, choice, least)
        best = best if value is None else max(best, value)
    return best


def _best_for(found: Planned, choice: tuple[list[int], ...], least: float) -> float | None:
    """The best value with these lots in these orders, all of them used."""
    campaign = found.campaign
    columns = [(k, i) for k, lots in enumerate(choice) for i in lots]
    if not columns:
        return 0.0
    cost, rows, right = [], [], []
    for k, i in columns:
        order, lot = campaign.orders[k], campaign.lots[i]
        cost.append(float(lot.cost.value) - float(order.price.value if order.price else 0))
    for k, lots in enumerate(choice):
        if not lots:
            continue
        order = campaign.orders[k]
        for row in own_rows(found, k):
            rows.append([row[i] if j == k else 0.0 for j, i in columns])
            right.append(0.0)
        total = [1.0 if j == k else 0.0 for j, _ in columns]
        rows.append(total)
        right.append(float(order.amount.high))
        if order.accept == "whole":
            rows.append([-x for x in total])
            right.append(-float(order.amount.low))
        for used in lots:
            rows.append(
                [least * t - (1.0 if (j, i) == (k, used) else 0.0) for t, (j, i) in zip(total, columns, strict=True)]
            )
            right.append(0.0)
    for i, lot in enumerate(campaign.lots):
        rows.append([1.0 if own == i else 0.0 for _, own in columns])
        right.append(float(lot.stock.value))
    answer = linprog(cost, A_ub=rows, b_ub=right)
    return None if answer.x is None else -answer.fun


@pytest.mark.parametrize("seed", range(12))
def test_plan_against_brute_force(seed: int) -> None:
    """The plan's value is the best over every set of lots for every order, and its amounts hold exactly."""
    found = planned(*random_campaign(random.Random(seed), orders=2, lots=4))
    check_exactly(found)
    assert found.plan.value == pytest.approx(best_by_force(found), abs=1e-6)


@pytest.mark.parametrize("seed", range(6))
def test_parts_by_parts_against_brute_force(seed: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Orders priced one by one come within the gap that is told, and that gap holds."""
    monkeypatch.setattr(plan_search, "DIRECT_USES", 0)
    found = planned(*random_campaign(random.Random(seed), orders=2, lots=4))
    check_exactly(found)
    best = best_by_force(found)
    assert found.plan.value <= best + 1e-6
    if found.plan.gap is not None:
        assert best <= found.plan.value + found.plan.gap * max(abs(found.plan.value), 1e-9) + 1e-6


@pytest.mark.parametrize("seed", range(30, 34))
def test_classes_part_by_part(seed: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Orders priced one by one keep the classes: the first class gets no less than it can alone, within its gap."""
    assays, targets, house = random_campaign(random.Random(seed), orders=4, lots=5)
    head, *lines = targets.splitlines()
    rows = [f"{line},{1 + k % 2}" for k, line in enumerate(lines)]
    classed = "\n".join([f"{head},priority", *rows, ""])
    first = "\n".join([head, *lines[::2], ""])
    best = planned(assays, first, house).plan.value
    monkeypatch.setattr(plan_search, "DIRECT_USES", 0)
    found = planned(assays, classed, house)
    check_exactly(found)
    stage = found.plan.stages[0]
    assert (stage.aim, stage.priority) == ("value", 1)
    assert best is not None
    assert stage.gap is not None
    assert stage.best <= best + 1e-6
    assert stage.best >= best - stage.gap * max(stage.best, 1e-9) - 1e-6


def independent_value(found: Planned) -> float:
    """The plan's value from a mixed-integer program written anew, on amounts as they are."""
    campaign = found.campaign
    n, m, house = len(campaign.lots), len(campaign.orders), campaign.house
    width = 2 * n * m + m
    rows, low, high = [], [], []

    def add(terms: dict[int, float], least: float, most: float) -> None:
        row = np.zeros(width)
        for column, value in terms.items():
            row[column] = value
        rows.append(row)
        low.append(least)
        high.append(most)

    cost = np.zeros(width)
    for k, order in enumerate(campaign.orders):
        x, used, taken = k * n, m * n + k * n, 2 * m * n + k
        amount = float(order.amount.high)
        for i, lot in enumerate(campaign.lots):
            cost[x + i] = float(lot.cost.value) - float(order.price.value)
            add({x + i: 1, used + i: -amount}, -np.inf, 0)
            if house.least_if_used:
                share = float(house.least_if_used)
                terms = {x + j: share for j in range(n)}
                terms[x + i] -= 1
                add({**terms, used + i: share * amount}, -np.inf, share * amount)
        for row in own_rows(found, k):
            add({x + i: value for i, value in enumerate(row)}, -np.inf, 0)
        total = {x + i: 1.0 for i in range(n)}
        add({**total, taken: -amount}, -np.inf, 0)
        if order.accept == "whole":
            add({**total, taken: -amount}, 0, np.inf)
        if house.max_lots:
            add({used + i: 1 for i in range(n)}, -np.inf, house.max_lots)
        for i, one in enumerate(campaign.lots):
            for j, other in enumerate(campaign.lots):
                if house.keep_apart and "salt" in one.materials and "acid" in other.materials:
                    add({used + i: 1, used + j: 1}, -np.inf, 1)
    for i, lot in enumerate(campaign.lots):
        add({k * n + i: 1 for k in range(m)}, -np.inf, float(lot.stock.value))
    whole = np.r_[np.zeros(n * m), np.ones(n * m + m)]
    upper = np.r_[np.full(n * m, np.inf), np.ones(n * m + m)]
    answer = milp(
        cost,
        integrality=whole,
        bounds=Bounds(0, upper),
        constraints=LinearConstraint(np.array(rows), low, high),
        options={"mip_rel_gap": 0},
    )
    return -answer.fun


@pytest.mark.parametrize("seed", range(20, 25))
def test_plan_against_another_program(seed: int) -> None:
    """The plan's value is that of an independently written program, with house rules and without."""
    for rules in (True, False):
        found = planned(*random_campaign(random.Random(seed), orders=4, lots=6, rules=rules))
        check_exactly(found)
        assert found.plan.value == pytest.approx(independent_value(found), rel=1e-6, abs=1e-6)


def test_a_choice_that_cannot_be_is_none() -> None:
    """A choice that floats might hold possible by a hair is refused in exact numbers."""
    campaign = make_campaign("lot,stock,N\nA,10,10\n", "order,amount,N\nx,10.0000000001,10\n")
    from generator.findings.measures import measures_of
    from generator.findings.plan_exact import Choice
    from generator.findings.values import table_of

    model = plan_model(campaign, table_of(campaign), measures_of(campaign), {"x": "makeable"})
    assert settle(model, Choice((True,), (frozenset([0]),))) is None
    found = planned("lot,stock,N\nA,10,10\n", "order,amount,N\nx,10.0000000001,10\n", verdicts={"x": "makeable"})
    assert found.accepted() == {"x": 0}
    assert replace(found.plan, nodes=0).orders["x"].exact == {}
