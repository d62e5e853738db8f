"""Campaigns for the benches: made from a seed, in the shape of real ones."""

from __future__ import annotations

import random
from pathlib import Path


def make_campaign(seed: int, *, lots: int = 24, components: int = 8, orders: int = 12) -> dict[str, str]:
    """The files of one campaign by name: about half of the orders lie around a mixture of the lots.

    Every component has a laboratory standard deviation, every lot a stock and a cost.
    """
    draw = random.Random(seed)
    names = [f"C{j}" for j in range(components)]
    values = [[round(draw.uniform(0, 20), 2) for _ in names] for _ in range(lots)]
    assays = [f"lot,stock,cost,{','.join(names)}"]
    assays += [
        f"L{i},{draw.randint(50, 400)},{draw.uniform(10, 60):.2f},{','.join(map(str, row))}"
        for i, row in enumerate(values)
    ]
    targets = [f"order,amount,{','.join(names)}"]
    for k in range(orders):
        middle = _mixture(values, draw) if k % 2 == 0 else [draw.uniform(4, 16) for _ in names]
        cells = ",".join(_limit(value, draw) for value in middle)
        targets.append(f"O{k},{draw.randint(20, 200)},{cells}")
    settings = "".join(f"[components.{name}]\nsd = 0.1\n" for name in names)
    return {
        "assays.csv": "\n".join(assays) + "\n",
        "targets.csv": "\n".join(targets) + "\n",
        "campaign.toml": settings,
    }


def _mixture(values: list[list[float]], draw: random.Random) -> list[float]:
    weights = [draw.random() ** 3 for _ in values]
    total = sum(weights)
    return [
        sum(weight * row[j] for weight, row in zip(weights, values, strict=True)) / total for j in range(len(values[0]))
    ]


def _limit(value: float, draw: random.Random) -> str:
    if draw.random() < 0.6:
        return f"{value - 1.5:.2f}..{value + 1.5:.2f}"
    return f"<= {value + 1:.2f}" if draw.random() < 0.5 else f">= {value - 1:.2f}"


def write_campaign(folder: Path, files: dict[str, str]) -> None:
    """Write the files of one campaign into its folder."""
    folder.mkdir(parents=True, exist_ok=True)
    for name, text in files.items():
        (folder / name).write_text(text, encoding="utf-8")
