"""Degenerate families of windows over points: where float solvers go wrong and proofs must not."""

from __future__ import annotations

from fractions import Fraction
from random import Random

from generator.geometry.program import Program
from generator.geometry.reach import Window

KINDS = ("line", "plane", "repeated", "lattice", "nearly flat", "mixed scale", "general")
TARGETS = ("vertex", "edge", "face", "middle", "just off")


def whole(random: Random, low: int, high: int) -> Fraction:
    return Fraction(random.randint(low, high))


def points(random: Random, kind: str, d: int, n: int) -> list[tuple[Fraction, ...]]:
    """n points of d values."""
    if kind in ("line", "plane"):
        base, first, second = ([whole(random, -4, 4) for _ in range(d)] for _ in range(3))
        steps = [(whole(random, 0, 5), whole(random, 0, 5 if kind == "plane" else 0)) for _ in range(n)]
        return [tuple(b + s * f + t * g for b, f, g in zip(base, first, second, strict=True)) for s, t in steps]
    if kind == "repeated":
        few = [tuple(whole(random, 0, 9) / 10 for _ in range(d)) for _ in range(max(1, n // 3))]
        return [random.choice(few) for _ in range(n)]
    if kind == "lattice":
        return [tuple(whole(random, 0, 2) for _ in range(d)) for _ in range(n)]
    if kind == "nearly flat":
        flat = [[whole(random, 0, 20) / 10 for _ in range(d)] for _ in range(n)]
        return [(*p[:-1], sum(p[:-1], Fraction(0)) + Fraction(random.randint(-1, 1), 10**12)) for p in flat]
    if kind == "mixed scale":
        return [tuple(whole(random, 0, 500) / 10 / (10**6 if i % 2 else 1) for i in range(d)) for _ in range(n)]
    return [tuple(whole(random, 0, 1000) / 10 for _ in range(d)) for _ in range(n)]


def target(random: Random, cloud: list[tuple[Fraction, ...]]) -> tuple[Fraction, ...]:
    """A point at a vertex, on an edge or face, inside, or off by as little as 1e-12."""
    kind = random.choice(TARGETS)
    count = min({"vertex": 1, "edge": 2, "face": 3}.get(kind, len(cloud)), len(cloud))
    chosen = random.sample(cloud, count)
    weights = [random.randint(1, 3) for _ in chosen]
    total = sum(weights)
    middle = [
        sum((Fraction(w, total) * p[i] for w, p in zip(weights, chosen, strict=True)), Fraction(0))
        for i in range(len(cloud[0]))
    ]
    if kind == "just off":
        middle = [v + Fraction(random.randint(-1, 1), random.choice([1, 10, 10**6, 10**12])) for v in middle]
    return tuple(middle)


def bounds(random: Random, value: Fraction) -> tuple[Fraction | None, Fraction | None]:
    """Bounds that ``value`` meets, most of them exactly."""
    half = Fraction(random.randint(0, 5), 10)
    kinds = {
        "exact": (value, value),
        "low": (value, None),
        "high": (None, value),
        "window": (value - half, value),
        "none": (None, None),
    }
    return kinds[random.choice(sorted(kinds))]


def windows(random: Random, kind: str, d: int, n: int, count: int) -> list[Window]:
    """``count`` windows over one cloud of n points."""
    cloud = points(random, kind, d, n)
    rows = tuple(tuple(p[i] for p in cloud) for i in range(d))
    found = []
    for _ in range(count):
        pairs = [bounds(random, value) for value in target(random, cloud)]
        most = random.choice([None, None, Fraction(1, 2), Fraction(1, n)])
        found.append(
            Window(
                rows=rows,
                low=tuple(low for low, _ in pairs),
                high=tuple(high for _, high in pairs),
                upper=None if most is None else (most,) * n,
            )
        )
    return found


def prices(random: Random, n: int) -> tuple[Fraction, ...]:
    """Costs: all 0, a few different ones, or all different."""
    kind = random.choice(["none", "ties", "different"])
    spread = {"none": (0, 0), "ties": (1, 3), "different": (1, 1000)}[kind]
    return tuple(Fraction(random.randint(*spread), 10) for _ in range(n))


def programs(random: Random, kind: str, count: int) -> list[Program]:
    """``count`` programs over one cloud of random size."""
    d, n = random.randint(1, 5), random.randint(1, 9)
    cost = prices(random, n)
    return [window.program(cost) for window in windows(random, kind, d, n, count)]
