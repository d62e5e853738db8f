"""Choices of few columns: what the searches leave holds the best point of all allowed sets, found one by one."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import combinations

import pytest

from generator.geometry.branching import branch, closed_paths, program_of
from generator.geometry.choice import OUT, Box, Choice, Left, closed_box
from generator.geometry.decide import decide
from generator.geometry.program import Infeasible, Optimum, Program
from generator.geometry.selecting import select

ZERO, ONE = Fraction(0), Fraction(1)


def draw(number: int, *, is_relative: bool = False) -> Choice:
    """Four to six columns on a coarse grid under one to three rows, a count, leasts and a pair kept apart."""
    pick = random.Random(number).randint
    n = pick(4, 6)
    rows = [tuple(Fraction(pick(-4, 4)) for _ in range(n)) for _ in range(pick(1, 3))]
    low = [None if pick(0, 1) else Fraction(pick(-2, 0)) * (not is_relative) for _ in rows]
    high: list[Fraction | None] = [Fraction(pick(0, 1)) * (not is_relative) for _ in rows]
    if not is_relative:
        rows.append((ONE,) * n)
        low.append(ONE)
        high.append(ONE)
    program = Program(
        rows=tuple(rows),
        row_low=tuple(low),
        row_high=tuple(high),
        lower=(*((ZERO,) * (n - 1)), Fraction(0 if is_relative else pick(0, 1), 10)),
        upper=tuple(Fraction(pick(1, 4), 1 if is_relative else 4) for _ in range(n)),
        cost=tuple(Fraction(-1 if is_relative else pick(0, 6)) for _ in range(n)),
    )
    least = tuple(Fraction((0, 5, 20)[pick(0, 2)], 100) or None for _ in range(n))
    apart = ((frozenset([0]), frozenset([1, 2])),) if pick(0, 1) else ()
    return Choice(program, least, pick(2, 4), apart, is_relative)


def allowed_sets(choice: Choice) -> list[frozenset[int]]:
    """Every set of columns that the choice allows."""
    return [
        frozenset(used)
        for size in range(1, (choice.most or choice.n) + 1)
        for used in combinations(range(choice.n), size)
        if not any(one & set(used) and other & set(used) for one, other in choice.apart)
    ]


def best_of_all(choice: Choice) -> tuple[Fraction | None, list[frozenset[int]]]:
    """The least value of all allowed sets, each decided exactly, and the sets that have it."""
    values: dict[frozenset[int], Fraction] = {}
    for used in allowed_sets(choice):
        answer = decide(program_of(choice, closed_box(sorted(used), choice.n)))
        if isinstance(answer, Optimum) and (not choice.is_relative or answer.value < 0):
            values[used] = answer.value
    least = min(values.values(), default=None)
    return least, [used for used, value in values.items() if value == least]


def check(choice: Choice, left: Left) -> None:
    """The box left as best holds the best value; nothing is left only where nothing is allowed."""
    least, _ = best_of_all(choice)
    if least is None:
        assert left.best is None or choice.is_relative
        return
    assert left.best is not None
    answer = decide(program_of(choice, left.best))
    assert isinstance(answer, Optimum)
    assert answer.value == least
    assert float(least) <= left.value <= float(least) + 1e-9
    assert any(isinstance(decide(program_of(choice, box)), Optimum) for box in left.boxes)


@pytest.mark.parametrize("number", range(10))
def test_branches_that_are_closed_hold_nothing_better(number: int) -> None:
    """The best box that branching leaves has the least value of all allowed sets."""
    choice = draw(number)
    check(choice, branch(choice, nodes=2000))


@pytest.mark.parametrize("number", range(10))
def test_amounts_keep_leasts_relative_to_their_sum(number: int) -> None:
    """The same where the columns are amounts and leasts are parts of their sum."""
    choice = draw(number, is_relative=True)
    check(choice, branch(choice, nodes=2000))


@pytest.mark.parametrize("number", range(10))
def test_going_through_all_sets_finds_what_branching_finds(number: int) -> None:
    """Going through all sets by their bounds leaves the least value of all allowed sets as well."""
    choice = draw(number)
    left = select(choice, steps=5000)
    assert left is not None
    check(choice, left)


@pytest.mark.parametrize("number", range(6))
def test_roots_limit_what_is_searched(number: int) -> None:
    """Within roots that hold a column out and another in, only sets that fit one of them count."""
    choice = draw(number)
    roots = (Box(frozenset([0]), frozenset([3])), Box(frozenset([3]), frozenset([0])))
    for left in (branch(choice, roots, nodes=2000), select(choice, roots, steps=5000)):
        assert left is not None
        values = [
            answer.value
            for used in allowed_sets(choice)
            if len(used & {0, 3}) == 1
            and isinstance(answer := decide(program_of(choice, closed_box(sorted(used), choice.n))), Optimum)
        ]
        if not values:
            assert left.best is None
            continue
        assert left.best is not None
        answer = decide(program_of(choice, left.best))
        assert isinstance(answer, Optimum)
        assert answer.value == min(values)


def test_a_known_value_leaves_only_what_is_as_good() -> None:
    """Of a choice whose best value is known to be undercut by a given one, nothing is left."""
    for number in range(6):
        choice = draw(number)
        least, _ = best_of_all(choice)
        if least is not None:
            below = float(least) - 1e-6
            assert branch(choice, known=below, nodes=2000).boxes == ()
            left = select(choice, known=below, steps=5000)
            assert left is not None
            assert left.boxes == ()


def test_paths_to_closed_boxes_leave_out_no_allowed_set() -> None:
    """Where no set is allowed every one lies in a closed box, and each such box is infeasible with all its columns."""
    seen = 0
    for number in range(60):
        choice = draw(number)
        paths = closed_paths(choice, nodes=2000)
        if best_of_all(choice)[0] is not None:
            assert paths is None
            continue
        seen += 1
        assert paths is not None
        boxes = [Box.of(path[-1]) for path in paths]
        for box in boxes:
            bare = Choice(choice.program, choice.least, None, ())
            assert isinstance(decide(program_of(bare, box)), Infeasible)
        for used in allowed_sets(choice):
            assert any(not used & box.out and box.inside <= used for box in boxes)
        assert all((path[0] != OUT).all() for path in paths)
    assert seen > 0
