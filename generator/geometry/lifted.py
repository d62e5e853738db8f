"""Square systems of sparse rows in whole numbers, solved exactly: floating point wins the digits, a few at a time.

A factorization in floats answers for what is left of the right side, the rest is worked out anew in whole
numbers, and so on until the digits can be those of one fraction only (Z. Wan, An algorithm to solve integer
linear systems exactly using numerical methods, Journal of Symbolic Computation 41, 2006).  What comes out
has been put into every row.  Systems that fall apart are solved part by part.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import ldexp
from typing import Any

import numpy as np

from generator.geometry.elimination import solve_square

Line = Mapping[int, int]

#: Parts of up to so many rows are eliminated in whole numbers at once.
SMALL = 10
#: Bits won in one step: many, or, where the floats are not that good, few.
STEPS = (32, 16)
#: A fraction is looked for after so many bits, and again each time they have grown by a half.
FIRST_BITS = 128
#: More bits than this for each row are not waited for.
MOST_BITS = 200
#: Rows whose entries sum to less than this are multiplied in machine numbers: what overflows cancels out again.
MACHINE = 2**52
#: So many bits more than a fraction needs make sure that it is no chance.
SPARE = 16


def solve_lines(rows: Sequence[Line], right: Sequence[int]) -> list[Fraction] | None:
    """A solution of n rows (entries by column 0…n−1, absent for 0) = ``right``; for n = 0: ``[]``.

    None where there is none, where the rows are singular, or so near to it that floating point fails.
    """
    solution = [Fraction(0)] * len(right)
    for lines, columns in _parts(rows, len(right)):
        if len(lines) != len(columns):
            return None
        place = {column: position for position, column in enumerate(columns)}
        own = [{place[j]: a for j, a in rows[k].items() if a} for k in lines]
        solved = _solved(own, [right[k] for k in lines])
        if solved is None:
            return None
        for column, value in zip(columns, solved, strict=True):
            solution[column] = value
    return solution


def proves_regular(rows: Sequence[Line]) -> bool:
    """Whether floating point proves that n rows of n columns are independent; False says nothing.

    With B near the inverse of A, ‖1 − B·A‖ < 1 proves A regular; the rounding of the product is allowed for
    (S. M. Rump, Verification methods, Acta Numerica 19, 2010, section 10; Higham, ch. 3).
    """
    return all(
        len(lines) == len(columns) and _is_regular(rows, lines, columns) for lines, columns in _parts(rows, len(rows))
    )


def _is_regular(rows: Sequence[Line], lines: list[int], columns: list[int]) -> bool:
    size = len(lines)
    place = {column: position for position, column in enumerate(columns)}
    matrix = np.zeros((size, size))
    for line, k in enumerate(lines):
        scale = -max((a.bit_length() for a in rows[k].values()), default=0)
        for j, a in rows[k].items():
            if a:
                matrix[line, place[j]] = _scaled(a, scale)
    try:
        inverse = np.linalg.inv(matrix)
    except np.linalg.LinAlgError:
        return False
    off = np.abs(np.eye(size) - inverse @ matrix)
    # Entries of the matrix are rounded once, each product size times, the difference once.
    rounding = (size + 4) * 2.0**-52 * (np.abs(inverse) @ np.abs(matrix) + np.eye(size))
    return bool(np.max((off + rounding).sum(axis=1)) < 0.99)


def _parts(rows: Sequence[Line], size: int) -> list[tuple[list[int], list[int]]]:
    """The rows and the columns of each part that hangs together, in order."""
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import connected_components

    pairs = [(k, size + j) for k, row in enumerate(rows) for j, a in row.items() if a]
    ends = ([k for k, _ in pairs], [j for _, j in pairs])
    graph = csr_array((np.ones(len(pairs)), ends), shape=(2 * size, 2 * size))
    count, label = connected_components(graph, directed=False)
    parts: list[tuple[list[int], list[int]]] = [([], []) for _ in range(count)]
    for node, part in enumerate(label.tolist()):
        parts[part][node >= size].append(node % size)
    return parts


def _solved(rows: list[dict[int, int]], right: list[int]) -> list[Fraction] | None:
    size = len(right)
    if size <= SMALL:
        whole = solve_square([[row.get(j, 0) for j in range(size)] for row in rows], right)
        return None if whole is None else [Fraction(numerator, whole[1]) for numerator in whole[0]]
    factors = _factors(rows)
    if factors is None:
        return None
    for step in STEPS:
        solution = _lifted(rows, right, factors, step)
        if solution is not None:
            return solution
    return None


@dataclass(frozen=True, slots=True)
class _Factors:
    """A factorization of the rows in floats, row k multiplied by 2 to the power ``scales[k]``; ``matrix`` holds
    the rows in machine numbers, where they fit."""

    lu: Any
    scales: list[int]
    matrix: Any | None


def _factors(rows: list[dict[int, int]]) -> _Factors | None:
    """None where floats find the rows singular."""
    from scipy.sparse import csc_array, csr_array
    from scipy.sparse.linalg import splu

    shape = (len(rows), len(rows))
    scales = [-max((a.bit_length() for a in row.values()), default=0) for row in rows]
    ends = ([k for k, row in enumerate(rows) for _ in row], [j for row in rows for j in row])
    values = [_scaled(a, scale) for row, scale in zip(rows, scales, strict=True) for a in row.values()]
    try:
        lu = splu(csc_array((np.array(values, dtype=np.float64), ends), shape=shape))
    except RuntimeError:
        return None
    matrix = None
    if all(sum(map(abs, row.values())) < MACHINE for row in rows):
        entries = np.array([a for row in rows for a in row.values()], dtype=np.int64)
        matrix = csr_array((entries, ends), shape=shape)
    return _Factors(lu, scales, matrix)


def _scaled(value: int, exponent: int) -> float:
    """Value · 2^exponent, of any size of value."""
    spare = max(0, value.bit_length() - 64)
    return ldexp(float(value >> spare), exponent + spare)


def _lifted(rows: list[dict[int, int]], right: list[int], factors: _Factors, step: int) -> list[Fraction] | None:
    """The solution by steps of so many bits; None where they win nothing, or no fraction is found."""
    digits, rest = [0] * len(right), right
    machine: Any = None
    powers = np.ldexp(1.0, np.array(factors.scales))
    bits, look = 0, FIRST_BITS
    while bits < MOST_BITS * len(right) + FIRST_BITS:
        if machine is None:
            given = np.array([_scaled(value, scale) for value, scale in zip(rest, factors.scales, strict=True)])
        else:
            given = machine * powers
        next_digits = np.rint(np.ldexp(factors.lu.solve(given), step))
        # What is left of a rounded answer is at most a half of its last bit, but for the floats' own error.
        if not np.isfinite(next_digits).all() or (bits and np.abs(next_digits).max() > 2.0**step):
            return None
        own = [int(digit) for digit in next_digits.tolist()]
        digits = [(digit << step) + more for digit, more in zip(digits, own, strict=True)]
        bits += step
        if machine is not None:
            machine = (machine << step) - factors.matrix @ next_digits.astype(np.int64)
        else:
            rest = [
                (value << step) - sum(a * own[j] for j, a in row.items()) for value, row in zip(rest, rows, strict=True)
            ]
            if factors.matrix is not None and max(map(abs, rest)) < MACHINE:
                machine = np.array(rest, dtype=np.int64)
        if bits >= look:
            look = bits + bits // 2
            found = _fractions(digits, bits)
            if found is not None and _holds(rows, right, *found):
                return [Fraction(numerator, found[1]) for numerator in found[0]]
    return None


def _fractions(digits: list[int], bits: int) -> tuple[list[int], int] | None:
    """Numerators over one denominator that all digits are within a last bit of; None if they don't tell yet."""
    one, half, below = 1 << bits, 1 << (bits - 1), 1
    found = []
    for digit in digits:
        value = below * digit
        off = abs(value - ((value + half >> bits) << bits))
        if off > below:
            more = _denominator(off, one, below)
            if more is None:
                return None
            below *= more
            value *= more
        if 2 * below.bit_length() + SPARE > bits:
            return None
        found.append((value + half >> bits, below))
    return [numerator * (below // own) for numerator, own in found], below


def _denominator(off: int, one: int, below: int) -> int | None:
    """The least q with q·off within q·below of a multiple of ``one``, by Euclid's algorithm."""
    last, rest, last_q, q = one, off, 0, 1
    while rest > q * below:
        times, left = divmod(last, rest)
        last, rest = rest, left
        last_q, q = q, last_q + times * q
        if 2 * (q * below).bit_length() + SPARE > one.bit_length():
            return None
    return q


def _holds(rows: list[dict[int, int]], right: list[int], numerators: list[int], below: int) -> bool:
    return all(
        sum(a * numerators[j] for j, a in row.items()) == value * below for row, value in zip(rows, right, strict=True)
    )
