"""Computations that wait for answers, run side by side so that what they all wait for is asked at once.

A computation is a generator: it yields the questions that it waits for and is sent their replies, in their
order.  Functions that give one are named ``ask_…`` and read like plain ones, with ``yield from`` where a
plain one would call the solver.  :func:`run` drives one to its end; :func:`together` and :func:`both` make
one of several, which wait together.
"""

from __future__ import annotations

from collections.abc import Callable, Generator, Sequence
from functools import wraps
from typing import ParamSpec, TypeVar, cast

from generator.geometry.asked import Point, Proven, Question, Reply, answer_all
from generator.geometry.integral import Memory
from generator.geometry.program import Answer, Program, Unbounded

T = TypeVar("T")
S = TypeVar("S")
P = ParamSpec("P")

Asking = Generator[list[Question], list[Reply], T]


def ask_possible(program: Program) -> Asking[bool]:
    """Whether any point is feasible, proven."""
    (reply,) = yield [Question(program, "verdict")]
    return cast(bool, reply)


def ask_best(program: Program) -> Asking[Point | Unbounded | None]:
    """The exact best point; None where none is feasible."""
    (reply,) = yield [Question(program, "best")]
    return cast("Point | Unbounded | None", reply)


def ask_all_best(programs: Sequence[Program]) -> Asking[list[Point | Unbounded | None]]:
    """The exact best point of each program."""
    replies = yield [Question(program, "best") for program in programs]
    return cast("list[Point | Unbounded | None]", replies)


def ask_proven(program: Program, *, to_publish: bool = True) -> Asking[Proven]:
    """The answer with its multipliers, and whether an optimum is known to be the only one."""
    (reply,) = yield [Question(program, "proof" if to_publish else "prices")]
    return cast(Proven, reply)


def ask_answer(program: Program, *, to_publish: bool = True) -> Asking[Answer]:
    """The answer with its multipliers; checked in exact arithmetic where they are to be published."""
    return (yield from ask_proven(program, to_publish=to_publish)).answer


def ask_nothing(value: T) -> Asking[T]:
    """A value that is there already, where a computation is expected."""
    yield from ()
    return value


def together(askings: Sequence[Asking[T]]) -> Asking[list[T]]:
    """The results of all computations, in their order; they wait for their questions together."""
    results: list[T | None] = [None] * len(askings)
    waiting: dict[int, list[Question]] = {}

    def step(place: int, replies: list[Reply] | None) -> None:
        try:
            waiting[place] = next(askings[place]) if replies is None else askings[place].send(replies)
        except StopIteration as ended:
            waiting.pop(place, None)
            results[place] = ended.value

    for place in range(len(askings)):
        step(place, None)
    while waiting:
        asked = list(waiting.items())
        replies = yield [question for _, questions in asked for question in questions]
        begin = 0
        for place, questions in asked:
            step(place, replies[begin : begin + len(questions)])
            begin += len(questions)
    return cast("list[T]", results)


def both(one: Asking[T], other: Asking[S]) -> Asking[tuple[T, S]]:
    """The results of two computations of different kinds, which wait together."""
    first, second = yield from together(cast("list[Asking[T | S]]", [one, other]))
    return cast("tuple[T, S]", (first, second))


def run(asking: Asking[T]) -> T:
    """The result of a computation, each lot of its questions answered at once."""
    replies: list[Reply] | None = None
    memory = Memory()
    try:
        while True:
            replies = answer_all(next(asking) if replies is None else asking.send(replies), memory)
    except StopIteration as ended:
        return cast(T, ended.value)


def answered(ask: Callable[P, Asking[T]]) -> Callable[P, T]:
    """The same computation as a plain function that asks on its own."""

    @wraps(ask)
    def plain(*args: P.args, **kwargs: P.kwargs) -> T:
        return run(ask(*args, **kwargs))

    return plain
