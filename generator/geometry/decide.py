"""Decide programs: floating point proposes, exact arithmetic disposes.

Every answer returned has passed its checker in :mod:`generator.geometry.checks`, is a basic one (at
most as many columns strictly between their bounds as rows are tight), and depends on the program and
the hint alone.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Literal

from generator.geometry.checks import proves_infeasible, proves_optimum, proves_unbounded
from generator.geometry.exact import exact_simplex, farkas_on_basis, rounded_farkas, solve_on_basis
from generator.geometry.integral import Integral, integral
from generator.geometry.program import Answer, Basis, Infeasible, Optimum, Program
from generator.geometry.propose import Proposal, highs

Proposer = Callable[[Program], Proposal]
Path = Literal["hint", "basis", "farkas", "rounded", "simplex"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Paths:
    """How many programs were decided in which way.

    ``hint``: on the caller's basis; ``basis``: on the proposed optimal basis; ``farkas``: by the
    multipliers of the proposed infeasible basis; ``rounded``: by the proposed multipliers, rounded;
    ``simplex``: by the exact simplex method.
    """

    hint: int = 0
    basis: int = 0
    farkas: int = 0
    rounded: int = 0
    simplex: int = 0


def decide(program: Program, hint: Basis | None = None) -> Answer:
    """The proven answer to one program; ``hint`` is a basis to try first (of a neighbouring program)."""
    return _decided(program, hint, highs)[0]


def decide_many(programs: Sequence[Program]) -> list[Answer]:
    """The proven answers to many programs, in their order."""
    return decide_counted(programs)[0]


def decide_counted(
    programs: Sequence[Program], hints: Sequence[Basis | None] | None = None, proposer: Proposer | None = None
) -> tuple[list[Answer], Paths]:
    """As :func:`decide_many`, with a count of how each was decided; ``proposer`` replaces HiGHS."""
    given = hints if hints is not None else [None] * len(programs)
    decided = [_decided(program, hint, proposer or highs) for program, hint in zip(programs, given, strict=True)]
    ways = [path for _, path in decided]
    paths = Paths(
        hint=ways.count("hint"),
        basis=ways.count("basis"),
        farkas=ways.count("farkas"),
        rounded=ways.count("rounded"),
        simplex=ways.count("simplex"),
    )
    return [answer for answer, _ in decided], paths


def from_proposal(program: Program, proposal: Proposal, form: Integral | None = None) -> tuple[Answer, Path] | None:
    """The proven answer that a proposal leads to without any search; None if it leads to none."""
    form = form or integral(program)
    answer: Answer | None
    if proposal.basis is not None and proposal.status == "feasible":
        answer = solve_on_basis(program, proposal.basis, form)
        return None if answer is None else (answer, "basis")
    if proposal.basis is not None and proposal.status == "infeasible":
        answer = farkas_on_basis(program, proposal.basis, proposal.weights, form)
        if answer is not None:
            return answer, "farkas"
    if proposal.weights is not None and proposal.status == "infeasible":
        answer = rounded_farkas(program, proposal.weights)
        return None if answer is None else (answer, "rounded")
    return None


def _decided(program: Program, hint: Basis | None, proposer: Proposer) -> tuple[Answer, Path]:
    form = integral(program)
    if hint is not None:
        answer: Answer | None = solve_on_basis(program, hint, form) or farkas_on_basis(program, hint, None, form)
        if answer is not None:
            return answer, "hint"
    return from_proposal(program, proposer(program), form) or (_searched(program, form), "simplex")


def _searched(program: Program, form: Integral) -> Answer:
    """The exact simplex method's answer, which is checked like any other."""
    answer = exact_simplex(program, form)
    if isinstance(answer, Optimum):
        proven = proves_optimum(program, answer)
    elif isinstance(answer, Infeasible):
        proven = proves_infeasible(program, answer)
    else:
        proven = proves_unbounded(program, answer)
    if not proven:
        raise ArithmeticError(f"the exact simplex method and its checker disagree on {program!r}: {answer!r}")
    return answer
