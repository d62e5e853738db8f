"""How long replays take one by one and side by side: ``python -m tests.bench.bench_causes [SEEDS] [EDITS…]``.

A campaign of 24 lots × 8 components × 12 orders and a copy with so many edited cells.  Every single edit and
every pair of edits that can matter to an order (a sample of 60 an order) is made alone, and the order is asked
again: its verdict, cost, greatest amount, room and recipe.  Three ways in one run, processor time of one thread:

- alone: each system built anew from the edited campaign, its programs solved on their own;
- kept: the columns of lots remembered from one replay to the next, programs on their own;
- together: the same, in waves whose programs are solved as stacks, which is how causes are looked for.

The answers are compared.  At last the causes of all changes of the pair are told, and timed.
"""

from __future__ import annotations

import csv
import io
import random
import sys
import time
from collections.abc import Callable
from itertools import combinations
from unittest import mock

from tests.bench.one_thread import THREADS  # isort: skip  (numpy reads the number of threads when it is imported)

from generator.findings import answers
from generator.findings.ask import run
from generator.findings.measures import measures_of
from generator.findings.model import OrderModel, model_of
from generator.findings.values import table_of
from generator.history.causes import Side, explained
from generator.history.compare import changes
from generator.history.edits import apply, edits
from generator.history.questions import Answer, ask_again
from generator.history.records import Edit
from generator.history.relevance import Question, slim
from generator.history.replay import Replay
from generator.history.searching import Wanted, answer_all
from generator.history.systems import Subset, System
from generator.intake.campaign import read_campaign
from generator.intake.records import Campaign
from tests.bench.making import make_campaign

QUESTIONS: tuple[Question, ...] = ("verdict", "cost", "amount", "room", "recipe")
#: Replays an order: singles first, then pairs.
SAMPLE = 60


def read(files: dict[str, str]) -> Campaign:
    """The campaign of these files."""
    return read_campaign({name: text.encode() for name, text in files.items()}, slug="bench", folder="bench")


def edited(files: dict[str, str], seed: int, count: int) -> dict[str, str]:
    """The files with so many cells changed by up to a fifth: mostly assays, some costs, stocks and amounts."""
    chance = random.Random(seed)
    tables = {name: list(csv.reader(io.StringIO(files[name]))) for name in ("assays.csv", "targets.csv")}
    done: set[tuple[str, int, int]] = set()
    while len(done) < count:
        kind = chance.random()
        name = "assays.csv" if kind < 0.8 else "targets.csv"
        row = chance.randrange(1, len(tables[name]))
        column = chance.randrange(3, len(tables[name][0])) if kind < 0.55 else 2 if kind < 0.7 else 1
        if (name, row, column) not in done:
            done.add((name, row, column))
            cell = float(tables[name][row][column]) * chance.uniform(0.8, 1.2)
            tables[name][row][column] = f"{max(0.01, cell):.2f}"
    return files | {name: "\n".join(map(",".join, rows)) + "\n" for name, rows in tables.items()}


def sampled(old: Campaign, new: Campaign, made: tuple[Edit, ...], question: Question) -> list[tuple[str, Subset]]:
    """Orders and subsets of the edits that can matter to them."""
    chosen = []
    for order in new.orders:
        relevant = Replay(old, new, made, order.name, order.name).relevant(question)
        subsets = [frozenset(one) for size in (1, 2) for one in combinations(relevant, size)]
        chosen += [(order.name, subset) for subset in subsets[:SAMPLE]]
    return chosen


def alone(
    old: Campaign, made: tuple[Edit, ...], question: Question, name: str, subset: Subset, needs: frozenset[str]
) -> Answer:
    """One replay with everything built anew."""
    campaign = slim(apply(old, [made[position] for position in sorted(subset)]), needs)
    model = model_of(campaign, campaign.order(name), table_of(campaign), measures_of(campaign))
    known = model if isinstance(model, OrderModel) else None
    return run(ask_again(question, System(campaign, campaign.order(name), known)))


def timed(call: Callable[[], list[Answer]]) -> tuple[float, list[Answer]]:
    """Milliseconds of processor time, and what was answered."""
    begin = time.process_time()
    found = call()
    return (time.process_time() - begin) * 1000, found


def compared(old: Campaign, new: Campaign, made: tuple[Edit, ...], question: Question) -> tuple[float, float, float]:
    """Milliseconds a replay: alone, kept, together."""
    asked = sampled(old, new, made, question)

    def replays() -> dict[str, Replay]:
        return {order.name: Replay(old, new, made, order.name, order.name) for order in new.orders}

    needs = frozenset(component.name for component in new.components)
    few = asked[:: max(1, len(asked) // 60)]
    one = timed(lambda: [alone(old, made, question, name, subset, needs) for name, subset in few])
    kept = replays()
    two = timed(lambda: [kept[name].answer(question, subset) for name, subset in few])
    stacked = replays()

    def together() -> list[Answer]:
        answer_all(Wanted(stacked[name], question, subset) for name, subset in asked)
        return [stacked[name].answer(question, subset) for name, subset in few]

    three = timed(together)
    assert one[1] == two[1] == three[1], f"{question}: the answers differ"
    return one[0] / len(few), two[0] / len(few), three[0] / len(asked)


def main(seeds: int, counts: list[int]) -> None:
    """Print a line for each pair and question, and how long all its causes took."""
    with mock.patch.object(answers, "plan_of", return_value=(None, [])):
        for seed in range(seeds):
            for count in counts:
                files = make_campaign(seed)
                old, new = read(files), read(edited(files, seed + 1, count))
                made = edits(old, new)
                for question in QUESTIONS:
                    one, two, three = compared(old, new, made, question)
                    print(
                        f"seed {seed}, {len(made)} edits, {question}: alone {one:.2f} ms, kept {two:.2f} ms, "
                        f"together {three:.2f} ms; ratio {one / three:.1f}",
                        flush=True,
                    )
                before, after = answers.find(old), answers.find(new)
                found = changes(before, after)
                begin = time.process_time()
                told = explained(
                    Side(campaign=old, findings=before),
                    Side(campaign=new, findings=after),
                    made,
                    found,
                    same_program=True,
                )
                spent = time.process_time() - begin
                with_cause = sum(change.cause is not None and change.cause.is_told for change in told)
                print(f"seed {seed}, {len(made)} edits: {with_cause} of {len(told)} changes explained in {spent:.1f} s")
    print(f"{THREADS} thread")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 1, [int(text) for text in sys.argv[2:]] or [20, 40])
