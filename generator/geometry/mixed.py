"""Large, sparse programs with whole-number columns, proposed in floating point.

HiGHS through scipy searches, with its effort counted in nodes so that the same program gives the same
point.  What comes back is a proposal: whoever asks fixes the whole-number columns and lets
:func:`generator.geometry.decide.decide` settle the rest exactly.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from generator.geometry.muted import muted

Floats = NDArray[np.float64]
Status = Literal["proven", "stopped", "infeasible", "unbounded", "unknown"]


@dataclass(frozen=True, slots=True)
class SparseRow:
    """low ≤ Σ coefficient·x ≤ high; coefficients by column, ±inf for no bound."""

    terms: Mapping[int, float]
    low: float
    high: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Mixed:
    """minimise cost·x over 0 ≤ x ≤ upper and the rows; ``whole`` are the columns that take whole numbers."""

    cost: Sequence[float]
    upper: Sequence[float]
    rows: Sequence[SparseRow]
    whole: frozenset[int] = field(default_factory=frozenset)


@dataclass(frozen=True, slots=True, kw_only=True)
class Found:
    """The best point found (n, None if none), its value, a bound that no point is below, nodes spent.

    "proven": best within the gap asked for; "stopped": the nodes or seconds ran out.  ``multipliers``
    (one a row, signs as of a Program's) only from :func:`linear`.
    """

    status: Status
    x: Floats | None = None
    value: float = np.inf
    bound: float = -np.inf
    nodes: int = 0
    multipliers: Floats | None = None


def search(program: Mixed, *, nodes: int, seconds: float, gap: float = 0.0) -> Found:
    """Search for the best point with at most so many nodes; ``gap`` is relative.  ``seconds`` is a last guard."""
    from scipy.optimize import Bounds, LinearConstraint, milp

    n = len(program.cost)
    if n == 0:
        return _without_columns(program)
    matrix, low, high = _scaled(program)
    cost = np.array(program.cost, dtype=np.float64)
    scale = float(_power_of_two(np.abs(cost).max(initial=0.0, keepdims=True))[0])
    integrality = np.zeros(n, dtype=np.int64)
    integrality[sorted(program.whole)] = 1
    with muted():
        result: Any = milp(
            cost * scale,
            constraints=LinearConstraint(matrix, low, high) if len(low) else None,
            bounds=Bounds(0.0, np.array(program.upper, dtype=np.float64)),
            integrality=integrality,
            options={"node_limit": max(1, nodes), "time_limit": max(0.1, seconds), "mip_rel_gap": gap},
        )
    spent = int(getattr(result, "mip_node_count", None) or 0)
    status = _STATUS.get(int(result.status), "unknown")
    if result.x is None:
        return Found(status=status if status != "proven" else "unknown", nodes=spent)
    bound = getattr(result, "mip_dual_bound", None)
    value = float(cost @ result.x)
    below = value if bound is None or (status == "proven" and not program.whole) else float(bound) / scale
    return Found(status=status, x=np.asarray(result.x), value=value, bound=below, nodes=spent)


_STATUS: dict[int, Status] = {0: "proven", 1: "stopped", 2: "infeasible", 3: "unbounded", 4: "unknown"}


def linear(program: Mixed) -> Found:
    """The optimum with whole numbers waived, and its row multipliers."""
    if not program.cost:
        return _without_columns(program)
    low = np.array([row.low for row in program.rows], dtype=np.float64)
    high = np.array([row.high for row in program.rows], dtype=np.float64)
    cost, upper = np.array(program.cost, dtype=np.float64), np.array(program.upper, dtype=np.float64)
    return linear_on(_matrix(program), low, high, cost, upper)


def linear_on(matrix: Any, low: Floats, high: Floats, cost: Floats, upper: Floats) -> Found:
    """As :func:`linear`, for a program given as a sparse matrix (m × n, by rows) and arrays; n at least 1."""
    from scipy.optimize import linprog
    from scipy.sparse import vstack

    scales = _row_scales(matrix)
    matrix = matrix.copy()
    matrix.data = matrix.data * np.repeat(scales, np.diff(matrix.indptr))
    low, high = low * scales, high * scales
    equal = low == high
    has_low, has_high = ~equal & np.isfinite(low), ~equal & np.isfinite(high)

    solver: Any = linprog  # its stubs know no sparse matrices
    result = solver(
        cost,
        A_ub=vstack([-matrix[has_low], matrix[has_high]]).tocsr() if (has_low | has_high).any() else None,
        b_ub=np.concatenate([-low[has_low], high[has_high]]) if (has_low | has_high).any() else None,
        A_eq=matrix[equal] if equal.any() else None,
        b_eq=low[equal] if equal.any() else None,
        bounds=np.column_stack([np.zeros(len(cost)), upper]),
        method="highs-ds",
    )
    status = _STATUS.get(int(result.status), "unknown")
    if result.x is None or result.status != 0:
        return Found(status=status if status != "proven" else "unknown")
    y = np.zeros(len(low))
    if (has_low | has_high).any():
        y[has_low] -= result.ineqlin.marginals[: has_low.sum()]
        y[has_high] += result.ineqlin.marginals[has_low.sum() :]
    if equal.any():
        y[equal] = result.eqlin.marginals
    value = float(result.fun)
    return Found(status="proven", x=np.asarray(result.x), value=value, bound=value, multipliers=y * scales)


def _without_columns(program: Mixed) -> Found:
    if any(row.low > 0 or row.high < 0 for row in program.rows):
        return Found(status="infeasible")
    return Found(status="proven", x=np.zeros(0), value=0.0, bound=0.0, multipliers=np.zeros(len(program.rows)))


def _scaled(program: Mixed) -> tuple[Any, Floats, Floats]:
    """The matrix in compressed rows with its bounds, each row scaled to about 1 by a power of two."""
    matrix = _matrix(program)
    scales = _row_scales(matrix)
    matrix.data = matrix.data * np.repeat(scales, np.diff(matrix.indptr))
    low = np.array([row.low for row in program.rows], dtype=np.float64) * scales
    high = np.array([row.high for row in program.rows], dtype=np.float64) * scales
    return matrix, low, high


def _matrix(program: Mixed) -> Any:
    from scipy.sparse import csr_array

    starts = np.zeros(len(program.rows) + 1, dtype=np.int32)
    starts[1:] = np.cumsum([len(row.terms) for row in program.rows])
    columns = np.fromiter((j for row in program.rows for j in row.terms), dtype=np.int32, count=starts[-1])
    values = np.fromiter((v for row in program.rows for v in row.terms.values()), dtype=np.float64, count=starts[-1])
    return csr_array((values, columns, starts), shape=(len(program.rows), len(program.cost)))


def _row_scales(matrix: Any) -> Floats:
    """For each row of a matrix in compressed rows the power of two that brings its largest entry to about 1."""
    sizes = np.zeros(matrix.shape[0])
    lines = np.repeat(np.arange(matrix.shape[0]), np.diff(matrix.indptr))
    np.maximum.at(sizes, lines, np.abs(matrix.data))
    return _power_of_two(sizes)


def _power_of_two(sizes: Floats) -> Floats:
    """For each size the power of two that brings it into [½, 1); 1 for 0."""
    exponents = np.frexp(sizes)[1]
    return np.where(sizes > 0, np.ldexp(1.0, -exponents), 1.0)
