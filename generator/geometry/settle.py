"""From float stacks to exact answers: what floats could not decide is decided here, and proofs are written out.

A basis is data enough: the exact point and multipliers on it come from one small system in whole
numbers.  Where the basis leads nowhere, ``decide`` searches (HiGHS, then the exact simplex).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from generator.geometry.checks import proves_infeasible
from generator.geometry.decide import decide_counted
from generator.geometry.elimination import solve_square
from generator.geometry.exact import solve_on_basis
from generator.geometry.integral import Integral, integral
from generator.geometry.program import Answer, Basis, Infeasible, Optimum, Program
from generator.geometry.rigour import Certified
from generator.geometry.simplex import INFEASIBLE, OPTIMAL, Solved, solve
from generator.geometry.stack import Flags, stack_of


@dataclass(frozen=True, slots=True, kw_only=True)
class Tally:
    """How many programs each step decided: ``floats`` with a proven error bound, exact arithmetic on the
    ``basis`` that the stack ended in, exact arithmetic on what ``highs`` proposed, the exact ``simplex``."""

    floats: int = 0
    basis: int = 0
    highs: int = 0
    simplex: int = 0

    @property
    def total(self) -> int:
        """All programs."""
        return self.floats + self.basis + self.highs + self.simplex

    def __add__(self, other: Tally) -> Tally:
        """Both together."""
        return Tally(
            floats=self.floats + other.floats,
            basis=self.basis + other.basis,
            highs=self.highs + other.highs,
            simplex=self.simplex + other.simplex,
        )


def search(program: Program) -> tuple[Answer, Tally]:
    """The exact answer to one program without a stack's basis: HiGHS proposes, else the exact simplex finds it."""
    (answer,), paths = decide_counted([program])
    return answer, Tally(highs=1 - paths.simplex, simplex=paths.simplex)


def basis_of(solved: Solved, k: int) -> Basis:
    """The ending basis of program k of a stack."""
    basic = tuple(sorted(int(column) for column in solved.basic[k]))
    resting = frozenset(int(column) for column in np.flatnonzero(solved.at_upper[k]))
    return Basis(basic, resting - frozenset(basic))


def blocking_on_basis(program: Program, basis: Basis, blocked: int, form: Integral | None = None) -> Infeasible | None:
    """The proof that the basic column or slack ``blocked`` can't keep its bounds, checked; else None.

    Its multipliers are a row of the inverse of the basis, in whole numbers: they use at most as many
    rows as are tight, and one more.
    """
    form = form or integral(program)
    m, n = len(form.rows), len(form.cost)
    if len(basis.basic) != m or blocked not in basis.basic:
        return None
    basic = set(basis.basic)
    inside = [column for column in basis.basic if column < n]
    tight = [k for k in range(m) if n + k not in basic]
    given = [0] * m
    if blocked >= n:
        given[blocked - n] = 1
    # yᵀ·(basic columns) is 0 but for the blocked one; a basic slack's multiplier is 0 but for the blocked one
    right = [int(j == blocked) - sum(g * form.rows[k][j] for k, g in enumerate(given) if g) for j in inside]
    solved = solve_square([[form.rows[k][j] for k in tight] for j in inside], right)
    if solved is None:
        return None
    weights = [weight * solved[1] for weight in given]
    for k, weight in zip(tight, solved[0], strict=True):
        weights[k] = weight
    for sign in (1, -1):
        # what leans on a missing bound is noise of the pivots that the floats took for 0: a proof can do without
        kept = [
            sign * weight if (low if sign * weight > 0 else high) is not None else 0
            for weight, low, high in zip(weights, program.row_low, program.row_high, strict=True)
        ]
        proof = Infeasible(tuple(Fraction(weight * s) for weight, s in zip(kept, form.row_scale, strict=True)))
        if proves_infeasible(program, proof):
            return proof
    return None


def publish(solved: Solved, k: int, program: Program) -> tuple[Answer, Tally]:
    """The exact, checked answer to program k of a stack, and which step led to it."""
    basis = basis_of(solved, k)
    answer: Optimum | Infeasible | None = None
    if solved.status[k] == OPTIMAL:
        answer = solve_on_basis(program, basis)
    elif solved.status[k] == INFEASIBLE:
        answer = blocking_on_basis(program, basis, int(solved.blocked[k]))
    return (answer, Tally(basis=1)) if answer is not None else search(program)


def answer_many(programs: Sequence[Program]) -> tuple[list[Answer], Tally]:
    """The exact answers to programs of any shapes, in their order; those of one shape are solved side by side.

    Which of several optima or proofs is given depends on the program alone, not on its company.
    """
    groups: dict[object, list[int]] = {}
    for place, program in enumerate(programs):
        groups.setdefault((len(program.rows), len(program.cost)), []).append(place)
    answers: dict[int, Answer] = {}
    tally = Tally()
    for places in groups.values():
        solved = solve(stack_of([programs[place] for place in places]), alone=True)
        for k, place in enumerate(places):
            answers[place], step = publish(solved, k, programs[place])
            tally = tally + step
    return [answers[place] for place in range(len(programs))], tally


def settle(
    certified: Certified,
    program_of: Callable[[int], Program],
    *,
    ask_best: bool = True,
    doubtful: Flags | None = None,
) -> tuple[dict[int, Answer], Tally]:
    """Exact answers, by place, for whatever floats did not prove.

    ``ask_best`` false: a proven verdict is enough, the optimum may be a tie.  ``doubtful`` (K,) marks
    programs whose bounds are equal as floats but not in truth: they are decided here in any case.
    """
    proven = certified.decided.copy()
    if ask_best:
        proven &= certified.best | (certified.solved.status != OPTIMAL)
    if doubtful is not None:
        proven &= ~doubtful
    left = [int(k) for k in np.flatnonzero(~proven)]
    answers, tally = answer_many([program_of(k) for k in left])
    return dict(zip(left, answers, strict=True)), tally + Tally(floats=int(proven.sum()))
