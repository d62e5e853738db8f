"""The fewest columns that shares need, against every set solved one by one."""

from __future__ import annotations

from itertools import combinations

import numpy as np
import pytest
from scipy.optimize import linprog

from generator.geometry import supports
from generator.geometry.supports import Shares, TooManyError, fewest_columns


def drawn(seed: int, n: int = 9, d: int = 3) -> Shares:
    """Windows about a mixture of few columns; some columns forced, kept apart, capped or with a least share."""
    rng = np.random.default_rng(seed)
    rows = rng.uniform(0, 20, (d, n)).round(1)
    middle = rows @ rng.dirichlet(np.full(n, 0.3))
    apart = np.triu(rng.random((n, n)) < 0.08, 1)
    return Shares(
        rows=rows,
        low=np.where(rng.random(d) < 0.8, middle - 1.0, -np.inf),
        high=np.where(rng.random(d) < 0.8, middle + 1.0, np.inf),
        lower=np.where(rng.random(n) < 0.3, 0.1, 0.0),
        upper=np.where(rng.random(n) < 0.4, 0.5, 1.0),
        cost=rng.uniform(10, 60, n).round(2),
        forced=rng.random(n) < 0.1,
        apart=apart | apart.T,
    )


def by_every_set(shares: Shares, most: int) -> tuple[int, float] | None:
    """(columns, cost) of the best set, by linprog on each one."""
    n = shares.cost.size
    finite = np.isfinite(shares.low), np.isfinite(shares.high)
    above = np.vstack([-shares.rows[finite[0]], shares.rows[finite[1]]])
    bound = np.concatenate([-shares.low[finite[0]], shares.high[finite[1]]])
    for count in range(1, most + 1):
        costs = []
        for used in map(list, combinations(range(n), count)):
            if shares.apart[np.ix_(used, used)].any() or not set(np.flatnonzero(shares.forced)) <= set(used):
                continue
            found = linprog(
                shares.cost[used],
                A_ub=above[:, used] if len(bound) else None,
                b_ub=bound if len(bound) else None,
                A_eq=np.ones((1, count)),
                b_eq=[1.0],
                bounds=list(zip(shares.lower[used], shares.upper[used], strict=True)),
            )
            if found.status == 0:
                costs.append(found.fun)
        if costs:
            return count, min(costs)
    return None


def cost_of(shares: Shares, used: tuple[int, ...]) -> float:
    """The least cost of one set."""
    only = np.isin(np.arange(shares.cost.size), used)
    alone = Shares(
        rows=shares.rows[:, only],
        low=shares.low,
        high=shares.high,
        lower=shares.lower[only],
        upper=shares.upper[only],
        cost=shares.cost[only],
        forced=shares.forced[only],
        apart=shares.apart[np.ix_(only, only)],
    )
    found = by_every_set(alone, len(used))
    assert found is not None
    assert found[0] == len(used)
    return found[1]


@pytest.mark.parametrize("seed", range(12))
def test_fewest_and_then_cheapest(seed: int) -> None:
    """With forced columns, pairs kept apart, caps and least shares: no set is smaller, none as small is cheaper."""
    shares = drawn(seed)
    expected, found = by_every_set(shares, 4), fewest_columns(shares, 4)
    if expected is None or found is None:
        assert expected is None
        assert found is None
        return
    assert len(found) == expected[0]
    assert cost_of(shares, found) == pytest.approx(expected[1], abs=1e-7)


def test_more_columns_than_fit_a_machine_word() -> None:
    """Of 70 columns the two that alone meet a narrow window are found."""
    values = np.array([[10.0] * 69 + [0.0]])
    values[0, 40] = 30.0
    shares = Shares(
        rows=values,
        low=np.array([19.9]),
        high=np.array([20.1]),
        lower=np.zeros(70),
        upper=np.where(np.arange(70) == 40, 0.4, 1.0),
        cost=np.arange(70.0),
        forced=np.zeros(70, dtype=np.bool_),
        apart=np.zeros((70, 70), dtype=np.bool_),
    )
    assert fewest_columns(shares, 3) is None
    assert fewest_columns(Shares(**{**_fields(shares), "upper": np.ones(70)}), 3) == (0, 40)


def _fields(shares: Shares) -> dict:
    return {name: getattr(shares, name) for name in Shares.__dataclass_fields__}


def test_too_many_sets_are_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """Where the sets of a size are more than may be looked at, TooManyError says how many there are."""
    monkeypatch.setattr(supports, "MOST_SETS", 20)
    shares = Shares(**{**_fields(drawn(1)), "low": np.full(3, 1e3)})
    with pytest.raises(TooManyError, match="36 sets of 2 columns of 9"):
        fewest_columns(shares, 3)
