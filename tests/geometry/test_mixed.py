"""Sparse programs with whole-number columns: points, bounds and multipliers."""

from __future__ import annotations

from math import inf

import numpy as np
import pytest

from generator.geometry.mixed import Mixed, SparseRow, linear, search


def test_a_knapsack() -> None:
    """The best whole point is found, with a bound that meets it."""
    program = Mixed(
        cost=[-5, -4, -3], upper=[1, 1, 1], rows=[SparseRow({0: 2, 1: 3, 2: 1}, -inf, 5)], whole=frozenset(range(3))
    )
    found = search(program, nodes=100, seconds=10)
    assert found.status == "proven"
    assert found.x is not None
    assert found.x.round().tolist() == [1, 1, 0]
    assert found.bound == pytest.approx(-9)


def test_multipliers_have_the_signs_of_a_program() -> None:
    """A row held at its high bound has a multiplier ≤ 0, one at its low bound ≥ 0; together they make the value."""
    rows = [
        SparseRow({0: 1000.0, 1: 1000.0}, -inf, 4000.0),
        SparseRow({0: 1e-4}, 1e-4, inf),
        SparseRow({0: 1, 1: -1}, 0, 0),
    ]
    found = linear(Mixed(cost=[-1, -2], upper=[inf, inf], rows=rows))
    assert found.multipliers is not None
    assert found.multipliers[0] < 0
    assert found.multipliers[0] * 4000 + found.multipliers[1] * 1e-4 == pytest.approx(found.value)
    assert found.value == pytest.approx(-6)


def test_what_has_no_point_or_no_bound_is_said() -> None:
    """Infeasible and unbounded programs are told apart from those with an answer."""
    none = Mixed(cost=[1], upper=[1], rows=[SparseRow({0: 1}, 2, inf)], whole=frozenset([0]))
    assert search(none, nodes=10, seconds=5).status == "infeasible"
    assert linear(none).status == "infeasible"
    assert linear(Mixed(cost=[-1], upper=[inf], rows=[])).status == "unbounded"
    assert search(Mixed(cost=[], upper=[], rows=[]), nodes=1, seconds=1).status == "proven"


def test_nothing_is_printed(capfd: pytest.CaptureFixture[str]) -> None:
    """A search leaves standard output alone, and what is printed after it still arrives."""
    rng = np.random.default_rng(3)
    rows = [SparseRow({j: float(rng.uniform(1, 9)) for j in range(20)}, -inf, 40.0) for _ in range(8)]
    program = Mixed(cost=list(-rng.uniform(1, 9, 20)), upper=[3.0] * 20, rows=rows, whole=frozenset(range(0, 20, 2)))
    search(program, nodes=50, seconds=5)
    print("after")
    assert capfd.readouterr().out == "after\n"
