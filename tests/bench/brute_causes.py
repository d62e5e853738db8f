"""Hold causes against brute force on many random pairs: ``python -m tests.bench.brute_causes [PAIRS]``.

Every smallest set of edits, every undoing and every fair part is compared with trying all subsets and all
orders.  Ends with an AssertionError at the first pair that differs.
"""

from __future__ import annotations

import sys
import time

from tests.bench import one_thread  # noqa: F401  # isort: skip  (numpy reads the number of threads when it is imported)
from tests.history.brute import check_pair
from tests.history.making import pair


def main(pairs: int) -> None:
    """Check pairs 0 … pairs−1 and tell what was compared."""
    start = time.perf_counter()
    verdicts = costs = undivided = 0
    seeds = []
    for seed in range(pairs):
        counted = check_pair(*pair(seed))
        verdicts, costs = verdicts + counted.verdicts, costs + counted.costs
        undivided += counted.undivided
        if counted.verdicts:
            seeds.append(seed)
    print(f"{pairs} pairs in {time.perf_counter() - start:.0f} s, all as brute force finds:")
    print(f"{verdicts} changed verdicts, {costs} changed costs, {undivided} of them rightly not divided")
    print(f"pairs with a changed verdict: {seeds}")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 200)
