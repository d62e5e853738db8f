"""How long the answers of a campaign take with house rules against without them, in one run.

    python -m tests.bench.bench_house [--campaigns 3] [--orders 12] [--lots 24] [--components 8] [--limits 4]

Each order keeps so many of its limits.  The rules are max_lots 3 to 6, least_if_used 0, 5 or 10 and a pair kept
apart.  The plan is left out on both sides.  Processor time of one process, one thread.
"""

from __future__ import annotations

import argparse
import random
import time
from statistics import median
from unittest import mock

from tests.bench.one_thread import THREADS  # isort: skip  (numpy reads the number of threads when it is imported)

from generator.findings import answers
from generator.findings.records import Findings
from generator.intake.campaign import read_campaign
from generator.intake.records import Campaign
from tests.bench.making import make_campaign


def drawn(seed: int, given: argparse.Namespace, rules: str) -> Campaign:
    """A campaign of which each order keeps so many limits, under the rules."""
    files = make_campaign(seed, lots=given.lots, components=given.components, orders=given.orders)
    pick = random.Random(seed)
    head, *lines = files["targets.csv"].splitlines()
    kept = []
    for line in lines:
        cells = line.split(",")
        chosen = set(pick.sample(range(2, len(cells)), min(given.limits, len(cells) - 2)))
        kept.append(",".join(cell if j < 2 or j in chosen else "" for j, cell in enumerate(cells)))
    files["targets.csv"] = "\n".join([head, *kept]) + "\n"
    files["campaign.toml"] += rules
    return read_campaign({name: text.encode() for name, text in files.items()}, slug="drawn", folder="drawn")


def timed(campaign: Campaign) -> tuple[float, Findings]:
    """Seconds of processor time for the answers, and the answers."""
    begin = time.process_time()
    findings = answers.find(campaign)
    return time.process_time() - begin, findings


def main() -> None:
    """Print one line for each campaign, and the median ratio."""
    parser = argparse.ArgumentParser(description=__doc__)
    for name, value in (("campaigns", 3), ("orders", 12), ("lots", 24), ("components", 8), ("limits", 4)):
        parser.add_argument(f"--{name}", type=int, default=value)
    given = parser.parse_args()
    ratios = []
    with mock.patch.object(answers, "plan_of", return_value=(None, [])):
        timed(drawn(0, argparse.Namespace(lots=5, components=2, orders=2, limits=2), ""))  # imports, caches
        for seed in range(given.campaigns):
            most, least = 3 + seed % 4, (5, 0, 10)[seed % 3]
            rules = f"[house]\nmax_lots = {most}\nleast_if_used = {least}\n" if least else ""
            rules = rules or f"[house]\nmax_lots = {most}\n"
            plain, _ = timed(drawn(seed, given, ""))
            ruled, findings = timed(drawn(seed, given, rules + 'keep_apart = [["L0", "L1"]]\n'))
            ratios.append(ruled / plain)
            undecided = sum("too many ways" in problem.message for problem in findings.problems)
            print(
                f"campaign {seed}, max_lots {most}, least_if_used {least}: {ruled:.2f} s with rules against "
                f"{plain:.2f} s, ratio {ruled / plain:.1f}; undecided {undecided}",
                flush=True,
            )
    print(f"median ratio {median(ratios):.1f}, {THREADS} thread")


if __name__ == "__main__":
    main()
