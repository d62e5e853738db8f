"""A stack of small linear programs: scaled, cut into chunks that fit the cache, each chunk started well.

The work is done in ``lockstep``.  Nothing here is a proof: see ``rigour``.
"""

from __future__ import annotations

from dataclasses import fields

import numpy as np

from generator.geometry.batched import fractions_of_gold
from generator.geometry.lockstep import INFEASIBLE, OPTIMAL, UNFINISHED, Solved, Start, boxed, solve_chunk
from generator.geometry.stack import FAR, Floats, Indices, Scales, Stack, scaled

__all__ = ["INFEASIBLE", "OPTIMAL", "UNFINISHED", "Solved", "Start", "solve", "solve_scaled", "unscaled"]

#: Entries of one working array: chunks of about this size stay in the processor's cache (measured).
_CHUNK = 100_000
#: Programs that start cold, so that the others have bases to start from (measured: 32 to 96 do alike).
_FIRST = 64


def solve(stack: Stack, start: Start | None = None, *, alone: bool = False) -> Solved:
    """Solve all programs of the stack, from ``start`` where given; ``alone`` as in :func:`solve_scaled`."""
    inner, scales = scaled(stack)
    return unscaled(solve_scaled(inner, start, alone=alone), scales)


def solve_scaled(stack: Stack, start: Start | None = None, *, alone: bool = False) -> Solved:
    """Solve programs whose rows, bounds and costs are about 1.

    With shared rows and no start given, a first few programs are solved cold, and each later one
    starts from that basis found so far whose multipliers promise the highest bound on its optimum.
    ``alone`` forgoes that: then which of several equally good ends a program comes to depends on
    itself only, not on its company.
    """
    m, n = stack.shape
    size = max(16, _CHUNK // (n + m + m * m + 1))
    if alone or start is not None or not stack.is_shared or stack.count < 3 * _FIRST:
        sizes = range(size, stack.count, size)
        parts = [
            solve_chunk(stack.some(which), None if start is None else start.some(which))
            for which in np.split(np.arange(stack.count), sizes)
        ]
        return parts[0] if len(parts) == 1 else _joined(parts)
    return _solve_in_turn(stack, size)


def _solve_in_turn(stack: Stack, size: int) -> Solved:
    """Chunk after chunk, each starting from the best of the bases that the chunks before ended in."""
    kind = _kinds(stack.cost)
    # the first few are spread evenly over all, whatever the order of the questions
    order = np.argsort(fractions_of_gold(stack.count), kind="stable")
    parts: list[Solved] = []
    begin = 0
    while begin < stack.count:
        which = order[begin : begin + (_FIRST if not parts else size)]
        part = stack.some(which)
        start = None
        if parts:
            start = _promising(part, kind[which], _joined(parts[-2:]), stack, kind, order[:begin])
        parts.append(solve_chunk(part, start))
        begin += which.size
    return _some(_joined(parts), np.argsort(order, kind="stable"))


def _kinds(costs: Floats) -> Indices:
    """A number for each row of the table, equal for equal rows: (K,)."""
    if costs.strides[0] == 0:
        return np.zeros(costs.shape[0], dtype=np.int64)
    seen: dict[bytes, int] = {}
    return np.array([seen.setdefault(row.tobytes(), len(seen)) for row in costs], dtype=np.int64)


def _promising(part: Stack, kind: Indices, ended: Solved, stack: Stack, kinds: Indices, done: Indices) -> Start:
    """For each program of ``part`` the ended basis, of the same costs, with the highest dual value at its bounds."""
    pool = done[-ended.status.size :]
    n = stack.shape[1]
    cost = np.concatenate([stack.cost[pool], np.zeros((pool.size, stack.shape[0]))], axis=1)
    y = np.matmul(np.take_along_axis(cost, ended.basic, axis=1)[:, None, :], ended.inverse)[:, 0]
    reduced = cost[:, :n] - y @ stack.rows
    lower, upper = np.maximum(stack.lower[pool], -FAR), np.minimum(stack.upper[pool], FAR)
    value = np.minimum(reduced * lower, reduced * upper).sum(axis=1)
    box = boxed(part)
    promise = box.low[:, n:] @ np.maximum(y, 0.0).T + box.high[:, n:] @ np.minimum(y, 0.0).T + value
    promise[kind[:, None] != kinds[pool]] = -np.inf
    best = promise.argmax(axis=1)
    return Start(ended.basic[best], ended.at_upper[best], ended.inverse[best])


def _some(solved: Solved, which: Indices) -> Solved:
    """The answers of ``which``, in that order."""
    return Solved(**{field.name: getattr(solved, field.name)[which] for field in fields(Solved)})


def unscaled(solved: Solved, scales: Scales) -> Solved:
    """The same answers in the units of the program before ``scaled`` (``inverse`` stays scaled)."""
    of_cost = np.where(solved.status == INFEASIBLE, 1.0, scales.cost)[:, None]
    return Solved(
        status=solved.status,
        x=solved.x * scales.x[:, None],
        value=solved.value * scales.x / scales.cost,
        multipliers=solved.multipliers * scales.row / of_cost,
        basic=solved.basic,
        at_upper=solved.at_upper,
        inverse=solved.inverse,
        iterations=solved.iterations,
        blocked=solved.blocked,
    )


def _joined(parts: list[Solved]) -> Solved:
    """The chunks one after another."""
    return Solved(
        **{field.name: np.concatenate([getattr(part, field.name) for part in parts]) for field in fields(Solved)}
    )
