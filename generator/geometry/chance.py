"""A row that must hold with a given probability: what it has, what it allows, and its tangents.

A :class:`Chance` is an uncertain row: its value is normal with mean terms·x and variance
σ² = Σ variance_i x_i² + (bias·x)².  One-sided at probability p: terms·x + z_p σ ≤ 0.  Two-sided, with
α = −low·x and β = −high·x: Φ(α/σ) + Φ(β/σ) − 1 ≥ p.  Both are convex for p ≥ ½ and say σ ≤ s(α, β) with a
concave s of degree 1, so each point has a tangent plane through 0 that no allowed x crosses.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from scipy.optimize import brentq
from scipy.special import ndtr, ndtri

from generator.geometry.program import Vector
from generator.geometry.stack import Floats

_ZERO, _ONE = Fraction(0), Fraction(1)
#: By so much of itself every irrational number is moved the safe way: far above double rounding (2⁻⁵³ and
#: what scipy's quantiles lose), far below any tolerance here.
_SAFE = Fraction(1, 2**36)
#: Coefficients of tangents keep so many bits (of the largest): short numbers make exact arithmetic fast.
_BITS = 44


@dataclass(frozen=True, slots=True, kw_only=True)
class Chance:
    """An uncertain row: low·x ≤ 0 and/or high·x ≤ 0 (n terms each), n ``variance`` ≥ 0, n ``bias``.

    With both sides, low + high must be ≤ 0 for each column: a window of some width.
    """

    low: Vector | None = None
    high: Vector | None = None
    variance: Vector
    bias: Vector

    def __post_init__(self) -> None:
        """Refuse a row without sides or with negative variances: ValueError."""
        if self.low is None and self.high is None:
            raise ValueError("a chance without a side")
        if any(value < 0 for value in self.variance):
            raise ValueError("a negative variance")

    @property
    def sides(self) -> tuple[Vector, ...]:
        """The one or two sides, each ≤ 0 where met."""
        return tuple(side for side in (self.low, self.high) if side is not None)


@dataclass(frozen=True, slots=True)
class Image:
    """A chance beside its floats: ``sides`` (1 or 2, n), ``variance`` and ``bias`` (n,), and roots of the
    variances that are surely not too large."""

    exact: Chance
    sides: Floats
    variance: Floats
    bias: Floats
    roots: Vector

    @staticmethod
    def of(chance: Chance) -> Image:
        """The image of one chance."""
        variance = [float(value) for value in chance.variance]
        return Image(
            chance,
            np.array([[float(value) for value in side] for side in chance.sides]),
            np.array(variance),
            np.array([float(value) for value in chance.bias]),
            tuple(Fraction(math.sqrt(value)) * (1 - _SAFE) for value in variance),
        )

    def deviation(self, x: Floats) -> float:
        """σ at x."""
        return math.sqrt(float(self.variance @ (x * x) + (self.bias @ x) ** 2))

    def slacks(self, x: Floats) -> list[float]:
        """By how much each side is met."""
        return [float(value) for value in -(self.sides @ x)]


def probability(chance: Chance, x: Sequence[Fraction]) -> float:
    """With which probability the row holds at shares x: 0 or 1 where σ = 0."""
    image, shares = Image.of(chance), np.array([float(value) for value in x])
    deviation = image.deviation(shares)
    z = [
        slack / deviation if deviation > 0 else math.copysign(math.inf, slack + 1e-300)
        for slack in image.slacks(shares)
    ]
    return max(0.0, float(sum(ndtr(value) for value in z)) - (len(z) - 1))


def holds(chance: Chance, x: Vector, wanted: float) -> bool:
    """Whether the row holds at x: exactly for one side (with z moved the safe way), else Φ with a margin."""
    slacks = [-sum((a * b for a, b in zip(side, x, strict=True) if b), _ZERO) for side in chance.sides]
    if min(slacks) < 0:
        return False
    bias = sum((a * b for a, b in zip(chance.bias, x, strict=True) if b), _ZERO)
    variance = sum((v * b * b for v, b in zip(chance.variance, x, strict=True) if b), bias * bias)
    if variance == 0:
        return True
    if len(slacks) == 1:
        z = Fraction(float(ndtri(wanted))) * (1 + _SAFE)
        return bool(z * z * variance <= slacks[0] * slacks[0])
    deviation = math.sqrt(variance)
    return bool(sum(ndtr(float(slack) / deviation) for slack in slacks) - 1 >= wanted + float(_SAFE))


def spare(image: Image, x: Floats, wanted: float) -> float:
    """How much smaller than the allowed deviation σ is: 1 − σ/s, negative where the row fails."""
    slacks = image.slacks(x)
    if min(slacks) <= 0:
        return -1.0
    if len(slacks) == 1:
        z = float(ndtri(wanted))
        allowed = slacks[0] / z if z > 0 else math.inf
    else:
        pulls = _allowed_slope(slacks[0], slacks[1], wanted)
        allowed = pulls[0] * slacks[0] + pulls[1] * slacks[1] if pulls else 0.0
    return 1.0 - image.deviation(x) / allowed if allowed > 0 else -1.0


def tangent(image: Image, x: Floats, wanted: float) -> Vector | None:
    """Exact terms with terms·x ≤ 0 for all allowed x ≥ 0, from the tangent at x; None where there is none."""
    deviation, slacks, sides = image.deviation(x), image.slacks(x), image.exact.sides
    if deviation <= 0:
        return None
    steep = _deviation_terms(image, x, deviation)
    if len(slacks) == 1:
        z = Fraction(float(ndtri(wanted))) * (1 - _SAFE)
        return tuple(a + z * w for a, w in zip(sides[0], steep, strict=True))
    pulls = _allowed_slope(max(slacks[0], 0.0), max(slacks[1], 0.0), wanted)
    if pulls is None:
        return None
    up = [Fraction(pull) * (1 + _SAFE) for pull in pulls]
    return tuple(w + up[0] * low + up[1] * high for w, low, high in zip(steep, *sides, strict=True))


def _deviation_terms(image: Image, x: Floats, deviation: float) -> Vector:
    """Terms w with w·x ≤ σ(x) for every x ≥ 0 and nearly equal at the given x.

    σ(x) is the greatest Σ λ_i √variance_i x_i + μ bias·x over Σ λ² + μ² ≤ 1 (Cauchy and Schwarz).
    """
    mu = Fraction(float(image.bias @ x) / deviation) * (1 - _SAFE)
    weights = [
        Fraction(float(root) * max(float(share), 0.0) / deviation) * (1 - _SAFE)
        for root, share in zip(image.roots, x, strict=True)
    ]
    length = sum((weight * weight for weight in weights), mu * mu)
    if length > 1:
        mu, weights = mu / length, [weight / length for weight in weights]
    terms = [weight * root + mu * b for weight, root, b in zip(weights, image.roots, image.exact.bias, strict=True)]
    # smaller terms hold as well where x ≥ 0, so the bits beyond are floored away
    unit = Fraction(2) ** (math.frexp(float(max(map(abs, terms), default=_ONE)) or 1.0)[1] - _BITS)
    return tuple(math.floor(term / unit) * unit for term in terms)


def _allowed_slope(above: float, below: float, wanted: float) -> tuple[float, float] | None:
    """The gradient of s(α, β), the greatest σ with Φ(α/σ) + Φ(β/σ) − 1 ≥ wanted; None where s = 0 = α = β."""
    top = max(above, below)
    if top <= 0:
        return None
    # at an end of the window the tangent just inside it serves
    above, below = max(above, 1e-6 * top), max(below, 1e-6 * top)

    def lacking(scale: float) -> float:
        return float(ndtr(above / scale) + ndtr(below / scale) - 1 - wanted)

    least = min(above, below) / 40
    scale = float(brentq(lacking, least, 4 * top / max(float(ndtri(wanted)), 0.05), xtol=1e-300, rtol=1e-15))
    densities = math.exp(-0.5 * (above / scale) ** 2), math.exp(-0.5 * (below / scale) ** 2)
    total = above * densities[0] + below * densities[1]
    return densities[0] * scale / total, densities[1] * scale / total
