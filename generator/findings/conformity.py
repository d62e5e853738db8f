"""Conformity: the probability that a recipe's true values are inside its limits (JCGM 106).

Values are normal with the standard uncertainties of :mod:`generator.findings.uncertainty`.  Each limit
on its own is Φ; all together is the joint normal of the rows, clipped to the Fréchet bounds.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import sqrt

from generator.findings.model import OrderModel, Row
from generator.findings.records import Conformity
from generator.findings.uncertainty import RowError, Uncertainty, row_error
from generator.findings.values import Table

#: Probabilities are published to six decimals: the joint normal is integrated to about that.
DECIMALS = 6
#: The integration's random lattice starts here, always, so that the same input gives the same bytes.
LATTICE = 20100


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


def conformity_of(model: OrderModel, rows: Sequence[UncertainRow], shares: Mapping[str, Fraction]) -> Conformity:
    """Probabilities by limit, and together; None for limits held on values alone."""
    x = [float(shares.get(name, Fraction(0))) for name in model.names]
    margins = [_margin(uncertain.row, x) for uncertain in rows]
    spread = _covariance(rows, x)
    each: dict[str, float | None] = dict.fromkeys(model.limits)
    for name in model.limits:
        mine = [k for k, uncertain in enumerate(rows) if uncertain.row.on == name]
        if mine:
            each[name] = _rounded(_alone([margins[k] for k in mine], [spread[k][k] for k in mine]))
    known = [p for p in each.values() if p is not None]
    if not known:
        return Conformity(all=None, each=each)
    joint = known[0] if len(known) == 1 else _joint(rows, margins, spread)
    bounded = min(max(joint, 1.0 - sum(1.0 - p for p in known), 0.0), *known)
    return Conformity(all=_rounded(bounded), each=each)


def _rounded(probability: float) -> float:
    return round(min(max(probability, 0.0), 1.0), DECIMALS)


def _margin(row: Row, x: Sequence[float]) -> float:
    return -sum(float(term) * share for term, share in zip(row.terms, x, strict=True))


def _covariance(rows: Sequence[UncertainRow], x: Sequence[float]) -> list[list[float]]:
    """Cov of the rows' values: lots' errors component by component, and the common biases."""
    return [[_shared(one.error, other.error, x) for other in rows] for one in rows]


def _shared(one: RowError, other: RowError, x: Sequence[float]) -> float:
    total = 0.0
    for name in one.parts.keys() & other.parts.keys():
        total += sum(
            float(a) * float(b) * share * share
            for a, b, share in zip(one.parts[name], other.parts[name], x, strict=True)
        )
        bias = [sum(float(b) * share for b, share in zip(error.biases[name], x, strict=True)) for error in (one, other)]
        total += bias[0] * bias[1]
    return total


def _alone(margins: Sequence[float], variances: Sequence[float]) -> float:
    """Φ for one side; for two sides of one limit Φ(low) + Φ(high) − 1, the same error being in both."""
    from scipy.special import ndtr

    total = 0.0
    for margin, variance in zip(margins, variances, strict=True):
        sigma = sqrt(max(variance, 0.0))
        total += float(ndtr(margin / sigma)) if sigma > 0 else float(margin >= 0)
    return total - (len(margins) - 1)


def _joint(rows: Sequence[UncertainRow], margins: Sequence[float], spread: list[list[float]]) -> float:
    """P(every row ≤ its margin); two sides with the same error are one variable with two ends."""
    import numpy as np
    from scipy.stats import multivariate_normal

    ends: list[list[float]] = []
    chosen: list[int] = []
    twins: dict[str, int] = {}
    for k, uncertain in enumerate(rows):
        scale = sqrt(spread[k][k]) if spread[k][k] > 0 else 0.0
        if scale == 0.0:
            if margins[k] < 0:
                return 0.0
            continue
        twin = twins.get(uncertain.row.on)
        if twin is not None and is_mirror(rows[chosen[twin]].error, uncertain.error):
            # The other side's value is minus this one's: its margin is this one's low end.
            ends[twin][0] = max(ends[twin][0], -margins[k] / scale)
            continue
        twins[uncertain.row.on] = len(chosen)
        chosen.append(k)
        ends.append([-np.inf, margins[k] / scale])
    if not chosen:
        return 1.0
    scales = np.sqrt([spread[k][k] for k in chosen])
    correlation = np.array([[spread[j][k] for k in chosen] for j in chosen]) / np.outer(scales, scales)
    low, high = np.array(ends).T
    if any(low > high):
        return 0.0
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
