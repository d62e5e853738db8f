"""Many degenerate programs: is anything that floats prove, or that a stack's basis leads to, ever wrong?

    python -m tests.bench.soak_geometry [--programs 100000] [--seed 0]

Families as in ``tests.geometry.stack_families``.  Each program is solved in a stack, certified in floats, answered
exactly from the stack's basis, and decided once more on its own (HiGHS proposes, exact arithmetic decides).
Prints a table, and every disagreement; the exit status is 1 if there was one.
"""

from __future__ import annotations

import argparse
import sys
import time
from collections import Counter
from random import Random

from tests.bench.one_thread import THREADS  # isort: skip  (numpy reads the number of threads when it is imported)

from generator.geometry.decide import decide
from generator.geometry.program import Optimum, Program
from generator.geometry.rigour import solve_certified
from generator.geometry.settle import answer_many
from generator.geometry.simplex import OPTIMAL
from generator.geometry.stack import stack_of
from tests.geometry.stack_families import KINDS, programs

#: Programs of one cloud, solved together.
TOGETHER = 250


def check(asked: list[Program], counts: Counter[str]) -> list[str]:
    """What is wrong with the answers to one stack; what decided each program goes to ``counts``."""
    certified = solve_certified(stack_of(asked))
    answers, tally = answer_many(asked)
    counts.update({"programs": len(asked), "on the stack's basis": tally.basis})
    counts.update({"by HiGHS": tally.highs, "by exact simplex": tally.simplex})
    wrong = []
    for k, program in enumerate(asked):
        expected = decide(program)
        feasible = isinstance(expected, Optimum)
        counts["feasible"] += feasible
        counts["verdict by floats"] += bool(certified.decided[k])
        counts["optimum by floats"] += bool(certified.best[k])
        if certified.decided[k] and (certified.solved.status[k] == OPTIMAL) != feasible:
            wrong.append(f"false verdict: {program!r}")
        if isinstance(expected, Optimum) and not certified.least[k] <= expected.value <= certified.most[k]:
            wrong.append(f"false bounds: {program!r}")
        if type(answers[k]) is not type(expected):
            wrong.append(f"false answer: {program!r}")
        elif isinstance(expected, Optimum) and answers[k].value != expected.value:
            wrong.append(f"false value: {program!r}")
    return wrong


def main(arguments: list[str] | None = None) -> int:
    """Run and report."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--programs", type=int, default=100_000)
    parser.add_argument("--seed", type=int, default=0)
    asked = parser.parse_args(arguments)
    begin, wrong = time.perf_counter(), 0
    totals: dict[str, Counter[str]] = {kind: Counter() for kind in KINDS}
    for stack in range(-(-asked.programs // TOGETHER)):
        kind = KINDS[stack % len(KINDS)]
        for complaint in check(programs(Random(f"{asked.seed} {stack}"), kind, TOGETHER), totals[kind]):
            wrong += 1
            print(complaint)
    names = list(dict.fromkeys(name for counts in totals.values() for name in sorted(counts)))
    print(f"{'family':<14}" + "".join(f"{name:>22}" for name in names))
    for kind, counts in totals.items():
        print(f"{kind:<14}" + "".join(f"{counts[name]:>22}" for name in names))
    print(f"{wrong} wrong; {time.perf_counter() - begin:.0f} s on {THREADS} thread")
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
