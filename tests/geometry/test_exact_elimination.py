"""Fraction-free linear algebra against elimination in Fractions."""

from __future__ import annotations

from fractions import Fraction

from hypothesis import given
from hypothesis import strategies as st

from generator.geometry.elimination import cleared, coprime, determinant, independent_rows, solve_square
from tests.geometry import oracle

ENTRIES = st.integers(-3, 3)


def matrices(rows: int, columns: int):
    """Whole matrices of small entries: often singular."""
    return st.lists(st.lists(ENTRIES, min_size=columns, max_size=columns), min_size=rows, max_size=rows)


@given(st.integers(0, 5).flatmap(lambda n: st.tuples(matrices(n, n), st.lists(ENTRIES, min_size=n, max_size=n))))
def test_square_systems(system):
    """A regular system's solution solves it over a positive denominator; a singular one has none."""
    matrix, right = system
    solved = solve_square(matrix, right)
    if oracle.rank(matrix) < len(right):
        assert solved is None
        return
    assert solved is not None
    numerators, denominator = solved
    assert denominator > 0
    for row, value in zip(matrix, right, strict=True):
        assert sum(a * x for a, x in zip(row, numerators, strict=True)) == value * denominator


@given(st.integers(0, 4).flatmap(lambda n: matrices(n, n)))
def test_determinants(matrix):
    """The determinant is the one of expansion by minors, 0 where the rank is short."""
    assert determinant(matrix) == oracle.determinant(matrix)
    assert (determinant(matrix) != 0) == (oracle.rank(matrix) == len(matrix))


@given(st.tuples(st.integers(0, 5), st.integers(1, 4)).flatmap(lambda size: matrices(*size)))
def test_independent_rows(matrix):
    """The rows kept are the first that span all, and with their columns form a regular matrix."""
    kept, columns = independent_rows(matrix)
    assert len(kept) == len(columns) == oracle.rank(matrix)
    assert determinant([[matrix[k][j] for j in columns] for k in kept]) != 0
    for k in range(len(matrix)):
        assert (k in kept) == (oracle.rank(matrix[: k + 1]) > oracle.rank(matrix[:k]))


@given(st.lists(st.fractions(max_denominator=30), max_size=5))
def test_cleared_and_coprime(values):
    """Clearing denominators keeps the values; coprime numbers keep the direction and share no factor."""
    numerators, denominator = cleared(values)
    assert [Fraction(value, denominator) for value in numerators] == values
    short = coprime(numerators)
    assert coprime([6 * value for value in numerators]) == short
    assert all(
        a * y == b * x for a, x in zip(numerators, short, strict=True) for b, y in zip(numerators, short, strict=True)
    )
