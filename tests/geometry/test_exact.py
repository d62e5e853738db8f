"""The exact simplex method, bases and checkers."""

from __future__ import annotations

import subprocess
import sys
from dataclasses import replace
from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from generator.geometry.exact import (
    exact_simplex,
    farkas_on_basis,
    proves_infeasible,
    proves_optimum,
    proves_unbounded,
    rounded_farkas,
    solve_on_basis,
)
from generator.geometry.program import Basis, Infeasible, Optimum, Program, Unbounded
from tests.geometry.exact_families import make, programs
from tests.geometry.oracle import least

F = Fraction


def oracle(program: Program):
    """The oracle's verdict on a program."""
    return least(program.rows, program.row_low, program.row_high, program.lower, program.upper, program.cost)


def verdict(answer):
    """An answer in the oracle's terms."""
    if isinstance(answer, Optimum):
        return answer.value
    return "infeasible" if isinstance(answer, Infeasible) else "unbounded"


def proven(program: Program, answer) -> bool:
    """Whether the checker of the answer's kind agrees."""
    if isinstance(answer, Optimum):
        return proves_optimum(program, answer)
    if isinstance(answer, Infeasible):
        return proves_infeasible(program, answer)
    return proves_unbounded(program, answer)


@settings(max_examples=400, deadline=None)
@given(programs())
def test_simplex_agrees_with_elimination(program):
    """The exact simplex method and Fourier–Motzkin elimination give the same verdict and value."""
    answer = exact_simplex(program)
    assert proven(program, answer)
    assert verdict(answer) == oracle(program)


@settings(max_examples=200, deadline=None)
@given(programs(max_rows=6, max_columns=6))
def test_simplex_returns_its_basis(program):
    """An optimum's basis leads back to the very same point, value and multipliers."""
    answer = exact_simplex(program)
    if isinstance(answer, Optimum):
        assert answer.basis is not None
        assert len(answer.basis.basic) == len(program.rows)
        assert solve_on_basis(program, answer.basis) == answer


@settings(max_examples=200, deadline=None)
@given(programs(max_rows=5, max_columns=6, boxed=True))
def test_answers_are_sparse(program):
    """Columns strictly between their bounds number at most the rows held at a bound."""
    answer = exact_simplex(program)
    if isinstance(answer, Optimum):
        between = sum(
            low < value < high for value, low, high in zip(answer.x, program.lower, program.upper, strict=True)
        )
        values = [sum(a * v for a, v in zip(row, answer.x, strict=True)) for row in program.rows]
        tight = sum(v in (lo, hi) for v, lo, hi in zip(values, program.row_low, program.row_high, strict=True))
        assert between <= tight


@settings(max_examples=200, deadline=None)
@given(programs(max_rows=4, max_columns=4), st.data())
def test_checkers_reject_what_is_not_so(program, data):
    """No checker accepts an answer moved in one number, unless the oracle's verdict bears it out."""
    answer = exact_simplex(program)
    step = data.draw(st.sampled_from([F(1), F(-1), F(1, 1000)]))
    if isinstance(answer, Optimum):
        assert not proves_optimum(program, replace(answer, value=answer.value + step))
        if answer.x:
            j = data.draw(st.integers(0, len(answer.x) - 1))
            moved = tuple(v + step * (i == j) for i, v in enumerate(answer.x))
            value = sum((c * v for c, v in zip(program.cost, moved, strict=True)), F(0))
            if proves_optimum(program, replace(answer, x=moved, value=value)):
                assert value == oracle(program)
    else:
        assert not proves_optimum(program, Optimum((F(0),) * len(program.cost), F(0), (F(0),) * len(program.rows)))
    if not isinstance(answer, Infeasible) and program.rows:
        weights = tuple(data.draw(st.integers(-3, 3).map(F)) for _ in program.rows)
        assert not proves_infeasible(program, Infeasible(weights))


@settings(max_examples=200, deadline=None)
@given(programs(max_rows=3, max_columns=3), st.data())
def test_any_basis_is_safe(program, data):
    """A basis drawn at random leads to a proven optimum or to None, and so does a random first phase."""
    m, n = len(program.rows), len(program.cost)
    columns = data.draw(st.permutations(range(n + m)))[: data.draw(st.integers(0, n + m))]
    basis = Basis(tuple(sorted(columns)), frozenset(data.draw(st.sets(st.integers(0, max(0, n + m - 1))))))
    optimum = solve_on_basis(program, basis)
    assert optimum is None or optimum.value == oracle(program)
    assert farkas_on_basis(program, basis) is None or oracle(program) == "infeasible"


EDGE_CASES = {
    "nothing at all": (make([], [], [], [], [], []), F(0)),
    "no columns, rows of 0 kept": (make([[]], [0], [1], [], [], []), F(0)),
    "no columns, a row broken": (make([[]], [1], [2], [], [], []), "infeasible"),
    "no rows, cost up a free column": (make([], [], [], [None], [None], [1]), "unbounded"),
    "no rows, box": (make([], [], [], [-1, 0], [2, "1/2"], [1, -2]), F(-2)),
    "column bounds cross": (make([[1]], [None], [None], [1], [0], [0]), "infeasible"),
    "row bounds cross": (make([[1]], [2], [1], [0], [5], [0]), "infeasible"),
    "empty row kept": (make([[0, 0]], [0], [0], [0, 0], [1, 1], [1, 1]), F(0)),
    "empty row broken": (make([[0, 0]], [1], [1], [0, 0], [1, 1], [1, 1]), "infeasible"),
    "rows without bounds": (make([[1, 1]], [None], [None], [0, 0], [1, 1], [-1, -1]), F(-2)),
    "fixed columns": (make([[1, 1, 1]], [1], [1], ["0.3", "0.3", 0], ["0.3", "0.3", 1], [0, 0, 1]), F(2, 5)),
    "redundant equalities": (make([[1, 1], [2, 2], [1, 1]], [1, 2, 1], [1, 2, 1], [0, 0], [1, 1], [1, 3]), F(1)),
    "equalities that clash by a hair": (
        make([[1, 1], [1, 1]], [1, "1.000000000001"], [1, "1.000000000001"], [0, 0], [1, 1], [0, 0]),
        "infeasible",
    ),
    "free columns held by rows": (make([[1, 1], [1, -1]], [4, 0], [4, 0], [None] * 2, [None] * 2, [3, -1]), F(4)),
    "upper bounds only": (make([[1, 1]], [-3], [None], [None, None], [2, 2], [1, 1]), F(-3)),
    "numbers too small for floats": (
        make([[f"1e-{e}"] for e in (320, 310, 5)], [f"1e-{e}" for e in (320, 310, 5)], [None] * 3, [0], [5], [1]),
        F(1),
    ),
    "numbers far apart": (
        make([["1e300", 1], ["1e-300", -1]], [1, 0], [None, 0], [0, 0], [None, 1], [1, 1]),
        (1 + F("1e-300")) / (F("1e300") + F("1e-300")),
    ),
    "numbers too large for floats": (make([[10**400]], [10**400], [None], [0], [5], [1]), F(1)),
}


@pytest.mark.parametrize("name", EDGE_CASES)
def test_edge_cases(name):
    """Empty, free, fixed, crossed and redundant parts get the right, proven verdict."""
    program, expected = EDGE_CASES[name]
    answer = exact_simplex(program)
    assert verdict(answer) == expected
    assert proven(program, answer)


def test_cycling_example_ends():
    """Beale's example, on which the textbook rule cycles, ends at −1/20 (E. M. L. Beale 1955; from memory)."""
    program = make(
        [["1/4", -60, "-1/25", 9], ["1/2", -90, "-1/50", 3], [0, 0, 1, 0]],
        [None] * 3,
        [0, 0, 1],
        [0] * 4,
        [None] * 4,
        ["-3/4", 150, "-1/50", 6],
    )
    answer = exact_simplex(program)
    assert isinstance(answer, Optimum)
    assert answer.value == F(-1, 20)
    assert proves_optimum(program, answer)


def test_twisted_cube_ends_at_its_optimum():
    """The Klee–Minty cube in 8 dimensions has optimum −100^7 (V. Klee, G. J. Minty 1972; from memory)."""
    d = 8
    rows = [[2 * 10 ** (i - j) if j < i else int(i == j) for j in range(d)] for i in range(d)]
    program = make(
        rows, [None] * d, [100**i for i in range(d)], [0] * d, [None] * d, [-(10 ** (d - 1 - j)) for j in range(d)]
    )
    answer = exact_simplex(program)
    assert isinstance(answer, Optimum)
    assert answer.value == -(100 ** (d - 1))


def test_claims_of_the_wrong_shape_prove_nothing():
    """Answers with too few numbers are rejected, not misread."""
    program = make([[1, 1]], [3], [None], [0, 0], [1, 1], [0, 0])
    assert proves_infeasible(program, Infeasible((F(1),)))
    assert not proves_infeasible(program, Infeasible(()))
    assert not proves_infeasible(program, Infeasible((F(1), F(1))))
    assert not proves_optimum(program, Optimum((F(0),), F(0), (F(0),)))
    free = make([], [], [], [None], [None], [1])
    assert proves_unbounded(free, Unbounded((F(0),), (F(-1),)))
    assert not proves_unbounded(free, Unbounded((F(0),), (F(1),)))
    assert not proves_unbounded(free, Unbounded((F(0),), ()))


def test_rays_may_not_leave_a_bound():
    """A falling ray proves nothing where it runs into a bound of a column or a row, on either side."""
    ray = Unbounded((F(1), F(1)), (F(-1), F(0)))
    assert proves_unbounded(make([[1, 0]], [None], [2], [None, 0], [3, 3], [1, 0]), ray)
    assert not proves_unbounded(make([[1, 0]], [None], [2], [0, 0], [3, 3], [1, 0]), ray)
    assert not proves_unbounded(make([[1, 0]], [0], [2], [None, 0], [3, 3], [1, 0]), ray)
    assert not proves_unbounded(make([[-1, 0]], [-1], [2], [None, 0], [3, 3], [1, 0]), ray)
    up = Unbounded((F(1), F(1)), (F(1), F(0)))
    assert not proves_unbounded(make([], [], [], [0, 0], [3, 3], [-1, 0]), up)
    assert not proves_unbounded(make([[1, 0]], [0], [2], [0, 0], [None, 3], [-1, 0]), up)


def test_multipliers_price_the_bounds():
    """The multiplier of a row is the rise of the optimum for one unit more of the bound that holds it."""
    program = make([[1, 1], [10, 30]], [1, 24], [1, None], [0, 0], [None, None], [100, 180])
    answer = exact_simplex(program)
    dearer = exact_simplex(replace(program, row_low=(F(1), F(25))))
    assert isinstance(answer, Optimum)
    assert isinstance(dearer, Optimum)
    assert answer.multipliers[1] == dearer.value - answer.value == 4


def test_rounded_multipliers_count_only_if_they_prove():
    """Floating-point multipliers become a proof where rounding leaves one, and None where it does not."""
    program = make([[1, 1], [1, -1]], [3, None], [None, 5], [0, 0], [1, 1], [0, 0])
    assert rounded_farkas(program, (0.333333333, 1e-17)) is not None
    assert rounded_farkas(program, (0.0, 0.0)) is None
    assert rounded_farkas(program, (float("nan"), 1.0)) is None
    assert rounded_farkas(replace(program, row_low=(F(1), None)), (1.0, 0.0)) is None


def test_imports_no_solver():
    """The exact half loads without numpy and scipy."""
    code = (
        "import sys, generator.geometry.exact, generator.geometry.proofs\n"
        "print('numpy' in sys.modules or 'scipy' in sys.modules)"
    )
    assert subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout == "False\n"
