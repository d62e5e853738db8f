"""Questions about one order as linear programs, and their multipliers as weights on its rows.

Columns are the order's usable lots.  Two sides of one window that differ by a constant (equal
carriers) share one program row with two bounds; :class:`Rows` remembers which is which.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import lru_cache

from generator.findings.model import OrderModel, Row
from generator.findings.same import Same
from generator.geometry.program import Bound, Program, Vector

ZERO = Fraction(0)
ONE = Fraction(1)


@dataclass(frozen=True, slots=True)
class ProgramRow:
    """One program row of the limit ``on``; ``low_of`` and ``high_of`` are the positions of the model rows that
    its low and high bound stand for (None where it has none; an exact row stands on both)."""

    on: str
    terms: Vector
    low: Bound
    high: Bound
    low_of: int | None
    high_of: int | None


@dataclass(frozen=True, slots=True)
class Rows:
    """Program rows for some of a model's rows."""

    entries: tuple[ProgramRow, ...]

    def weights(self, multipliers: Sequence[Fraction]) -> dict[int, Fraction]:
        """Weights by model row from a program's multipliers: ≥ 0, of either sign for exact rows."""
        weights: dict[int, Fraction] = {}
        for entry, y in zip(self.entries, multipliers, strict=False):
            if y == 0:
                continue
            position = entry.low_of if y > 0 else entry.high_of
            assert position is not None, "a multiplier's sign fits the bounds of its row"
            weights[position] = -y if entry.low_of == entry.high_of else abs(y)
        return weights

    def without(self, name: str) -> Rows:
        """All rows but those of one limit."""
        return Rows(tuple(entry for entry in self.entries if entry.on != name))

    def tightened(self, by: Mapping[int, Fraction]) -> Rows:
        """The rows with model row k at most −by[k] instead of 0; exact rows stay."""
        if not any(by.values()):
            return self
        return Rows(
            tuple(
                entry
                if entry.low_of == entry.high_of
                else replace(
                    entry,
                    low=None if entry.low is None else entry.low + by.get(entry.low_of, ZERO),  # type: ignore[arg-type]
                    high=None if entry.high is None else entry.high - by.get(entry.high_of, ZERO),  # type: ignore[arg-type]
                )
                for entry in self.entries
            )
        )


def share_rows(model: OrderModel) -> Rows:
    """The rows over shares that sum to 1."""
    return _rows(Same(model.rows), paired=True)


def amount_rows(model: OrderModel) -> Rows:
    """The rows over amounts of any sum: every side is a homogeneous row of its own."""
    return _rows(Same(model.rows), paired=False)


@lru_cache(maxsize=1024)
def _rows(same: Same[tuple[Row, ...]], *, paired: bool) -> Rows:
    entries: list[ProgramRow] = []
    lows: dict[str, tuple[int, Row]] = {}
    for k, row in enumerate(same.value):
        if row.side == "exact":
            entries.append(ProgramRow(row.on, row.terms, ZERO, ZERO, k, k))
            continue
        partner = lows.get(row.on) if paired and row.side == "high" else None
        width = _constant_sum(row, partner[1]) if partner else None
        if partner and width is not None:
            entries = [entry for entry in entries if entry.high_of != partner[0]]
            entries.append(ProgramRow(row.on, row.terms, width, ZERO, partner[0], k))
        else:
            entries.append(ProgramRow(row.on, row.terms, None, ZERO, None, k))
        if row.side == "low":
            lows[row.on] = (k, row)
    return Rows(tuple(entries))


def level_rows(model: OrderModel) -> tuple[bool, ...]:
    """For each model row whether one unit more of its bound is the same for all lots: equal carriers."""
    return _level(Same(model.rows))


@lru_cache(maxsize=256)
def _level(same: Same[tuple[Row, ...]]) -> tuple[bool, ...]:
    return tuple(all(base == row.base[0] for base in row.base) for row in same.value)


def _constant_sum(high: Row, low: Row) -> Fraction | None:
    """Low + high terms where that is the same for every lot: then low·x ≤ 0 says high·x ≥ it.

    With low = l·e − a·c and high = a·c − h·e that is (l − h)·e: constant where carriers are equal.
    """
    pairs = zip(high.terms, low.terms, strict=True)
    total = sum(next(pairs), ZERO)
    return total if all(one + other == total for one, other in pairs) else None


def share_program(
    model: OrderModel,
    rows: Rows,
    cost: Sequence[Fraction],
    *,
    upper: Sequence[Bound] | None = None,
    extra: Iterable[tuple[Vector, Bound, Bound]] = (),
) -> Program:
    """Least cost over shares: the model's rows, Σx = 1, the share bounds (or ``upper``), extra rows.

    Columns beyond the lots, as many as ``cost`` has more, are ≥ 0 and stand in ``extra`` rows only.
    """
    more = tuple(extra)
    n, width = len(model.lots), len(cost)
    padding = (ZERO,) * (width - n)
    return Program(
        rows=(
            *((*entry.terms, *padding) if padding else entry.terms for entry in rows.entries),
            (*((ONE,) * n), *padding),
            *(vector for vector, _, _ in more),
        ),
        row_low=(*(entry.low for entry in rows.entries), ONE, *(low for _, low, _ in more)),
        row_high=(*(entry.high for entry in rows.entries), ONE, *(high for _, _, high in more)),
        lower=(*model.lower, *padding),
        upper=tuple(model.upper if upper is None else upper),
        cost=tuple(cost),
    )


def capped_upper(model: OrderModel, amount: Fraction | None) -> tuple[Bound, ...]:
    """Upper share bounds with the stock in them: the lesser of max share and stock / amount."""
    return _capped(Same(model.upper), Same(model.stock), amount) if amount else model.upper


@lru_cache(maxsize=256)
def _capped(uppers: Same[tuple[Bound, ...]], stocks: Same[tuple[Bound, ...]], amount: Fraction) -> tuple[Bound, ...]:
    capped = []
    for bound, stock in zip(uppers.value, stocks.value, strict=True):
        most = [b for b in (bound, None if stock is None else stock / amount) if b is not None]
        capped.append(min(most) if most else None)
    return tuple(capped)


def share_bound_rows(model: OrderModel) -> list[tuple[Row, Vector]]:
    """The share bounds as homogeneous rows over amounts: l·T − x ≤ 0 and x − u·T ≤ 0."""
    rows = []
    for i, name in enumerate(model.names):
        for side, bound in (("low", model.lower[i] or None), ("high", model.upper[i])):
            if bound is None:
                continue
            sign = -1 if side == "low" else 1
            terms = tuple(sign * ((ONE if j == i else ZERO) - bound) for j in range(len(model.lots)))
            base = (ONE,) * len(model.lots)
            row = Row(f"share of {name}", "low" if side == "low" else "high", bound, bound, terms, base)
            rows.append((row, terms))
    return rows


def least_over_shares(scores: Sequence[Fraction], lower: Sequence[Fraction], upper: Sequence[Bound]) -> Fraction:
    """The least Σ score·x over shares that sum to 1 within their bounds (lowest scores filled first).

    ValueError if the bounds admit no shares.
    """
    rest = ONE - sum(lower, ZERO)
    total = sum((score * low for score, low in zip(scores, lower, strict=True)), ZERO)
    for i in sorted(range(len(scores)), key=lambda i: (scores[i], i)):
        top = upper[i]
        step = rest if top is None else min(rest, top - lower[i])
        total += step * scores[i]
        rest -= step
    if rest != 0:
        raise ValueError("the share bounds admit no shares that sum to 1")
    return total


def combined(model_rows: Sequence[Row], weights: dict[int, Fraction], n: int) -> tuple[Fraction, ...]:
    """Σ weight·row for each of n lots."""
    return tuple(sum((w * model_rows[k].terms[i] for k, w in weights.items()), ZERO) for i in range(n))
