"""Computations that wait for answers together: each gets its own replies, whoever waits beside it."""

from __future__ import annotations

from fractions import Fraction

import pytest

from generator.findings.ask import ask_best, ask_nothing, ask_possible, both, run, together
from generator.geometry.asked import Point
from generator.geometry.program import Program


def at_least(*lows: int) -> Program:
    """Least sum of columns that each have a low bound; no rows but one that asks for nothing."""
    n = len(lows)
    one = (Fraction(1),) * n
    return Program(
        rows=(one,),
        row_low=(None,),
        row_high=(Fraction(100),),
        lower=tuple(map(Fraction, lows)),
        upper=(None,) * n,
        cost=one,
    )


def ask_sum(*lows: int):
    """The least sum, then that of one column that must be above it, if that is not more than 100."""
    first = yield from ask_best(at_least(*lows))
    assert isinstance(first, Point)
    fits = yield from ask_possible(at_least(int(first.value) + 1))
    if not fits:
        return first.value, None
    second = yield from ask_best(at_least(int(first.value) + 1))
    assert isinstance(second, Point)
    return first.value, second.value


def test_each_computation_gets_its_own_replies() -> None:
    """Computations of different lengths and shapes end as they would alone."""
    asked = [(1, 2), (3,), (5, 6, 7), (60, 40), (2, 2)]
    alone = [run(ask_sum(*lows)) for lows in asked]
    assert alone == [(3, 4), (3, 4), (18, 19), (100, None), (4, 5)]
    assert run(together([ask_sum(*lows) for lows in asked])) == alone


def test_a_computation_that_waits_for_nothing_is_at_its_end() -> None:
    """A value that is there already takes part, and so do none at all."""
    assert run(both(ask_nothing("there"), ask_sum(1, 2))) == ("there", (3, 4))
    assert run(together([])) == []


def test_what_one_raises_reaches_whoever_waits_for_all() -> None:
    """An exception in one computation ends those that wait with it."""

    def ask_failing():
        yield from ask_possible(at_least(1))
        raise ValueError("no shares")

    with pytest.raises(ValueError, match="no shares"):
        run(both(ask_failing(), ask_sum(1, 2)))
