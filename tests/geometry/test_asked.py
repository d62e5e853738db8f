"""Questions answered side by side agree with one asked alone and exactly, whatever they want."""

from __future__ import annotations

import random
from fractions import Fraction

import pytest

from generator.geometry import asked
from generator.geometry.asked import Point, Proven, Question, answer_all
from generator.geometry.bland import exact_simplex
from generator.geometry.checks import proves_infeasible, proves_optimum
from generator.geometry.program import Infeasible, Optimum, Program, Unbounded


def drawn(seed: int) -> Program:
    """A small program full of ties; some are empty, some without a least value."""
    pick = random.Random(seed)
    n, m = pick.randint(1, 6), pick.randint(1, 4)
    rows = tuple(tuple(Fraction(pick.randint(-3, 3)) for _ in range(n)) for _ in range(m))
    low = tuple(Fraction(pick.randint(-4, 2)) if pick.random() < 0.6 else None for _ in rows)
    return Program(
        rows=rows,
        row_low=low,
        row_high=tuple((value or 0) + Fraction(pick.randint(0, 3)) if pick.random() < 0.6 else None for value in low),
        lower=tuple(Fraction(pick.randint(-1, 1)) if pick.random() < 0.9 else None for _ in range(n)),
        upper=tuple(Fraction(pick.randint(1, 4)) if pick.random() < 0.7 else None for _ in range(n)),
        cost=tuple(Fraction(pick.randint(-3, 3)) for _ in range(n)),
    )


PROGRAMS = [drawn(seed) for seed in range(400)]


def test_verdicts_and_values_are_exact() -> None:
    """Verdict, best value and proof of 400 programs are those of the exact simplex method."""
    wants = ("verdict", "best", "prices", "proof")
    replies = answer_all([Question(program, want) for program in PROGRAMS for want in wants])
    for k, program in enumerate(PROGRAMS):
        exact = exact_simplex(program)
        verdict, best, prices, proof = replies[4 * k : 4 * k + 4]
        assert verdict is not isinstance(exact, Infeasible)
        assert isinstance(prices, Proven)
        assert isinstance(proof, Proven)
        assert type(prices.answer) is type(proof.answer) is type(exact)
        if isinstance(exact, Optimum):
            assert isinstance(best, Point)
            assert best.value == prices.answer.value == proof.answer.value == exact.value
            assert proves_optimum(program, prices.answer)
            assert proves_optimum(program, proof.answer)
            if proof.is_only:
                assert best.x == proof.answer.x == exact.x
        elif isinstance(exact, Unbounded):
            assert isinstance(best, Unbounded)
        else:
            assert best is None
            assert proves_infeasible(program, proof.answer)


def test_company_changes_nothing() -> None:
    """The same question comes back with the same point and multipliers alone as among 400."""
    among = answer_all([Question(program, "proof") for program in PROGRAMS])
    for k in range(0, len(PROGRAMS), 20):
        assert answer_all([Question(PROGRAMS[k], "proof")]) == [among[k]]


def test_many_rows_are_asked_one_by_one(monkeypatch: pytest.MonkeyPatch) -> None:
    """Programs of more rows than the stack is for have the same verdicts and values."""
    questions = [Question(program, "best") for program in PROGRAMS[:60]]
    usual = answer_all(questions)
    monkeypatch.setattr(asked, "_MANY_ROWS", 0)
    for one, other in zip(usual, answer_all(questions), strict=True):
        assert type(one) is type(other)
        if isinstance(one, Point):
            assert isinstance(other, Point)
            assert one.value == other.value
