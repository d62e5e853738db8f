"""Questions of any shapes answered side by side, each as far as it is wanted: a verdict, a best point, a proof.

Programs of one shape go through the stack solver together.  What its floats prove is not proven again: a
verdict with an error bound is a verdict, and a basis that is proven to be the only best one only has its
point worked out in whole numbers.  Which answer is given depends on the question alone, not on its company.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

from generator.geometry.exact import point_on_basis, solve_on_basis, vertex_on_basis
from generator.geometry.integral import Memory, integral
from generator.geometry.program import Answer, Infeasible, Optimum, Program, Unbounded, Vector
from generator.geometry.rigour import Certified, solve_certified
from generator.geometry.settle import basis_of, blocking_on_basis, search
from generator.geometry.simplex import INFEASIBLE, OPTIMAL
from generator.geometry.stack import doubtful, stack_of

#: Programs of more rows are left to HiGHS: the stack keeps a dense inverse for each.
_MANY_ROWS = 60


@dataclass(frozen=True, slots=True)
class Question:
    """A program, and what of its answer is wanted.

    ``verdict``: whether there is a feasible point (bool).  ``best``: a :class:`Point`.  ``prices``: the answer
    with its multipliers.  ``proof``: likewise, always checked in exact arithmetic, as what is published is.
    """

    program: Program
    wants: Literal["verdict", "best", "prices", "proof"]


@dataclass(frozen=True, slots=True)
class Point:
    """The exact best point; ``is_only``: proven to be the only one (False where that is not known)."""

    x: Vector
    value: Fraction
    is_only: bool


@dataclass(frozen=True, slots=True)
class Proven:
    """An answer and its multipliers; ``is_only``: proven to be the only optimum (False where that is not known)."""

    answer: Answer
    is_only: bool


#: What a question comes back with: by what it wants, with None for an infeasible program and Unbounded for
#: one without a least value where a best point was wanted.
Reply = bool | Point | Proven | Unbounded | None


def answer_all(questions: Sequence[Question], memory: Memory | None = None) -> list[Reply]:
    """The replies to the questions, in their order; ``memory`` of earlier ones about the same rows spares work."""
    groups: dict[tuple[int, int], list[int]] = {}
    for place, question in enumerate(questions):
        shape = len(question.program.rows), len(question.program.cost)
        groups.setdefault(shape, []).append(place)
    replies: list[Reply] = [None] * len(questions)
    memory = memory or Memory()
    for shape, places in groups.items():
        asked = [questions[place] for place in places]
        if shape[0] > _MANY_ROWS:
            for place in places:
                replies[place] = _reply_of(questions[place], search(questions[place].program)[0], is_only=False)
            continue
        for place, reply in zip(places, _answered(asked, memory), strict=True):
            replies[place] = reply
    return replies


def _answered(questions: Sequence[Question], memory: Memory) -> list[Reply]:
    programs = [question.program for question in questions]
    stack = stack_of(programs)
    certified = solve_certified(stack, alone=True)
    unsure = doubtful(programs, stack)
    return [_reply(question, certified, k, bool(unsure[k]), memory) for k, question in enumerate(questions)]


def _reply(question: Question, certified: Certified, k: int, is_unsure: bool, memory: Memory) -> Reply:
    is_decided = bool(certified.decided[k]) and not is_unsure
    is_empty = is_decided and certified.solved.status[k] == INFEASIBLE
    is_only = bool(certified.best[k]) and not is_unsure
    if question.wants == "verdict" and is_decided:
        return not is_empty
    if question.wants == "best" and is_empty:
        return None
    if question.wants == "best" and is_only:
        found = point_on_basis(question.program, basis_of(certified.solved, k), integral(question.program, memory))
        if found is not None:
            return Point(found[0], found[1], is_only=True)
    if question.wants == "prices" and certified.solved.status[k] == OPTIMAL:
        form = integral(question.program, memory)
        optimum = vertex_on_basis(question.program, basis_of(certified.solved, k), form, is_best=not is_only)
        if optimum is not None:
            return Proven(optimum, is_only)
    return _reply_of(question, _published(question.program, certified, k, memory), is_only)


def _reply_of(question: Question, answer: Answer, is_only: bool) -> Reply:
    """What is wanted of an exact answer."""
    if question.wants in ("prices", "proof"):
        return Proven(answer, is_only)
    if question.wants == "verdict":
        return not isinstance(answer, Infeasible)
    if isinstance(answer, Optimum):
        return Point(answer.x, answer.value, is_only)
    return answer if isinstance(answer, Unbounded) else None


def _published(program: Program, certified: Certified, k: int, memory: Memory) -> Answer:
    """The exact, checked answer on the basis that the floats ended in; where that leads nowhere, by a search."""
    solved, form = certified.solved, integral(program, memory)
    answer: Answer | None = None
    if solved.status[k] == OPTIMAL:
        answer = solve_on_basis(program, basis_of(solved, k), form)
    elif solved.status[k] == INFEASIBLE:
        answer = blocking_on_basis(program, basis_of(solved, k), int(solved.blocked[k]), form)
    return search(program)[0] if answer is None else answer
