"""A floating-point solver's opinion of one program: which way it goes, and in which basis.

Whoever proposes (here HiGHS through scipy) hands over a :class:`Proposal` and nothing else; exact
arithmetic decides.  A wrong proposal costs time.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from generator.geometry.program import Basis, Bound, Program

Floats = NDArray[np.float64]

#: A value this near to a bound (relative to 1 or the bound) counts as at it; solvers put non-basic
#: columns at their bounds to the last bit, rows are off by rounding only.  A wrong guess costs time.
AT_BOUND = 1e-9
#: A pivot this small is taken for 0 when independent columns are picked; rows are scaled to about 1.
NO_PIVOT = 1e-9


@dataclass(frozen=True, slots=True)
class Proposal:
    """What a floating-point solver believes.

    "feasible": ``basis`` is believed optimal.  "infeasible": ``basis`` is the last of a first phase
    that minimises the weighted breaches of rows, ``weights`` (m) its row multipliers (any positive
    multiple; None if rows weigh alike).  "unknown": no opinion.
    """

    status: Literal["feasible", "infeasible", "unknown"]
    basis: Basis | None = None
    weights: tuple[float, ...] | None = None


UNKNOWN = Proposal("unknown")


def highs(program: Program) -> Proposal:
    """HiGHS's opinion, on rows and costs scaled to about 1 by powers of two."""
    if not program.rows or not program.cost:
        return UNKNOWN
    try:
        with np.errstate(over="ignore", invalid="ignore"):
            scaled = _scaled(program)
    except OverflowError:
        return UNKNOWN
    if not _is_usable(scaled):
        return UNKNOWN
    status, x, y = _linprog(scaled)
    if status == 0:
        return Proposal("feasible", _guess(scaled, x, y, scaled.cost - y @ scaled.rows))
    if status != 2:
        return UNKNOWN
    status, x, y = _linprog(_elastic(scaled))
    if status != 0:
        return UNKNOWN
    x = x[: len(scaled.cost)]
    weights = tuple(float(value) for value in y * scaled.row_scale)
    return Proposal("infeasible", _guess(scaled, x, y, -(y @ scaled.rows)), weights)


@dataclass(frozen=True, slots=True)
class _Scaled:
    """A program in floats: rows (m × n), bounds of rows and columns, cost; infinite for no bound."""

    rows: Floats
    low: Floats
    high: Floats
    lower: Floats
    upper: Floats
    cost: Floats
    row_scale: Floats


def _scaled(program: Program) -> _Scaled:
    m, n = len(program.rows), len(program.cost)
    rows = np.array([[float(value) for value in row] for row in program.rows], dtype=np.float64).reshape(m, n)
    scale = _power_of_two(np.abs(rows).max(axis=1, initial=0.0))
    cost = np.array([float(value) for value in program.cost], dtype=np.float64)
    return _Scaled(
        rows=rows * scale[:, None],
        low=_bounds(program.row_low, -np.inf) * scale,
        high=_bounds(program.row_high, np.inf) * scale,
        lower=_bounds(program.lower, -np.inf),
        upper=_bounds(program.upper, np.inf),
        cost=cost * _power_of_two(np.abs(cost).max(initial=0.0, keepdims=True)),
        row_scale=scale,
    )


def _is_usable(scaled: _Scaled) -> bool:
    """Whether no number was too large or too small for a float."""
    finite = np.isfinite(scaled.rows).all() and np.isfinite(scaled.cost).all()
    return bool(finite and (scaled.low < np.inf).all() and (scaled.high > -np.inf).all())


def _bounds(bounds: Sequence[Bound], absent: float) -> Floats:
    return np.array([absent if bound is None else float(bound) for bound in bounds], dtype=np.float64)


def _power_of_two(sizes: Floats) -> Floats:
    """For each size the power of two that brings it into [½, 1); 1 for 0."""
    exponents = np.frexp(sizes)[1]
    return np.where(sizes > 0, np.ldexp(1.0, -exponents), 1.0)


def _elastic(scaled: _Scaled) -> _Scaled:
    """The first phase: every row may be broken both ways, each unit (scaled) costs 1."""
    m, n = scaled.rows.shape
    give = np.eye(m)
    return _Scaled(
        rows=np.hstack([scaled.rows, give, -give]),
        low=scaled.low,
        high=scaled.high,
        lower=np.concatenate([scaled.lower, np.zeros(2 * m)]),
        upper=np.concatenate([scaled.upper, np.full(2 * m, np.inf)]),
        cost=np.concatenate([np.zeros(n), np.ones(2 * m)]),
        row_scale=scaled.row_scale,
    )


def _linprog(scaled: _Scaled) -> tuple[int, Floats, Floats]:
    """The solver's status (as scipy numbers it), x, and the row multipliers with the signs of a Program's."""
    from scipy.optimize import linprog

    equal = scaled.low == scaled.high
    has_low, has_high = ~equal & np.isfinite(scaled.low), ~equal & np.isfinite(scaled.high)
    result: Any = linprog(
        scaled.cost,
        A_ub=np.vstack([-scaled.rows[has_low], scaled.rows[has_high]]),
        b_ub=np.concatenate([-scaled.low[has_low], scaled.high[has_high]]),
        A_eq=scaled.rows[equal],
        b_eq=scaled.low[equal],
        bounds=list(zip(scaled.lower.tolist(), scaled.upper.tolist(), strict=True)),
        method="highs-ds",
    )
    y = np.zeros(len(scaled.low))
    if result.x is None or result.status != 0:
        return int(result.status) or 4, y, y
    marginals = result.ineqlin.marginals
    y[has_low] -= marginals[: has_low.sum()]
    y[has_high] += marginals[has_low.sum() :]
    y[equal] = result.eqlin.marginals
    return 0, result.x, y


def _guess(scaled: _Scaled, x: Floats, y: Floats, reduced: Floats) -> Basis:
    """The basis that a solver must have ended in, from its floating-point x and multipliers.

    Whatever lies strictly between its bounds is basic.  Where that is fewer than m, any choice
    among the columns of reduced cost 0 that keeps the basis regular has the same point and the same
    multipliers, so the first independent ones in a fixed order do.
    """
    m = len(y)
    values = np.concatenate([x, scaled.rows @ x])
    floor, ceiling = np.concatenate([scaled.lower, scaled.low]), np.concatenate([scaled.upper, scaled.high])
    prices = np.abs(np.concatenate([reduced, y]))
    with np.errstate(invalid="ignore"):
        to_floor = np.abs(values - floor)
        to_ceiling = np.abs(ceiling - values)
    near = np.minimum(to_floor, to_ceiling) <= AT_BOUND * np.maximum(1.0, np.abs(values))
    fixed = floor == ceiling
    order = np.lexsort((fixed, np.where(prices <= AT_BOUND, 0.0, prices), near))
    basic = independent(np.hstack([scaled.rows, -np.eye(m)]), order)
    upper = np.isfinite(ceiling) & (to_ceiling < to_floor)
    upper[basic] = False
    return Basis(tuple(sorted(int(column) for column in basic)), frozenset(int(j) for j in np.flatnonzero(upper)))


def independent(columns: Floats, order: NDArray[np.intp]) -> list[int]:
    """The first columns (of an m × n matrix), in that order, that are independent: at most m of them."""
    work = columns.copy()
    free = np.ones(len(work), dtype=bool)
    chosen: list[int] = []
    for column in order:
        entries = np.where(free, np.abs(work[:, column]), 0.0)
        pivot = int(entries.argmax())
        if entries[pivot] <= NO_PIVOT:
            continue
        free[pivot] = False
        chosen.append(int(column))
        if len(chosen) == len(work):
            break
        factors = np.where(free, work[:, column] / work[pivot, column], 0.0)
        work -= factors[:, None] * work[pivot]
    return chosen
