"""The lockstep simplex: what it finds agrees with HiGHS in general position, whatever the order, start or company."""

import numpy as np
import pytest
from scipy.optimize import linprog

from generator.geometry.simplex import INFEASIBLE, OPTIMAL, UNFINISHED, Solved, Start, solve
from generator.geometry.stack import Stack, make_stack


def random_stack(seed: int, *, shared: bool = True, count: int = 60, n: int = 9, d: int = 4) -> Stack:
    """Windows around mixtures, some pushed off; costs of either sign; low and high share bounds."""
    rng = np.random.default_rng(seed)
    values = rng.uniform(0, 100, (d, n) if shared else (count, d, n))
    mixed = rng.dirichlet(np.ones(n), count)
    middle = (values @ mixed.T).T if shared else np.einsum("kdn,kn->kd", values, mixed)
    middle = middle + rng.normal(0, 15, (count, d)) * (rng.random((count, 1)) < 0.6)
    half = rng.uniform(0.5, 6, (count, d))
    rows = np.concatenate([values, np.ones((*values.shape[:-2], 1, n))], axis=-2)
    ones = np.ones((count, 1))
    return make_stack(
        rows,
        np.hstack([np.where(rng.random((count, d)) < 0.2, -np.inf, middle - half), ones]),
        np.hstack([np.where(rng.random((count, d)) < 0.2, np.inf, middle + half), ones]),
        lower=np.where(rng.random((count, n)) < 0.1, 0.05, 0.0),
        upper=np.where(rng.random((count, n)) < 0.3, 0.4, 1.0),
        cost=rng.uniform(-20, 60, (count, n)),
    )


def highs(stack: Stack, k: int):
    """What linprog says of program k."""
    rows = stack.rows if stack.is_shared else stack.rows[k]
    low, high = stack.row_low[k], stack.row_high[k]
    above, below = np.isfinite(high), np.isfinite(low)
    return linprog(
        stack.cost[k],
        A_ub=np.vstack([rows[above], -rows[below]]),
        b_ub=np.concatenate([high[above], -low[below]]),
        bounds=np.column_stack([stack.lower[k], stack.upper[k]]),
        method="highs",
    )


def assert_agrees(stack: Stack, solved: Solved) -> None:
    for k in range(stack.count):
        other = highs(stack, k)
        assert (other.status, other.status == 0) == (
            0 if solved.status[k] == OPTIMAL else 2,
            solved.status[k] != INFEASIBLE,
        )
        if other.status == 0:
            assert solved.value[k] == pytest.approx(other.fun, abs=1e-6)


@pytest.mark.parametrize("shared", [True, False])
@pytest.mark.parametrize("seed", range(4))
def test_agrees_with_highs_in_general_position(seed, shared):
    """Verdicts and values are HiGHS's, with shared rows and with rows of each program's own."""
    stack = random_stack(seed, shared=shared)
    solved = solve(stack)
    assert_agrees(stack, solved)
    assert {OPTIMAL, INFEASIBLE} == set(solved.status.tolist())


def test_multipliers_price_every_column():
    """At an optimum cost − rowsᵀ·y is ≥ 0 for columns at their low bound, ≤ 0 at their high, 0 between."""
    stack = random_stack(7)
    solved = solve(stack)
    for k in np.flatnonzero(solved.status == OPTIMAL):
        reduced = stack.cost[k] - solved.multipliers[k] @ stack.rows
        x = solved.x[k]
        at_low, at_high = x <= stack.lower[k] + 1e-9, x >= stack.upper[k] - 1e-9
        assert (reduced[~at_low] <= 1e-6).all()
        assert (reduced[~at_high] >= -1e-6).all()


def test_infeasible_ones_come_with_multipliers_that_no_x_survives():
    """For infeasible programs the least that y asks of the rows exceeds the most that the box can give."""
    stack = random_stack(8)
    solved = solve(stack)
    for k in np.flatnonzero(solved.status == INFEASIBLE):
        y = np.where(np.abs(solved.multipliers[k]) < 1e-12, 0.0, solved.multipliers[k])
        asked = np.where(y > 0, stack.row_low[k], stack.row_high[k])
        score = y @ stack.rows
        most = np.maximum(score * stack.lower[k], score * stack.upper[k]).sum()
        assert (y[y != 0] * asked[y != 0]).sum() > most


def test_company_changes_no_answer():
    """A program solved alone, or among any others in any order, ends with the same value."""
    stack = random_stack(3, count=300)
    together = solve(stack)
    order = np.random.default_rng(0).permutation(stack.count)
    shuffled = solve(stack.some(order))
    alone = solve(stack.some(np.arange(5)))
    assert together.status[order].tolist() == shuffled.status.tolist()
    np.testing.assert_allclose(together.value[order], shuffled.value, rtol=1e-9)
    np.testing.assert_allclose(together.value[:5], alone.value, rtol=1e-9)


def test_same_stack_gives_the_same_bits():
    """Two runs agree to the last bit."""
    stack = random_stack(4, count=300)
    first, second = solve(stack), solve(stack)
    assert first.x.tobytes() == second.x.tobytes()
    assert first.basic.tolist() == second.basic.tolist()


def test_column_order_changes_no_value():
    """Permuted columns give permuted shares (no ties in general position)."""
    stack = random_stack(5)
    order = np.random.default_rng(1).permutation(stack.shape[1])
    other = solve(
        make_stack(
            stack.rows[:, order],
            stack.row_low,
            stack.row_high,
            lower=stack.lower[:, order],
            upper=stack.upper[:, order],
            cost=stack.cost[:, order],
        )
    )
    np.testing.assert_allclose(other.x, solve(stack).x[:, order], atol=1e-9)


def test_an_ending_basis_restarts_at_once():
    """Started from its own ending basis a program takes no step; from a neighbour's, fewer than cold."""
    stack = random_stack(6)
    cold = solve(stack)
    again = solve(stack, cold.start)
    optimal = cold.status == OPTIMAL
    assert again.iterations[optimal].max() == 0
    moved = make_stack(
        stack.rows, stack.row_low - 0.1, stack.row_high, lower=stack.lower, upper=stack.upper, cost=stack.cost
    )
    warm, anew = solve(moved, cold.start), solve(moved)
    assert warm.status.tolist() == anew.status.tolist()
    np.testing.assert_allclose(warm.value, anew.value, rtol=1e-9)
    assert warm.iterations[optimal].sum() < anew.iterations[optimal].sum() / 2


def test_a_singular_start_is_replaced():
    """A start whose columns depend on each other is no harm."""
    stack = random_stack(9)
    m, n = stack.shape
    basic = np.broadcast_to(np.zeros(m, dtype=np.int64), (stack.count, m))
    start = Start(basic, np.zeros((stack.count, n + m), dtype=np.bool_))
    np.testing.assert_allclose(solve(stack, start).value, solve(stack).value, rtol=1e-9)


def test_unbounded_programs_are_left_unfinished():
    """A cost that falls for ever is not an optimum at some far bound."""
    solved = solve(make_stack([[1.0, -1.0]], [0.0], [np.inf], cost=[[-1.0, 0.0], [1.0, 1.0]]))
    assert solved.status.tolist() == [UNFINISHED, OPTIMAL]


def test_free_columns_and_free_rows_are_solved():
    """Columns without bounds and rows without bounds are ordinary input."""
    solved = solve(
        make_stack(
            [[1.0, 1.0], [1.0, -1.0]],
            [[2.0, -np.inf]],
            [[np.inf, np.inf]],
            lower=-np.inf,
            upper=[[np.inf, 5.0]],
            cost=[[1.0, 0.5]],
        )
    )
    assert solved.status.tolist() == [OPTIMAL]
    np.testing.assert_allclose(solved.x, [[-3.0, 5.0]])


@pytest.mark.parametrize(("m", "n"), [(0, 3), (3, 0), (0, 0)])
def test_empty_shapes_are_solved(m, n):
    """No rows, or no columns, are no special case: rows that ask for 0 of nothing are met, others not."""
    stack = make_stack(
        np.zeros((m, n)),
        np.array([[0.0] * m, [1.0] * m]),
        np.array([[1.0] * m] * 2),
        upper=np.ones(n),
        cost=-np.ones(n),
    )
    solved = solve(stack)
    assert solved.status.tolist() == [OPTIMAL, INFEASIBLE if m else OPTIMAL]
    assert solved.value[0] == -n


def test_crossed_bounds_are_infeasible():
    """A column or a row whose low bound exceeds its high one admits nothing."""
    columns = make_stack([[1.0, 1.0]], [0.0], [1.0], lower=[[0.5, 0.0]], upper=[[0.4, 1.0]])
    rows = make_stack([[1.0, 1.0]], [[0.6]], [[0.5]], upper=1.0)
    assert solve(columns).status.tolist() == solve(rows).status.tolist() == [INFEASIBLE]


def test_scale_of_rows_shares_and_costs_changes_no_answer():
    """Rows in ppm, amounts in thousands, costs in millions: the same x up to the units."""
    stack = random_stack(10)
    unit = np.array([1e-6, 1.0, 1e4, 1e-3, 1.0])
    other = solve(
        make_stack(
            stack.rows * unit[:, None],
            stack.row_low * unit * 5e3,
            stack.row_high * unit * 5e3,
            lower=stack.lower * 5e3,
            upper=stack.upper * 5e3,
            cost=stack.cost * 1e6,
        )
    )
    plain = solve(stack)
    assert other.status.tolist() == plain.status.tolist()
    np.testing.assert_allclose(other.x, plain.x * 5e3, rtol=1e-7, atol=1e-5)
    np.testing.assert_allclose(other.value, plain.value * 5e9, rtol=1e-9)


def test_cycling_example_ends():
    """Beale's example (1955), on which the textbook simplex method cycles, ends at −1/20."""
    solved = solve(
        make_stack(
            [[0.25, -60.0, -0.04, 9.0], [0.5, -90.0, -0.02, 3.0], [0.0, 0.0, 1.0, 0.0]],
            [[-np.inf] * 3],
            [[0.0, 0.0, 1.0]],
            cost=[[-0.75, 150.0, -0.02, 6.0]],
        )
    )
    assert solved.status.tolist() == [OPTIMAL]
    assert solved.value[0] == pytest.approx(-0.05, abs=1e-12)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (([1.0], [0.0], [1.0]), "2 or 3 axes, found 1"),
        (([[np.nan]], [0.0], [1.0]), "NaN"),
        (([[[1.0]], [[1.0]]], [[0.0]] * 3, [[1.0]] * 3), "speak of"),
    ],
)
def test_shapes_that_do_not_fit_are_refused(arguments, message):
    """Wrong axes, NaN and disagreeing counts raise ValueError."""
    with pytest.raises(ValueError, match=message):
        make_stack(*arguments)
