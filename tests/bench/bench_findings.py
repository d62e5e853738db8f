"""How long the answers of a campaign take against a plain script that calls a solver for each question.

    python -m tests.bench.bench_findings [--campaigns 3] [--orders 12] [--lots 24] [--components 8]

The plain side gets its numbers as float arrays and calls ``scipy.optimize.linprog`` once for every linear
program that the answers were made from (as many, of the same shapes), proves nothing and draws nothing.
Ours starts from the campaign as read and ends with findings, every verdict proven.  The plan, which shares
the stock among all orders and is a search of its own, is left out on both sides.  One process, one thread.
"""

from __future__ import annotations

import argparse
import random
import time
from collections import Counter
from statistics import median
from unittest import mock

from tests.bench.one_thread import THREADS  # isort: skip  (numpy reads the number of threads when it is imported)

import numpy as np
from scipy.optimize import linprog

from generator.findings import answers, ask
from generator.geometry.asked import Question
from generator.geometry.stack import stack_of
from generator.intake.campaign import read_campaign
from generator.intake.records import Campaign


def drawn(seed: int, lots: int, components: int, orders: int) -> Campaign:
    """A campaign of which about nine orders in ten can be met; every sd, stock and cost is known."""
    pick = random.Random(seed)
    names = [f"C{j}" for j in range(components)]
    values = [[round(pick.uniform(0, 20), 2) for _ in names] for _ in range(lots)]
    assays = ["lot,stock,cost," + ",".join(names)]
    for i, row in enumerate(values):
        assays.append(f"L{i},{pick.randint(50, 400)},{pick.uniform(10, 60):.2f}," + ",".join(map(str, row)))
    targets = ["order,amount," + ",".join(names)]
    for k in range(orders):
        weights = [pick.random() ** 3 for _ in values]
        mixed = [
            sum(w * row[j] for w, row in zip(weights, values, strict=True)) / sum(weights) for j in range(len(names))
        ]
        middle = mixed if k % 2 == 0 else [pick.uniform(4, 16) for _ in names]
        targets.append(f"O{k},{pick.randint(20, 200)}," + ",".join(_cell(pick, x) for x in middle))
    settings = "".join(f"[components.{name}]\nsd = 0.1\n" for name in names)
    files = {"assays.csv": "\n".join(assays), "targets.csv": "\n".join(targets), "campaign.toml": settings}
    return read_campaign({name: text.encode() for name, text in files.items()}, slug="drawn", folder="drawn")


def _cell(pick: random.Random, middle: float) -> str:
    if pick.random() < 0.6:
        return f"{middle - 1.5:.2f}..{middle + 1.5:.2f}"
    return f"<= {middle + 1:.2f}" if pick.random() < 0.5 else f">= {middle - 1:.2f}"


def ours(campaign: Campaign) -> float:
    """Seconds for the campaign's findings, its plan aside."""
    begin = time.process_time()
    answers.find(campaign)
    return time.process_time() - begin


def questions_of(campaign: Campaign) -> list[Question]:
    """Every linear program that the campaign's answers were made from."""
    asked: list[Question] = []
    answer_all = ask.answer_all

    def noted(questions: list[Question], *memory: object) -> object:
        asked.extend(questions)
        return answer_all(questions, *memory)

    with mock.patch.object(ask, "answer_all", noted):
        answers.find(campaign)
    return asked


def plain(questions: list[Question]) -> float:
    """Seconds for one call of linprog for each question, its arrays made beforehand."""
    calls = []
    for question in questions:
        stack = stack_of([question.program])
        rows, low, high = stack.rows, stack.row_low[0], stack.row_high[0]
        equal = low == high
        under, over = ~equal & np.isfinite(low), ~equal & np.isfinite(high)
        calls.append(
            {
                "c": stack.cost[0],
                "A_ub": np.vstack([-rows[under], rows[over]]),
                "b_ub": np.concatenate([-low[under], high[over]]),
                "A_eq": rows[equal],
                "b_eq": low[equal],
                "bounds": np.column_stack([stack.lower[0], stack.upper[0]]),
                "method": "highs",
            }
        )
    begin = time.process_time()
    for call in calls:
        linprog(**call)
    return time.process_time() - begin


def main() -> None:
    """Print one line for each campaign, and the medians."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--campaigns", type=int, default=3)
    parser.add_argument("--orders", type=int, default=12)
    parser.add_argument("--lots", type=int, default=24)
    parser.add_argument("--components", type=int, default=8)
    given = parser.parse_args()
    ratios = []
    with mock.patch.object(answers, "plan_of", return_value=(None, [])):
        ours(drawn(0, 5, 2, 2))  # imports, caches
        for seed in range(given.campaigns):
            campaign = drawn(seed, given.lots, given.components, given.orders)
            spent = median(ours(campaign) for _ in range(3))
            questions = questions_of(campaign)
            theirs = plain(questions)
            ratios.append(spent / theirs)
            wants = Counter(question.wants for question in questions)
            print(
                f"campaign {seed}: {spent / given.orders * 1000:.1f} ms an order against "
                f"{theirs / given.orders * 1000:.1f} ms, ratio {spent / theirs:.2f}; "
                f"{len(questions)} questions ({', '.join(f'{n} {want}' for want, n in sorted(wants.items()))})"
            )
    print(f"median ratio {median(ratios):.2f}, {THREADS} thread")


if __name__ == "__main__":
    main()
