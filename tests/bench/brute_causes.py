"""Hold causes against brute force on many random pairs: ``python -m tests.bench.brute_causes [PAIRS [FIRST]]``.

Every smallest set of edits, every undoing and every fair part is compared with trying all subsets and all
orders.  Ends with an AssertionError at the first pair that differs.
"""

from __future__ import annotations

import sys
import time
from collections import Counter

from tests.bench import one_thread  # noqa: F401  # isort: skip  (numpy reads the number of threads when it is imported)
from tests.history.brute import check_pair
from tests.history.making import pair, ruled_pair

#: Every so many pairs the plan's causes are checked as well: each subset makes a whole plan.
WITH_PLANS = 5
#: Every so many pairs have house rules.
WITH_RULES = 4


def main(pairs: int, first: int = 0) -> None:
    """Check so many pairs from ``first`` on and tell what was compared."""
    start = time.process_time()
    kinds: Counter[str] = Counter()
    undivided = 0
    for seed in range(first, first + pairs):
        made = ruled_pair(seed) if seed % WITH_RULES == 1 else pair(seed)
        counted = check_pair(*made, with_plans=seed % WITH_PLANS == 0)
        kinds.update(counted.kinds)
        undivided += counted.undivided
    print(f"{pairs} pairs in {time.process_time() - start:.0f} s, all as brute force finds:")
    print(", ".join(f"{count} of kind {kind}" for kind, count in sorted(kinds.items())))
    print(f"{undivided} numbers rightly not divided")


if __name__ == "__main__":
    main(*([int(text) for text in sys.argv[1:]] or [200]))
