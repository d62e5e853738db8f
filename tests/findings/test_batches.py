"""Batch cards: weighable amounts that hold everything, checked from the inputs in exact numbers."""

from __future__ import annotations

import random
from fractions import Fraction

import pytest

from generator.findings.records import Batch
from tests.findings.planning import Planned, planned
from tests.findings.test_plan import random_campaign


def totals(found: Planned) -> dict[str, Fraction]:
    """What all batches weigh of each lot."""
    used: dict[str, Fraction] = {}
    for batch in found.batches:
        for lot, amount in batch.exact.items():
            used[lot] = used.get(lot, Fraction(0)) + batch.times * amount
    return used


def weighed(found: Planned, order: str) -> Fraction:
    return sum((b.times * sum(b.exact.values(), Fraction(0)) for b in found.batches if b.order == order), Fraction(0))


def check(found: Planned, step: Fraction) -> None:
    """Every batch that claims to hold does, and all batches together need no more than the stock."""
    campaign = found.campaign
    stock = {lot.name: lot.stock.value for lot in campaign.lots if lot.stock}
    for lot, amount in totals(found).items():
        assert amount <= stock.get(lot, amount)
    for batch in found.batches:
        total = sum(batch.exact.values(), Fraction(0))
        assert all((amount / step).denominator == 1 for amount in batch.exact.values())
        broken = broken_limits(found, batch, total)
        house = campaign.house
        if house.max_lots is not None and len(batch.exact) > house.max_lots:
            broken.append("max_lots")
        if house.least_if_used is not None and min(batch.exact.values()) < house.least_if_used * total:
            broken.append("least")
        kinds = {kind for lot in batch.exact for kind in campaign.lot(lot).materials}
        assert not house.keep_apart or not {"salt", "acid"} <= kinds
        if batch.holds:
            assert broken == []
        else:
            assert batch.remark


def broken_limits(found: Planned, batch: Batch, total: Fraction) -> list[str]:
    broken = []
    for name, limit in found.campaign.order(batch.order).limits.items():
        value = sum(found.campaign.lot(lot).assay[name].readings[0].value * x for lot, x in batch.exact.items()) / total
        if (limit.low is not None and value < limit.low) or (limit.high is not None and value > limit.high):
            broken.append(name)
    return broken


def test_rounding_keeps_the_limits() -> None:
    """The nearest multiples would break a limit; the ones taken do not, and sum to the order."""
    assays = "lot,stock,cost,N\nA,100,10,10\nB,100,30,30.3\n"
    found = planned(assays, "order,amount,N\nx,50,>= 20\n", "[house]\nweigh_step = 1\n")
    (batch,) = found.batches
    assert found.plan.orders["x"].amounts["B"] == pytest.approx(24.63, abs=0.01)
    assert batch.exact == {"A": 25, "B": 25}
    assert batch.holds
    assert batch.steps == {"A": 1, "B": 1}
    check(found, Fraction(1))


def test_the_lot_s_own_step_comes_first() -> None:
    """A lot's weigh step goes before the house's."""
    assays = "lot,stock,weigh step,N\nA,100,0.25,10\nB,100,,30\n"
    found = planned(assays, "order,amount,N\nx,33,16 - 17\n", "[house]\nweigh_step = 1\n")
    (batch,) = found.batches
    assert batch.steps == {"A": 0.25, "B": 1}
    assert (batch.exact["A"] / Fraction(1, 4)).denominator == 1
    assert batch.exact["B"].denominator == 1


def test_without_a_step_amounts_have_few_digits() -> None:
    """Without a weigh step amounts are short decimals that hold every limit."""
    found = planned("lot,stock,N\nA,100,10\nB,100,31\n", "order,amount,N\nx,50,17 - 18\n")
    (batch,) = found.batches
    assert batch.steps == {}
    assert batch.holds
    assert all((amount * 100).denominator == 1 for amount in batch.exact.values())
    assert weighed(found, "x") == 50
    check(found, Fraction(1, 100))


def test_what_no_decimal_holds_stays_exact() -> None:
    """Without a weigh step, an exact limit that no short decimal meets keeps the plan's own amounts."""
    found = planned("lot,stock,N\nA,100,10\nB,100,40\n", "order,amount,N\nx,50,17\n")
    (batch,) = found.batches
    assert batch.holds
    assert batch.exact == {"A": Fraction(115, 3), "B": Fraction(35, 3)}


def test_equal_batches() -> None:
    """A batch size splits the order into equal batches, which stand once."""
    found = planned(
        "lot,stock,N\nA,100,10\nB,100,30\n",
        "order,amount,N\nx,100,19 - 21\n",
        "batch_size = 25\n[house]\nweigh_step = 0.5\n",
    )
    (batch,) = found.batches
    assert (batch.batch, batch.times, batch.of) == (1, 4, 4)
    assert sum(batch.exact.values()) == 25
    check(found, Fraction(1, 2))


def test_batches_that_differ_by_a_step() -> None:
    """Where equal batches can't come to the amount, they differ by as little as will do."""
    found = planned(
        "lot,stock,N\nA,100,10\nB,100,30\n",
        "order,amount,N\nx,50,15 - 25\n",
        "batch_size = 17\n[house]\nweigh_step = 1\n",
    )
    assert sum(batch.times for batch in found.batches) == 3
    assert {batch.of for batch in found.batches} == {3}
    assert weighed(found, "x") == 50
    assert all(batch.holds for batch in found.batches)
    check(found, Fraction(1))


def test_an_amount_between_steps() -> None:
    """An amount that is no sum of steps is weighed to the next step, and the card says so."""
    found = planned("lot,stock,N\nA,100,10\n", "order,amount,N\nx,10.3,10\n", "[house]\nweigh_step = 0.5\n")
    (batch,) = found.batches
    assert batch.exact == {"A": Fraction(21, 2)}
    assert "can't be weighed" in batch.remark


def test_none_found() -> None:
    """Where no multiples hold, the closest are given with the limit that gives way, and no claim."""
    found = planned("lot,stock,N\nA,100,10\nB,100,40\n", "order,amount,N\nx,5,17 - 17.1\n", "[house]\nweigh_step = 1\n")
    (batch,) = found.batches
    assert not batch.holds
    assert batch.breaks == ("N",)
    assert batch.remark.startswith("None found")
    assert weighed(found, "x") in (4, 5, 6)


def test_stock_is_shared_by_all_cards() -> None:
    """Two orders that need all of a lot between them round one down where the other rounds up."""
    assays = "lot,stock,cost,N\nA,15,10,30\nB,100,10,10\n"
    found = planned(assays, "order,amount,N\nx,15,>= 20\ny,15,>= 20\n", "[house]\nweigh_step = 1\n")
    check(found, Fraction(1))
    assert all(amount <= 15 for lot, amount in totals(found).items() if lot == "A")
    assert [batch.holds for batch in found.batches].count(True) >= 1


def test_a_part_order_gives_way_to_a_whole_one() -> None:
    """Rounding takes a step from what is accepted in part, so that a whole order still comes to its amount."""
    assays = "lot,stock,cost,N\nA,20,10,30.2\nB,100,10,10\n"
    targets = "order,amount,price,accept,N\npart,100,50,part,>= 20\nwhole,10,60,whole,>= 20\n"
    found = planned(assays, targets, "[house]\nweigh_step = 1\n")
    check(found, Fraction(1))
    assert all(batch.holds for batch in found.batches)
    assert weighed(found, "whole") == 10


def test_a_lot_is_added_where_it_must_be() -> None:
    """Where the plan's lots leave no room to round, a step of another one is added and named."""
    assays = "lot,stock,cost,N\nA,4.9,1,30\nB,100,2,10\nC,100,50,30\n"
    found = planned(assays, "order,amount,N\nx,9.8,>= 20\n", "[house]\nweigh_step = 0.7\n")
    assert found.plan.orders["x"].amounts == pytest.approx({"A": 4.9, "B": 4.9})
    tight = planned(assays.replace("4.9", "4.95"), "order,amount,N\nx,9.9,>= 20\n", "[house]\nweigh_step = 0.5\n")
    (batch,) = tight.batches
    assert batch.holds
    assert batch.exact["A"] == Fraction(9, 2)
    assert batch.exact["C"] >= Fraction(1, 2)
    assert "C" in batch.remark


@pytest.mark.parametrize("seed", range(10))
def test_random_cards(seed: int) -> None:
    """Whatever the plan, cards keep limits, rules and stock, or say that they don't."""
    rng = random.Random(seed)
    step = rng.choice(["0.5", "0.25", "1"])
    assays, targets, house = random_campaign(rng, orders=3, lots=4)
    found = planned(assays, targets, f"batch_size = 20\n{house or '[house]'}\nweigh_step = {step}\n")
    check(found, Fraction(step))
    for name, order in found.plan.orders.items():
        assert (order.accepted > 0) == any(batch.order == name for batch in found.batches)
