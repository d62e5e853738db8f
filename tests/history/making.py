"""Small campaigns as tables in memory, and random pairs of them that differ by a few edits."""

from __future__ import annotations

import copy
import random
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from generator.intake.campaign import read_campaign
from generator.intake.records import Campaign

Row = dict[str, str]


@dataclass
class Tables:
    """The two tables of a campaign, by row name and column; and its campaign.toml."""

    lots: dict[str, Row] = field(default_factory=dict)
    orders: dict[str, Row] = field(default_factory=dict)
    toml: str = ""

    def files(self) -> dict[str, bytes]:
        """The bytes of the folder."""
        files = {"assays.csv": _csv("lot", self.lots), "targets.csv": _csv("order", self.orders)}
        return {**files, "campaign.toml": self.toml.encode()} if self.toml else files

    def campaign(self) -> Campaign:
        """The folder, read."""
        return read_campaign(self.files(), slug="spring", folder="spring")


def _csv(first: str, rows: Mapping[str, Row]) -> bytes:
    columns = list(dict.fromkeys(name for row in rows.values() for name in row))
    lines = [",".join([first, *columns])]
    lines += [",".join([name, *(row.get(column, "") for column in columns)]) for name, row in rows.items()]
    return ("\n".join(lines) + "\n").encode()


def tables(seed: int) -> Tables:
    """A random campaign of 3 to 5 lots, 2 or 3 components and 1 to 3 orders."""
    chance = random.Random(seed)
    components = ["N", "K", "S"][: chance.randint(2, 3)]
    lots = {name: _lot(chance, components) for name in "ABCDE"[: chance.randint(3, 5)]}
    orders = {str(number): _order(chance, components) for number in range(1, chance.randint(1, 3) + 1)}
    toml = "".join(f'[components.{name}]\nunit = "%"\nsd = 0.5\n' for name in components)
    return Tables(lots, orders, toml)


def edited(old: Tables, seed: int, count: int) -> Tables:
    """A copy with about ``count`` random edits."""
    chance = random.Random(seed)
    new = copy.deepcopy(old)
    components = [name for name in ("N", "K", "S") if name in next(iter(old.lots.values()))]
    for _ in range(count):
        _edit(chance, new, components)
    return new


def pair(seed: int) -> tuple[Campaign, Campaign]:
    """Two campaigns that differ by one to six random edits."""
    old = tables(seed)
    return old.campaign(), edited(old, seed + 1, 1 + seed % 6).campaign()


def ruled_pair(seed: int) -> tuple[Campaign, Campaign]:
    """Likewise, with house rules: few lots in a recipe, a least share of a used one, two lots kept apart."""
    old = tables(seed)
    rules = ("max_lots = 2", "least_if_used = 20", 'keep_apart = [["A", "B"]]', "max_lots = 3\nleast_if_used = 10")
    old.toml += f"[house]\n{rules[seed % len(rules)]}\n"
    return old.campaign(), edited(old, seed + 1, 1 + seed % 5).campaign()


def _lot(chance: random.Random, components: Sequence[str]) -> Row:
    row = {"stock": str(chance.choice([0, 20, 60, 200])), "cost": str(chance.randint(5, 40))}
    return row | {name: str(chance.randint(0, 40)) for name in components}


def _order(chance: random.Random, components: Sequence[str]) -> Row:
    return {"amount": str(chance.choice([10, 50, 120]))} | {name: _limit(chance) for name in components}


def _limit(chance: random.Random) -> str:
    low = chance.randint(0, 30)
    return chance.choice([f">= {low}", f"<= {low}", f"{low} - {low + chance.randint(1, 12)}", ""])


def _edit(chance: random.Random, new: Tables, components: Sequence[str]) -> None:
    lot, order = chance.choice(list(new.lots)), chance.choice(list(new.orders))
    what = chance.randint(0, 6)
    if what <= 1:
        new.lots[lot][chance.choice(components)] = str(chance.randint(0, 40))
    elif what == 2:
        new.lots[lot]["stock"] = str(chance.choice([0, 20, 60, 200]))
    elif what == 3:
        new.lots[lot]["cost"] = str(chance.randint(5, 40))
    elif what == 4:
        new.orders[order][chance.choice(components)] = _limit(chance)
    elif what == 5:
        new.orders[order]["amount"] = str(chance.choice([10, 50, 120]))
    elif len(new.lots) > 2 and chance.random() < 0.5:
        del new.lots[lot]
    else:
        new.lots[f"X{len(new.lots)}"] = _lot(chance, components)
