"""Roles of points: the same as the exact ones, whatever the cloud."""

from fractions import Fraction
from random import Random

import numpy as np
import pytest
from scipy.spatial import ConvexHull

from generator.geometry.corners import corners
from tests.geometry import oracle
from tests.geometry.stack_families import KINDS, points


def assert_imitated(cloud, roles) -> None:
    """Every inner point's exact shares are positive, sum to 1 and rebuild it from others."""
    for k in range(len(cloud)):
        if roles.is_corner[k]:
            assert k not in roles.imitated_by
            continue
        shares = roles.imitation(k)
        assert k not in shares
        assert min(shares.values()) > 0
        assert sum(shares.values()) == 1
        for i, value in enumerate(cloud[k]):
            assert sum(share * cloud[j][i] for j, share in shares.items()) == value


@pytest.mark.parametrize("kind", KINDS)
def test_roles_agree_with_the_oracle_on_degenerate_clouds(kind):
    """Lines, planes, repeated points, lattices, nearly flat and mixed scales: corners are the oracle's."""
    for seed in range(6):
        random = Random(f"corners {kind} {seed}")
        cloud = points(random, kind, random.randint(1, 3), random.randint(1, 12))
        roles = corners(cloud)
        found = {cloud[k] for k in np.flatnonzero(roles.is_corner)}
        assert found == {tuple(point) for point in oracle.corner_points(cloud)}
        assert roles.is_corner.sum() == len(found)
        assert_imitated(cloud, roles)
        assert roles.tally.total == len(cloud)


def test_of_equal_points_the_first_is_the_corner():
    """Repeats are imitated by the first of them."""
    cloud = [(Fraction(v),) for v in (1, 0, 0, 2, 2, 1)]
    roles = corners(cloud)
    assert roles.is_corner.tolist() == [False, True, False, True, False, False]
    assert roles.imitated_by[2] == (1,)
    assert roles.imitation(0) == {1: Fraction(1, 2), 3: Fraction(1, 2)}


@pytest.mark.parametrize(("cloud", "expected"), [([], []), ([()], [True]), ([(), ()], [True, False])])
def test_small_clouds(cloud, expected):
    """No point, or points without values, are no special case."""
    assert corners(cloud).is_corner.tolist() == expected


@pytest.mark.parametrize("d", [2, 4])
def test_general_position_agrees_with_qhull_and_is_decided_by_floats(d):
    """For 300 random points the corners are Qhull's, and floats prove all of them."""
    values = np.random.default_rng(d).normal(size=(300, d)).round(4)
    cloud = [tuple(Fraction(str(v)) for v in row) for row in values]
    roles = corners(cloud)
    assert np.flatnonzero(roles.is_corner).tolist() == sorted(ConvexHull(values).vertices)
    assert roles.tally.floats == 300
    assert_imitated(cloud[:1] + cloud[1:], roles)


def test_order_of_points_changes_no_role():
    """Shuffled points keep their roles."""
    cloud = points(Random("order"), "general", 3, 60)
    order = Random(1).sample(range(60), 60)
    plain, shuffled = corners(cloud), corners([cloud[k] for k in order])
    assert plain.is_corner[order].tolist() == shuffled.is_corner.tolist()


def test_a_sum_that_is_always_the_same_is_flat():
    """Compositions that sum to 100 are flat in all their values and keep their corners."""
    random = Random("sum")
    cloud = []
    for _ in range(40):
        a, b = random.randint(0, 500), random.randint(0, 500)
        cloud.append((Fraction(a, 10), Fraction(b, 10), 100 - Fraction(a + b, 10)))
    flat, reduced = corners(cloud), corners([point[:2] for point in cloud])
    assert flat.is_corner.tolist() == reduced.is_corner.tolist()
    assert_imitated(cloud, flat)
