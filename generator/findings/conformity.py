"""Conformity: the probability that a recipe's true values are inside its limits (JCGM 106).

Values are normal with the standard uncertainties of :mod:`generator.findings.uncertainty`.  Each limit
on its own is Φ; all together is the joint normal of the rows, clipped to the Fréchet bounds.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import prod, sqrt

import numpy as np

from generator.findings.model import OrderModel, Row
from generator.findings.records import Conformity
from generator.findings.uncertainty import RowError, Uncertainty, row_error
from generator.findings.values import Table
from generator.geometry.stack import Floats

#: Probabilities are published to six decimals: the joint normal is integrated to about that.
DECIMALS = 6
#: The integration's random lattice starts here, always, so that the same input gives the same bytes.
LATTICE = 20100
#: A row that fails less often than this is sure: in the joint normal it would cost time and digits, and change none.
SURE = 1e-9


@dataclass(frozen=True, slots=True)
class UncertainRow:
    """A row that is not exact, with its error."""

    row: Row
    error: RowError


def uncertain_rows(model: OrderModel, table: Table, uncertainty: Uncertainty) -> tuple[UncertainRow, ...]:
    """The rows that have a probability: not exact, every usable lot's uncertainty known."""
    found = []
    for row in model.rows:
        if row.side == "exact":
            continue
        error = row_error(row, model.measures[row.on], table, uncertainty, model.lots)
        if error is not None:
            found.append(UncertainRow(row, error))
    return tuple(found)


@dataclass(frozen=True, slots=True)
class Errors:
    """The uncertain rows in floats, K rows over n lots: ``terms`` (K, n), and by component ``parts`` and
    ``biases`` (K, n), 0 where a row has none of it; ``twin_of`` the row before it that is the other side of
    the same window, with the same error."""

    rows: Sequence[UncertainRow]
    terms: Floats
    parts: Floats
    biases: Floats
    twin_of: tuple[int | None, ...]

    @staticmethod
    def of(rows: Sequence[UncertainRow], n: int) -> Errors:
        """The arrays of K rows, ``parts`` and ``biases`` one after another in the order of components met."""
        names = list(dict.fromkeys(name for uncertain in rows for name in uncertain.error.parts))
        none = (0.0,) * n
        firsts: dict[str, int] = {}
        twins: list[int | None] = []
        for k, uncertain in enumerate(rows):
            first = firsts.setdefault(uncertain.row.on, k)
            twins.append(first if first < k and is_mirror(rows[first].error, uncertain.error) else None)
        return Errors(
            rows,
            np.array([_floats(uncertain.row.terms) for uncertain in rows]).reshape(len(rows), n),
            np.array([[_floats(u.error.parts.get(name, none)) for u in rows] for name in names]),
            np.array([[_floats(u.error.biases.get(name, none)) for u in rows] for name in names]),
            tuple(twins),
        )

    def covariance(self, x: Floats) -> Floats:
        """Cov of the rows' values at shares x, (K, K): lots' errors by component, and the common biases."""
        own, common = self.parts * x, self.biases @ x
        return np.asarray(np.einsum("cki,cli->kl", own, own) + common.T @ common)


def _floats(values: Sequence[Fraction | float]) -> list[float]:
    return [float(value) for value in values]


def conformities_of(
    model: OrderModel, rows: Sequence[UncertainRow], recipes: Sequence[Mapping[str, Fraction]]
) -> list[Conformity]:
    """Probabilities of each recipe's shares by limit, and together; None for limits held on values alone."""
    if not rows:
        return [Conformity(all=None, each=dict.fromkeys(model.limits)) for _ in recipes]
    errors = Errors.of(rows, len(model.names))
    points = [np.array([float(shares.get(name, 0)) for name in model.names]) for shares in recipes]
    return [_conformity(model, errors, x) for x in points]


def _conformity(model: OrderModel, errors: Errors, x: Floats) -> Conformity:
    margins = (-(errors.terms @ x)).tolist()
    spread = errors.covariance(x)
    variances = np.diag(spread).tolist()
    each: dict[str, float | None] = dict.fromkeys(model.limits)
    for name in model.limits:
        mine = [k for k, uncertain in enumerate(errors.rows) if uncertain.row.on == name]
        if mine:
            each[name] = _rounded(_alone([margins[k] for k in mine], [variances[k] for k in mine]))
    known = [p for p in each.values() if p is not None]
    if not known:
        return Conformity(all=None, each=each)
    joint = known[0] if len(known) == 1 else _joint(errors, margins, spread)
    bounded = min(max(joint, 1.0 - sum(1.0 - p for p in known), 0.0), *known)
    return Conformity(all=_rounded(bounded), each=each)


def _rounded(probability: float) -> float:
    return round(min(max(probability, 0.0), 1.0), DECIMALS)


def _alone(margins: Sequence[float], variances: Sequence[float]) -> float:
    """Φ for one side; for two sides of one limit Φ(low) + Φ(high) − 1, the same error being in both."""
    from scipy.special import ndtr

    total = 0.0
    for margin, variance in zip(margins, variances, strict=True):
        sigma = sqrt(max(variance, 0.0))
        total += float(ndtr(margin / sigma)) if sigma > 0 else float(margin >= 0)
    return total - (len(margins) - 1)


def _joint(errors: Errors, margins: Sequence[float], spread: Floats) -> float:
    """P(every row ≤ its margin); two sides with the same error are one variable with two ends."""
    ends: list[list[float]] = []
    chosen: list[int] = []
    places: dict[int, int] = {}
    for k, first in enumerate(errors.twin_of):
        scale = sqrt(spread[k, k]) if spread[k, k] > 0 else 0.0
        if scale == 0.0:
            if margins[k] < 0:
                return 0.0
            continue
        if first is not None and first in places:
            # The other side's value is minus this one's: its margin is this one's low end.
            ends[places[first]][0] = max(ends[places[first]][0], -margins[k] / scale)
            continue
        places[k] = len(chosen)
        chosen.append(k)
        ends.append([-np.inf, margins[k] / scale])
    if not chosen:
        return 1.0
    low, high = np.array(ends).T
    if any(low > high):
        return 0.0
    scales = np.sqrt(np.diag(spread)[chosen])
    correlation = spread[np.ix_(chosen, chosen)] / np.outer(scales, scales)
    return prod(_inside(low[block], high[block], correlation[np.ix_(block, block)]) for block in _blocks(correlation))


def _blocks(correlation: Floats) -> list[list[int]]:
    """The variables in groups that have nothing to do with each other: their probabilities multiply."""
    left = list(range(len(correlation)))
    blocks = []
    while left:
        block = [left.pop(0)]
        for k in block:
            joined = [j for j in left if correlation[k, j] != 0]
            block += joined
            left = [j for j in left if j not in joined]
        blocks.append(sorted(block))
    return blocks


def _inside(low: Floats, high: Floats, correlation: Floats) -> float:
    """P(low ≤ z ≤ high) for standard normals of that correlation.

    Two are integrated to rounding, more by a lattice: rows that are nearly multiples of each other and far from
    their limits spoil that, so that sure ones are left out first.
    """
    from scipy.special import ndtr

    unsure = np.flatnonzero(ndtr(low) + ndtr(-high) >= SURE)
    if unsure.size < low.size:
        low, high, correlation = low[unsure], high[unsure], correlation[np.ix_(unsure, unsure)]
    if low.size == 0:
        return 1.0
    if low.size == 1:
        return float(ndtr(high[0]) - ndtr(low[0]))
    from scipy.stats import multivariate_normal

    return float(
        multivariate_normal.cdf(
            high, cov=correlation, allow_singular=True, lower_limit=low, rng=np.random.default_rng(LATTICE)
        )
    )


def is_mirror(one: RowError, other: RowError) -> bool:
    """Whether two rows have the same error with the opposite sign: the two sides of one window."""
    return all(
        tuple(-part for part in one.parts[name]) == other.parts.get(name)
        and tuple(-part for part in one.biases[name]) == other.biases.get(name)
        for name in one.parts
    )
