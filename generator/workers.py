"""Who makes campaigns: this process, or a crew of others in which no campaign can take for ever.

A process of the crew that takes too long, or dies, is ended, and its campaign shows its last good answers under a
banner that says so; the others go on.  What a process writes it writes whole, so that it may be ended at any moment.
"""

from __future__ import annotations

import contextlib
import importlib
import multiprocessing
import os
import signal
import threading
import time
from collections import deque
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, replace
from multiprocessing import connection
from typing import TYPE_CHECKING, Any, Protocol

from generator.problems import Problem
from generator.report.views import IndexEntry
from generator.tasks import Chapter, Task

if TYPE_CHECKING:
    from multiprocessing.connection import Connection
    from multiprocessing.context import SpawnProcess

#: Each process is one worker; libraries that start threads of their own would fight for the cores.
_ONE_THREAD = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")
#: So often the caller hears of a crew at work, in seconds.
_TICK = 0.25
#: A process makes way for a fresh one after so many calls: what libraries keep in memory goes with it.
MOST_CALLS = 500

MAKE, MAKE_STOPPED = "generator.chapter:make", "generator.chapter:make_stopped"

#: Called while waiting; False: no more is wanted.
Tick = Callable[[], bool]


class Makers(Protocol):
    """Who makes chapters of tasks, as they get done, and answers a single call; None where that failed."""

    def make_all(self, tasks: Iterable[Task], tick: Tick) -> Iterator[tuple[Task, Chapter]]:
        """Hand back each task with its chapter; ends early where ``tick`` says so."""

    def call(self, function: str, *arguments: object, tick: Tick) -> Any:
        """Return what the function "module:name" gives; None where it took too long or died."""


class Here:
    """Makes campaigns one after the other in this process, which nothing but its end can stop."""

    def make_all(self, tasks: Iterable[Task], tick: Tick) -> Iterator[tuple[Task, Chapter]]:
        """Hand back each task with its chapter."""
        for task in tasks:
            if not tick():
                return
            yield task, _named(MAKE)(task)

    def call(self, function: str, *arguments: object, tick: Tick) -> Any:  # noqa: ARG002 - as a crew
        """Call the function."""
        return _named(function)(*arguments)


@dataclass(frozen=True, slots=True)
class _Failure:
    """Why a call has no answer, in words, and whether another try may help."""

    what: str
    remedy: str
    is_overrun: bool

    def problem(self) -> Problem:
        return Problem(file="campaign", message=self.what, remedy=self.remedy, severity="stops")


@dataclass(frozen=True, slots=True)
class _Call:
    """One call for a process: its task, and the failure of the call before, if it stands in for that."""

    task: Task | None
    function: str
    arguments: tuple[object, ...]
    tries: int = 0
    failure: _Failure | None = None


class _Hand:
    """One process of a crew, and what it is busy with."""

    def __init__(self) -> None:
        context = multiprocessing.get_context("spawn")  # not forked: an observer's threads may be running here
        mine, its = context.Pipe()
        self.connection: Connection[Any, Any] = mine
        self.process: SpawnProcess = context.Process(target=_serve, args=(its,), daemon=True)
        self.process.start()
        its.close()
        self.doing: _Call | None = None
        self.since = 0.0
        self.calls = 0

    def begin(self, call: _Call) -> None:
        self.doing, self.since = call, time.monotonic()
        self.calls += 1
        with contextlib.suppress(OSError):  # a process that is gone is noticed when its answer is waited for
            self.connection.send((call.function, call.arguments))

    def end(self) -> None:
        self.process.kill()
        self.process.join()
        self.connection.close()
        self.process.close()


class Crew:
    """``size`` processes, kept for the next build, each campaign for at most ``longest`` seconds.

    Use as a context manager.
    """

    def __init__(self, size: int, longest: float) -> None:
        self._size = size
        self.longest = longest
        self._hands: list[_Hand] = []

    def __enter__(self) -> Crew:
        """Start nothing yet."""
        return self

    def __exit__(self, *_: object) -> None:
        """End all processes."""
        while self._hands:
            self._hands.pop().end()

    def warm(self) -> None:
        """Start a process now, so that the first campaign need not wait for it."""
        if not self._hands:
            self._hands.append(_hired())

    def make_all(self, tasks: Iterable[Task], tick: Tick) -> Iterator[tuple[Task, Chapter]]:
        """Hand back each task with its chapter, as they get done; ends early where ``tick`` says so."""
        calls = (_Call(task, MAKE, (task,)) for task in tasks)
        again: deque[_Call] = deque()
        for call, result in self._answers(calls, again, tick):
            assert call.task is not None
            if not isinstance(result, _Failure):
                yield call.task, self._marked(result, call.failure)
            elif call.failure is not None:
                yield call.task, _nothing(call.task, call.failure)
            elif result.is_overrun or call.tries:
                arguments = (call.task, result.problem())
                again.append(_Call(call.task, MAKE_STOPPED, arguments, failure=result))
            else:
                again.append(_Call(call.task, call.function, call.arguments, tries=1))

    def _marked(self, chapter: Chapter, failure: _Failure | None) -> Chapter:
        """The chapter that stands in for one that failed says when to try again."""
        if failure is None:
            return chapter
        return replace(chapter, overran=self.longest) if failure.is_overrun else replace(chapter, must_repeat=True)

    def call(self, function: str, *arguments: object, tick: Tick) -> Any:
        """Return what the function "module:name" gives; None where it took too long or died, or is not wanted."""
        for _, result in self._answers(iter((_Call(None, function, arguments),)), deque(), tick):
            return None if isinstance(result, _Failure) else result
        return None

    def _answers(self, calls: Iterator[_Call], again: deque[_Call], tick: Tick) -> Iterator[tuple[_Call, Any]]:
        """Keep all processes busy; the next call begins before an answer is handed out."""
        done: deque[tuple[_Call, Any]] = deque()
        try:
            while True:
                self._begin(calls, again)
                while done:
                    yield done.popleft()
                    self._begin(iter(()), again)
                if not tick():
                    return
                busy = [hand for hand in self._hands if hand.doing is not None]
                if not busy:
                    return
                done.extend(self._waited(busy))
        finally:
            for hand in [hand for hand in self._hands if hand.doing is not None]:
                self._dismiss(hand)

    def _begin(self, calls: Iterator[_Call], again: deque[_Call]) -> None:
        """Give every idle process a call, as long as there are any."""
        while sum(hand.doing is not None for hand in self._hands) < self._size:
            call = again.popleft() if again else next(calls, None)
            if call is None:
                return
            idle = next((hand for hand in self._hands if hand.doing is None), None)
            if idle is not None and (idle.calls >= MOST_CALLS or not idle.process.is_alive()):
                self._dismiss(idle)
                idle = None
            if idle is None:
                idle = _hired()
                self._hands.append(idle)
            idle.begin(call)

    def _waited(self, busy: list[_Hand]) -> Iterator[tuple[_Call, Any]]:
        """Wait a little for answers; whoever died or takes too long is dismissed."""
        ready = set(connection.wait([hand.connection for hand in busy], _TICK))
        for hand in busy:
            call = hand.doing
            assert call is not None
            if hand.connection in ready:
                try:
                    answer = hand.connection.recv()
                except (EOFError, OSError):
                    self._dismiss(hand)
                    yield call, _DIED
                else:
                    hand.doing = None
                    yield call, answer
            elif time.monotonic() - hand.since > self.longest:
                self._dismiss(hand)
                yield call, _overran(self.longest)

    def _dismiss(self, hand: _Hand) -> None:
        self._hands.remove(hand)
        hand.end()


_DIED = _Failure(
    what="the process that worked on it died without an answer (ended by someone, or out of memory)",
    remedy="build again; if it goes on, split the campaign or give the machine more memory",
    is_overrun=False,
)


def _overran(longest: float) -> _Failure:
    return _Failure(
        what=f"its answers took longer than {longest:g} s and were given up",
        remedy="split the campaign or ask for less (plan_nodes, house rules), or give it more time with --time-limit",
        is_overrun=True,
    )


def _nothing(task: Task, failure: _Failure) -> Chapter:
    """Not even the last good answers can be shown in time: what is published stays."""
    problems = (failure.problem(),)
    entry = IndexEntry(slug=task.folder.slug, title=task.folder.name, counts={}, problems=problems, is_stopped=True)
    return Chapter(files=None, entry=entry, theme="plain", must_repeat=True)


def _hired() -> _Hand:
    for name in _ONE_THREAD:
        os.environ.setdefault(name, "1")
    return _Hand()


def _serve(calls: Connection[Any, Any]) -> None:
    """Be a process of a crew: answer calls until there are no more, or the crew's process is gone."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl-C reaches the crew's process, which decides
    threading.Thread(target=_end_with_parent, daemon=True).start()
    # What nearly every campaign needs is imported while the first one is still being read.
    import generator.findings.answers
    import generator.report.pages  # noqa: F401

    with contextlib.suppress(EOFError, OSError):
        while True:
            function, arguments = calls.recv()
            calls.send(_named(function)(*arguments))


def _named(function: str) -> Callable[..., Any]:
    """The function "module:name": passed by name, so that only who calls it imports what it needs."""
    module, _, name = function.partition(":")
    found: Callable[..., Any] = getattr(importlib.import_module(module), name)
    return found


def _end_with_parent() -> None:
    """End at once when the process that started this one has ended, however busy this one is."""
    parent = multiprocessing.parent_process()
    if parent is not None:
        connection.wait([parent.sentinel])
        os._exit(1)
