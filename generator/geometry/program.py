"""The one shape of question: a linear program with exact data, and its exact answers.

    minimise  cost·x   subject to   row_low ≤ rows·x ≤ row_high,   lower ≤ x ≤ upper

``None`` stands for "no bound".  Membership, cheapest shares, greatest amount, attainable range and
faces are all programs of this shape; :mod:`generator.geometry.exact` decides them.

Signs of the multipliers y (one for each row): with reduced costs d = cost − rowsᵀ·y, a row's y is
≥ 0 where the row is held at its low bound and ≤ 0 where it is held at its high bound, d_j ≥ 0 at a
lower bound and ≤ 0 at an upper one; an equality's is free.  So y_k is the rise of the optimum for one unit more of the
bound that holds row k.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

Bound = Fraction | None
Vector = tuple[Fraction, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Program:
    """A linear program of m rows and n columns in exact numbers.

    ``rows`` has m tuples of n; ``row_low`` and ``row_high`` m each; ``lower``, ``upper``, ``cost``
    n each.  All zero costs ask for any feasible point.
    """

    rows: tuple[Vector, ...]
    row_low: tuple[Bound, ...]
    row_high: tuple[Bound, ...]
    lower: tuple[Bound, ...]
    upper: tuple[Bound, ...]
    cost: Vector

    def __post_init__(self) -> None:
        """Refuse shapes that don't fit: ValueError."""
        m, n = len(self.rows), len(self.cost)
        if not (len(self.row_low) == len(self.row_high) == m):
            raise ValueError(f"{m} rows, but {len(self.row_low)} low and {len(self.row_high)} high bounds")
        if not (len(self.lower) == len(self.upper) == n):
            raise ValueError(f"{n} columns, but {len(self.lower)} lower and {len(self.upper)} upper bounds")
        if any(len(row) != n for row in self.rows):
            raise ValueError(f"a row has not {n} entries")

    def at_most(self, rows: Sequence[Vector], top: Fraction) -> Program:
        """The program with further rows (n entries each) that are at most ``top``."""
        return replace(
            self,
            rows=(*self.rows, *rows),
            row_low=(*self.row_low, *(None,) * len(rows)),
            row_high=(*self.row_high, *(top,) * len(rows)),
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Sparse:
    """The constraints of a large program with few entries a row, in whole numbers: low ≤ row·x ≤ high, x ≥ 0.

    ``width`` columns; m rows with their entries by column (absent for 0), m entries in ``low`` and ``high``
    (None for no bound).
    """

    width: int
    rows: tuple[Mapping[int, int], ...]
    low: tuple[int | None, ...]
    high: tuple[int | None, ...]


@dataclass(frozen=True, slots=True)
class Basis:
    """The columns (0…n−1) and row slacks (n…n+m−1) that are basic, m in all, sorted; and which
    non-basic ones rest at their upper bound."""

    basic: tuple[int, ...]
    at_upper: frozenset[int] = frozenset()


@dataclass(frozen=True, slots=True)
class Optimum:
    """Proven best: ``x`` (n), ``value`` = cost·x, and ``multipliers`` (m) that prove it.

    ``basis`` is the optimal basis where one is known (for warm starts), else None.
    """

    x: Vector
    value: Fraction
    multipliers: Vector
    basis: Basis | None = None


@dataclass(frozen=True, slots=True)
class Infeasible:
    """Proven empty: with y = ``multipliers`` (m), the least of Σ y_k·(row k's bound) that any feasible
    point would need exceeds the greatest of (yᵀ·rows)·x over the box.

    y_k > 0 uses row k's low bound, y_k < 0 its high bound.  Where a column's own bounds cross
    (lower > upper) all multipliers may be 0.
    """

    multipliers: Vector


@dataclass(frozen=True, slots=True)
class Unbounded:
    """Proven without a least value: from feasible ``x`` along ``ray`` the cost falls for ever."""

    x: Vector
    ray: Vector


Answer = Optimum | Infeasible | Unbounded


def fractions(values: Sequence[int | str | Fraction]) -> Vector:
    """A vector of exact numbers from ints, strings such as "1/3" or "0.25", or Fractions."""
    return tuple(Fraction(value) for value in values)
