"""Whole columns: the points are exactly feasible, and the best by brute force."""

from dataclasses import replace
from fractions import Fraction
from itertools import product
from math import inf
from random import Random

import pytest

from generator.geometry.decide import decide
from generator.geometry.integers import solve_whole
from generator.geometry.program import Infeasible, Optimum, Program


def vector(*values) -> tuple[Fraction, ...]:
    return tuple(Fraction(value) for value in values)


def make_program(**changes) -> Program:
    """A knapsack of three things: 10, 13 and 7 for 4, 6 and 3; at most 10 together, each at most 2."""
    base = Program(
        rows=(vector(4, 6, 3),),
        row_low=(None,),
        row_high=(Fraction(10),),
        lower=vector(0, 0, 0),
        upper=vector(2, 2, 2),
        cost=vector(-10, -13, -7),
    )
    return replace(base, **changes)


def best_by_brute_force(program: Program, whole: list[int], most: int) -> Fraction | None:
    """The least value over all whole numbers up to ``most``, the rest decided exactly."""
    best = None
    for numbers in product(range(most + 1), repeat=len(whole)):
        lower, upper = list(program.lower), list(program.upper)
        for j, number in zip(whole, numbers, strict=True):
            lower[j] = upper[j] = Fraction(number)
        answer = decide(replace(program, lower=tuple(lower), upper=tuple(upper)))
        if isinstance(answer, Optimum) and (best is None or answer.value < best):
            best = answer.value
    return best


def test_knapsack():
    """4 + 3 + 3 = 10 earns 24: more than 4 + 6 (23)."""
    found = solve_whole(make_program(), [0, 1, 2])
    assert (found.status, found.value, found.x) == ("best", -24, vector(1, 0, 2))
    assert found.gap == pytest.approx(0, abs=1e-9)


def test_mixed_columns_are_finished_exactly():
    """With only the second whole the rest is a linear program, decided in exact numbers."""
    found = solve_whole(make_program(row_high=(Fraction(31, 3),)), [1])
    assert found.status == "best"
    assert found.value == best_by_brute_force(make_program(row_high=(Fraction(31, 3),)), [1], 2)
    assert sum(a * x for a, x in zip((4, 6, 3), found.x, strict=True)) <= Fraction(31, 3)


@pytest.mark.parametrize("seed", range(12))
def test_agrees_with_brute_force(seed):
    """Random programs of four columns, two or three whole: value by brute force, point exactly feasible."""
    random = Random(seed)
    n, whole = 4, sorted(random.sample(range(4), random.choice([2, 3])))
    program = Program(
        rows=tuple(tuple(Fraction(random.randint(-30, 60), 10) for _ in range(n)) for _ in range(3)),
        row_low=tuple(random.choice([None, Fraction(random.randint(0, 90), 10)]) for _ in range(3)),
        row_high=tuple(random.choice([None, Fraction(random.randint(90, 150), 10)]) for _ in range(3)),
        lower=(Fraction(0),) * n,
        upper=(Fraction(3),) * n,
        cost=tuple(Fraction(random.randint(-20, 50), 10) for _ in range(n)),
    )
    expected = best_by_brute_force(program, whole, 3)
    found = solve_whole(program, whole)
    assert found.value == expected
    assert found.status == ("none" if expected is None else "best")
    if found.x is not None:
        assert all(found.x[j].denominator == 1 for j in whole)
        for row, low, high in zip(program.rows, program.row_low, program.row_high, strict=True):
            value = sum(a * x for a, x in zip(row, found.x, strict=True))
            assert low is None or value >= low
            assert high is None or value <= high


def test_no_whole_number_between_the_bounds():
    """Bounds 0.2 to 0.8 admit no whole number."""
    found = solve_whole(make_program(lower=vector("1/5", 0, 0), upper=vector("4/5", 2, 2)), [0])
    assert (found.status, found.x, found.gap) == ("none", None, inf)


def test_a_linear_program_is_decided_exactly():
    """Without whole columns the answer is the exact optimum; an empty one is none, an endless one unknown."""
    assert solve_whole(make_program(), []).value == decide(make_program()).value
    assert isinstance(decide(make_program(row_high=(Fraction(-1),))), Infeasible)
    assert solve_whole(make_program(row_high=(Fraction(-1),)), []).status == "none"
    endless = make_program(row_high=(None,), upper=(None, None, None))
    assert solve_whole(endless, []).status == solve_whole(endless, [0]).status == "unknown"


def test_a_limit_of_effort_is_reported_with_the_gap():
    """Stopped at its first node, a hard knapsack says what it has, and how much better it might get."""
    random = Random(5)
    n = 40
    weights = [Fraction(random.randint(1000, 9999)) for _ in range(n)]
    rows = tuple(tuple(w + random.randint(-300, 300) for w in weights) for _ in range(5))
    program = Program(
        rows=rows,
        row_low=(None,) * 5,
        row_high=tuple(sum(row, Fraction(0)) / 2 for row in rows),
        lower=(Fraction(0),) * n,
        upper=(Fraction(1),) * n,
        cost=tuple(-w - random.randint(-100, 100) for w in weights),
    )
    found = solve_whole(program, range(n), nodes=1)
    assert found.status in ("found", "unknown")
    assert found.gap > 0
    if found.x is not None:
        assert all(
            sum(a * x for a, x in zip(row, found.x, strict=True)) <= h
            for row, h in zip(rows, program.row_high, strict=True)
        )
