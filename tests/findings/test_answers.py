"""Room, curve, worths, prices and nearest blends hold against the oracle and an independent solver."""

from __future__ import annotations

import random
from collections.abc import Iterator
from fractions import Fraction

import numpy as np
import pytest
from scipy.optimize import linprog

from generator.findings.records import OrderFinding
from tests.findings import oracle
from tests.findings.drawing import Drawn, draw_campaign
from tests.findings.judging import findings_of, row

ZERO = Fraction(0)
Windows = dict[str, tuple[Fraction | None, Fraction | None]]
#: A step that is surely felt and surely small beside the grids of the drawings.
TINY = Fraction(1, 10**6)


def cases(number: int) -> Iterator[tuple[Drawn, Windows, OrderFinding]]:
    """Orders of a drawn campaign without stock and share bounds that have a verdict."""
    drawn = draw_campaign(random.Random(1000 + number).randint, orders=5, most_lots=5)
    drawn.lower, drawn.upper, drawn.stock = [ZERO] * len(drawn.values), [None] * len(drawn.values), None
    for order, finding in zip(drawn.orders, findings_of(drawn).orders, strict=True):
        if finding.verdict is not None:
            yield drawn, {name: window for name, window in order.windows.items() if window != (None, None)}, finding


def scale(drawn: Drawn, name: str, window: tuple[Fraction | None, Fraction | None], side: int) -> Fraction:
    """Half the window, else 1 % of the limit, else 1 % of the lots' range, else 1."""
    low, high = window
    if low is not None and high is not None and low != high:
        return (high - low) / 2
    if window[side]:
        return abs(window[side] or ZERO) / 100
    parts = [drawn.parts(name, i) for i in range(len(drawn.values))]
    values = [n / d for n, d in parts if d]
    return (max(values) - min(values)) / 100 if values and max(values) != min(values) else Fraction(1)


def moved(drawn: Drawn, windows: Windows, t: Fraction) -> Windows:
    """Every window that is not exact, moved inwards by t scales."""
    result: Windows = {}
    for name, (low, high) in windows.items():
        if low == high:
            result[name] = (low, high)
            continue
        result[name] = (
            None if low is None else low + t * scale(drawn, name, (low, high), 0),
            None if high is None else high - t * scale(drawn, name, (low, high), 1),
        )
    return result


def points(drawn: Drawn, windows: Windows) -> oracle.Vertices:
    """The vertices of the blends within the windows."""
    lots = range(len(drawn.values))
    return oracle.shares(
        len(lots),
        [
            (row(drawn, lots, name, side, bound), ZERO)
            for name, window in windows.items()
            for side, bound in zip(("low", "high"), window, strict=True)
            if bound is not None
        ],
    )


def least_cost(drawn: Drawn, windows: Windows, cost: list[Fraction] | None = None) -> Fraction | None:
    """The least cost by the oracle, None where nothing fits."""
    prices = cost or [Fraction(c) for c in drawn.cost]
    return min((sum(c * x for c, x in zip(prices, p, strict=True)) for p in points(drawn, windows)), default=None)


@pytest.mark.parametrize("number", range(25))
def test_room_is_the_greatest_tightening(number: int) -> None:
    """Moved in by the room (less a hair) an order is reachable, by a hair more it is not."""
    for drawn, windows, finding in cases(number):
        if finding.room is None:
            continue
        room = Fraction(finding.room)
        assert points(drawn, moved(drawn, windows, room - TINY))
        assert not points(drawn, moved(drawn, windows, room + TINY))


@pytest.mark.parametrize("number", range(25))
def test_curve_points_cost_the_least_at_their_room(number: int) -> None:
    """Each point of the cost–room curve is the least cost of the order tightened so far."""
    for drawn, windows, finding in cases(number):
        for point in finding.curve:
            # Rooms are published as floats: ask a hair inside, where the cost is a hair less.
            expected = least_cost(drawn, moved(drawn, windows, Fraction(point.room) - TINY * TINY))
            assert expected is not None
            assert point.cost == pytest.approx(float(expected), rel=1e-6, abs=1e-6)
        assert [p.cost for p in finding.curve] == sorted(p.cost for p in finding.curve)


@pytest.mark.parametrize("number", range(25))
def test_worth_is_what_a_loosened_limit_saves(number: int) -> None:
    """A limit loosened by a hair saves its worth times the hair, and up to the end of its range as well."""
    for drawn, windows, finding in cases(number):
        if finding.verdict not in ("makeable", "edge"):
            continue
        base = least_cost(drawn, windows)
        for limit in finding.limits:
            low, high = windows[limit.on]
            if low == high:
                continue
            savings = []
            for looser in ((None if low is None else low - TINY, high), (low, None if high is None else high + TINY)):
                cost = least_cost(drawn, {**windows, limit.on: looser})
                assert base is not None
                assert cost is not None
                savings.append((base - cost) / TINY)
            assert (limit.worth or 0.0) == pytest.approx(float(max(savings)), rel=1e-3, abs=1e-5)
            if limit.worth_holds is not None and limit.worth:
                start, end = (Fraction(x).limit_denominator(10**9) for x in limit.worth_holds)
                wider = (start, high) if low is not None and start < low else (low, end)
                saved = (base or ZERO) - (least_cost(drawn, {**windows, limit.on: wider}) or ZERO)
                assert float(saved) == pytest.approx(limit.worth * float(end - start), rel=1e-6, abs=1e-6)


@pytest.mark.parametrize("number", range(25))
def test_prices_are_thresholds(number: int) -> None:
    """Just below its price an unused lot makes the order cheaper, just above it does not; a used one likewise."""
    for drawn, windows, finding in cases(number):
        base = least_cost(drawn, windows)
        for lot, price in finding.enters_at.items():
            i = int(lot[1:])
            for step, enters in ((-TINY, True), (TINY, False)):
                if price is None:
                    continue
                cost = [Fraction(c) for c in drawn.cost]
                cost[i] = Fraction(price) + step
                assert (least_cost(drawn, windows, cost) < base) == enters
        for lot, price in finding.stays_up_to.items():
            if price is None:
                assert finding.without_lot[lot][0] not in ("makeable", "edge")
                continue
            i = int(lot[1:])
            without = finding.without_lot[lot][1]
            for step, stays in ((-TINY, True), (TINY, False)):
                cost = [Fraction(c) for c in drawn.cost]
                cost[i] = Fraction(price) + step
                used = float(least_cost(drawn, windows, cost) or 0) < (without or 0) - 1e-12
                assert used == stays


@pytest.mark.parametrize("number", range(25))
def test_nearest_blend_breaks_the_limits_least(number: int) -> None:
    """The sum of scaled row excess is that of HiGHS on the same question, written anew."""
    for drawn, windows, finding in cases(number):
        if finding.verdict != "unreachable":
            continue
        assert finding.nearest is not None
        n = len(drawn.values)
        rows = []
        for name, window in windows.items():
            for side, bound in zip((0, 1), window, strict=True):
                if bound is None:
                    continue
                terms = row(drawn, range(n), name, ("low", "high")[side], bound)
                mean = sum(drawn.parts(name, i)[1] for i in range(n)) / n or 1
                rows.append([float(term / (scale(drawn, name, window, side) * mean)) for term in terms])
        a = np.array(rows)
        k = len(rows)
        best = linprog(
            np.concatenate([np.zeros(n), np.ones(k)]),
            A_ub=np.hstack([a, -np.eye(k)]),
            b_ub=np.zeros(k),
            A_eq=[[1.0] * n + [0.0] * k],
            b_eq=[1.0],
        )
        x = np.array([finding.nearest.shares.get(f"L{i}", 0.0) for i in range(n)])
        assert np.maximum(a @ x, 0).sum() == pytest.approx(best.fun, rel=1e-7, abs=1e-7)
        assert all(excess > 0 for excess in finding.nearest.excess.values())
