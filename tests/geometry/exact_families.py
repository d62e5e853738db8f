"""Programs and point clouds on coarse grids, where ties, flat hulls and redundant rows are the usual case."""

from __future__ import annotations

from fractions import Fraction

from hypothesis import strategies as st

from generator.geometry.program import Program

TENTHS = st.integers(-20, 20).map(lambda k: Fraction(k, 10))
COARSE = st.integers(-3, 3).map(Fraction)
HALVES = st.integers(0, 4).map(lambda k: Fraction(k, 2))


def number(low: int = -3, high: int = 3) -> st.SearchStrategy[Fraction]:
    """Mostly small whole numbers, sometimes tenths."""
    return st.one_of(st.integers(low, high).map(Fraction), TENTHS)


@st.composite
def programs(draw, max_rows: int = 4, max_columns: int = 3, boxed: bool = False, with_cost: bool = True) -> Program:
    """Programs with every kind of bound; now and then a row is repeated, or bounds cross."""
    n = draw(st.integers(0, max_columns))
    m = draw(st.integers(0, max_rows))
    rows = [tuple(draw(number()) for _ in range(n)) for _ in range(m)]
    if m > 1 and draw(st.booleans()):
        rows[-1] = tuple(2 * a for a in rows[0])
    sides = [_bounds(draw, draw(st.sampled_from(["equal", "low", "high", "both", "none"]))) for _ in range(m)]
    kinds = ["both"] if boxed else ["both", "both", "equal", "low", "high", "none"]
    box = [_bounds(draw, draw(st.sampled_from(kinds))) for _ in range(n)]
    return Program(
        rows=tuple(rows),
        row_low=tuple(low for low, _ in sides),
        row_high=tuple(high for _, high in sides),
        lower=tuple(low for low, _ in box),
        upper=tuple(high for _, high in box),
        cost=tuple(draw(COARSE) if with_cost else Fraction(0) for _ in range(n)),
    )


def _bounds(draw, kind: str) -> tuple[Fraction | None, Fraction | None]:
    low = draw(number())
    if kind == "equal":
        return low, low
    high = low + draw(st.integers(-1, 8).map(Fraction))
    return (low if kind in ("low", "both") else None), (high if kind in ("high", "both") else None)


def clouds(dimension: int, max_points: int = 8) -> st.SearchStrategy[list[tuple[Fraction, ...]]]:
    """Points on a grid of 5 to a side."""
    return st.lists(st.tuples(*[HALVES] * dimension), max_size=max_points)


def make(rows, low, high, lower, upper, cost) -> Program:
    """A program from anything that Fraction reads; None stays None."""

    def vector(values):
        return tuple(None if value is None else Fraction(value) for value in values)

    return Program(
        rows=tuple(vector(row) for row in rows),
        row_low=vector(low),
        row_high=vector(high),
        lower=vector(lower),
        upper=vector(upper),
        cost=vector(cost),
    )
