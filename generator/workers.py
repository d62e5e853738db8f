"""Campaigns made side by side in other processes."""

from __future__ import annotations

import itertools
import multiprocessing
import os
from collections import deque
from collections.abc import Iterable, Iterator
from concurrent.futures import Future, ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool

from generator.chapter import Chapter, Task, make

#: So many tasks per process are under way or waiting: enough to keep all busy, few enough for memory.
_AHEAD = 2
#: Each process is one worker; libraries that start threads of their own would fight for the cores.
_ONE_THREAD = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")


def make_in_processes(tasks: Iterable[Task], jobs: int) -> Iterator[tuple[Task, Chapter]]:
    """Make campaigns in ``jobs`` processes and hand them back in the order of ``tasks``.

    Fresh processes, not forked ones: an observer's threads may be running here.  A process that dies
    (killed, out of memory) does not stop the build: what it leaves is made here.  So is a task that is
    alone, since a process takes longer to start than most campaigns to make.
    """
    for name in _ONE_THREAD:
        os.environ.setdefault(name, "1")
    source = iter(tasks)
    first = tuple(itertools.islice(source, 2))
    if len(first) < 2:
        for task in first:
            yield task, make(task)
        return
    source = itertools.chain(first, source)
    waiting: deque[tuple[Task, Future[Chapter]]] = deque()
    with ProcessPoolExecutor(jobs, mp_context=multiprocessing.get_context("spawn")) as pool:
        for task in itertools.islice(source, jobs * _AHEAD):
            waiting.append((task, pool.submit(make, task)))
        while waiting:
            task, future = waiting.popleft()
            try:
                chapter = future.result()
            except BrokenProcessPool:
                yield task, make(task)
                break
            for following in itertools.islice(source, 1):
                waiting.append((following, pool.submit(make, following)))
            yield task, chapter
    for task in (*(task for task, _ in waiting), *source):
        yield task, make(task)
