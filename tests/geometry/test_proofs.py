"""Blocking proofs: as few rows and as small weights as can be had."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from itertools import combinations

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from generator.geometry.exact import exact_simplex, proves_infeasible
from generator.geometry.program import Infeasible, Program
from generator.geometry.proofs import fewest_rows, simplest, tidy
from tests.geometry.exact_families import make, programs
from tests.geometry.oracle import least

F = Fraction


def blocks(program: Program, kept) -> bool:
    """Whether the oracle finds these rows of the program unreachable."""
    rows = [program.rows[k] for k in kept]
    low, high = [program.row_low[k] for k in kept], [program.row_high[k] for k in kept]
    zero = (F(0),) * len(program.cost)
    return least(rows, low, high, program.lower, program.upper, zero) == "infeasible"


@settings(max_examples=250, deadline=None)
@given(programs(with_cost=False), st.data())
def test_fewest_rows_is_least(program, data):
    """The proof returned holds, and the oracle finds no smaller set of rows that is blocked."""
    answer = exact_simplex(program)
    assume(isinstance(answer, Infeasible))
    m = len(program.rows)
    uncounted = data.draw(st.sets(st.integers(0, m - 1), max_size=2)) if m else set()
    proof = fewest_rows(program, answer, sorted(uncounted))
    assert proves_infeasible(program, proof)
    used = [k for k, weight in enumerate(proof.multipliers) if weight and k not in uncounted]
    if proves_infeasible(program, Infeasible((F(0),) * m)):
        assert not used
        return
    counted = [k for k in range(m) if k not in uncounted]
    for size in range(len(used)):
        assert not any(blocks(program, (*kept, *uncounted)) for kept in combinations(counted, size))
    weights = tuple(proof.multipliers[k] for k in used)
    assert weights == tidy(weights)


@settings(max_examples=150, deadline=None)
@given(
    st.lists(st.tuples(st.integers(-6, 6), st.integers(-6, 6)), min_size=1, max_size=6),
    st.integers(-4, 4),
    st.integers(-4, 4),
)
def test_two_rows_get_the_smallest_weights(points, one, two):
    """On two homogeneous rows no pair of whole weights with a smaller sum is a proof."""
    program = make(
        [[1] * len(points), [a - one for a, _ in points], [b - two for _, b in points]],
        [1, 0, 0],
        [1, None, None],
        [0] * len(points),
        [None] * len(points),
        [0] * len(points),
    )
    answer = exact_simplex(program)
    assume(isinstance(answer, Infeasible))
    y = fewest_rows(program, answer, [0]).multipliers
    total = y[1] + y[2]
    smaller = [(F(a), F(b)) for a in range(30) for b in range(30) if 0 < a + b < total]
    if y[1] and y[2]:
        scores = [[weights[0] * (one - a) + weights[1] * (two - b) for a, b in points] for weights in smaller]
        assert all(min(score) <= 0 for score in scores)


def test_two_lot_example():
    """Lots (10, 20) and (30, 5) with N ≥ 20, K ≥ 16: N + K must be at least 36, and no lot has more than 35."""
    program = make([[1, 1], [10, 30], [20, 5]], [1, 20, 16], [1, None, None], [0, 0], [None, None], [0, 0])
    proof = fewest_rows(program, exact_simplex(program), [0])
    assert proof.multipliers[1:] == (F(1), F(1))
    assert proof.multipliers[0] == -35


def test_one_row_suffices():
    """Where one limit is out of reach by itself, the proof names it alone with weight 1."""
    program = make(
        [[1, 1, 1], [3, 4, 5], [1, 9, 2], [7, 7, 8]],
        [1, 6, 5, None],
        [1, 7, 6, "6.5"],
        [0] * 3,
        [1] * 3,
        [0] * 3,
    )
    proof = fewest_rows(program, exact_simplex(program), [0])
    assert sorted(map(abs, proof.multipliers[1:])) == [0, 0, 1]
    assert proof.multipliers[1] == 1


def test_box_alone_blocks():
    """Where bounds cross no row is needed, and where the uncounted row alone is out of reach no other."""
    crossed = make([[1]], [0], [1], [1], [0], [0])
    assert fewest_rows(crossed, Infeasible((F(0),))).multipliers == (F(0),)
    short = make([[1, 1], [5, 6]], [1, 5], [1, 6], [0, 0], ["0.3", "0.3"], [0, 0])
    proof = fewest_rows(short, exact_simplex(short), [0])
    assert proof.multipliers[1] == 0
    assert proves_infeasible(short, proof)


def test_three_rows_where_three_are_needed():
    """Three limits that only together are out of reach (Helly: one more than the hull's dimension) share the proof."""
    corners = [(0, 0), (4, 0), (0, 4)]
    rows = [[1, 1, 1], *[[x for x, _ in corners], [y for _, y in corners], [x + 2 * y for x, y in corners]]]
    program = make(rows, [1, "1.5", "1.5", None], [1, None, None, "4.4"], [0] * 3, [None] * 3, [0] * 3)
    proof = fewest_rows(program, exact_simplex(program), [0])
    assert proof.multipliers[1:] == (F(1), F(2), F(-1))


def test_mixed_units_give_round_weights():
    """With a row in ppm beside one in percent, the weights are whole numbers of few digits."""
    program = make(
        [[1, 1, 1], ["10.13", "30.57", "20.21"], [20133, 5077, 12003]],
        [1, "21.3", 16011],
        [1, None, None],
        [0] * 3,
        [None] * 3,
        [0] * 3,
    )
    proof = fewest_rows(program, exact_simplex(program), [0])
    assert all(weight.denominator == 1 for weight in proof.multipliers[1:])
    assert proof.multipliers[2] == 1
    assert 1 < proof.multipliers[1] <= 1000


def test_many_rows_keep_an_irreducible_proof():
    """Beyond the rows of which all subsets are tried, no row of the proof can be dropped."""
    d = 14
    rows = [[1] * (d + 1)] + [[int(i == j) for i in range(d + 1)] for j in range(d)]
    program = make(
        rows, [1] + ["1/14"] * (d - 1) + ["1/13"], [1] + [None] * d, [0] * (d + 1), [None] * (d + 1), [0] * (d + 1)
    )
    proof = fewest_rows(program, exact_simplex(program), [0])
    assert proof.multipliers[1:] == (F(1),) * d
    for k in range(1, d + 1):
        low = tuple(None if i == k else bound for i, bound in enumerate(program.row_low))
        assert not isinstance(exact_simplex(replace(program, row_low=low)), Infeasible)


def test_no_proof_no_rows():
    """Multipliers that prove nothing are refused."""
    program = make([[1]], [0], [1], [0], [1], [0])
    with pytest.raises(ValueError, match="prove nothing"):
        fewest_rows(program, Infeasible((F(1),)))


@given(
    st.lists(st.fractions(max_denominator=50), min_size=1, max_size=6), st.fractions(min_value="1/100", max_value=100)
)
def test_tidy_is_the_shortest_of_its_direction(values, factor):
    """Tidied multipliers are whole, without common factor, and the same for every positive multiple."""
    result = tidy(tuple(values))
    assert all(value.denominator == 1 for value in result)
    assert tidy(tuple(value * factor for value in values)) == result
    scale = next((r / v for r, v in zip(result, values, strict=True) if v), F(1))
    assert scale > 0
    assert result == tuple(v * scale for v in values)


@given(
    st.fractions(min_value="1/60", max_value=60, max_denominator=60),
    st.fractions(min_value=0, max_value=2, max_denominator=40),
)
def test_simplest_fraction_of_an_interval(low, width):
    """The fraction found has the least denominator, and of these the least numerator, in the interval."""
    high = low + width
    found = simplest(lambda value: low <= value <= high, low + width / 3)
    assert low <= found <= high
    for denominator in range(1, found.denominator + 1):
        numerator = -(-low.numerator * denominator // low.denominator)
        if F(numerator, denominator) <= high:
            assert found == F(numerator, denominator)
            break


def test_simplest_fraction_far_from_one():
    """Very large and very small fractions are found without walking to them one by one."""
    asked = []

    def holds(value):
        asked.append(value)
        return F(10**9) + F(1, 3) <= value <= F(10**9) + F(1, 2)

    assert simplest(holds, F(10**9) + F(2, 5)) == F(2 * 10**9 + 1, 2)
    assert len(asked) < 200
    assert simplest(lambda value: value < F(1, 10**6), F(1, 10**8)) == F(1, 10**6 + 1)
