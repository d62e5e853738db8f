"""Room, greatest total, nearest miss, wanted point, curve and stuck shares, against hand-made and exact answers."""

from dataclasses import replace
from fractions import Fraction
from itertools import pairwise
from random import Random

import numpy as np
import pytest

from generator.geometry.exact import exact_simplex
from generator.geometry.program import Infeasible, Optimum
from generator.geometry.reach import Window
from generator.geometry.ways import (
    Stuck,
    curve,
    greatest_many,
    nearest_many,
    room_many,
    stuck_many,
    wanted_many,
)
from tests.geometry.stack_families import KINDS, windows
from tests.geometry.test_reach import make_window, vector

#: A square's corners and its centre, as two rows over five points.
SQUARE = (vector(0, 4, 4, 0, 2), vector(0, 0, 4, 4, 2))


def square(low, high) -> Window:
    return replace(make_window(low, high), rows=SQUARE)


def test_room_is_the_greatest_common_tightening():
    """Between 10 and 30 a window 15..25 can close to its middle; one at 32..34 must give way by 2 and a step."""
    asked = [make_window(low=(15, None), high=(25, None)), make_window(low=(32, None), high=(34, None))]
    reached = room_many(asked, [vector(1, 0), vector("1/2", 0)])
    np.testing.assert_allclose(-reached.value, [5, -4])
    assert reached.answer(1).value == 4
    assert reached.answer(1).x == vector(0, 1, -4)


def test_rows_that_do_not_move_can_block_alone():
    """A fixed row out of reach leaves no room to measure."""
    reached = room_many([make_window(low=(40, 0), high=(50, 30))], [vector(0, 1)])
    assert reached.is_feasible.tolist() == [False]
    assert isinstance(reached.answer(0), Infeasible)


def test_room_without_a_moving_bound_is_refused():
    """Where nothing bounds t there is no greatest one."""
    with pytest.raises(ValueError, match="no least value"):
        room_many([make_window()], [vector(1, 1)])


@pytest.mark.parametrize("kind", KINDS)
def test_room_is_the_edge_of_reach(kind):
    """At the room the moved window is within reach, a little beyond it is not."""
    random = Random(f"room {kind}")
    asked = [
        window
        for window in windows(random, kind, 2, 6, 12)
        if any(a is not None and b is not None for a, b in zip(window.low, window.high, strict=True))
    ]
    steps = [vector(1, 2)] * len(asked)
    reached = room_many(asked, steps)
    for k, window in enumerate(asked):
        answer = reached.answer(k)
        assert isinstance(answer, Optimum)

        def moved(t, window=window):
            low = tuple(None if b is None else b + t * s for b, s in zip(window.low, vector(1, 2), strict=True))
            high = tuple(None if b is None else b - t * s for b, s in zip(window.high, vector(1, 2), strict=True))
            return exact_simplex(replace(window, low=low, high=high).program(vector(*[0] * 6)))

        assert isinstance(moved(-answer.value), Optimum)
        assert isinstance(moved(-answer.value + Fraction(1, 10**9)), Infeasible)


def test_greatest_total_is_bounded_by_what_runs_out():
    """Half and half of A and B with 3 of A and 5 of B makes 6; a value out of reach makes 0."""
    asked = [make_window(low=(20, None), high=(20, None)), make_window(low=(31, None))]
    reached = greatest_many(asked, [vector(3, 5)] * 2)
    np.testing.assert_allclose(-reached.value, [6, 0], atol=1e-12)
    assert reached.answer(0).x == vector(3, 3)
    assert reached.answer(1).value == 0


def test_greatest_total_keeps_share_bounds():
    """With at most a quarter of B, 3 of A make 4 in all; without any bound in the way the total grows for ever."""
    window = replace(make_window(), upper=vector(1, "1/4"))
    reached = greatest_many([window], [(Fraction(3), None)])
    assert reached.answer(0).x == vector(3, 1)
    with pytest.raises(ValueError, match="no least value"):
        greatest_many([make_window()], [(Fraction(3), None)])


def test_nearest_weighs_what_is_missed():
    """N ≥ 20 and K ≥ 16 at equal weights: K falls ¾ for each N gained, so N keeps 20 and K misses 3.5."""
    reached = nearest_many([make_window(low=(20, 16)), make_window(low=(20, 10))], [vector(1, 1)] * 2)
    np.testing.assert_allclose(reached.value, [3.5, 0], atol=1e-12)
    assert reached.answer(0).x == vector("1/2", "1/2", 0, "7/2", 0, 0)


def test_wanted_point_mends_the_window():
    """With 20 % of the wanted point the window is just within reach, and no nearer point would do."""
    window = make_window(low=(20, 16))
    share = Fraction(1, 5)
    (wanted,) = wanted_many([window], share, [vector(1, 1)], (Fraction(0),) * 2, (Fraction(100),) * 2)
    rows = tuple((*row, value) for row, value in zip(window.rows, wanted.values, strict=True))
    bounds = {"lower": (*vector(0, 0), share), "upper": (*vector(1, 1), share)}
    larger = replace(window, rows=rows, **bounds)
    assert isinstance(exact_simplex(larger.program(vector(0, 0, 0))), Optimum)
    assert wanted.distance == Fraction(35, 2)
    closer = tuple((*row[:2], (row[2] + 20 * (row[0] + row[1])) / 41) for row in rows)
    assert isinstance(exact_simplex(replace(larger, rows=closer).program(vector(0, 0, 0))), Infeasible)


def test_wanted_point_keeps_its_range():
    """Where the value that would be needed lies outside what a point may have, there is none."""
    window = make_window(low=(80, None))
    near = wanted_many([window] * 2, Fraction(1, 2), [vector(1, 1)] * 2, (None, None), (Fraction(200), None))
    assert near[0].values[0] == 130
    assert wanted_many([window], Fraction(1, 2), [vector(1, 1)], (None, None), (Fraction(100), None)) == [None]


def test_curve_has_exact_corners():
    """Cheapest at room t: A up to N = 10 + t, then mixed; a straight line has two points, a bend has three."""
    window = make_window(low=(5, None))
    points = curve(window, vector(1, 3), vector(1, 0), Fraction(0), Fraction(25))
    assert [(point.room, point.cost) for point in points] == [(0, 1), (5, 1), (25, 3)]
    assert points[1].x == vector(1, 0)
    assert curve(window, vector(1, 3), vector(1, 0), Fraction(0), Fraction(26)) == ()
    assert len(curve(window, vector(1, 3), vector(1, 0), Fraction(7), Fraction(7))) == 1


def test_curve_is_convex_and_right_between_its_corners():
    """Halfway between two corners the least cost is halfway between theirs; slopes rise."""
    random = Random("curve")
    bends = 0
    for window in windows(random, "general", 3, 8, 40):
        wide = replace(
            window,
            low=tuple(None if b is None else b - 30 for b in window.low),
            high=tuple(None if b is None else b + 30 for b in window.high),
        )
        cost = vector(*(random.randint(1, 1000) for _ in range(8)))
        step = vector(1, "2/3", "1/2")
        points = curve(wide, cost, step, Fraction(0), Fraction(30))
        slopes = []
        for left, right in pairwise(points):
            middle = (left.room + right.room) / 2
            low = tuple(None if b is None else b + middle * s for b, s in zip(wide.low, step, strict=True))
            high = tuple(None if b is None else b - middle * s for b, s in zip(wide.high, step, strict=True))
            answer = exact_simplex(replace(wide, low=low, high=high).program(cost))
            assert answer.value == (left.cost + right.cost) / 2
            slopes.append((right.cost - left.cost) / (right.room - left.room))
        assert all(a < b for a, b in pairwise(slopes))
        bends += len(points) - 2
    assert bends >= 5


def test_stuck_shares_name_the_face():
    """On an edge of the square only its two corners can be used; at a corner only that; inside all can."""
    asked = [
        square((1, 0), (1, 0)),
        square((4, 4), (4, 4)),
        square((1, 1), (1, 1)),
        square((5, 0), (5, 0)),
    ]
    edge, corner, inside, outside = stuck_many(asked)
    assert (edge.low, edge.high) == ((2, 3, 4), ())
    assert (corner.low, corner.high) == ((0, 1, 3, 4), ())
    assert inside == Stuck((), ())
    assert outside is None


def test_stuck_proof_holds():
    """The multipliers price the stuck shares above nothing else: every feasible x has them at 0."""
    (edge,) = stuck_many([square((1, 0), (1, 0))])
    y = edge.low_multipliers
    for j in range(5):
        price = sum(y[k] * row[j] for k, row in enumerate(SQUARE)) + y[2]
        assert -price >= (1 if j in edge.low else 0)
    assert y[0] * 1 + y[1] * 0 + y[2] * 1 == 0


def test_a_share_stuck_at_its_high_bound_is_named():
    """With at most half of B, N = 20 needs all that is allowed of it; a bound that says nothing isn't named."""
    window = replace(make_window(low=(20, None)), upper=vector(1, "1/2"))
    (stuck,) = stuck_many([window])
    assert (stuck.low, stuck.high) == ((), (1,))
    assert stuck.high_multipliers is not None
    (free,) = stuck_many([replace(window, low=(Fraction(19), None))])
    assert free == Stuck((), ())


@pytest.mark.parametrize("kind", KINDS)
def test_stuck_shares_are_exactly_those_that_cannot_move(kind):
    """A share is stuck at 0 just when the exact greatest share is 0."""
    random = Random(f"stuck {kind}")
    asked = windows(random, kind, 2, 6, 8)
    for window, stuck in zip(asked, stuck_many(asked), strict=True):
        greatest = [exact_simplex(window.program(tuple(Fraction(-(i == j)) for j in range(6)))) for i in range(6)]
        if stuck is None:
            assert all(isinstance(answer, Infeasible) for answer in greatest)
        else:
            assert stuck.low == tuple(i for i, answer in enumerate(greatest) if answer.value == 0)
