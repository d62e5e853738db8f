"""An exact oracle that shares no code and no method with the program: clipping by half-spaces.

The shares within an order's limits are a polytope; it is kept as the list of its vertices, each with
the constraints that are tight there.  To clip by a·x ≤ b, keep the vertices inside and add, for every
edge that crosses the plane, where it crosses; two vertices share an edge if no third one is tight in
all that both are tight in (the double description method of Motzkin, Raiffa, Thompson and Thrall
1953).  Extremes of linear functions and of ratios with a positive denominator are then read off.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

Point = tuple[Fraction, ...]
HalfSpace = tuple[Sequence[Fraction], Fraction]
Vertices = dict[Point, frozenset[object]]


def clip(vertices: Vertices, half_space: HalfSpace, name: object) -> Vertices:
    """The vertices of the part with a·x ≤ b; ``name`` marks the new constraint."""
    a, b = half_space
    sides = {point: sum((p * q for p, q in zip(a, point, strict=True)), Fraction(0)) - b for point in vertices}
    kept = {p: tight | {name} if sides[p] == 0 else tight for p, tight in vertices.items() if sides[p] <= 0}
    inside = [p for p in vertices if sides[p] < 0]
    outside = [p for p in vertices if sides[p] > 0]
    for one in inside:
        for other in outside:
            common = vertices[one] & vertices[other]
            if any(common <= tight for p, tight in vertices.items() if p not in (one, other)):
                continue
            s, t = sides[one], sides[other]
            w = t / (t - s)
            point = tuple(w * p + (1 - w) * q for p, q in zip(one, other, strict=True))
            kept[point] = kept.get(point, frozenset()) | common | {name}
    return kept


def clip_all(vertices: Vertices, half_spaces: Sequence[HalfSpace]) -> Vertices:
    """The vertices of the part in every half-space."""
    for half_space in half_spaces:
        vertices = clip(vertices, half_space, (tuple(half_space[0]), half_space[1]))
    return vertices


def shares(n: int, half_spaces: Sequence[HalfSpace]) -> Vertices:
    """The vertices of the shares of n lots within the half-spaces."""
    corners: Vertices = {
        tuple(Fraction(int(i == j)) for j in range(n)): frozenset(("none of", j) for j in range(n) if j != i)
        for i in range(n)
    }
    return clip_all(corners, half_spaces)


def amounts(stock: Sequence[Fraction], half_spaces: Sequence[HalfSpace]) -> Vertices:
    """The vertices of the amounts 0 ≤ x ≤ stock (each stock above 0) within the half-spaces."""
    corners: Vertices = {(): frozenset()}
    for i, most in enumerate(stock):
        corners = {
            (*corner, value): tight | {(end, i)}
            for corner, tight in corners.items()
            for end, value in (("none of", Fraction(0)), ("all of", most))
        }
    return clip_all(corners, half_spaces)
