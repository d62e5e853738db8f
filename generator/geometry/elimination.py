"""Linear algebra on whole numbers: clearing denominators and fraction-free elimination.

Fraction-free elimination (E. H. Bareiss, Sylvester's identity and multistep integer-preserving
Gaussian elimination, Mathematics of Computation 22, 1968) keeps every intermediate number a minor
of the input, so that divisions come out even and numbers stay as short as they can.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from math import gcd, lcm


def common_denominator(values: Iterable[Fraction | None]) -> int:
    """The least positive number that makes every value whole; 1 for none (None is skipped)."""
    return lcm(*{value.denominator for value in values if value is not None})


def whole(value: Fraction, denominator: int) -> int:
    """``value * denominator``, which the caller knows to be whole."""
    numerator, own = value.as_integer_ratio()
    return numerator * (denominator // own)


def cleared(values: Sequence[Fraction]) -> tuple[list[int], int]:
    """Numerators over one common positive denominator."""
    denominator = common_denominator(values)
    return [whole(value, denominator) for value in values], denominator


def coprime(values: Sequence[int]) -> list[int]:
    """The same direction in the smallest whole numbers; zeros stay zeros."""
    divisor = gcd(*values)
    return list(values) if divisor <= 1 else [value // divisor for value in values]


def solve_square(matrix: Sequence[Sequence[int]], right: Sequence[int]) -> tuple[list[int], int] | None:
    """The solution of a square system as numerators over one positive denominator; None if singular.

    ``matrix`` has n rows of n, ``right`` n entries; neither is changed.  For n = 0: ``([], 1)``.
    """
    size = len(right)
    rows = [[*row, value] for row, value in zip(matrix, right, strict=True)]
    previous = 1
    for step in range(size):
        pivot_row = next((k for k in range(step, size) if rows[k][step]), None)
        if pivot_row is None:
            return None
        if pivot_row != step:
            rows[step], rows[pivot_row] = rows[pivot_row], rows[step]
        top = rows[step]
        pivot = top[step]
        tail = top[step + 1 :]
        for k in range(step + 1, size):
            row = rows[k]
            factor = row[step]
            if factor:
                row[step + 1 :] = [
                    (pivot * a - factor * b) // previous for a, b in zip(row[step + 1 :], tail, strict=True)
                ]
            else:
                row[step + 1 :] = [pivot * a // previous for a in row[step + 1 :]]
        previous = pivot
    return _back_substituted(rows, previous)


def _back_substituted(rows: list[list[int]], determinant: int) -> tuple[list[int], int]:
    """Numerators over |determinant| from the triangular rows that the elimination leaves."""
    size = len(rows)
    solution = [0] * size
    for k in range(size - 1, -1, -1):
        row = rows[k]
        known = sum(row[j] * solution[j] for j in range(k + 1, size))
        solution[k] = (determinant * row[size] - known) // row[k]
    if determinant < 0:
        return [-value for value in solution], -determinant
    return solution, determinant


def independent_rows(rows: Sequence[Sequence[int]]) -> tuple[list[int], list[int]]:
    """Indices of the first rows that span all rows, and of the columns that their pivots stand in.

    Both have the rank as their length; the named rows and columns form a regular square matrix.
    """
    kept: list[tuple[int, list[int]]] = []
    indices: list[int] = []
    for index, given in enumerate(rows):
        row = list(given)
        for column, reducer in kept:
            if row[column]:
                pivot, factor = reducer[column], row[column]
                row = coprime([pivot * a - factor * b for a, b in zip(row, reducer, strict=True)])
        column = next((j for j, value in enumerate(row) if value), -1)
        if column >= 0:
            kept.append((column, row))
            indices.append(index)
            if len(kept) == len(row):
                break
    return indices, [column for column, _ in kept]


def determinant(matrix: Sequence[Sequence[int]]) -> int:
    """The determinant of a square matrix of whole numbers; 1 for the empty one."""
    rows = [list(row) for row in matrix]
    size, sign, previous = len(rows), 1, 1
    for step in range(size):
        pivot_row = next((k for k in range(step, size) if rows[k][step]), None)
        if pivot_row is None:
            return 0
        if pivot_row != step:
            rows[step], rows[pivot_row] = rows[pivot_row], rows[step]
            sign = -sign
        pivot = rows[step][step]
        for k in range(step + 1, size):
            factor = rows[k][step]
            rows[k] = [(pivot * a - factor * b) // previous for a, b in zip(rows[k], rows[step], strict=True)]
        previous = pivot
    return sign * previous
