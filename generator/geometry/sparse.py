"""The exact best point of a large program with few entries a row, by several costs in turn.

HiGHS proposes a point and multipliers, exact arithmetic works out the basis that they must come from
(:mod:`generator.geometry.lifted`), and a checker has the last word.  There is no search: where a proposal
leads nowhere, there is no answer, and whoever asks has to decide the program in another way.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import inf
from typing import Any

import numpy as np
from numpy.typing import NDArray

from generator.geometry.checks import proven_prices
from generator.geometry.elimination import cleared
from generator.geometry.lifted import proves_regular, solve_lines
from generator.geometry.mixed import Floats, linear_on
from generator.geometry.program import Sparse
from generator.geometry.propose import independent

Flags = NDArray[np.bool_]
Indices = NDArray[np.int64]

#: A value this near to a bound, relative to the terms that make it up, counts as at it.
AT_BOUND = 1e-9
#: A price this small, relative to the largest cost, counts as none.  A wrong guess costs the answer, not its truth.
NO_PRICE = 1e-9


@dataclass(frozen=True, slots=True)
class BestInTurn:
    """A point (by column, absent for 0) that no other undercuts in the first cost, of those in the second, …

    ``is_only``: no other point is as good in all of them.  Points as good use no columns but ``free``, and are in
    each row of ``held`` at the bound that it names; all such points are as good.
    """

    x: Mapping[int, Fraction]
    is_only: bool
    free: frozenset[int]
    held: Mapping[int, int]


@dataclass(frozen=True, slots=True)
class _Proposal:
    """A point and multipliers in floats, over the columns ``order``: which are used, which rows are at a bound
    (``bounds`` says which, None for none), the rows as floats, the columns' prices."""

    order: list[int]
    used: Flags
    bounds: list[int | None]
    matrix: Any
    multipliers: Floats
    costs: Floats

    @property
    def prices(self) -> Floats:
        """The columns' reduced costs."""
        prices: Floats = self.costs - self.matrix.T @ self.multipliers
        return prices

    @property
    def size(self) -> float:
        """The largest cost."""
        return float(np.abs(self.costs).max(initial=0.0))


@dataclass(frozen=True, slots=True)
class _Caps:
    """For each column the most that one row lets it come to (inf: no row does), a power of two as a unit for it,
    and the row with the column's entry in it."""

    tops: Floats
    units: Floats
    rows: Indices
    entries: Floats


@dataclass(frozen=True, slots=True)
class _Vertex:
    """A best point for one cost and its multipliers (by row), and the columns and rows of its basis."""

    x: dict[int, Fraction]
    multipliers: dict[int, Fraction]
    columns: frozenset[int]
    rows: tuple[int, ...]


def best_in_turn(
    program: Sparse,
    costs: Sequence[Mapping[int, Fraction]],
    accepts: Callable[[Floats], bool] = lambda _: True,
) -> BestInTurn | None:
    """The point that is best by each of ``costs`` (by column) in turn, least first, exactly.

    None where there is none, or none was found this way; also where ``accepts`` refuses the point (width
    floats) that is proposed for one of the costs.  Ends as soon as only one point is left.
    """
    free = frozenset(range(program.width))
    vertex: _Vertex | None = None
    face, is_only = program, False
    matrix = _matrix(program)
    if matrix is None or not program.width:
        return None
    for given in costs:
        cost = dict(zip(given, cleared(list(given.values()))[0], strict=True))
        own = {j: c for j, c in cost.items() if c and j in free}
        if not own and vertex is not None:
            continue
        best = _vertex(face, matrix, own, free, accepts)
        if best is None:
            return None
        vertex, free = best
        face = _face(face, vertex)
        is_only = _is_one_point(face, free, vertex)
        if is_only:
            break
    if vertex is None:
        return None
    held = {
        k: bound
        for k, (row, bound, other) in enumerate(zip(face.rows, face.low, face.high, strict=True))
        if row and bound is not None and bound == other
    }
    return BestInTurn(vertex.x, is_only, free, held)


def _vertex(
    program: Sparse, matrix: Any, cost: Mapping[int, int], free: frozenset[int], accepts: Callable[[Floats], bool]
) -> tuple[_Vertex, frozenset[int]] | None:
    """The best point over the ``free`` columns, checked, and which of them have no price."""
    proposal = _proposed(program, matrix, cost, sorted(free), accepts)
    if proposal is None:
        return None
    idle = _idle(proposal)
    for without in [idle, frozenset[int]()] if idle else [idle]:
        basis = _basis(proposal, without)
        vertex = None if basis is None else _on_basis(program, cost, proposal, basis, without)
        if vertex is None:
            continue
        prices = proven_prices(program, cost, vertex.x, vertex.multipliers, free)
        if prices is not None:
            return vertex, frozenset(j for j, price in prices.items() if not price)
    return None


def _matrix(program: Sparse) -> Any | None:
    """The rows as floats in compressed rows; None where a number is too large."""
    from scipy.sparse import csr_array

    starts = np.cumsum([0, *map(len, program.rows)])
    try:
        values = np.fromiter((a for row in program.rows for a in row.values()), dtype=np.float64, count=starts[-1])
    except OverflowError:
        return None
    columns = np.fromiter((j for row in program.rows for j in row), dtype=np.int32, count=starts[-1])
    return csr_array((values, columns, starts), shape=(len(program.rows), program.width))


def _proposed(
    program: Sparse, matrix: Any, cost: Mapping[int, int], order: list[int], accepts: Callable[[Floats], bool]
) -> _Proposal | None:
    if len(order) < program.width:
        matrix = matrix[:, order].tocsr()
    try:
        low = np.array([-inf if bound is None else float(bound) for bound in program.low])
        high = np.array([inf if bound is None else float(bound) for bound in program.high])
        costs = np.array([float(cost.get(j, 0)) for j in order])
    except OverflowError:
        return None
    size = float(np.abs(costs).max(initial=0.0))
    capping = _caps(matrix, high)
    caps, unit = capping.tops, capping.units
    scaled = matrix.copy()
    scaled.data = scaled.data * unit[scaled.indices]
    found = linear_on(scaled, low, high, costs * unit / (size or 1.0), caps / unit)
    if found.x is None or found.multipliers is None:
        return None
    x = found.x * unit
    whole = np.zeros(program.width)
    whole[order] = x
    if not accepts(whole):
        return None
    y = found.multipliers * (size or 1.0)
    # A multiplier of a cap is one of the row that the cap comes from.
    prices = costs - matrix.T @ y
    capped = np.flatnonzero((prices < -NO_PRICE * size) & np.isfinite(caps))
    more = np.zeros(len(y))
    np.minimum.at(more, capping.rows[capped], prices[capped] / capping.entries[capped])
    y += more
    total, terms = matrix @ x, abs(matrix) @ x
    near = AT_BOUND * np.maximum(terms, 1e-300)
    with np.errstate(invalid="ignore"):
        at_high = np.abs(total - high) <= np.maximum(near, AT_BOUND * np.abs(high))
        at_low = np.abs(total - low) <= np.maximum(near, AT_BOUND * np.abs(low))
    bounds = [
        top if is_top else bottom if is_bottom else None
        for top, bottom, is_top, is_bottom in zip(program.high, program.low, at_high, at_low, strict=True)
    ]
    used = x > AT_BOUND * max(1e-300, float(x.max(initial=0.0)))
    return _Proposal(order, used, bounds, matrix, y, costs)


def _caps(matrix: Any, high: Floats) -> _Caps:
    """What rows that only add up let each column come to."""
    if not len(matrix.data):
        width = matrix.shape[1]
        return _Caps(np.full(width, inf), np.ones(width), np.zeros(width, dtype=np.int64), np.ones(width))
    lines = np.repeat(np.arange(matrix.shape[0]), np.diff(matrix.indptr))
    adds = np.isfinite(high)
    adds[lines[matrix.data < 0]] = False
    inside = np.flatnonzero(adds[lines] & (matrix.data > 0))
    tops = high[lines[inside]] / matrix.data[inside]
    # The least comes last, and stays.
    turn = np.argsort(-tops, kind="stable")
    chosen = np.full(matrix.shape[1], -1)
    chosen[matrix.indices[inside[turn]]] = turn
    has_cap = chosen >= 0
    caps = np.where(has_cap, np.maximum(tops[chosen], 0.0), inf) if len(tops) else np.full(len(chosen), inf)
    where = np.where(has_cap, inside[chosen], 0) if len(tops) else np.zeros(len(chosen), dtype=np.int64)
    unit = np.where(np.isfinite(caps) & (caps > 0), np.ldexp(1.0, np.frexp(np.where(has_cap, caps, 1.0))[1]), 1.0)
    return _Caps(caps, unit, lines[where], matrix.data[where])


def _idle(proposal: _Proposal) -> frozenset[int]:
    """Rows that are at a bound of 0 because none of their columns is used: all of them are then degenerate."""
    used = proposal.matrix[:, np.flatnonzero(proposal.used)]
    counts = np.diff(used.tocsr().indptr)
    return frozenset(k for k, bound in enumerate(proposal.bounds) if bound == 0 and not counts[k])


def _basis(proposal: _Proposal, without: frozenset[int]) -> tuple[list[int], list[int]] | None:
    """The basic columns (positions) and the rows held tight, equally many, that a solver must have ended in.

    Used columns are basic, rows that are not at a bound are not tight, nor are those in ``without``.  Where more
    rows are at a bound than columns are used, those without a multiplier give way first, then columns without a
    price come in.
    """
    used = np.flatnonzero(proposal.used).tolist()
    tight = [k for k, bound in enumerate(proposal.bounds) if bound is not None and k not in without]
    if len(used) >= len(tight):
        return (used, tight) if len(used) == len(tight) else None
    spare = np.flatnonzero(~proposal.used & (np.abs(proposal.prices) <= NO_PRICE * proposal.size)).tolist()
    columns = [*used, *spare]
    held = proposal.multipliers[tight] != 0
    matrix = proposal.matrix[tight][:, columns].toarray()
    matrix /= np.maximum(np.abs(matrix).max(axis=1, initial=0.0), 1e-300)[:, None]
    slacks = len(columns) + np.arange(len(tight))
    order = np.concatenate([np.arange(len(used)), slacks[~held], np.arange(len(used), len(columns)), slacks[held]])
    chosen = independent(np.hstack([matrix, np.eye(len(tight))]), order.astype(np.intp))
    basic = sorted(columns[j] for j in chosen if j < len(columns))
    gone = {j - len(columns) for j in chosen if j >= len(columns)}
    kept = [k for line, k in enumerate(tight) if line not in gone]
    return (basic, kept) if len(basic) == len(kept) else None


def _on_basis(
    program: Sparse,
    cost: Mapping[int, int],
    proposal: _Proposal,
    basis: tuple[list[int], list[int]],
    without: frozenset[int],
) -> _Vertex | None:
    """The point and the multipliers of a basis; those of the rows ``without`` a part in it are chosen apart."""
    columns, tight = [proposal.order[position] for position in basis[0]], basis[1]
    place = {j: position for position, j in enumerate(columns)}
    lines = [{place[j]: a for j, a in program.rows[k].items() if j in place} for k in tight]
    turned: list[dict[int, int]] = [{} for _ in columns]
    for position, line in enumerate(lines):
        for j, a in line.items():
            turned[j][position] = a
    right = [bound for k in tight if (bound := proposal.bounds[k]) is not None]
    point, weights = solve_lines(lines, right), solve_lines(turned, [cost.get(j, 0) for j in columns])
    if point is None or weights is None:
        return None
    y = {k: value for k, value in zip(tight, weights, strict=True) if value}
    if without:
        y |= _chosen_apart(program, proposal, without, y)
    return _Vertex({j: x for j, x in zip(columns, point, strict=True) if x}, y, frozenset(columns), tuple(tight))


def _chosen_apart(
    program: Sparse, proposal: _Proposal, rows: frozenset[int], others: Mapping[int, Fraction]
) -> dict[int, Fraction]:
    """Multipliers of idle rows that leave every column of theirs a price, the least price as large as can be.

    In floats, rounded: with such a price there is room.
    """
    from scipy.sparse import csr_array, hstack

    lines = sorted(rows)
    given = np.zeros(len(program.rows))
    for k, weight in others.items():
        given[k] = float(weight)
    idle = proposal.matrix[lines]
    inside = np.flatnonzero(np.diff(idle.tocsc().indptr))
    if not len(inside):
        return {}
    size = proposal.size or 1.0
    prices = (proposal.costs - proposal.matrix.T @ given)[inside] / size
    turned = idle[:, inside].T.tocsr()
    # Columns: what each row weighs at its low and at its high bound, then the least price.
    matrix = hstack([turned, -turned, csr_array(np.ones((len(inside), 1)))]).tocsr()
    upper = [0.0 if program.low[k] is None else inf for k in lines]
    upper += [0.0 if program.high[k] is None else inf for k in lines]
    cost = np.zeros(len(upper) + 1)
    cost[-1] = -1.0
    found = linear_on(matrix, np.full(len(inside), -inf), prices, cost, np.array([*upper, 1.0]))
    if found.x is None:
        return {}
    weights = (found.x[: len(lines)] - found.x[len(lines) : -1]) * size
    return {k: Fraction(float(weight)) for k, weight in zip(lines, weights, strict=True) if weight}


def _face(program: Sparse, vertex: _Vertex) -> Sparse:
    """The rows of all points as good as the vertex: those with a multiplier are held where they are."""
    low, high = list(program.low), list(program.high)
    for k, weight in vertex.multipliers.items():
        if weight > 0:
            high[k] = low[k]
        else:
            low[k] = high[k]
    return Sparse(width=program.width, rows=program.rows, low=tuple(low), high=tuple(high))


def _is_one_point(face: Sparse, free: frozenset[int], vertex: _Vertex) -> bool:
    """Whether the basis is all that is left, its rows are all held, and it is regular."""
    if not free <= vertex.columns or any(face.low[k] is None or face.low[k] != face.high[k] for k in vertex.rows):
        return False
    place = {j: position for position, j in enumerate(sorted(vertex.columns))}
    return proves_regular([{place[j]: a for j, a in face.rows[k].items() if j in place} for k in vertex.rows])
