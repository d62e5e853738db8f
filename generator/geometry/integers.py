"""Small programs in which some columns are whole numbers: HiGHS searches, exact arithmetic answers.

``scipy.optimize.milp`` proposes the whole numbers; they are rounded and fixed, and the program that is
left is decided exactly, so the point returned is exactly feasible and the best for those whole numbers.
That no other whole numbers are better is the search's claim: its bound and gap are reported with it.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from fractions import Fraction
from math import ceil, floor, inf
from typing import Any, Literal

import numpy as np
from scipy.optimize import Bounds, LinearConstraint, milp

from generator.geometry.decide import decide
from generator.geometry.program import Infeasible, Optimum, Program, Vector
from generator.geometry.stack import scaled, stack_of

#: Statuses of milp: 0 optimal, 1 a limit was reached, 2 infeasible; the others say nothing certain.
_OPTIMAL, _LIMIT, _INFEASIBLE = 0, 1, 2


@dataclass(frozen=True, slots=True, kw_only=True)
class Whole:
    """The best point found with the columns asked for whole.

    ``status`` "best": the search claims that nothing is better (``bound`` says how sure); "found": a
    limit of effort was reached, better ones may exist; "none": the search claims that there is no
    point; "unknown": a limit was reached, or numbers failed, before any point was found.  ``x`` is
    exactly feasible and ``value`` its cost (None without a point).  ``bound``: nothing costs less, as
    the search says in floats (−inf where it doesn't say).
    """

    status: Literal["best", "found", "none", "unknown"]
    x: Vector | None
    value: Fraction | None
    bound: float

    @property
    def gap(self) -> float:
        """By how much a better point could undercut ``value``: ≥ 0, inf where nothing is known."""
        return inf if self.value is None else max(0.0, float(self.value) - self.bound)


def solve_whole(program: Program, whole: Iterable[int], *, nodes: int = 20_000, seconds: float = 60.0) -> Whole:
    """The least cost with the columns ``whole`` whole numbers.

    ``nodes`` limits the search by a count, so that the same input gives the same answer; ``seconds``
    is the last guard.
    """
    columns = sorted(set(whole))
    if not columns:
        return _without_whole(program)
    result, cost_scale = _search(program, columns, nodes, seconds)
    bound = getattr(result, "mip_dual_bound", None)
    least = -inf if bound is None or not np.isfinite(bound) else float(bound) / cost_scale
    if result.status == _INFEASIBLE:
        return Whole(status="none", x=None, value=None, bound=inf)
    if result.x is None:
        return Whole(status="unknown", x=None, value=None, bound=least)
    exact = _fixed(program, columns, [float(result.x[j]) for j in columns])
    if exact is None:
        return Whole(status="unknown", x=None, value=None, bound=least)
    status: Literal["best", "found"] = "best" if result.status == _OPTIMAL else "found"
    return Whole(status=status, x=exact.x, value=exact.value, bound=least)


def _without_whole(program: Program) -> Whole:
    """A program without whole columns is decided exactly."""
    answer = decide(program)
    if isinstance(answer, Optimum):
        return Whole(status="best", x=answer.x, value=answer.value, bound=float(answer.value))
    return Whole(status="none" if isinstance(answer, Infeasible) else "unknown", x=None, value=None, bound=-inf)


def _search(program: Program, columns: list[int], nodes: int, seconds: float) -> tuple[Any, float]:
    """What milp finds on rows and costs of about 1, and by how much costs were multiplied."""
    stack, scales = scaled(stack_of([program]))
    # whole columns keep their unit: only rows and costs are scaled
    x = float(scales.x[0])
    integrality = np.zeros(len(program.cost), dtype=np.int64)
    integrality[columns] = 1
    lower, upper = stack.lower[0] * x, stack.upper[0] * x
    lower[columns], upper[columns] = np.ceil(lower[columns]), np.floor(upper[columns])
    if (lower > upper).any():
        return _Nothing(), 1.0
    constraints = [LinearConstraint(stack.rows, stack.row_low[0] * x, stack.row_high[0] * x)] if program.rows else []
    result = milp(
        stack.cost[0],
        integrality=integrality,
        bounds=Bounds(lower, upper),
        constraints=constraints,
        options={"mip_rel_gap": 0.0, "node_limit": nodes, "time_limit": seconds},
    )
    return result, float(scales.cost[0])


@dataclass(frozen=True, slots=True)
class _Nothing:
    """milp's answer where the bounds of a whole column have no whole number between them."""

    status: int = _INFEASIBLE
    x: None = None


def _fixed(program: Program, columns: list[int], values: list[float]) -> Optimum | None:
    """The exact optimum with the whole columns fixed at the rounded values; None where those don't hold exactly.

    Each value is within rounding of a whole number, which exact bounds may exclude by as little.
    """
    lower, upper = list(program.lower), list(program.upper)
    for j, value in zip(columns, values, strict=True):
        low, high = lower[j], upper[j]
        number = Fraction(round(value))
        if low is not None and number < low:
            number = Fraction(ceil(low))
        if high is not None and number > high:
            number = Fraction(floor(high))
        lower[j] = upper[j] = number
    answer = decide(replace(program, lower=tuple(lower), upper=tuple(upper)))
    return answer if isinstance(answer, Optimum) else None
