"""Hulls: roles, facets, equations, volumes and shadows, against brute force and published facts."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import product
from math import comb, factorial

import numpy as np
import pytest
import scipy.spatial
from hypothesis import given, settings
from hypothesis import strategies as st

from generator.geometry import hull as hull_module
from generator.geometry.facets import TooManyFacets, facets
from generator.geometry.hull import Equation, Facet, affine_rank, hull, projection, roles, ternary
from tests.geometry import oracle
from tests.geometry.exact_families import clouds

F = Fraction


def exact(points) -> list[tuple[Fraction, ...]]:
    """Points from anything that Fraction reads."""
    return [tuple(F(value) for value in point) for point in points]


def dot(coefficients, point) -> Fraction:
    """The value of a functional at a point."""
    return sum((a * v for a, v in zip(coefficients, point, strict=True)), F(0))


def cube(d):
    """The unit cube's corners."""
    return exact(product((0, 1), repeat=d))


def cross(d):
    """The cross-polytope's corners."""
    return exact([tuple(sign * int(i == axis) for i in range(d)) for axis in range(d) for sign in (1, -1)])


def simplex(d):
    """The origin and the unit vectors."""
    return exact([(0,) * d, *[tuple(int(i == axis) for i in range(d)) for axis in range(d)]])


def moment_curve(n, d):
    """n points (t, t², …, t^d) with t evenly spaced on [−1, 1]."""
    return [tuple((F(2 * i, n - 1) - 1) ** k for k in range(1, d + 1)) for i in range(n)]


@settings(max_examples=80, deadline=None)
@given(st.integers(1, 3).flatmap(lambda d: clouds(d, 7)))
def test_roles_agree_with_brute_force(points):
    """Corners are the oracle's, the first of equal points stands, and imitations are exact and sparse."""
    found = roles(points)
    expected = oracle.corner_points(points)
    for index, (point, role) in enumerate(zip(points, found, strict=True)):
        assert role.is_corner == (point in expected and point not in points[:index])
        if not role.is_corner:
            assert all(weight > 0 and i != index for i, weight in role.imitation)
            assert sum(weight for _, weight in role.imitation) == 1
            assert len(role.imitation) <= oracle.dimension(points) + 1
            blend = tuple(sum(w * points[i][axis] for i, w in role.imitation) for axis in range(len(point)))
            assert blend == point


@settings(max_examples=80, deadline=None)
@given(st.integers(1, 3).flatmap(lambda d: clouds(d, 8)))
def test_facets_agree_with_brute_force(points):
    """Facets, equations and corners are those of the oracle, flat or not."""
    shape = hull(points)
    assert shape.dimension == affine_rank(points) == oracle.dimension(points)
    assert {points[i] for i in shape.corners} == oracle.corner_points(points)
    assert list(shape.corners) == sorted(shape.corners)
    assert shape.facets is not None
    for facet in shape.facets:
        values = [dot(facet.coefficients, point) for point in points]
        assert max(values) == facet.at_most
        on = [point for point, value in zip(points, values, strict=True) if value == facet.at_most]
        assert oracle.dimension(on) == shape.dimension - 1
    for equation in shape.equations:
        assert all(dot(equation.coefficients, point) == equation.equals for point in points)
    if points:
        assert oracle.rank([list(map(F, e.coefficients)) for e in shape.equations]) == len(points[0]) - shape.dimension
        assert len(shape.equations) == len(points[0]) - shape.dimension
    if points and shape.dimension == len(points[0]):
        sets = {
            frozenset(points[i] for i in shape.corners if dot(f.coefficients, points[i]) == f.at_most)
            for f in shape.facets
        }
        assert sets == oracle.facet_sets(points)
        assert len(sets) == len(shape.facets)
        assert shape.volume is not None
        assert shape.volume > 0
    else:
        assert shape.volume == 0


@settings(max_examples=40, deadline=None)
@given(clouds(3, 9), st.randoms(use_true_random=False))
def test_facets_without_or_with_wrong_proposals(points, rng):
    """Gift wrapping finds every facet by itself, and nonsense proposed to it does no harm."""
    corners = [points[i] for i in hull(points).corners]
    if oracle.dimension(corners) < 3:
        return
    whole = [tuple(int(2 * value) for value in point) for point in corners]
    nonsense = [[rng.randrange(len(whole)) for _ in range(3)] for _ in range(5)]
    planes = facets(whole)
    assert planes == facets(whole, nonsense)
    assert {frozenset(corners[i] for i in plane.on) for plane in planes} == oracle.facet_sets(points)


def test_qhull_only_proposes(monkeypatch):
    """The hull is the same where Qhull says nothing, gives up, or names the wrong facets."""
    rng = random.Random(4)
    points = exact([tuple(rng.randint(0, 6) for _ in range(3)) for _ in range(25)])
    expected = hull(points)

    class Liar:
        simplices = np.array([[0, 1, 2], [2, 1, 0], [1, 1, 1]])

    def gives_up(_):
        raise scipy.spatial.QhullError("no")

    monkeypatch.setattr(hull_module, "_proposed", lambda flat: [])
    assert hull(points) == expected
    monkeypatch.undo()
    for stand_in in (lambda _: Liar, gives_up):
        monkeypatch.setattr(scipy.spatial, "ConvexHull", stand_in)
        assert hull(points) == expected


@pytest.mark.parametrize("d", [1, 2, 3, 4])
def test_published_volumes_and_facet_counts(d):
    """Simplex 1/d! and d + 1, cross-polytope 2^d/d! and 2^d, cube 1 and 2d (Ziegler 1995, Coxeter; from memory)."""
    for points, volume, count in (
        (simplex(d), F(1, factorial(d)), d + 1),
        (cross(d), F(2**d, factorial(d)), 2**d if d > 1 else 2),
        (cube(d), F(1), 2 * d),
    ):
        shape = hull(points)
        assert shape.volume == volume
        assert shape.facets is not None
        assert len(shape.facets) == count
        assert shape.corners == tuple(range(len(points)))


@pytest.mark.parametrize("n, d, count", [(8, 4, 20), (21, 4, 189), (10, 6, 50)])
def test_cyclic_polytopes_have_the_most_facets(n, d, count):
    """Points on the moment curve reach McMullen's upper bound (Mathematika 17, 1970, 179–184; Gale 1963)."""
    shape = hull(moment_curve(n, d), facet_dimension=6)
    assert shape.facets is not None
    assert len(shape.facets) == count == comb(n - d // 2, d // 2) + comb(n - d // 2 - 1, d // 2 - 1)
    assert len(shape.corners) == n


def test_caratheodory_is_attained():
    """A simplex's centroid needs all d + 1 corners, a cross-polytope's centre two (Carathéodory 1907; from memory)."""
    for d in (3, 5, 7):
        centre = [tuple(F(1, d + 1) for _ in range(d))]
        assert len(roles(simplex(d) + centre)[-1].imitation) == d + 1
        assert len(roles(cross(d) + exact([(0,) * d]))[-1].imitation) >= 2
        assert len(roles(cross(d) + exact([(0,) * d]))[-1].imitation) % 2 == 0


def test_grids_have_the_corners_of_their_box():
    """A 3 × 3 × 3 grid has 8 corners and 6 facets, a 3 × 3 × 3 × 3 grid 16 and 8."""
    for d in (3, 4):
        grid = exact(product(range(3), repeat=d))
        shape = hull(grid)
        assert len(shape.corners) == 2**d
        assert shape.facets is not None
        assert len(shape.facets) == 2 * d
        assert shape.volume == 2**d


def test_mixed_units_lose_no_corner():
    """Scaling a coordinate from percent to ppm changes neither corners nor facets, and scales the volume."""
    rng = random.Random(9)
    points = exact([tuple(rng.randint(0, 9) for _ in range(3)) for _ in range(30)])
    stretched = [(a, b / 10**6, c * 10**4) for a, b, c in points]
    plain, other = hull(points), hull(stretched)
    assert other.corners == plain.corners
    assert other.volume == plain.volume / 100
    assert plain.facets is not None
    assert other.facets is not None
    assert len(other.facets) == len(plain.facets)


def test_nearly_flat_is_not_flat():
    """A cloud lifted by 1e-12 at one point has all its dimensions, exactly."""
    points = exact([(0, 0, 0), (1, 0, 0), (0, 1, 0), (1, 1, "1e-12")])
    shape = hull(points)
    assert shape.dimension == 3
    assert shape.volume == F(1, 6 * 10**12)
    assert shape.facets is not None
    assert len(shape.facets) == 4


def test_closed_compositions_are_a_plane_in_space():
    """Three parts of 100 lie in the plane a + b + c = 100; their facets are stated within it."""
    shape = hull(exact([(60, 30, 10), (20, 70, 10), (20, 30, 50), ("33.3", "43.3", "23.4")]))
    assert shape.dimension == 2
    assert shape.corners == (0, 1, 2)
    assert shape.equations == (Equation((1, 1, 1), 100),)
    assert set(shape.facets or ()) == {Facet((0, -1, 0), -30), Facet((1, 1, 0), 90), Facet((-1, 0, 0), -20)}
    assert shape.volume == 0


def test_segments_points_and_nothing():
    """Collinear clouds, repeated points, one point, no coordinates and no points have plain answers."""
    segment = hull(exact([(1, 2), (1, 2), (3, 4), (2, 3)]))
    assert (segment.dimension, segment.corners, segment.volume) == (1, (0, 2), 0)
    assert segment.equations == (Equation((1, -1), -1),)
    assert segment.facets == (Facet((-1, 0), -1), Facet((1, 0), 3))
    point = hull(exact([("0.5", 2), ("0.5", 2)]))
    assert (point.dimension, point.corners, point.facets, point.volume) == (0, (0,), (), 0)
    assert point.equations == (Equation((2, 0), 1), Equation((0, 1), 2))
    assert hull([]).dimension == affine_rank([]) == -1
    assert hull([]).corners == roles([]) == projection([], 0, 1) == ()
    assert hull([(), ()]).corners == (0,)
    assert hull(exact([(1,), (3,), (2,)])).facets == (Facet((-1,), -1), Facet((1,), 3))


def test_too_many_dimensions_or_facets_give_none():
    """Above the dimension asked for there are corners, and no facets; too many facets are reported as such."""
    shape = hull(cross(5))
    assert shape.facets is None
    assert shape.volume is None
    assert len(shape.corners) == 10
    with pytest.raises(TooManyFacets):
        facets([tuple(int(v) for v in point) for point in cross(4)], at_most=5)


def test_uneven_points_are_refused():
    """Points of different length raise ValueError."""
    with pytest.raises(ValueError, match="numbers of coordinates"):
        hull(exact([(1, 2), (1, 2, 3)]))


@settings(max_examples=120, deadline=None)
@given(clouds(3, 9))
def test_shadows_agree_with_brute_force(points):
    """A shadow's ring holds the planar corners, each once, turning left all the way."""
    ring = projection(points, 0, 2)
    shadow = [(point[0], point[2]) for point in points]
    assert {shadow[i] for i in ring} == oracle.corner_points(shadow)
    assert len(ring) == len({shadow[i] for i in ring})
    assert all(shadow.index(shadow[i]) == i for i in ring)
    for a, b, c in zip(ring, ring[1:] + ring[:1], ring[2:] + ring[:2], strict=True):
        if len(ring) > 2:
            (ax, ay), (bx, by), (cx, cy) = shadow[a], shadow[b], shadow[c]
            assert (bx - ax) * (cy - ay) > (by - ay) * (cx - ax)
    if ring:
        assert shadow[ring[0]] == min(shadow)


def test_volume_agrees_with_qhull_in_general_position():
    """On random points in 2, 3 and 4 dimensions volume and facet count are Qhull's."""
    rng = random.Random(21)
    for d in (2, 3, 4):
        points = exact([tuple(rng.randint(0, 10**6) for _ in range(d)) for _ in range(14)])
        other = scipy.spatial.ConvexHull(np.array(points, dtype=float))
        shape = hull(points)
        assert float(shape.volume or 0) == pytest.approx(other.volume, rel=1e-9)
        assert len(shape.facets or ()) == len(other.simplices)


def test_ternary_coordinates():
    """Pure parts stand at the corners of a triangle of side 1, equal parts at its centre."""
    total = F(100)
    assert ternary((total, F(0), F(0)), total) == (0, 0)
    assert ternary((F(0), total, F(0)), total) == (1, 0)
    assert ternary((F(0), F(0), total), total) == pytest.approx((0.5, 0.75**0.5))
    assert ternary((F(1), F(1), F(1)), F(3)) == pytest.approx((0.5, 0.75**0.5 / 3))
    for parts, whole in (((F(1), F(1)), F(2)), ((F(1), F(1), F(1)), F(0))):
        with pytest.raises(ValueError, match="three parts"):
            ternary(parts, whole)
