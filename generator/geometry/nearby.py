"""An exactly feasible point beside a float one that is feasible up to rounding."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from scipy.linalg import qr

from generator.geometry.elimination import cleared, solve_square
from generator.geometry.program import Bound, Program, Vector
from generator.geometry.stack import Floats, Indices

#: What lies so near to a bound (relative to 1 or the value) is put on it; far above rounding.
_NEAR = 1e-9
#: Bits kept of the other columns' values.
_BITS = 60


def feasible_near(program: Program, x: Floats) -> Vector | None:
    """A point that satisfies the program exactly, within about 1e-9 of x (n floats); None where none is found.

    Columns and rows that are near their bounds are put exactly on them: the others keep their
    (rounded) values, but for as many as it takes to meet the rows, for which a small system is
    solved in whole numbers.
    """
    values: list[Fraction] = []
    margin = np.zeros(x.size)
    for j, value in enumerate(x):
        placed, room = _placed(float(value), program.lower[j], program.upper[j])
        values.append(placed)
        margin[j] = room
    held, targets = _held_rows(program, x)
    moving = np.flatnonzero(margin > 0)
    if held:
        matrix = np.array([[float(program.rows[k][j]) for j in moving] for k in held]).reshape(len(held), moving.size)
        chosen, pivots = _independent(matrix, margin[moving])
        rows = [held[k] for k in chosen]
        columns = [int(moving[j]) for j in pivots]
        solved = _solved(program, rows, [targets[k] for k in chosen], columns, values)
        if solved is None:
            return None
        for j, value in zip(columns, solved, strict=True):
            values[j] = value
    found = tuple(values)
    return found if _is_met(program, found) else None


def _is_met(program: Program, x: Vector) -> bool:
    """Whether x keeps every bound, exactly."""
    used = [(j, value) for j, value in enumerate(x) if value]
    sums = [sum((row[j] * value for j, value in used), Fraction(0)) for row in program.rows]
    held = zip((*x, *sums), (*program.lower, *program.row_low), (*program.upper, *program.row_high), strict=True)
    return all((low is None or low <= value) and (high is None or value <= high) for value, low, high in held)


def _placed(value: float, low: Bound, high: Bound) -> tuple[Fraction, float]:
    """(the exact value, its distance from the nearer bound: 0 where it was put on one)."""
    room = 1.0
    for bound in (low, high):
        if bound is not None:
            distance = abs(value - float(bound))
            if distance <= _NEAR * max(1.0, abs(value)):
                return bound, 0.0
            room = min(room, distance)
    return Fraction(round(value * 2**_BITS), 2**_BITS), room


def _held_rows(program: Program, x: Floats) -> tuple[list[int], list[Fraction]]:
    """Rows that are at a bound, and that bound."""
    held, targets = [], []
    for k, row in enumerate(program.rows):
        terms = np.array([float(value) for value in row]) * x
        size = max(float(np.abs(terms).sum()), 1e-300)
        for bound in (program.row_low[k], program.row_high[k]):
            if bound is not None and abs(float(terms.sum()) - float(bound)) <= _NEAR * size:
                held.append(k)
                targets.append(bound)
                break
    return held, targets


def _independent(matrix: Floats, margin: Floats) -> tuple[Indices, Indices]:
    """Independent rows, and as many columns to solve them with, those with most room first."""
    size = np.abs(matrix).max(axis=1, initial=0.0)
    weighted = matrix / np.where(size > 0, size, 1.0)[:, None] * margin
    _, upper, rows = qr(weighted.T, mode="economic", pivoting=True)
    steps = np.abs(np.diag(upper))
    rank = int((steps > _NEAR * max(float(steps.max(initial=0.0)), 1e-300)).sum())
    chosen = np.sort(rows[:rank])
    _, _, columns = qr(weighted[chosen], mode="economic", pivoting=True)
    return chosen.astype(np.int64), np.sort(columns[:rank]).astype(np.int64)


def _solved(
    program: Program, rows: list[int], targets: list[Fraction], columns: list[int], values: list[Fraction]
) -> list[Fraction] | None:
    """The values of ``columns`` that put the rows on their targets."""
    moving = set(columns)
    matrix, right = [], []
    for k, target in zip(rows, targets, strict=True):
        row = program.rows[k]
        rest = sum(
            (a * v for j, (a, v) in enumerate(zip(row, values, strict=True)) if a and j not in moving), Fraction(0)
        )
        whole, _ = cleared([*(row[j] for j in columns), target - rest])
        matrix.append(whole[:-1])
        right.append(whole[-1])
    solved = solve_square(matrix, right)
    if solved is None:
        return None
    return [Fraction(numerator, solved[1]) for numerator in solved[0]]
