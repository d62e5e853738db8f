"""Published cases of several orders from one stock, and of house rules, against the plan."""

from __future__ import annotations

import pytest

from tests.findings.planning import Planned, planned
from tests.published.plans import PLANS


@pytest.fixture(scope="module")
def plans() -> dict[str, Planned]:
    return {name: planned(case.assays, case.targets, case.settings) for name, case in PLANS.items()}


@pytest.mark.parametrize("name", PLANS)
def test_published_plan(name: str, plans: dict[str, Planned]) -> None:
    """The plan has the published value or cost, and is claimed to be the best."""
    case, found = PLANS[name], plans[name]
    if case.value is not None:
        assert found.plan.value == pytest.approx(case.value, rel=0, abs=case.within)
    if case.cost is not None:
        assert found.cost() == pytest.approx(case.cost, rel=0, abs=case.within)
    assert found.plan.status == "proven"


@pytest.mark.parametrize("name", PLANS)
def test_published_amounts(name: str, plans: dict[str, Planned]) -> None:
    """Where the published plan is the only best one, orders get its amounts and lots are used as in it."""
    case, found = PLANS[name], plans[name]
    for order, amounts in case.amounts.items():
        assert found.plan.orders[order].amounts == pytest.approx(dict(amounts), abs=case.amounts_within)
    used = found.used()
    for lot, amount in case.used.items():
        assert float(used[lot]) == pytest.approx(amount, abs=case.amounts_within)
    for order, accepted in case.accepted.items():
        assert found.accepted()[order] == pytest.approx(accepted, abs=case.amounts_within)
