"""Large sparse programs and systems, exactly: against elimination in whole numbers and the dense exact solver."""

from __future__ import annotations

import random
from fractions import Fraction

import pytest

from generator.geometry.checks import proven_prices
from generator.geometry.decide import decide
from generator.geometry.elimination import determinant, solve_square
from generator.geometry.lifted import proves_regular, solve_lines
from generator.geometry.program import Infeasible, Optimum, Program, Sparse
from generator.geometry.sparse import best_in_turn


def drawn_lines(rng: random.Random, size: int, most: int) -> list[dict[int, int]]:
    """Rows with about six entries each, one of them on the diagonal."""
    lines = []
    for k in range(size):
        line = {rng.randrange(size): rng.randint(-most, most) for _ in range(6)}
        lines.append({**line, k: rng.randint(1, most)})
    return lines


@pytest.mark.parametrize("most", [9, 10**6, 10**20])
@pytest.mark.parametrize("size", [1, 4, 11, 30, 70])
def test_systems_against_elimination(size: int, most: int) -> None:
    """The solution is that of fraction-free elimination, whatever the size of the numbers."""
    rng = random.Random(size * most)
    lines = drawn_lines(rng, size, most)
    right = [rng.randint(-most, most) for _ in range(size)]
    known = solve_square([[line.get(j, 0) for j in range(size)] for line in lines], right)
    assert known is not None
    assert solve_lines(lines, right) == [Fraction(value, known[1]) for value in known[0]]
    assert proves_regular(lines)


def test_systems_that_fall_apart() -> None:
    """Parts that share no column are solved each for itself, and a part with too few rows has no answer."""
    assert solve_lines([{0: 2}, {1: 3, 2: 1}, {1: 1, 2: 1}], [1, 2, 1]) == [
        Fraction(1, 2),
        Fraction(1, 2),
        Fraction(1, 2),
    ]
    assert solve_lines([{0: 2, 1: 1}, {2: 1}, {2: 2}], [1, 2, 4]) is None
    assert solve_lines([], []) == []


@pytest.mark.parametrize("size", [3, 25])
def test_singular_systems(size: int) -> None:
    """Dependent rows without a solution have no answer, and are never called regular."""
    rng = random.Random(size)
    lines = drawn_lines(rng, size, 50)
    lines[-1] = {j: lines[0].get(j, 0) + lines[1].get(j, 0) for j in {*lines[0], *lines[1]}}
    assert determinant([[line.get(j, 0) for j in range(size)] for line in lines]) == 0
    assert solve_lines(lines, [1] * size) is None
    assert not proves_regular(lines)


def test_nearly_singular_rows_are_not_called_regular_on_the_word_of_floats() -> None:
    """Rows that differ in the seventeenth digit: the system is solved exactly or not at all, never wrongly."""
    size, most = 14, 10**17
    lines = [{k: most, (k + 1) % size: 1} for k in range(size)]
    lines[1] = {0: most, 1: most + 1}
    lines[0] = {0: most, 1: most}
    solved = solve_lines(lines, [1] * size)
    if solved is not None:
        assert all(sum(a * solved[j] for j, a in line.items()) == 1 for line in lines)
    assert not proves_regular(lines)


def drawn_program(rng: random.Random, *, columns: int, rows: int) -> Sparse:
    """Rows that add up, each with a cap, and rows through the origin of either sign, in small whole numbers."""
    lines: list[dict[int, int]] = []
    low: list[int | None] = []
    high: list[int | None] = []
    for k in range(rows):
        chosen = rng.sample(range(columns), min(columns, rng.randint(2, 5)))
        if k % 2:
            lines.append(dict.fromkeys(chosen, rng.randint(1, 3)))
            low.append(rng.choice([None, None, 1]))
            high.append(rng.randint(5, 30))
        else:
            lines.append({j: rng.randint(-9, 9) for j in chosen})
            low.append(rng.choice([None, -3]))
            high.append(0)
    lines.append(dict.fromkeys(range(columns), 1))
    low.append(None)
    high.append(100)
    return Sparse(width=columns, rows=tuple(lines), low=tuple(low), high=tuple(high))


def dense(
    program: Sparse, cost: dict[int, Fraction], fixed: tuple[tuple[dict[int, Fraction], Fraction], ...]
) -> Program:
    """The same program in dense rows, with earlier costs fixed at their best."""
    width = range(program.width)
    rows = [tuple(Fraction(row.get(j, 0)) for j in width) for row in program.rows]
    rows += [tuple(own.get(j, Fraction(0)) for j in width) for own, _ in fixed]
    low = [None if bound is None else Fraction(bound) for bound in program.low]
    high = [None if bound is None else Fraction(bound) for bound in program.high]
    return Program(
        rows=tuple(rows),
        row_low=(*low, *(value for _, value in fixed)),
        row_high=(*high, *(value for _, value in fixed)),
        lower=(Fraction(0),) * program.width,
        upper=(None,) * program.width,
        cost=tuple(cost.get(j, Fraction(0)) for j in width),
    )


@pytest.mark.parametrize("seed", range(30))
def test_best_in_turn_against_the_dense_solver(seed: int) -> None:
    """Each cost in turn is as low as the dense exact solver makes it; where it gives no answer, that is allowed."""
    rng = random.Random(seed)
    program = drawn_program(rng, columns=rng.randint(3, 14), rows=rng.randint(2, 12))
    costs = [{j: Fraction(rng.randint(-5, 5), 2) for j in range(program.width)} for _ in range(3)]
    found = best_in_turn(program, costs)
    fixed: tuple[tuple[dict[int, Fraction], Fraction], ...] = ()
    for cost in costs:
        answer = decide(dense(program, cost, fixed))
        if isinstance(answer, Infeasible):
            assert found is None
            return
        assert isinstance(answer, Optimum)
        fixed = (*fixed, (cost, answer.value))
    if found is None:
        return  # how seldom that is, the next test counts
    for cost, value in fixed:
        assert sum(cost[j] * x for j, x in found.x.items()) == value
    assert found.x.keys() <= found.free
    for k, bound in found.held.items():
        assert sum(a * found.x.get(j, Fraction(0)) for j, a in program.rows[k].items()) == bound
    reach = [decide(dense(program, {j: Fraction(sign)}, fixed)) for j in range(program.width) for sign in (1, -1)]
    spread = [
        isinstance(a, Optimum) and isinstance(b, Optimum) and a.value == -b.value
        for a, b in zip(reach[::2], reach[1::2], strict=True)
    ]
    assert not found.is_only or all(spread)
    for j in range(program.width):
        if j not in found.free:
            most = reach[2 * j + 1]
            assert isinstance(most, Optimum)
            assert most.value == 0


def test_most_drawn_programs_have_an_answer() -> None:
    """Of drawn programs that have a best point, the proposal leads to it in nearly all."""
    answered = asked = 0
    for seed in range(60):
        rng = random.Random(seed)
        program = drawn_program(rng, columns=rng.randint(3, 14), rows=rng.randint(2, 12))
        costs = [{j: Fraction(rng.randint(-5, 5), 2) for j in range(program.width)} for _ in range(3)]
        if isinstance(decide(dense(program, costs[0], ())), Optimum):
            asked += 1
            answered += best_in_turn(program, costs) is not None
    assert asked > 20
    assert answered >= 0.9 * asked


def test_a_refused_proposal_is_no_answer() -> None:
    """What the caller does not accept is not worked out."""
    program = Sparse(width=1, rows=({0: 1},), low=(None,), high=(5,))
    assert best_in_turn(program, [{0: Fraction(-1)}], lambda x: bool(x[0] < 4)) is None
    found = best_in_turn(program, [{0: Fraction(-1)}])
    assert found is not None
    assert (found.x, found.is_only) == ({0: Fraction(5)}, True)


def test_programs_without_entries() -> None:
    """Without rows, or with empty ones, the point 0 is found where it is a best one, else nothing is found."""
    without = Sparse(width=2, rows=(), low=(), high=())
    found = best_in_turn(without, [{0: Fraction(1), 1: Fraction(2)}])
    assert found is not None
    assert (dict(found.x), found.is_only) == ({}, True)
    assert best_in_turn(without, [{0: Fraction(-1)}]) is None
    assert best_in_turn(Sparse(width=1, rows=({},), low=(1,), high=(None,)), [{0: Fraction(1)}]) is None
    assert best_in_turn(Sparse(width=0, rows=(), low=(), high=()), [{}]) is None


def test_the_checker_sees_through_wrong_claims() -> None:
    """A point that is not feasible, or that its multipliers do not prove best, is refused."""
    program = Sparse(width=2, rows=({0: 1, 1: 1}, {0: 1}), low=(None, None), high=(6, 4))
    cost = {0: -3, 1: -2}
    x, y = {0: Fraction(4), 1: Fraction(2)}, {0: Fraction(-2), 1: Fraction(-1)}
    assert proven_prices(program, cost, x, y) == {0: 0, 1: 0}
    assert proven_prices(program, cost, {0: Fraction(5), 1: Fraction(1)}, y) is None
    assert proven_prices(program, cost, {0: Fraction(4), 1: Fraction(1)}, y) is None
    assert proven_prices(program, cost, {1: Fraction(6)}, y) is None
    assert proven_prices(program, cost, x, {0: Fraction(-2)}) is None
    assert proven_prices(program, cost, x, {0: Fraction(-3)}) is None
    assert proven_prices(program, cost, {0: Fraction(4), 1: Fraction(2), 7: Fraction(1)}, y) is None
    assert proven_prices(program, cost, x, {**y, 5: Fraction(1)}) is None
    assert proven_prices(program, cost, {0: Fraction(7), 1: Fraction(-1)}, y) is None
