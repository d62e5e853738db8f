"""Float proofs: never wrong on degenerate families, and given for nearly everything in general position."""

from dataclasses import replace
from fractions import Fraction
from random import Random

import numpy as np
import pytest

from generator.geometry.checks import proves_infeasible, proves_optimum
from generator.geometry.exact import exact_simplex
from generator.geometry.program import Infeasible, Optimum, Program, Unbounded
from generator.geometry.rigour import blocks, certify, gamma, solve_certified
from generator.geometry.settle import Tally, answer_many, basis_of, blocking_on_basis, publish, settle
from generator.geometry.simplex import INFEASIBLE, OPTIMAL, solve_scaled
from generator.geometry.stack import doubtful, scaled, stack_of
from tests.geometry.stack_families import KINDS, programs


@pytest.mark.parametrize("kind", KINDS)
def test_what_floats_decide_is_right_on_degenerate_families(kind):
    """Each verdict, basis and value bound that floats prove is the exact simplex method's."""
    for seed in range(4):
        asked = programs(Random(f"{kind} {seed}"), kind, 60)
        certified = solve_certified(stack_of(asked))
        for k, program in enumerate(asked):
            answer = exact_simplex(program)
            if certified.decided[k]:
                assert (certified.solved.status[k] == OPTIMAL) == isinstance(answer, Optimum)
            if isinstance(answer, Optimum):
                assert certified.least[k] <= answer.value <= certified.most[k]
            if certified.best[k]:
                assert publish(certified.solved, k, program)[0].value == answer.value


@pytest.mark.parametrize("kind", KINDS)
def test_published_answers_are_exact_on_degenerate_families(kind):
    """What comes out of a stack is an exact optimum or an exact proof, with the exact simplex method's value."""
    asked = programs(Random(kind), kind, 80)
    answers, tally = answer_many(asked)
    assert tally.total == len(asked)
    for program, answer in zip(asked, answers, strict=True):
        expected = exact_simplex(program)
        if isinstance(expected, Optimum):
            assert proves_optimum(program, answer)
            assert answer.value == expected.value
        else:
            assert proves_infeasible(program, answer)


def test_general_position_is_decided_by_floats():
    """With room to spare floats prove every verdict and every basis."""
    rng = np.random.default_rng(0)
    values = rng.uniform(0, 100, (4, 12)).round(2)
    rows = tuple(tuple(Fraction(str(v)) for v in row) for row in (*values, np.ones(12)))
    cost = tuple(Fraction(str(v)) for v in rng.uniform(1, 9, 12).round(3))
    asked = []
    for _ in range(100):
        middle = values @ rng.dirichlet(np.ones(12)) + rng.normal(0, 12, 4)
        low, high = (tuple(Fraction(round(100 * (v + s)), 100) for v in middle) for s in (-4, 4))
        one = (Fraction(1),)
        zero, ones = (Fraction(0),) * 12, one * 12
        asked.append(Program(rows=rows, row_low=low + one, row_high=high + one, lower=zero, upper=ones, cost=cost))
    certified = solve_certified(stack_of(asked))
    assert certified.decided.all()
    optimal = certified.solved.status == OPTIMAL
    assert 20 < optimal.sum() < 100
    assert certified.best[optimal].all()
    assert (certified.most - certified.least)[optimal].max() < 1e-8


def test_a_target_on_a_corner_is_left_to_exact_arithmetic():
    """A window that is a single corner leaves no margin: floats decide nothing, the basis exactly does."""
    third = Fraction(1, 3)
    program = Program(
        rows=((third, Fraction(1), Fraction(2)), (Fraction(1),) * 3),
        row_low=(third, Fraction(1)),
        row_high=(third, Fraction(1)),
        lower=(Fraction(0),) * 3,
        upper=(Fraction(1),) * 3,
        cost=(Fraction(5), Fraction(1), Fraction(1)),
    )
    certified = solve_certified(stack_of([program]))
    assert not certified.decided[0]
    answers, tally = settle(certified, lambda _: program)
    assert answers[0].x == (Fraction(1), Fraction(0), Fraction(0))
    assert tally == Tally(basis=1)


def test_ties_are_proven_feasible_and_valued_but_not_unique():
    """With equal costs the verdict and the value are proven, the basis is not claimed to be the only one."""
    one = Fraction(1)
    program = Program(
        rows=((one, Fraction(2), Fraction(4)), (one,) * 3),
        row_low=(Fraction(3, 2), one),
        row_high=(Fraction(5, 2), one),
        lower=(Fraction(0),) * 3,
        upper=(one,) * 3,
        cost=(one,) * 3,
    )
    certified = solve_certified(stack_of([program]))
    assert certified.decided[0]
    assert not certified.best[0]
    assert certified.least[0] <= 1 <= certified.most[0]
    assert settle(certified, lambda _: program, ask_best=False) == ({}, Tally(floats=1))


def test_wrong_floats_prove_nothing():
    """A false verdict, a basis that isn't optimal and an inverse that isn't one are all seen through."""
    asked = [p for kind in KINDS for p in programs(Random(kind), kind, 8)]
    for program in asked:
        stack, _ = scaled(stack_of([program]))
        solved = solve_scaled(stack)
        feasible = isinstance(exact_simplex(program), Optimum)
        flipped = replace(
            solved,
            status=np.array([INFEASIBLE if feasible else OPTIMAL], dtype=np.int8),
            multipliers=np.random.default_rng(1).normal(size=solved.multipliers.shape),
        )
        assert not certify(stack, flipped).decided[0]
        bent = replace(solved, inverse=solved.inverse * 1.5, status=np.array([OPTIMAL], dtype=np.int8))
        assert not certify(stack, bent).decided[0]


def test_a_basis_that_is_not_optimal_is_not_called_best():
    """The best single point where another is cheaper is feasible, and not best."""
    one, zero = Fraction(1), Fraction(0)
    program = Program(
        rows=((one, one),), row_low=(one,), row_high=(one,), lower=(zero,) * 2, upper=(None,) * 2, cost=(one, zero)
    )
    stack, _ = scaled(stack_of([program]))
    solved = solve_scaled(stack)
    assert solved.basic.tolist() == [[1]]
    worse = replace(solved, basic=np.array([[0]]), inverse=np.array([[[1 / stack.rows[0, 0]]]]))
    found = certify(stack, worse)
    assert found.decided[0]
    assert not found.best[0]
    assert found.least[0] <= 0 < found.most[0]


def test_a_gap_below_rounding_is_not_decided_by_floats():
    """Bounds that miss by less than rounding can tell go to exact arithmetic, which sees the miss."""
    tiny, one = Fraction(1, 10**25), Fraction(1)
    program = Program(
        rows=((Fraction(1, 3), Fraction(2, 3)), (one, one)),
        row_low=(Fraction(2, 3) + tiny, one),
        row_high=(None, one),
        lower=(Fraction(0),) * 2,
        upper=(one,) * 2,
        cost=(Fraction(0),) * 2,
    )
    certified = solve_certified(stack_of([program]))
    assert not certified.decided[0]
    answers, _ = settle(certified, lambda _: program)
    assert isinstance(answers[0], Infeasible)


def test_bounds_equal_only_as_floats_are_doubtful():
    """Where low < high by less than a float can tell, floats are not trusted."""
    one = Fraction(1)
    program = Program(
        rows=((one, Fraction(2)),),
        row_low=(one,),
        row_high=(one + Fraction(1, 10**30),),
        lower=(Fraction(0),) * 2,
        upper=(one,) * 2,
        cost=(one, one),
    )
    even = replace(program, row_high=(one,))
    asked = [program, even]
    unsure = doubtful(asked, stack_of(asked))
    assert unsure.tolist() == [True, False]
    certified = solve_certified(stack_of(asked))
    answers, _ = settle(certified, lambda k: asked[k], doubtful=unsure)
    assert answers[0].value == Fraction(1, 2)


def test_multipliers_of_any_origin_are_checked():
    """``blocks`` accepts multipliers that prove, whatever their scale, and refuses those that don't."""
    one = Fraction(1)
    program = Program(
        rows=((Fraction(10), Fraction(30)), (Fraction(20), Fraction(5)), (one, one)),
        row_low=(Fraction(20), Fraction(16), one),
        row_high=(None, None, one),
        lower=(Fraction(0),) * 2,
        upper=(one,) * 2,
        cost=(Fraction(0),) * 2,
    )
    stack = stack_of([program] * 3)
    y = np.array([[3.0, 4.0, -110.0], [3e9, 4e9, -110e9], [3.0, -4.0, 0.0]])
    assert blocks(stack, y).tolist() == [True, True, False]


def test_proofs_on_a_basis_use_few_rows():
    """A blocking proof names at most as many rows as its points span dimensions, and one (Helly's theorem)."""
    for kind in KINDS:
        for program in programs(Random(kind), kind, 40):
            certified = solve_certified(stack_of([program]))
            solved = certified.solved
            if solved.status[0] != INFEASIBLE:
                continue
            proof = blocking_on_basis(program, basis_of(solved, 0), int(solved.blocked[0]))
            if proof is not None:
                assert proves_infeasible(program, proof)
                named = sum(1 for y in proof.multipliers[:-1] if y)
                assert named <= min(len(program.rows) - 1, len(program.cost))


def test_answer_many_takes_any_shapes_and_unbounded_programs():
    """Programs of different shapes come back in their order; one whose cost falls for ever says so."""
    one, zero = Fraction(1), Fraction(0)
    endless = Program(rows=(), row_low=(), row_high=(), lower=(zero,), upper=(None,), cost=(-one,))
    point = Program(rows=((one,),), row_low=(one,), row_high=(one,), lower=(zero,), upper=(one,), cost=(one,))
    none = replace(point, row_low=(Fraction(2),), row_high=(None,))
    answers, _ = answer_many([endless, point, none, point])
    assert [type(answer) for answer in answers] == [Unbounded, Optimum, Infeasible, Optimum]
    assert answer_many([])[0] == []


def test_gamma_is_an_upper_bound():
    """γ_k is no less than k·u/(1 − k·u) exactly."""
    unit = Fraction(1, 2**53)
    for k in (1, 3, 10, 1000):
        assert Fraction(gamma(k)) >= k * unit / (1 - k * unit)
