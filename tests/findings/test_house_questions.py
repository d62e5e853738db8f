"""House rules: every question about an order is answered as by brute force over all sets of lots that may be used."""

from __future__ import annotations

import random
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations

import pytest

from generator.findings import house, narrowing
from generator.findings.records import Findings, OrderFinding
from tests.findings import oracle
from tests.findings.making import answers

ZERO, ONE = Fraction(0), Fraction(1)
Windows = dict[str, tuple[Fraction | None, Fraction | None]]
#: Far below what differs between two answers on the coarse grids drawn here.
HAIR = Fraction(1, 10**9)


@dataclass(frozen=True)
class Ruled:
    """Lots on a grid with cost and stock, orders on windows, rules; the first lot's share is at least ``forced``."""

    values: list[list[Fraction]]
    cost: list[int]
    stock: list[int | None]
    kinds: list[str]
    windows: list[Windows]
    amounts: list[int | None]
    most: int | None
    least: Fraction
    forced: Fraction

    def findings(self) -> Findings:
        """The program's answers."""
        names = [f"C{j}" for j in range(len(self.values[0]))]
        lines = [",".join(["lot", "cost", "stock", "material", "min share", *names])]
        for i, row in enumerate(self.values):
            stock = "unlimited" if self.stock[i] is None else str(self.stock[i])
            share = f"{float(self.forced * 100):g}" if i == 0 and self.forced else ""
            cells = [f"L{i}", str(self.cost[i]), stock, self.kinds[i], share, *(str(float(v)) for v in row)]
            lines.append(",".join(cells))
        orders = [",".join(["order", "amount", *(f"{name} {side}" for name in names for side in ("min", "max"))])]
        for k, windows in enumerate(self.windows):
            cells = [f"O{k}", "" if self.amounts[k] is None else str(self.amounts[k])]
            for name in names:
                cells += ["" if bound is None else str(float(bound)) for bound in windows.get(name, (None, None))]
            orders.append(",".join(cells))
        rules = ["[house]", *([f"max_lots = {self.most}"] if self.most else [])]
        rules += [f"least_if_used = {float(self.least * 100):g}"] if self.least else []
        rules += ['keep_apart = [["salt*", "acid*"]]'] if {"salt", "acid"} <= set(self.kinds) else []
        return answers("\n".join(lines) + "\n", "\n".join(orders) + "\n", "\n".join(rules) + "\n")

    def sets(self, without: int | None = None) -> list[tuple[int, ...]]:
        """Every set of lots that the rules allow."""
        lots = [i for i in range(len(self.values)) if i != without and self.stock[i] != 0]
        return [
            used
            for size in range(1, min(self.most or len(lots), len(lots)) + 1)
            for used in combinations(lots, size)
            if not {"salt", "acid"} <= {self.kinds[i] for i in used} and (0 in used or without == 0 or not self.forced)
        ]

    def row(self, used: tuple[int, ...], name: str, side: str, bound: Fraction) -> list[Fraction]:
        """By how much each lot breaks a limit."""
        sign = -1 if side == "low" else 1
        return [sign * (self.values[i][int(name[1:])] - bound) for i in used]

    def rows(self, used: tuple[int, ...], windows: Windows) -> list[oracle.HalfSpace]:
        """The limits and leasts over these lots."""
        rows = [
            (self.row(used, name, side, bound), ZERO)
            for name, window in windows.items()
            for side, bound in zip(("low", "high"), window, strict=True)
            if bound is not None
        ]
        own = [max(self.least, self.forced) if i == 0 else self.least for i in used]
        least = [([part - (j == k) for j in range(len(used))], ZERO) for k, part in enumerate(own)]
        return [*rows, *least]

    def corners(
        self, windows: Windows, *, amount: int | None = None, without: int | None = None, cuts: bool = False
    ) -> list[dict[int, Fraction]]:
        """Vertices of the allowed shares; with ``cuts`` those of the parts on either side of each window's middle."""
        found = []
        for used in self.sets(without):
            rows = self.rows(used, windows)
            if amount is not None:
                for k, i in enumerate(used):
                    if self.stock[i] is not None:
                        top = Fraction(self.stock[i] or 0, amount)
                        rows.append(([Fraction(j == k) - top for j in range(len(used))], ZERO))
            parts = [oracle.shares(len(used), rows)]
            for name, (low, high) in windows.items() if cuts else ():
                if low is not None and high is not None and low != high:
                    middle = self.row(used, name, "high", (low + high) / 2)
                    sides = [(middle, ZERO), ([-a for a in middle], ZERO)]
                    parts = [oracle.clip_all(part, [side]) for part in parts for side in sides]
            found += [dict(zip(used, point, strict=True)) for part in parts for point in part]
        return found


def draw(number: int) -> Ruled:
    """Six lots of two or three components under a mixture of the rules."""
    pick = random.Random(number).randint
    lots, width = 6, pick(2, 3)
    values = [[Fraction(pick(0, 12), 2) for _ in range(width)] for _ in range(lots)]
    windows: list[Windows] = []
    for _ in range(3):
        parts = [pick(0, 3) for _ in range(lots)]
        total = sum(parts) or 1
        window: Windows = {}
        for j in range(width):
            middle = sum((Fraction(part, total) * row[j] for part, row in zip(parts, values, strict=True)), ZERO)
            middle, half = Fraction(round(middle * 8), 8), Fraction(pick(0, 4), 8)
            window[f"C{j}"] = ((middle - half, middle + half), (middle - half, None), (None, middle + half))[
                max(0, pick(0, 4) - 2)
            ]
        windows.append(window)
    return Ruled(
        values=values,
        cost=[pick(1, 9) for _ in range(lots)],
        stock=[None if pick(0, 5) == 0 else pick(1, 9) * 5 for _ in range(lots)],
        kinds=[("salt", "acid", "plain", "plain")[pick(0, 3)] for _ in range(lots)],
        windows=windows,
        amounts=[None if pick(0, 2) == 0 else pick(2, 12) * 5 for _ in windows],
        most=(None, 2, 3, 3)[pick(0, 3)],
        least=Fraction((0, 5, 15, 25)[pick(0, 3)], 100),
        forced=Fraction((0, 0, 10)[pick(0, 2)], 100),
    )


def test_draws_cover_every_verdict() -> None:
    """Among the campaigns drawn here are orders that are met, short and barred."""
    verdicts = {order.verdict for number in range(12) for order in draw(number).findings().orders}
    assert verdicts >= {"makeable", "short", "barred"}


@pytest.mark.parametrize("number", range(4))
@pytest.mark.parametrize("first", [400, 3], ids=["by branches", "by sets"])
def test_every_question_is_answered_as_by_brute_force(first: int, number: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Verdict, greatest amount, least cost with and without each lot, room, curve and closest recipe are those of
    brute force, whether branches are followed or all sets gone through."""
    monkeypatch.setattr(house, "FIRST_BRANCHES", 0)
    monkeypatch.setattr(narrowing, "FIRST", first)
    assert faults(draw(number)) == []


def faults(ruled: Ruled) -> list[str]:
    """What is wrong with the program's answers, in words."""
    return [
        f"{finding.order}: {fault}"
        for k, finding in enumerate(ruled.findings().orders)
        for fault in order_faults(ruled, ruled.windows[k], ruled.amounts[k], finding)
    ]


def order_faults(ruled: Ruled, windows: Windows, amount: int | None, finding: OrderFinding) -> list[str]:
    """The faults of one order's answer."""
    every = ruled.corners(windows)
    if not every:
        return [] if finding.verdict in ("barred", "unreachable") else [f"{finding.verdict}, though nothing is allowed"]
    greatest = greatest_amount(ruled, windows)
    found = []
    if finding.greatest_amount != (None if greatest is None else float(greatest)):
        found.append(f"greatest amount {finding.greatest_amount}, not {greatest}")
    inside = ruled.corners(windows, amount=amount)
    if (finding.verdict == "short") != (not inside):
        return [*found, f"{finding.verdict}, with {len(inside)} corners"]
    if not inside:
        return found
    best = least_cost(ruled, inside)
    if finding.recipes["cheapest"].cost != float(best):
        found.append(f"costs {finding.recipes['cheapest'].cost}, not {best}")
    for name, (_, cost) in finding.without_lot.items():
        rest = ruled.corners(windows, amount=amount, without=int(name[1:]))
        if cost != (float(least_cost(ruled, rest)) if rest else None):
            found.append(f"costs {cost} without {name}")
    return [*found, *room_faults(ruled, windows, amount, finding), *recipe_faults(ruled, windows, amount, finding)]


def greatest_amount(ruled: Ruled, windows: Windows) -> Fraction | None:
    """The most that any allowed set makes of its stock; None without bound."""
    most = ZERO
    for used in ruled.sets():
        endless = [i for i in used if ruled.stock[i] is None]
        # Where the lots of finite stock are needed, a part of their stock is what the whole can be.
        if endless and (tuple(endless) == used) and oracle.shares(len(used), ruled.rows(used, windows)):
            return None
        far = Fraction(10**6)
        stock = [far if ruled.stock[i] is None else Fraction(ruled.stock[i] or 0) for i in used]
        corners = oracle.amounts(stock, [(a, b) for a, b in ruled.rows(used, windows)])
        most = max([most, *(sum(corner) for corner in corners)])
    # An amount that leans on the stand-in for unlimited stock has no bound.
    return None if most >= 10**5 else most


def least_cost(ruled: Ruled, corners: list[dict[int, Fraction]]) -> Fraction:
    """The least cost among corners."""
    return min(sum((ruled.cost[i] * x for i, x in corner.items()), ZERO) for corner in corners)


def scale(window: tuple[Fraction | None, Fraction | None], bound: Fraction, values: list[Fraction]) -> Fraction:
    """Half the window, else 1 % of the limit, else 1 % of the lots' range."""
    low, high = window
    if low is not None and high is not None:
        return (high - low) / 2
    return abs(bound) / 100 or (max(values) - min(values)) / 100 or ONE


def tightened(ruled: Ruled, windows: Windows, t: Fraction) -> Windows:
    """All limits moved inwards by t scales; exact ones stay."""
    moved: Windows = {}
    for name, (low, high) in windows.items():
        values = [row[int(name[1:])] for i, row in enumerate(ruled.values) if ruled.stock[i] != 0]
        if low is not None and low == high:
            moved[name] = (low, high)
            continue
        moved[name] = (
            None if low is None else low + t * scale((low, high), low, values),
            None if high is None else high - t * scale((low, high), high, values),
        )
    return moved


def room_faults(ruled: Ruled, windows: Windows, amount: int | None, finding: OrderFinding) -> list[str]:
    """Whether the room can just be had, and what each point of the curve costs."""
    if finding.room is None:
        return [] if all(low == high for low, high in windows.values()) else ["no room"]
    t, found = Fraction(finding.room), []
    if not ruled.corners(tightened(ruled, windows, t - HAIR), amount=amount):
        found.append(f"the room {finding.room} can't be had")
    if ruled.corners(tightened(ruled, windows, t + HAIR), amount=amount):
        found.append(f"more room than {finding.room} can be had")
    for point in finding.curve[:-1:3]:
        corners = ruled.corners(tightened(ruled, windows, Fraction(point.room)), amount=amount)
        if not corners or abs(least_cost(ruled, corners) - Fraction(point.cost)) > HAIR * 100:
            found.append(f"{point.cost} at room {point.room}")
    return found


def distance(ruled: Ruled, windows: Windows, shares: dict[int, Fraction]) -> Fraction:
    """How far a blend is from the middles of its windows, in halves of them."""
    total = ZERO
    for name, (low, high) in windows.items():
        if low is not None and high is not None and low != high:
            value = sum((ruled.values[i][int(name[1:])] * x for i, x in shares.items()), ZERO)
            total += abs(value - (low + high) / 2) / ((high - low) / 2)
    return total


def recipe_faults(ruled: Ruled, windows: Windows, amount: int | None, finding: OrderFinding) -> list[str]:
    """Whether recipes keep the rules, and the closest one is as close as can be, then early in file order."""
    found = []
    for name, recipe in finding.recipes.items():
        used = {int(lot[1:]): share for lot, share in recipe.exact.items()}
        if len(used) > (ruled.most or len(used)) or any(share < ruled.least for share in used.values()):
            found.append(f"{name} breaks a count or a least")
        if {"salt", "acid"} <= {ruled.kinds[i] for i in used}:
            found.append(f"{name} joins what is kept apart")
    shares = {int(lot[1:]): share for lot, share in finding.recipes["closest"].exact.items()}
    corners = ruled.corners(windows, amount=amount, cuts=True)
    least = min(distance(ruled, windows, corner) for corner in corners)
    if distance(ruled, windows, shares) != least:
        found.append(f"closest is {distance(ruled, windows, shares)} away, not {least}")
    ties = [corner for corner in corners if distance(ruled, windows, corner) == least]
    early = min(sum((i * x for i, x in corner.items()), ZERO) for corner in ties)
    if sum((i * x for i, x in shares.items()), ZERO) != early:
        found.append("closest is not the first of equals")
    return found
