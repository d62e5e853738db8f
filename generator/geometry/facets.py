"""Facets of a full-dimensional point set, in whole numbers: Qhull may propose, exactness is here.

A list of facets is complete once every ridge (a facet of a facet) belongs to two of them, since one
can walk from any facet of a polytope to any other across ridges.  So facets that somebody
proposes are checked against all points, and what is missing is found by turning a known facet's plane about its
ridge until it meets the next point (gift wrapping: D. R. Chand and S. S. Kapur, An algorithm for convex
polytopes, Journal of the ACM 17, 1970).
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import combinations

from generator.geometry.elimination import coprime, determinant, independent_rows

Whole = tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Plane:
    """``normal·x <= offset`` holds at every point, with equality at the points ``on`` (sorted indices)."""

    normal: Whole
    offset: int
    on: tuple[int, ...]


class TooManyFacets(ArithmeticError):  # noqa: N818 - a limit reached, no fault
    """More facets than the caller wants."""


def facets(points: Sequence[Whole], proposed: Iterable[Sequence[int]] = (), at_most: int = 20_000) -> list[Plane]:
    """All facets of points that are corners of their hull and span their space of dimension d ≥ 1.

    ``proposed``: sets of point indices that may span facets; wrong ones do no harm, missing ones are
    found.  More than ``at_most`` facets: :class:`TooManyFacets`.  Sorted by the indices of their points.
    """
    found: dict[tuple[int, ...], Plane] = {}
    for indices in proposed:
        plane = _supporting(points, _normal([points[i] for i in indices]))
        if plane is not None:
            found.setdefault(plane.on, plane)
    if not found:
        first = _first_facet(points)
        found[first.on] = first
    _complete(points, found, at_most)
    return [found[on] for on in sorted(found)]


def ridges(points: Sequence[Whole], on: tuple[int, ...]) -> list[tuple[int, ...]]:
    """The facets of one facet, each as the sorted indices of its points; of a single point, the empty one."""
    dimension = len(points[on[0]])
    if len(on) == dimension:
        return list(combinations(on, dimension - 1))
    _, columns = independent_rows(_differences([points[i] for i in on]))
    flat = [tuple(points[i][column] for column in columns) for i in on]
    return [tuple(on[i] for i in plane.on) for plane in facets(flat)]


def simplices(points: Sequence[Whole], planes: Sequence[Plane]) -> list[tuple[int, ...]]:
    """Indices of d + 1 points each: the hull cut into simplices, given all its facets.

    Cones from the first point over the simplices of the facets that it is not on.
    """
    whole = tuple(range(len(points)))
    return [tuple(part) for part in _cones(points, whole, [plane.on for plane in planes])]


def volume_of_simplex(corners: Sequence[Whole]) -> int:
    """The volume of the simplex on d + 1 points, times d factorial."""
    return abs(determinant(_differences(corners)))


def _cones(points: Sequence[Whole], members: tuple[int, ...], faces: list[tuple[int, ...]]) -> list[list[int]]:
    apex = members[0]
    parts: list[list[int]] = []
    for face in faces:
        if apex in face:
            continue
        rank = len(independent_rows(_differences([points[i] for i in face]))[0])
        if len(face) == rank + 1:
            parts.append([apex, *face])
        else:
            _, columns = independent_rows(_differences([points[i] for i in face]))
            flat = [tuple(points[i][column] for column in columns) for i in face]
            inner = _cones(flat, tuple(range(len(face))), [plane.on for plane in facets(flat)])
            parts.extend([apex, *(face[i] for i in part)] for part in inner)
    return parts


def _complete(points: Sequence[Whole], found: dict[tuple[int, ...], Plane], at_most: int) -> None:
    """Add the missing facets: those beyond ridges that have one side only."""
    waiting = list(found.values())
    open_ridges: dict[tuple[int, ...], Plane] = {}
    while waiting or open_ridges:
        if len(found) > at_most:
            raise TooManyFacets(f"more than {at_most} facets")
        if waiting:
            plane = waiting.pop()
            for ridge in ridges(points, plane.on):
                if open_ridges.pop(ridge, None) is None:
                    open_ridges[ridge] = plane
            continue
        ridge, plane = next(iter(open_ridges.items()))
        beyond = _turned(points, plane, ridge)
        assert beyond.on not in found
        found[beyond.on] = beyond
        waiting.append(beyond)


def _turned(points: Sequence[Whole], plane: Plane, ridge: tuple[int, ...]) -> Plane:
    """The other facet at a ridge of a facet.

    Seen along the ridge all points lie in a wedge of less than half a turn, so that one pass over
    them finds its far side.
    """
    own = next(i for i in plane.on if i not in ridge)
    held = [points[i] for i in ridge]
    base = [held[k] for k in _spanning(held)]
    beside = [i for i, point in enumerate(points) if _dot(plane.normal, point) != plane.offset]
    normal, offset = _facing(base, points[beside[0]], points[own])
    for i in beside[1:]:
        if _dot(normal, points[i]) > offset:
            normal, offset = _facing(base, points[i], points[own])
    on = tuple(i for i, point in enumerate(points) if _dot(normal, point) == offset)
    return Plane(normal, offset, on)


def _facing(base: list[Whole], through: Whole, below: Whole) -> tuple[Whole, int]:
    """The plane through d points, turned so that ``below`` lies below it."""
    normal = _normal([*base, through])
    offset = _dot(normal, through)
    if _dot(normal, below) > offset:
        return tuple(-a for a in normal), -offset
    return normal, offset


def _first_facet(points: Sequence[Whole]) -> Plane:
    """Some facet: a plane that touches the points is tilted about what it touches until it holds d of them."""
    dimension = len(points[0])
    normal: Whole = (-1,) + (0,) * (dimension - 1)
    while True:
        offset = max(_dot(normal, point) for point in points)
        on = tuple(i for i, point in enumerate(points) if _dot(normal, point) == offset)
        span = _differences([points[i] for i in on])
        if len(independent_rows(span)[0]) == dimension - 1:
            return Plane(tuple(coprime(normal)), _dot(coprime(normal), points[on[0]]), on)
        tilt = _orthogonal([*span, normal])
        level = _dot(tilt, points[on[0]])
        rises = [(offset - _dot(normal, point), _dot(tilt, point) - level) for point in points]
        if not any(rise > 0 for _, rise in rises):
            tilt = tuple(-a for a in tilt)
            rises = [(gap, -rise) for gap, rise in rises]
        gap, rise = next(pair for pair in rises if pair[1] > 0)
        for other_gap, other_rise in rises:
            if other_rise > 0 and other_gap * rise < gap * other_rise:
                gap, rise = other_gap, other_rise
        normal = tuple(coprime([rise * a + gap * b for a, b in zip(normal, tilt, strict=True)]))


def _orthogonal(rows: Sequence[Whole]) -> Whole:
    """A vector orthogonal to all rows, which span less than the space."""
    kept, columns = independent_rows(rows)
    dimension = len(rows[0])
    free = next(j for j in range(dimension) if j not in columns)
    wanted = [*columns, free]
    minor = [[rows[k][j] for j in wanted] for k in kept]
    vector = [0] * dimension
    for position, column in enumerate(wanted):
        without = [[*row[:position], *row[position + 1 :]] for row in minor]
        vector[column] = (-1) ** position * determinant(without)
    return tuple(coprime(vector))


def _normal(through: Sequence[Whole]) -> Whole:
    """The coprime normal of the plane through d points; all zeros if they don't span one."""
    differences = _differences(through)
    dimension = len(through[0])
    minors = [(-1) ** j * determinant([[*row[:j], *row[j + 1 :]] for row in differences]) for j in range(dimension)]
    return tuple(coprime(minors))


def _supporting(points: Sequence[Whole], normal: Whole) -> Plane | None:
    """The facet with this normal or its opposite, if it is one."""
    if not any(normal):
        return None
    return _touching(points, normal) or _touching(points, tuple(-a for a in normal))


def _touching(points: Sequence[Whole], normal: Whole) -> Plane | None:
    heights = [_dot(normal, point) for point in points]
    offset = max(heights)
    on = tuple(i for i, height in enumerate(heights) if height == offset)
    rank = len(independent_rows(_differences([points[i] for i in on]))[0])
    return Plane(normal, offset, on) if rank == len(normal) - 1 else None


def _spanning(points: Sequence[Whole]) -> list[int]:
    """Indices of affinely independent points that span all; none of none."""
    if not points:
        return []
    rows, _ = independent_rows(_differences(points))
    return [0, *(row + 1 for row in rows)]


def _differences(points: Sequence[Whole]) -> list[Whole]:
    base = points[0]
    return [tuple(a - b for a, b in zip(point, base, strict=True)) for point in points[1:]]


def _dot(left: Sequence[int], right: Sequence[int]) -> int:
    return sum(a * b for a, b in zip(left, right, strict=True))
