"""How near to the best a large plan under house rules comes, and what a plan without them costs; on one thread.

    python -m tests.bench.bench_plan [--seeds 5] [--seconds 20] [--json FILE]

40 orders from 60 lots of 8 components.  First with ``max_lots = 4`` and ``least_if_used = 5``: the gap that is
told (the greatest part by which a better plan could gain) and the seconds it took; once with every order whole,
once with every order accepted in part.  Then without house rules, all orders in part: the whole plan, its exact
amounts and their proof included, against one solve of the same linear program by HiGHS through scipy.  Times are of
the processor (on a shared machine the clock tells of others), but the plan's last guard is by the clock.
"""

from __future__ import annotations

import argparse
import json
import sys
import time
from dataclasses import asdict, dataclass
from pathlib import Path
from statistics import median

from tests.bench.one_thread import THREADS  # isort: skip  (numpy reads the number of threads when it is imported)

import numpy as np

from generator.findings import plan_search
from generator.findings.measures import measures_of
from generator.findings.plan_model import PlanModel, plan_model
from generator.findings.plan_parts import joined, part_of, program_of, side_by_side, stage_costs
from generator.findings.values import table_of
from generator.geometry.mixed import linear
from generator.intake.campaign import read_campaign

ORDERS, LOTS, COMPONENTS = 40, 60, 8
HOUSE = "[house]\nmax_lots = 4\nleast_if_used = 5\n"


@dataclass(frozen=True)
class Line:
    """One plan: what it was of, its gap (None: none was told), seconds in all, and against HiGHS where asked."""

    work: str
    seed: int
    gap: float | None
    value: float
    seconds: float
    clock: float
    ratio: float | None = None


def drawn(seed: int, *, accept: str, house: str) -> PlanModel:
    """A plan's program: windows around blends of two to four lots, demand of about the stock, prices above cost."""
    rng = np.random.default_rng(seed)
    values = np.round(rng.uniform(0, 20, (LOTS, COMPONENTS)), 1)
    stock, cost = np.round(rng.uniform(200, 1500, LOTS)), np.round(rng.uniform(20, 100, LOTS), 1)
    names = [f"c{j}" for j in range(COMPONENTS)]
    assays = [f"lot,stock,cost,{','.join(names)}"]
    assays += [f"L{i},{stock[i]:g},{cost[i]:g},{','.join(f'{value:g}' for value in values[i])}" for i in range(LOTS)]
    targets = [f"order,amount,price,accept,{','.join(f'{name} min,{name} max' for name in names)}"]
    for k in range(ORDERS):
        lots = rng.choice(LOTS, rng.integers(2, 5), replace=False)
        shares = np.maximum(rng.dirichlet(np.full(len(lots), 3.0)), 0.08)
        shares /= shares.sum()
        cells = []
        for value in shares @ values[lots]:
            sides, width = rng.integers(0, 3), rng.uniform(0.05, 0.15) * value
            cells += [f"{value - width:.1f}" if sides != 1 else "", f"{value + width:.1f}" if sides != 0 else ""]
        amount, price = rng.uniform(200, 1500), shares @ cost[lots] * rng.uniform(1.1, 1.5)
        targets.append(f"O{k},{amount:.0f},{price:.1f},{accept},{','.join(cells)}")
    files = {"assays.csv": "\n".join(assays), "targets.csv": "\n".join(targets), "campaign.toml": house}
    campaign = read_campaign({name: text.encode() for name, text in files.items() if text}, slug="b", folder="b")
    assert not [problem for problem in campaign.problems if problem.severity != "note"]
    alone = {order.name: "makeable" for order in campaign.orders}
    return plan_model(campaign, table_of(campaign), measures_of(campaign), alone)  # type: ignore[arg-type]


def ruled(seed: int, accept: str, seconds: float) -> Line:
    """The plan under house rules."""
    model = drawn(seed, accept=accept, house=HOUSE)
    begun, clock = time.process_time(), time.monotonic()
    sought = plan_search.seek(model, 20_000, seconds)
    return Line(
        work=f"max_lots, least_if_used, {accept}",
        seed=seed,
        gap=sought.outcomes[0].gap,
        value=-float(sought.settled.values[0]),
        seconds=time.process_time() - begun,
        clock=time.monotonic() - clock,
    )


def plain(seed: int, repeats: int = 3) -> Line:
    """The plan without house rules against one solve of its linear program."""
    model = drawn(seed, accept="part", house="")
    whole = side_by_side([part_of(block) for block in model.blocks])
    program = program_of(model, whole, joined(whole, stage_costs(model.stages[0], whole.parts)[0]))
    theirs, ours = [], []
    for _ in range(repeats):
        begun = time.process_time()
        linear(program)
        theirs.append(time.process_time() - begun)
        begun = time.process_time()
        sought = plan_search.seek(model, 20_000, 60.0)
        ours.append(time.process_time() - begun)
    return Line(
        work="no house rules, part",
        seed=seed,
        gap=sought.outcomes[0].gap,
        value=-float(sought.settled.values[0]),
        seconds=median(ours),
        clock=median(ours),
        ratio=median(ours) / median(theirs),
    )


def main(arguments: list[str]) -> None:
    """Print the table; ``--json`` writes it too."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, default=5)
    parser.add_argument("--seconds", type=float, default=20.0)
    parser.add_argument("--json", type=Path)
    options = parser.parse_args(arguments)
    print(f"{ORDERS} orders x {LOTS} lots x {COMPONENTS} components, {THREADS} thread")
    lines = []
    for seed in range(options.seeds):
        for line in (ruled(seed, "whole", options.seconds), ruled(seed, "part", options.seconds), plain(seed)):
            lines.append(line)
            gap = "not told" if line.gap is None else f"{line.gap * 100:.2f} %"
            told = f"{line.work:34} seed {seed}  gap {gap:9}  {line.seconds:6.2f} s cpu, {line.clock:6.2f} s"
            if line.ratio is not None:
                told += f"  exact amounts included {line.ratio:.1f} x HiGHS"
            print(told, flush=True)
    if options.json:
        options.json.write_text(json.dumps([asdict(line) for line in lines], indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main(sys.argv[1:])
