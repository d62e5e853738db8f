"""What floats can prove: verdicts of a stack of programs with rounding-error bounds that hold.

A float is an exact rational, so a float multiplier or inverse is as good a witness as any; only the
arithmetic on it rounds.  Each test below computes a quantity and a bound on its error, and decides only
where the quantity exceeds the bound.  What lies within the bound (a share exactly at its limit, say) is
not decided here: it goes to rational arithmetic.

The data are taken to be the floats nearest to exact numbers, each wrong by at most 2⁻⁵³ of itself, and
bounds that are equal as floats to be equal.  Whoever can't promise that marks the program (see ``settle``).

Sources: inner products, |fl(xᵀy) − xᵀy| ≤ γₙ|x|ᵀ|y| in any order of summation, with or without fused
multiply-add (Higham, *Accuracy and Stability of Numerical Algorithms*, 2nd ed., section 3.1); solutions
from an approximate inverse R with ‖I − RB‖ < 1 (Rump, *Verification methods*, Acta Numerica 2010, section
10.8); safe bounds of a linear program from any multipliers (Neumaier and Shcherbina 2004).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from generator.geometry.batched import basis_columns, rows_times, times, times_columns
from generator.geometry.simplex import (
    INFEASIBLE,
    OPTIMAL,
    Solved,
    Start,
    solve_scaled,
    unscaled,
)
from generator.geometry.stack import Flags, Floats, Indices, Stack, scaled

_UNIT = 2.0**-53
#: Error bounds are themselves sums of fewer than 4,096 rounded terms: this factor makes up for it.
_UP = 1.0 + 2.0**-40
#: Added to every bound against underflow; data are about 1.
_TINY = 1e-290
#: Programs certified together: so many that their arrays stay in the processor's cache.
_CHUNK = 60_000


@dataclass(frozen=True, slots=True, kw_only=True)
class Certified:
    """K programs solved, and what is proven of them.

    ``decided`` (K,): the status is proven (feasible where optimal, else infeasible).  ``best`` (K,): the
    basis is proven optimal, and the only optimal one.  ``least`` and ``most`` (K,): the optimum is
    proven to lie between them (−inf and +inf where nothing is proven).
    """

    solved: Solved
    decided: Flags
    best: Flags
    least: Floats
    most: Floats


def gamma(terms: int) -> float:
    """γ_k = k·u/(1 − k·u), rounded up."""
    return terms * _UNIT / (1.0 - terms * _UNIT) * _UP


def solve_certified(stack: Stack, start: Start | None = None, *, alone: bool = False) -> Certified:
    """Solve the stack (``alone`` as in ``simplex.solve_scaled``) and certify what floats can."""
    inner, scales = scaled(stack)
    found = solve_scaled(inner, start, alone=alone)
    proven = certify(inner, found)
    unit = scales.x / scales.cost
    return Certified(
        solved=unscaled(found, scales),
        decided=proven.decided,
        best=proven.best,
        least=proven.least * unit,
        most=proven.most * unit,
    )


def certify(stack: Stack, solved: Solved) -> Certified:
    """What is proven of the answers ``solved`` to ``stack``, both scaled to about 1 (see ``stack.scaled``)."""
    count = stack.count
    decided, best = np.zeros(count, dtype=np.bool_), np.zeros(count, dtype=np.bool_)
    least, most = np.full(count, -np.inf), np.full(count, np.inf)
    m, n = stack.shape
    size = max(16, _CHUNK // (n + m + m * m + 1))
    sizes = np.abs(stack.rows)
    empty = np.flatnonzero(solved.status == INFEASIBLE)
    for which in np.split(empty, range(size, empty.size, size)):
        part = stack.some(which)
        decided[which] = _blocks(part, sizes if stack.is_shared else sizes[which], solved.multipliers[which])
    found = np.flatnonzero(solved.status == OPTIMAL)
    for which in np.split(found, range(size, found.size, size)) if found.size else ():
        ended = _Ended.read(stack, solved, which)
        with np.errstate(all="ignore"):  # of a hopeless inverse nothing is claimed, whatever comes out
            decided[which], best[which], least[which], most[which] = _vertex(ended)
    return Certified(solved=solved, decided=decided, best=best, least=least, most=most)


def blocks(stack: Stack, multipliers: Floats) -> Flags:
    """Whether multipliers (K, m) of any origin prove their programs infeasible: (K,), True only where proven."""
    inner, scales = scaled(stack)
    return _blocks(inner, np.abs(inner.rows), multipliers / scales.row)


def _blocks(stack: Stack, sizes: Floats, multipliers: Floats) -> Flags:
    """Σ y_k·bound_k − max over the box of (yᵀ·rows)·x > the error bound; or bounds that cross."""
    m, n = stack.shape
    bound = np.where(multipliers > 0, stack.row_low, stack.row_high)
    # a multiplier that leans on a missing bound is dropped: any multipliers of the right signs will do
    usable = np.isfinite(bound) & (multipliers != 0)
    y, bound = np.where(usable, multipliers, 0.0), np.where(usable, bound, 0.0)
    score, size = times_columns(y, stack.rows), times_columns(np.abs(y), sizes)
    slip = gamma(m + 2) * size
    open_up = np.isinf(stack.upper) & (score + slip > 0)
    open_down = np.isinf(stack.lower) & (score - slip < 0)
    upper = np.where(np.isfinite(stack.upper), stack.upper, 0.0)
    lower = np.where(np.isfinite(stack.lower), stack.lower, 0.0)
    reach = np.maximum(score * lower, score * upper)
    width = np.maximum(np.abs(lower), np.abs(upper))
    gain = np.einsum("km,km->k", y, bound) - reach.sum(axis=1)
    error = gamma(m + n + 6) * (np.einsum("km,km->k", np.abs(y), np.abs(bound)) + np.einsum("kn,kn->k", size, width))
    proven = (gain > error * _UP + _TINY) & ~(open_up | open_down).any(axis=1)
    # rounding to floats keeps order: bounds that cross as floats cross
    crossed = (stack.lower > stack.upper).any(axis=1) | (stack.row_low > stack.row_high).any(axis=1)
    return np.asarray(proven | crossed, dtype=np.bool_)


@dataclass(frozen=True, slots=True)
class _Ended:
    """Programs at their ending bases: [rows | −1], all bounds, and v = (x, row values) with the basic ones refined."""

    matrix: Floats
    low: Floats
    high: Floats
    cost: Floats
    basic: Indices
    at_upper: Flags
    inverse: Floats

    @staticmethod
    def read(stack: Stack, solved: Solved, which: Indices) -> _Ended:
        m = stack.shape[0]
        rows = stack.rows if stack.is_shared else stack.rows[which]
        eye = np.broadcast_to(-np.eye(m), (*rows.shape[:-2], m, m))
        return _Ended(
            matrix=np.concatenate([rows, eye], axis=-1),
            low=np.concatenate([stack.lower[which], stack.row_low[which]], axis=1),
            high=np.concatenate([stack.upper[which], stack.row_high[which]], axis=1),
            cost=np.concatenate([stack.cost[which], np.zeros((which.size, m))], axis=1),
            basic=solved.basic[which],
            at_upper=solved.at_upper[which],
            inverse=solved.inverse[which],
        )


def _vertex(ended: _Ended) -> tuple[Flags, Flags, Floats, Floats]:
    """(feasible, best, least, most) of programs that ended at a basis."""
    sizes = np.abs(ended.matrix)
    spread = _inverse_error(ended)
    rest = np.where(ended.at_upper, ended.high, ended.low)
    np.put_along_axis(rest, ended.basic, 0.0, axis=1)
    grounded = np.isfinite(rest).all(axis=1) & (spread < 0.5)
    rest = np.where(np.isfinite(rest), rest, 0.0)
    v, error = _basic_values(ended, sizes, rest, spread)
    feasible = grounded & _inside(ended, v, error)
    signed, least = _prices(ended, sizes, spread)
    most = np.einsum("kn,kn->k", ended.cost, v)
    slip = np.take_along_axis(np.abs(ended.cost), ended.basic, axis=1)
    slip = np.einsum("km,km->k", slip, error) + gamma(v.shape[1] + 3) * np.einsum("kn,kn->k", abs(ended.cost), abs(v))
    most = np.where(feasible, most + slip * _UP + _TINY, np.inf)
    return feasible, feasible & signed, least, most


def _inverse_error(ended: _Ended) -> Floats:
    """A bound on ‖I − R·B‖∞ for the exact basis B: (K,)."""
    bases = basis_columns(ended.matrix, ended.basic)
    m = bases.shape[1]
    if not m:
        return np.zeros(bases.shape[0])
    off = np.abs(np.eye(m) - np.matmul(ended.inverse, bases)).sum(axis=2)
    size = np.matmul(np.abs(ended.inverse), np.abs(bases).sum(axis=2)[:, :, None])[:, :, 0]
    return np.asarray((off + gamma(2 * m + 4) * (1.0 + size)).max(axis=1) * _UP, dtype=np.float64)


def _basic_values(ended: _Ended, sizes: Floats, rest: Floats, spread: Floats) -> tuple[Floats, Floats]:
    """All values (K, N), the basic ones close to the exact ones, and the bound (K, m) on their error."""
    basic = -times(ended.inverse, rows_times(ended.matrix, rest))
    v = rest.copy()
    np.put_along_axis(v, ended.basic, basic, axis=1)
    residual = rows_times(ended.matrix, v)
    slip = gamma(v.shape[1] + 3) * rows_times(sizes, np.abs(v))
    m = basic.shape[1]
    size = times(np.abs(ended.inverse), slip + gamma(m + 2) * np.abs(residual))
    first = np.abs(times(ended.inverse, residual)) + size
    factor = spread / (1.0 - np.minimum(spread, 0.5))  # where spread ≥ 1/2 nothing is claimed
    error = first + factor[:, None] * first.max(axis=1, initial=0.0)[:, None]
    return v, error * _UP


def _inside(ended: _Ended, v: Floats, error: Floats) -> Flags:
    """Whether every basic column is inside its bounds beyond the error."""
    value = np.take_along_axis(v, ended.basic, axis=1)
    low = np.take_along_axis(ended.low, ended.basic, axis=1)
    high = np.take_along_axis(ended.high, ended.basic, axis=1)
    margin = error + 4 * _UNIT * np.abs(value) + _TINY
    above = np.isinf(low) | (value - low > margin + 4 * _UNIT * np.abs(np.where(np.isinf(low), 0.0, low)))
    below = np.isinf(high) | (high - value > margin + 4 * _UNIT * np.abs(np.where(np.isinf(high), 0.0, high)))
    return np.asarray((above & below).all(axis=1), dtype=np.bool_)


def _prices(ended: _Ended, sizes: Floats, spread: Floats) -> tuple[Flags, Floats]:
    """(every reduced cost has its sign beyond the error, proven lower bound of the optimum), (K,) each."""
    m = ended.basic.shape[1]
    y = np.matmul(np.take_along_axis(ended.cost, ended.basic, axis=1)[:, None, :], ended.inverse)[:, 0]
    y = _without_basic_slacks(y, ended)
    reduced = ended.cost - times_columns(y, ended.matrix)
    slip = gamma(m + 3) * (np.abs(ended.cost) + times_columns(np.abs(y), sizes))
    left = np.take_along_axis(np.abs(reduced) + slip, ended.basic, axis=1)
    factor = spread / (1.0 - np.minimum(spread, 0.5))  # where spread ≥ 1/2 nothing is claimed
    y_error = np.matmul((left + (factor * left.sum(axis=1))[:, None])[:, None, :], np.abs(ended.inverse))[:, 0]
    error = (slip + times_columns(y_error, sizes)) * _UP + _TINY
    right = np.where(ended.at_upper, -reduced, reduced) > error
    np.put_along_axis(right, ended.basic, True, axis=1)
    signed = (right | (ended.low == ended.high)).all(axis=1)
    return signed, _safe_least(ended, reduced, slip)


def _without_basic_slacks(y: Floats, ended: _Ended) -> Floats:
    """The multipliers with those of basic slacks exactly 0, as they are in exact arithmetic."""
    m = y.shape[1]
    slack = ended.basic - (ended.low.shape[1] - m)
    padded = np.concatenate([y, np.zeros((y.shape[0], 1))], axis=1)
    np.put_along_axis(padded, np.where(slack >= 0, slack, m), 0.0, axis=1)
    return padded[:, :m]


def _safe_least(ended: _Ended, reduced: Floats, slip: Floats) -> Floats:
    """Σ of the least reduced·v over the box, less its error: every feasible v costs at least that."""
    n = reduced.shape[1] - ended.basic.shape[1]
    slip = np.concatenate([slip[:, :n], np.zeros_like(slip[:, n:])], axis=1)  # a slack's is its multiplier, unrounded
    up, down = reduced + slip, reduced - slip
    low, high = ended.low, ended.high
    # with row values as columns the optimum is exactly Σ reduced_j·v_j, since yᵀ·(rows·x − values) = 0
    worst = np.minimum(_product(down, low), _product(up, low))
    worst = np.minimum(worst, np.minimum(_product(down, high), _product(up, high)))
    total = worst.sum(axis=1)
    size = np.where(np.isfinite(worst), np.abs(worst), 0.0).sum(axis=1)
    return np.asarray(total - gamma(worst.shape[1] + 6) * size * _UP - _TINY, dtype=np.float64)


def _product(price: Floats, bound: Floats) -> Floats:
    """price·bound, 0 where the price is 0 though the bound be infinite."""
    with np.errstate(invalid="ignore"):
        return np.where(price == 0.0, 0.0, price * bound)
