"""Exact answers by brute force, for tests only: it shares no code with the program under test.

Programs by Fourier–Motzkin elimination (with D. A. Kohler's rule of 1967, which drops combinations of too
many of the inequalities given); hulls by trying all subsets.  Everything in Fractions, nothing clever.
"""

from __future__ import annotations

from fractions import Fraction
from itertools import combinations
from typing import Literal

Row = tuple[Fraction, ...]
Inequality = tuple[Row, Fraction]  # row · x <= bound
Verdict = Fraction | Literal["infeasible", "unbounded"]


def least(rows, row_low, row_high, lower, upper, cost) -> Verdict:
    """The least of cost·x over row_low <= rows·x <= row_high, lower <= x <= upper (None: no bound)."""
    n = len(cost)
    zero = Fraction(0)
    given: list[Inequality] = []
    for row, low, high in zip(rows, row_low, row_high, strict=True):
        if high is not None:
            given.append(((*row, zero), high))
        if low is not None:
            given.append((tuple(-a for a in (*row, zero)), -low))
    for j in range(n):
        unit = tuple(Fraction(int(i == j)) for i in range(n + 1))
        if upper[j] is not None:
            given.append((unit, upper[j]))
        if lower[j] is not None:
            given.append((tuple(-a for a in unit), -lower[j]))
    # the last variable t >= cost·x: its least value is the answer
    given.append(((*cost, Fraction(-1)), zero))
    tracked = [(row, bound, frozenset([k])) for k, (row, bound) in enumerate(given)]
    for step, j in enumerate(range(n), start=1):
        tracked = _eliminate(tracked, j, step)
    lows, highs = [], []
    for row, bound, _ in tracked:
        if row[n] > 0:
            highs.append(bound / row[n])
        elif row[n] < 0:
            lows.append(bound / row[n])
        elif bound < 0:
            return "infeasible"
    assert not highs
    return max(lows) if lows else "unbounded"


def _eliminate(tracked, j: int, step: int):
    kept, positive, negative = set(), [], []
    for entry in tracked:
        side = entry[0][j]
        if side > 0:
            positive.append(entry)
        elif side < 0:
            negative.append(entry)
        else:
            kept.add(entry)
    for up, up_bound, up_from in positive:
        for down, down_bound, down_from in negative:
            origins = up_from | down_from
            if len(origins) <= step + 1:
                a, b = -down[j], up[j]
                row = tuple(a * u + b * d for u, d in zip(up, down, strict=True))
                kept.add((row, a * up_bound + b * down_bound, origins))
    return kept


def solve(matrix, right):
    """One solution of a linear system (free variables 0), None if there is none; and the rank."""
    rows = [[*map(Fraction, row), Fraction(value)] for row, value in zip(matrix, right, strict=True)]
    width = len(matrix[0]) if matrix else 0
    pivots, top = [], 0
    for column in range(width):
        found = next((k for k in range(top, len(rows)) if rows[k][column] != 0), None)
        if found is None:
            continue
        rows[top], rows[found] = rows[found], rows[top]
        rows[top] = [value / rows[top][column] for value in rows[top]]
        for k in range(len(rows)):
            if k != top and rows[k][column]:
                factor = rows[k][column]
                rows[k] = [a - factor * b for a, b in zip(rows[k], rows[top], strict=True)]
        pivots.append(column)
        top += 1
    solution = [Fraction(0)] * width
    for k, column in enumerate(pivots):
        solution[column] = rows[k][width]
    consistent = all(row[width] == 0 for row in rows[top:])
    return (solution if consistent else None), len(pivots)


def rank(vectors) -> int:
    """The rank of vectors."""
    vectors = list(vectors)
    return solve(vectors, [0] * len(vectors))[1] if vectors else 0


def dimension(points) -> int:
    """The dimension of the affine span, −1 for no points."""
    return rank([[a - b for a, b in zip(p, points[0], strict=True)] for p in points[1:]]) if points else -1


def is_inside(point, others) -> bool:
    """Whether a point is a convex combination of others: over all affinely independent subsets (Carathéodory)."""
    others = sorted(set(others))
    for size in range(1, len(point) + 2):
        for subset in combinations(others, size):
            matrix = [[p[axis] for p in subset] for axis in range(len(point))] + [[1] * size]
            weights, found_rank = solve(matrix, [*point, 1])
            if weights is not None and found_rank == size and all(w >= 0 for w in weights):
                return True
    return False


def corner_points(points) -> set[Row]:
    """The vertices of the hull, as points."""
    distinct = set(points)
    return {p for p in distinct if not is_inside(p, distinct - {p})}


def facet_sets(points) -> set[frozenset[Row]]:
    """For points that span their space: the corners on each facet."""
    corners = sorted(corner_points(points))
    size = len(corners[0])
    found = set()
    for subset in combinations(corners, size):
        span = [[a - b for a, b in zip(p, subset[0], strict=True)] for p in subset[1:]]
        if rank(span) < size - 1:
            continue
        sides = [_side(subset, span, p) for p in corners]
        if all(s >= 0 for s in sides) or all(s <= 0 for s in sides):
            found.add(frozenset(p for p, s in zip(corners, sides, strict=True) if s == 0))
    return found


def _side(subset, span, point) -> Fraction:
    return determinant([*span, [a - b for a, b in zip(point, subset[0], strict=True)]])


def determinant(matrix) -> Fraction:
    """By expansion along the first row."""
    if not matrix:
        return Fraction(1)
    return sum(
        ((-1) ** j * value * determinant([row[:j] + row[j + 1 :] for row in map(list, matrix[1:])]))
        for j, value in enumerate(matrix[0])
        if value
    )
