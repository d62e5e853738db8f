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
from scipy.special import ndtr, ndtri

from generator.geometry.program import Vector
from generator.geometry.stack import Flags, Floats

_ZERO = Fraction(0)
#: By so much of itself every irrational number is moved the safe way: far above double rounding (2⁻⁵³ and
#: what scipy's quantiles lose), far below any tolerance here.
_SAFE = 2.0**-36
#: Terms of tangents are sums of a few products: rounding takes less than this from their sizes.
_ROUNDING = 2.0**-46
#: Stands for a variance of 0, where slacks are divided by its root.
_NOTHING = 1e-280
#: Newton's steps at most; 6 are usual.
_NEWTON = 60
#: The normal density at 0.
_DENSITY = 1.0 / math.sqrt(2.0 * math.pi)


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
    """A chance beside its floats: ``sides`` (1 or 2, n), ``variance`` and ``bias`` (n,)."""

    exact: Chance
    sides: Floats
    variance: Floats
    bias: Floats

    @staticmethod
    def of(chance: Chance) -> Image:
        """The image of one chance."""
        return Image(
            chance,
            np.array([[float(value) for value in side] for side in chance.sides]),
            np.array([float(value) for value in chance.variance]),
            np.array([float(value) for value in chance.bias]),
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
        z = Fraction(float(ndtri(wanted))) * (1 + Fraction(_SAFE))
        return bool(z * z * variance <= slacks[0] * slacks[0])
    deviation = math.sqrt(variance)
    return bool(sum(ndtr(float(slack) / deviation) for slack in slacks) - 1 >= wanted + _SAFE)


def tangent(image: Image, x: Floats, wanted: float) -> Vector | None:
    """Exact terms with terms·x ≤ 0 for all allowed x ≥ 0, from the tangent at x; None where there is none."""
    (terms,) = Images.of([image]).tangents(x, wanted)
    return None if np.isnan(terms).any() else tuple(Fraction(float(value)) for value in terms)


@dataclass(frozen=True, slots=True)
class Images:
    """K chances side by side: ``low`` and ``high`` (K, n), the low side 0 where there is one side only (not
    ``is_window``, (K,)); ``variance``, its ``roots`` and ``bias`` (K, n)."""

    low: Floats
    high: Floats
    is_window: Flags
    variance: Floats
    roots: Floats
    bias: Floats

    @staticmethod
    def of(images: Sequence[Image]) -> Images:
        """The images of K chances as arrays."""
        variance = np.array([image.variance for image in images])
        return Images(
            low=np.array([image.sides[0] if len(image.sides) == 2 else 0.0 * image.sides[0] for image in images]),
            high=np.array([image.sides[-1] for image in images]),
            is_window=np.array([len(image.sides) == 2 for image in images]),
            variance=variance,
            roots=np.sqrt(variance),
            bias=np.array([image.bias for image in images]),
        )

    def some(self, which: Flags) -> Images:
        """Those marked."""
        return Images(
            self.low[which],
            self.high[which],
            self.is_window[which],
            self.variance[which],
            self.roots[which],
            self.bias[which],
        )

    def spares(self, x: Floats, wanted: float) -> Floats:
        """How much smaller than the allowed deviation each σ is, (K,): 1 − σ/s, negative where the row fails."""
        deviation, above, below = self._at(x)
        pulls = self._pulls(above, below, wanted)
        allowed = np.where(self.is_window, pulls[0] * above, 0.0) + pulls[1] * below
        met = (below > 0) & ((above > 0) | ~self.is_window)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(met & (allowed > 0), 1.0 - deviation / allowed, -1.0)

    def seem_held(self, x: Floats, wanted: float) -> bool:
        """What :func:`holds` is likely to say of all K at x, in floats."""
        deviation, above, below = self._at(x)
        scale = 1.0 / np.maximum(deviation, _NOTHING)
        over = np.where(self.is_window, ndtr(above * scale), 1.0)
        return bool((over + ndtr(below * scale) - 1.0 >= wanted + _SAFE).all())

    def tangents(self, x: Floats, wanted: float) -> Floats:
        """Terms with terms·x ≤ 0 for all allowed x ≥ 0, from the tangents at x: (K, n), NaN where there is none.

        σ(x) is the greatest Σ λ_i √variance_i x_i + μ bias·x over Σ λ² + μ² ≤ 1 (Cauchy and Schwarz), and s
        lies below each of its own tangents.  Smaller terms hold as well where x ≥ 0: so each is lowered by
        more than its rounding.
        """
        deviation, above, below = self._at(x)
        with np.errstate(divide="ignore", invalid="ignore"):
            weights = self.roots * x / deviation[:, None]
            mu = (self.bias @ x / deviation)[:, None]
        length = np.sqrt((weights * weights).sum(axis=1, keepdims=True) + mu * mu) * (1 + _ROUNDING)
        steep, common = weights / length * self.roots, mu / length * self.bias
        pulls = self._pulls(np.maximum(above, 0.0), np.maximum(below, 0.0), wanted)
        # One side: terms + z σ ≤ 0, divided by z where that is not 0.
        z = float(ndtri(wanted)) * (1 - _SAFE)
        weight = np.where(self.is_window, 1.0, z)[:, None]
        of_low = (np.where(self.is_window, pulls[0], 0.0) * (1 + _SAFE))[:, None]
        of_high = np.where(self.is_window, pulls[1] * (1 + _SAFE), 1.0)[:, None]
        terms = weight * (steep + common) + of_low * self.low + of_high * self.high
        size = weight * (steep + np.abs(common)) + of_low * np.abs(self.low) + of_high * np.abs(self.high)
        return np.where((deviation > 0)[:, None] & np.isfinite(terms), terms - _ROUNDING * size, np.nan)

    def last(self, inside: Floats, outside: Floats, wanted: float) -> float:
        """The greatest t in [0, 1] (to 2⁻⁴⁰) up to which all hold on the way from a point where they do.

        On the way slacks are linear and variances quadratic; allowed points are convex, so a grid laid
        ever finer between a t that holds and one that doesn't finds the end.
        """
        way = outside - inside
        below, above = -(self.high @ inside), -(self.low @ inside)
        below_rate, above_rate = -(self.high @ way), -(self.low @ way)
        own, own_rate = self.bias @ inside, self.bias @ way
        squares = (
            self.variance @ (inside * inside) + own * own,
            2.0 * (self.variance @ (inside * way) + own * own_rate),
            self.variance @ (way * way) + own_rate * own_rate,
        )

        def hold(t: Floats) -> Flags:
            t = t[:, None]
            variance = np.maximum(squares[0] + t * (squares[1] + t * squares[2]), 0.0)
            scale = 1.0 / np.sqrt(np.maximum(variance, _NOTHING))
            over = np.where(self.is_window, ndtr((above + t * above_rate) * scale), 1.0)
            return np.asarray((over + ndtr((below + t * below_rate) * scale) - 1.0 >= wanted).all(axis=1))

        if hold(np.array([1.0]))[0]:
            return 1.0
        low, high = 0.0, 1.0
        for _ in range(8):
            grid = np.linspace(low, high, 33)
            held = int(np.append(hold(grid[1:-1]), False).argmin())  # the first that fails
            low, high = float(grid[held]), float(grid[held + 1])
        return low

    def _at(self, x: Floats) -> tuple[Floats, Floats, Floats]:
        """σ, and by how much the low and the high side are met: (K,) each."""
        return np.sqrt(self.variance @ (x * x) + (self.bias @ x) ** 2), -(self.low @ x), -(self.high @ x)

    def _pulls(self, above: Floats, below: Floats, wanted: float) -> tuple[Floats, Floats]:
        """The gradients of s at (α, β), the greatest σ that is allowed, (K,) each; NaN where there is no s."""
        first, second = np.full(above.size, np.nan), np.full(above.size, np.nan)
        z = float(ndtri(wanted))
        second[~self.is_window] = 1.0 / z if z > 0 else np.inf
        which = np.flatnonzero(self.is_window & (np.maximum(above, below) > 0))
        if which.size:
            first[which], second[which] = _window_pulls(above[which], below[which], wanted)
        return first, second


def _window_pulls(above: Floats, below: Floats, wanted: float) -> tuple[Floats, Floats]:
    """The gradient of s(α, β), the greatest σ with Φ(α/σ) + Φ(β/σ) − 1 ≥ wanted; max(α, β) > 0.

    With u = 1/σ the left side rises and is concave, so Newton's steps from a u that is too small climb to
    the root and never pass it.
    """
    top = np.maximum(above, below)
    # at an end of the window the tangent just inside it serves
    above, below = np.maximum(above, 1e-6 * top), np.maximum(below, 1e-6 * top)
    u = float(ndtri(wanted)) / np.minimum(above, below)
    for _ in range(_NEWTON):
        slope = (above * np.exp(-0.5 * (above * u) ** 2) + below * np.exp(-0.5 * (below * u) ** 2)) * _DENSITY
        step = (1.0 + wanted - ndtr(above * u) - ndtr(below * u)) / slope
        u = u + np.maximum(step, 0.0)
        if (step <= 4e-16 * u).all():
            break
    densities = np.exp(-0.5 * (above * u) ** 2), np.exp(-0.5 * (below * u) ** 2)
    total = (above * densities[0] + below * densities[1]) * u
    return densities[0] / total, densities[1] / total
