"""Random campaigns on coarse grids, where ties, flat hulls and targets on faces are the usual case.

``pick(low, high)`` gives an integer: from hypothesis in the tests, from ``random`` in long runs.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from fractions import Fraction

Pick = Callable[[int, int], int]


@dataclass(kw_only=True)
class DrawnOrder:
    """An order as drawn: windows by quantity name (None: no bound), and its amount."""

    windows: dict[str, tuple[Fraction | None, Fraction | None]]
    amount: int | None


@dataclass(kw_only=True)
class Drawn:
    """A campaign as drawn.  ``values[i][j]`` of lot i and component j; bounds are shares of 1."""

    values: list[list[Fraction]]
    moisture: list[int] | None
    ratio: bool
    cost: list[int]
    stock: list[int] | None
    lower: list[Fraction]
    upper: list[Fraction | None]
    orders: list[DrawnOrder] = field(default_factory=list)

    def carrier(self, lot: int, component: int) -> Fraction:
        """What component 0, typed on dry basis where there is moisture, counts in a wet unit."""
        if self.moisture is None or component != 0:
            return Fraction(1)
        return 1 - Fraction(self.moisture[lot], 100)

    def parts(self, name: str, lot: int) -> tuple[Fraction, Fraction]:
        """Numerator and denominator of a quantity at one lot (limits as received)."""
        held = [value * self.carrier(lot, j) for j, value in enumerate(self.values[lot])]
        if name == "ratio":
            return held[0], held[1]
        if name == "sum":
            return held[0] + 2 * held[-1], Fraction(1)
        return held[int(name[1:])], Fraction(1)

    def assays(self) -> str:
        """The text of assays.csv."""
        components = len(self.values[0])
        header = ["lot", "cost", "min share", "max share", *(f"C{j}" for j in range(components))]
        header += ["stock"] if self.stock else []
        header += ["moisture"] if self.moisture else []
        lines = [",".join(header)]
        for i, values in enumerate(self.values):
            top = self.upper[i]
            cells = [f"L{i}", str(self.cost[i]), _percent(self.lower[i]), "" if top is None else _percent(top)]
            cells += [_decimal(value) for value in values]
            cells += [str(self.stock[i])] if self.stock else []
            cells += [str(self.moisture[i])] if self.moisture else []
            lines.append(",".join(cells))
        return "\n".join(lines) + "\n"

    def targets(self) -> str:
        """The text of targets.csv."""
        names = sorted({name for order in self.orders for name in order.windows})
        header = ["order", "amount", *(f"{name} {side}" for name in names for side in ("min", "max"))]
        lines = [",".join(header)]
        for k, order in enumerate(self.orders):
            cells = [f"O{k}", "" if order.amount is None else str(order.amount)]
            for name in names:
                low, high = order.windows.get(name, (None, None))
                cells += ["" if low is None else _decimal(low), "" if high is None else _decimal(high)]
            lines.append(",".join(cells))
        return "\n".join(lines) + "\n"

    def settings(self) -> str:
        """The text of campaign.toml."""
        text = 'basis = "as received"\n'
        if self.moisture:
            text += '[components.C0]\nbasis = "dry"\nlimit_basis = "as received"\n'
        text += f'[derived]\nsum = "C0 + 2*C{len(self.values[0]) - 1}"\n'
        if self.ratio:
            text += 'ratio = "C0 / C1"\n'
        return text


def _decimal(value: Fraction) -> str:
    text = f"{float(value):.10g}"
    assert Fraction(text) == value, "drawn values are short decimals"
    return text


def _percent(share: Fraction) -> str:
    return f"{float(share * 100):g}"


def draw_campaign(pick: Pick, orders: int = 6, *, most_lots: int = 5) -> Drawn:
    """A campaign of 1 to ``most_lots`` lots and 1 to 3 components."""
    components = pick(1, 3)
    lots = pick(1, most_lots)
    grid = [Fraction(k, 2) for k in range(9)]
    values = [[grid[pick(0, 4 if j else 8)] for j in range(components)] for _ in range(lots)]
    bounded = pick(0, 3) == 0
    lower = [Fraction(pick(0, 2), 10) if bounded else Fraction(0) for _ in range(lots)]
    tops = [pick(0, 4) if bounded else 4 for _ in range(lots)]
    drawn = Drawn(
        values=values,
        moisture=[pick(0, 2) * 10 for _ in range(lots)] if pick(0, 2) == 0 else None,
        ratio=components > 1 and pick(0, 2) == 0,
        cost=[pick(0, 4) for _ in range(lots)],
        stock=[pick(0, 4) * 5 for _ in range(lots)] if pick(0, 1) else None,
        lower=lower,
        upper=[None if top == 4 else max(low, Fraction(top * 2 + 2, 10)) for top, low in zip(tops, lower, strict=True)],
    )
    names = [f"C{j}" for j in range(components)] + ["sum"] + (["ratio"] if drawn.ratio else [])
    for _ in range(orders):
        near = _blend(drawn, pick) if pick(0, 3) else None
        windows = {name: window for name in names if (window := _window(drawn, name, near, grid, pick))}
        drawn.orders.append(DrawnOrder(windows=windows, amount=pick(1, 8) * 5 if pick(0, 2) else None))
    return drawn


def _blend(drawn: Drawn, pick: Pick) -> list[Fraction]:
    """Shares in quarters: a lot itself, a point of an edge or a face, or one inside."""
    shares = [Fraction(0)] * len(drawn.values)
    for _ in range(4):
        shares[pick(0, len(shares) - 1)] += Fraction(1, 4)
    return shares


def _window(
    drawn: Drawn, name: str, near: list[Fraction] | None, grid: list[Fraction], pick: Pick
) -> tuple[Fraction | None, Fraction | None] | None:
    """A window on one quantity: at the blend ``near`` or a little off it, else anywhere on the grid."""
    kind = pick(0, 6)
    if kind <= 1:
        return None
    if near is None or name == "ratio":
        low = grid[pick(0, 8)]
    else:
        low = sum((share * drawn.parts(name, i)[0] for i, share in enumerate(near)), Fraction(0))
        low += Fraction(max(0, pick(-2, 6) - 4), 2) * (1 if kind != 3 else -1)
    high = low + grid[pick(0, 4)] if kind >= 5 else low
    if kind == 2:
        return (low, None)
    return (None, low) if kind == 3 else (low, high)
