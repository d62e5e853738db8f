"""What a cloud of points spans: its dimension, corners, facets, volume and shadows, all exact.

Points are tuples of exact numbers, all of one length.  Flat clouds, repeated points, one point and
none are ordinary input.  Roles are decided in any dimension; facets up to a few.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import factorial, prod, sqrt

from generator.geometry.corners import corners
from generator.geometry.elimination import common_denominator, coprime, independent_rows, solve_square, whole
from generator.geometry.facets import TooManyFacets, Whole, facets, simplices, volume_of_simplex
from generator.geometry.program import Vector

Points = Sequence[Vector]


@dataclass(frozen=True, slots=True)
class Role:
    """``is_corner``: a vertex of the hull.  Else ``imitation``: the point's weights over other points.

    ``imitation`` lists (index, weight), weights positive and summing to 1, at most dimension + 1 of them.
    """

    is_corner: bool
    imitation: tuple[tuple[int, Fraction], ...] = ()


@dataclass(frozen=True, slots=True)
class Facet:
    """``coefficients · x <= at_most`` for every point of the hull; coprime whole numbers."""

    coefficients: tuple[int, ...]
    at_most: int


@dataclass(frozen=True, slots=True)
class Equation:
    """``coefficients · x == equals`` for every point; coprime whole numbers, the first not 0 positive."""

    coefficients: tuple[int, ...]
    equals: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Hull:
    """A convex hull in D coordinates.

    ``dimension``: of its affine span (−1 for no points).  ``corners``: indices in input order.
    ``equations``: D − dimension of them, which say what the span is.  ``facets``: half-spaces whose
    intersection with the span is the hull; None where the dimension is above the one asked for (or
    facets are too many).  ``volume``: in D dimensions, so 0 where flat; None where facets are None.
    """

    dimension: int
    corners: tuple[int, ...]
    equations: tuple[Equation, ...]
    facets: tuple[Facet, ...] | None
    volume: Fraction | None


def affine_rank(points: Points) -> int:
    """The dimension of the affine span: 0 for one point, −1 for none."""
    if not points:
        return -1
    return len(independent_rows(_relative(_scaled(points)[0]))[0])


def roles(points: Points) -> tuple[Role, ...]:
    """Corner or inner for each point, exactly; of equal points only the first can be a corner."""
    _check(points)
    found = corners(points)
    return tuple(
        Role(True) if is_corner else Role(False, tuple(sorted(found.imitation(index).items())))
        for index, is_corner in enumerate(found.is_corner)
    )


def hull(points: Points, facet_dimension: int = 4) -> Hull:
    """The hull of the points; facets and volume where its dimension is at most ``facet_dimension``."""
    if not points:
        return Hull(dimension=-1, corners=(), equations=(), facets=(), volume=Fraction(0))
    scaled, scales = _scaled(points)
    _, columns = independent_rows(_relative(scaled))
    columns = sorted(columns)
    dimension, ambient = len(columns), len(scales)
    at_corners = tuple(index for index, is_corner in enumerate(corners(points).is_corner) if is_corner)
    equations = tuple(_equation(scaled, columns, column, scales) for column in range(ambient) if column not in columns)
    if dimension == 0:
        volume = Fraction(int(ambient == 0))
        return Hull(dimension=0, corners=at_corners, equations=equations, facets=(), volume=volume)
    flat = [tuple(scaled[i][column] for column in columns) for i in at_corners]
    try:
        planes = facets(flat, _proposed(flat)) if dimension <= facet_dimension else None
    except TooManyFacets:
        planes = None
    if planes is None:
        flat_volume = Fraction(0) if dimension < ambient else None
        return Hull(dimension=dimension, corners=at_corners, equations=equations, facets=None, volume=flat_volume)
    volume = Fraction(0)
    if dimension == ambient:
        total = sum(volume_of_simplex([flat[i] for i in part]) for part in simplices(flat, planes))
        volume = Fraction(total, factorial(dimension) * prod(scales))
    return Hull(
        dimension=dimension,
        corners=at_corners,
        equations=equations,
        facets=tuple(_facet(plane.normal, plane.offset, columns, scales) for plane in planes),
        volume=volume,
    )


def projection(points: Points, i: int, j: int) -> tuple[int, ...]:
    """Indices of the corners of the shadow in coordinates i and j, counter-clockwise.

    Begins at the lexicographically least; of equal shadows the first point stands.  Two for a
    shadow that is a segment, one for a point, none for no points.  (A. M. Andrew's monotone chain, 1979.)
    """
    scaled, _ = _scaled(points)
    first: dict[tuple[int, int], int] = {}
    for index, point in enumerate(scaled):
        first.setdefault((point[i], point[j]), index)
    shadow = sorted(first)
    if len(shadow) < 3:
        return tuple(first[point] for point in shadow)
    ring = [*_chain(shadow), *_chain(shadow[::-1])]
    return tuple(first[point] for point in ring)


def ternary(point: Vector, total: Fraction) -> tuple[float, float]:
    """Where three parts of a total stand in a triangle of side 1: all first at (0, 0), all second at (1, 0).

    Raises ValueError for other than three parts or a total that is not positive.
    """
    if len(point) != 3 or total <= 0:
        raise ValueError(f"a ternary point has three parts of a positive total, not {len(point)} of {total}")
    return float((point[1] + point[2] / 2) / total), float(point[2] / total) * sqrt(3) / 2


def _check(points: Points) -> None:
    if any(len(point) != len(points[0]) for point in points):
        raise ValueError("points have different numbers of coordinates")


def _scaled(points: Points) -> tuple[list[Whole], list[int]]:
    """The points with each coordinate multiplied by the number that makes it whole, and these numbers."""
    _check(points)
    scales = [common_denominator(column) for column in zip(*points, strict=True)]
    return [tuple(whole(v, s) for v, s in zip(point, scales, strict=True)) for point in points], scales


def _relative(scaled: Sequence[Whole]) -> list[Whole]:
    return [tuple(a - b for a, b in zip(point, scaled[0], strict=True)) for point in scaled[1:]]


def _proposed(flat: Sequence[Whole]) -> list[list[int]]:
    """Qhull's simplicial facets as point indices; none where it gives up or is not needed."""
    dimension = len(flat[0])
    if dimension < 2 or len(flat) <= dimension + 1:
        return []
    import numpy as np
    from scipy.spatial import ConvexHull, QhullError

    lows = [min(column) for column in zip(*flat, strict=True)]
    spans = [max(column) - low for column, low in zip(zip(*flat, strict=True), lows, strict=True)]
    unit = [[(v - low) / span for v, low, span in zip(point, lows, spans, strict=True)] for point in flat]
    try:
        return [[int(i) for i in simplex] for simplex in ConvexHull(np.array(unit)).simplices]
    except QhullError:
        return []


def _facet(normal: Whole, offset: int, columns: Sequence[int], scales: Sequence[int]) -> Facet:
    """The half-space in the original coordinates: x = scaled / scales."""
    coefficients = [0] * len(scales)
    for column, value in zip(columns, normal, strict=True):
        coefficients[column] = value * scales[column]
    *coefficients, at_most = coprime([*coefficients, offset])
    return Facet(tuple(coefficients), at_most)


def _equation(scaled: Sequence[Whole], columns: Sequence[int], column: int, scales: Sequence[int]) -> Equation:
    """How a coordinate that follows from the spanning ones does."""
    relative = _relative(scaled)
    kept, _ = independent_rows([[row[j] for j in columns] for row in relative])
    solved = solve_square([[relative[k][j] for j in columns] for k in kept], [relative[k][column] for k in kept])
    assert solved is not None
    numerators, denominator = solved
    coefficients = [0] * len(scales)
    for j, value in zip(columns, numerators, strict=True):
        coefficients[j] = -value * scales[j]
    coefficients[column] = denominator * scales[column]
    equals = denominator * scaled[0][column] - sum(
        value * scaled[0][j] for j, value in zip(columns, numerators, strict=True)
    )
    *coefficients, equals = coprime([*coefficients, equals])
    if next(value for value in coefficients if value) < 0:
        coefficients, equals = [-value for value in coefficients], -equals
    return Equation(tuple(coefficients), equals)


def _chain(shadow: Sequence[tuple[int, int]]) -> list[tuple[int, int]]:
    """The lower side of sorted planar points, without its last corner."""
    chain: list[tuple[int, int]] = []
    for point in shadow:
        while len(chain) > 1 and _turn(chain[-2], chain[-1], point) <= 0:
            chain.pop()
        chain.append(point)
    return chain[:-1]


def _turn(a: tuple[int, int], b: tuple[int, int], c: tuple[int, int]) -> int:
    """Positive where a → b → c turns left."""
    return (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0])
