"""Questions about windows: every answer agrees with the exact decision of the single program."""

import os
import subprocess
import sys
from dataclasses import replace
from fractions import Fraction
from pathlib import Path
from random import Random

import numpy as np
import pytest

from generator.geometry.decide import decide
from generator.geometry.exact import exact_simplex
from generator.geometry.program import Optimum
from generator.geometry.reach import Window, cheapest_many, free, ranges_many, reach, without, without_many
from tests.geometry.stack_families import KINDS, prices, windows

ROOT = Path(__file__).parents[2]


def vector(*values) -> tuple[Fraction, ...]:
    return tuple(Fraction(value) for value in values)


#: Two points A (10, 20) and B (30, 5): halfway lies (20, 12.5).
ROWS = (vector(10, 30), vector(20, 5))


def make_window(low=(None, None), high=(None, None), **changes) -> Window:
    def bounds(values):
        return tuple(None if value is None else Fraction(value) for value in values)

    return Window(rows=ROWS, low=bounds(low), high=bounds(high), **changes)


@pytest.mark.parametrize("kind", KINDS)
def test_cheapest_agrees_with_the_exact_simplex(kind):
    """Verdict, value and published proof of every window are those of the exact simplex method."""
    random = Random(f"cheapest {kind}")
    asked = windows(random, kind, 3, 7, 50)
    cost = prices(random, 7)
    reached = cheapest_many(asked, cost)
    for k, window in enumerate(asked):
        expected = exact_simplex(window.program(cost))
        assert reached.is_feasible[k] == isinstance(expected, Optimum)
        assert type(reached.answer(k)) is type(expected)
        if isinstance(expected, Optimum):
            assert reached.answer(k).value == expected.value
            assert reached.least[k] <= expected.value <= reached.most[k]
            assert reached.value[k] == pytest.approx(float(expected.value), abs=1e-7)
        else:
            assert np.isnan(reached.value[k])
    assert reached.tally.total == len(asked)


def test_the_two_point_example():
    """N ≥ 20 and K ≥ 16 can't both be had of A (10, 20) and B (30, 5); either alone can."""
    asked = [make_window(low=(20, 16)), make_window(low=(20, None)), make_window(low=(None, 16))]
    reached = cheapest_many(asked, vector(1, 3))
    assert reached.is_feasible.tolist() == [False, True, True]
    np.testing.assert_allclose(reached.x[1:], [[0.5, 0.5], [1.0, 0.0]])


@pytest.mark.parametrize("kind", KINDS)
def test_ranges_agree_with_exact_programs(kind):
    """Least and greatest of each row, its own bounds aside, are right within the error stated, or rightly absent."""
    random = Random(f"ranges {kind}")
    asked = windows(random, kind, 2, 6, 12)
    ranges = ranges_many(asked)
    for k, window in enumerate(asked):
        for row in range(2):
            terms = window.rows[row]
            low = exact_simplex(free(window, row).program(terms))
            assert ranges.exists[k, row] == isinstance(low, Optimum)
            if isinstance(low, Optimum):
                high = exact_simplex(free(window, row).program(tuple(-t for t in terms)))
                assert abs(Fraction(ranges.least[k, row]) - low.value) <= ranges.error[k, row]
                assert abs(Fraction(ranges.greatest[k, row]) + high.value) <= ranges.error[k, row]
                assert ranges.error[k, row] < 1e-6
            else:
                assert np.isnan([ranges.least[k, row], ranges.greatest[k, row]]).all()


def test_ranges_of_windows_with_rows_of_their_own():
    """Windows over different rows, share bounds and totals are answered in one call."""
    asked = [
        make_window(low=(20, None)),
        Window(
            rows=(vector(1, 2), vector(0, 1)),
            low=(None, None),
            high=(None, Fraction(1, 2)),
            lower=vector(0, 0),
            upper=vector(1, "3/4"),
        ),
    ]
    ranges = ranges_many(asked)
    np.testing.assert_allclose(ranges.least, [[10, 5], [1, 0]], atol=1e-9)
    np.testing.assert_allclose(ranges.greatest, [[30, 12.5], [1.5, 0.75]], atol=1e-9)


def test_without_a_point_it_is_gone():
    """Without B only A is left; a point forced in by its share bound can't be left out."""
    asked = [make_window(low=(20, None)), make_window(), replace(make_window(), lower=vector("1/10", 0))]
    reached = without_many(asked, vector(1, 3), [1, 1, 0])
    assert reached.is_feasible.tolist() == [False, True, False]
    assert reached.x[1].tolist() == [1.0, 0.0]
    assert without(asked[0], 1).upper == vector(1, 0)


def test_order_of_windows_and_points_changes_no_answer():
    """Reversed windows and points give the same verdicts and values."""
    random = Random("order")
    asked = windows(random, "general", 3, 8, 40)
    cost = prices(random, 8)
    plain = cheapest_many(asked, cost)
    turned = cheapest_many([replace(w, rows=tuple(row[::-1] for row in w.rows)) for w in reversed(asked)], cost[::-1])
    assert plain.is_feasible.tolist() == turned.is_feasible[::-1].tolist()
    np.testing.assert_allclose(plain.value, turned.value[::-1], rtol=1e-9)


def test_a_hundred_windows_on_a_border_are_all_decided():
    """Limits moved by one unit of the last typed digit, values in ppm and in percent: no verdict is wrong."""
    random = Random("border")
    cloud = [(Fraction(random.randint(0, 900), 10**7), Fraction(random.randint(0, 900), 10)) for _ in range(6)]
    rows = tuple(zip(*cloud, strict=True))
    asked = []
    for _ in range(100):
        i, j = random.sample(range(6), 2)
        middle = tuple((a + b) / 2 for a, b in zip(cloud[i], cloud[j], strict=True))
        digit = Fraction(random.randint(-1, 1), 10**8)
        asked.append(Window(rows=rows, low=(middle[0] + digit, middle[1]), high=(None, middle[1])))
    reached = cheapest_many(asked, vector(*[0] * 6))
    expected = [isinstance(decide(w.program(vector(*[0] * 6))), Optimum) for w in asked]
    assert reached.is_feasible.tolist() == expected
    assert {True, False} == set(expected)


def test_a_cost_that_falls_for_ever_is_refused():
    """A program without a least value raises ValueError with its place."""
    endless = replace(
        make_window().program(vector(-1, 0)), row_low=(None,) * 3, row_high=(None,) * 3, upper=(None,) * 2
    )
    with pytest.raises(ValueError, match="program 0 has no least value"):
        reach([endless])


@pytest.mark.parametrize("kind", KINDS)
def test_exact_answers_do_not_depend_on_company(kind):
    """Among ties, a window's exact optimum or proof is the same alone and among 250 others."""
    random = Random(f"company {kind}")
    asked = windows(random, kind, 2, 7, 250)
    cost = vector(*[random.randint(1, 2) for _ in range(7)])
    together = cheapest_many(asked, cost).answers()
    for k in range(0, 250, 10):
        assert cheapest_many([asked[k]], cost).answer(0) == together[k]


def test_threads_and_hash_seeds_change_no_answer():
    """Fresh processes with one or two threads and other hash seeds print the same exact answers."""
    script = (
        "from random import Random\n"
        "from tests.geometry.stack_families import KINDS, windows, prices\n"
        "from generator.geometry.reach import cheapest_many\n"
        "for kind in KINDS:\n"
        "    r = Random(kind)\n"
        "    print(cheapest_many(windows(r, kind, 3, 8, 220), prices(r, 8)).answers())\n"
    )
    printed = set()
    for threads, seed in (("1", "0"), ("2", "1")):
        environment = {**os.environ, "OPENBLAS_NUM_THREADS": threads, "PYTHONHASHSEED": seed}
        done = subprocess.run(
            [sys.executable, "-c", script], env=environment, capture_output=True, text=True, check=True, cwd=ROOT
        )
        printed.add(done.stdout)
    assert len(printed) == 1
