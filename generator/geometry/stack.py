"""Many small linear programs side by side, as arrays of floats, and their scaling to about 1."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from generator.geometry.program import Bound, Program

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]
Indices = NDArray[np.int64]

#: An infinite bound of a column is replaced by this much in scaled units, in which finite bounds are about 1.
#: An answer that rests on such a bound is reported as unfinished.
FAR = 2.0**14


@dataclass(frozen=True, slots=True, kw_only=True)
class Stack:
    """K programs: minimise cost·x, row_low ≤ rows·x ≤ row_high, lower ≤ x ≤ upper.

    ``rows`` is (m, n) where all share them, or (K, m, n); ``row_low`` and ``row_high`` are (K, m);
    ``lower``, ``upper`` and ``cost`` are (K, n).  ±inf stands for "no bound".
    """

    rows: Floats
    row_low: Floats
    row_high: Floats
    lower: Floats
    upper: Floats
    cost: Floats

    @property
    def count(self) -> int:
        """K, the number of programs."""
        return int(self.row_low.shape[0])

    @property
    def shape(self) -> tuple[int, int]:
        """(m, n): rows and columns of each program."""
        return int(self.rows.shape[-2]), int(self.rows.shape[-1])

    @property
    def is_shared(self) -> bool:
        """True where all programs have the same rows."""
        return self.rows.ndim == 2

    def some(self, which: Indices | Flags | slice) -> Stack:
        """The programs of ``which``, in that order."""
        return Stack(
            rows=self.rows if self.is_shared else self.rows[which],
            row_low=self.row_low[which],
            row_high=self.row_high[which],
            lower=self.lower[which],
            upper=self.upper[which],
            cost=self.cost[which],
        )


@dataclass(frozen=True, slots=True)
class Scales:
    """Powers of two: rows were multiplied by ``row`` ((m,) or (K, m)), x divided by ``x`` (K,), costs multiplied by
    ``cost`` (K,)."""

    row: Floats
    x: Floats
    cost: Floats


def make_stack(
    rows: Any, row_low: Any, row_high: Any, *, lower: Any = 0.0, upper: Any = np.inf, cost: Any = 0.0
) -> Stack:
    """A stack from arrays that numpy can broadcast: bounds and costs given once hold for all programs.

    Raises ValueError where shapes don't fit, where a number is NaN or a coefficient infinite.
    """
    matrix = np.asarray(rows, dtype=np.float64)
    if matrix.ndim not in (2, 3):
        raise ValueError(f"rows must have 2 or 3 axes, found {matrix.ndim}")
    m, n = matrix.shape[-2:]
    given = [np.asarray(array, dtype=np.float64) for array in (row_low, row_high, lower, upper, cost)]
    counts = {array.shape[0] for array in given if array.ndim == 2} | ({matrix.shape[0]} if matrix.ndim == 3 else set())
    counts = counts - {1} or {1}
    if len(counts) > 1:
        raise ValueError(f"the arrays speak of {sorted(counts)} programs")
    count = counts.pop()
    if matrix.ndim == 3 and matrix.shape[0] != count:
        raise ValueError(f"{matrix.shape[0]} matrices, but {count} programs")
    spread = [np.broadcast_to(array, (count, size)) for array, size in zip(given, (m, m, n, n, n), strict=True)]
    if any(bool(np.isnan(array).any()) for array in (matrix, *spread)) or not np.isfinite(matrix).all():
        raise ValueError("NaN, or an infinite coefficient")
    low, high, under, over, price = spread
    return Stack(rows=matrix, row_low=low, row_high=high, lower=under, upper=over, cost=price)


def stack_of(programs: Sequence[Program]) -> Stack:
    """The float image of exact programs of one shape: each entry is the nearest float.

    Raises ValueError where the shapes differ or there is no program.
    """
    if not programs:
        raise ValueError("no program")
    m, n = len(programs[0].rows), len(programs[0].cost)
    if any(len(program.rows) != m or len(program.cost) != n for program in programs):
        raise ValueError("programs of different shapes")
    first = programs[0].rows
    shared = all(program.rows is first or program.rows == first for program in programs)
    asked = programs[:1] if shared else programs
    rows = float_table([row for program in asked for row in program.rows], n).reshape(len(asked), m, n)
    return Stack(
        rows=rows[0] if shared else rows,
        row_low=float_table([program.row_low for program in programs], m, -np.inf),
        row_high=float_table([program.row_high for program in programs], m, np.inf),
        lower=float_table([program.lower for program in programs], n, -np.inf),
        upper=float_table([program.upper for program in programs], n, np.inf),
        cost=float_table([program.cost for program in programs], n),
    )


def doubtful(programs: Sequence[Program], stack: Stack) -> Flags:
    """Where bounds are equal as floats but not in truth, (K,): floats prove nothing there."""
    rows = differ(
        [program.row_low for program in programs],
        [program.row_high for program in programs],
        stack.row_low == stack.row_high,
    )
    columns = differ(
        [program.lower for program in programs], [program.upper for program in programs], stack.lower == stack.upper
    )
    return rows | columns


def differ(lows: Sequence[Sequence[Bound]], highs: Sequence[Sequence[Bound]], where: Flags) -> Flags:
    """Whether any low bound differs from its high one among those marked in ``where`` (K, width); (K,)."""
    found = np.zeros(len(lows), dtype=np.bool_)
    for k, column in np.argwhere(where).tolist():
        if lows[k][column] is not highs[k][column] and lows[k][column] != highs[k][column]:
            found[k] = True
    return found


def float_table(vectors: Sequence[Sequence[Bound]], width: int, missing: float = 0.0) -> Floats:
    """Exact vectors of one width as the nearest floats, (K, width), None as ``missing``.

    A vector object that occurs again isn't converted again.
    """
    places: dict[int, int] = {}
    rows: list[list[float]] = []
    index = []
    for vector in vectors:
        place = places.setdefault(id(vector), len(rows))
        if place == len(rows):
            # the quotient of two integers is rounded once, as float(Fraction) is, and comes sooner
            rows.append([missing if value is None else value.numerator / value.denominator for value in vector])
        index.append(place)
    table = np.array(rows, dtype=np.float64).reshape(len(rows), width)
    if len(rows) == 1:
        return np.broadcast_to(table, (len(index), width))
    return table if len(rows) == len(index) else table[index]


def scaled(stack: Stack) -> tuple[Stack, Scales]:
    """The stack with rows, shares and costs brought to about 1 by powers of two (so without rounding).

    Mixed units in one model make a float solver call border cases feasible that are not; scaled rows don't.
    """
    row = _inverse_power(np.abs(stack.rows).max(axis=-1, initial=0.0))
    bounds = np.maximum(_finite_size(stack.lower), _finite_size(stack.upper))
    x = 1.0 / _inverse_power(bounds.max(axis=-1, initial=0.0))
    cost = _inverse_power(np.abs(stack.cost).max(axis=-1, initial=0.0))
    shrink = row / x[:, None]
    return (
        Stack(
            rows=stack.rows * row[..., None],
            row_low=stack.row_low * shrink,
            row_high=stack.row_high * shrink,
            lower=stack.lower / x[:, None],
            upper=stack.upper / x[:, None],
            cost=stack.cost * cost[:, None],
        ),
        Scales(row, x, cost),
    )


def _finite_size(bounds: Floats) -> Floats:
    """|bound|, 0 where infinite."""
    return np.where(np.isfinite(bounds), np.abs(bounds), 0.0)


def _inverse_power(sizes: Floats) -> Floats:
    """1/2^e with 2^(e−1) ≤ size < 2^e, and 1 for size 0."""
    exponents = np.frexp(sizes)[1]
    return np.asarray(np.where(sizes > 0, np.ldexp(1.0, -exponents), 1.0), dtype=np.float64)
