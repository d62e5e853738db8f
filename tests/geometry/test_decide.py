"""Decisions: whoever proposes, the verdict is right, proven and the same every time."""

from __future__ import annotations

import os
import random
import subprocess
import sys
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from generator.geometry import decide as decide_module
from generator.geometry.decide import decide, decide_counted, decide_many, from_proposal
from generator.geometry.exact import exact_simplex
from generator.geometry.program import Basis, Infeasible, Optimum, Program
from generator.geometry.propose import Proposal, highs
from tests.geometry.exact_families import make, programs
from tests.geometry.test_exact import EDGE_CASES, oracle, proven, verdict

F = Fraction


def blend(rng: random.Random, lots: int, components: int, tight: int = 600) -> Program:
    """Shares of lots that sum to 1, windows on components in % and ppm."""
    rows, low, high = [(F(1),) * lots], [F(1)], [F(1)]
    for component in range(components):
        unit = F(1, 100) if component % 3 else F(1, 1_000_000)
        row = tuple(rng.randint(0, 4000) * unit for _ in range(lots))
        centre = sorted(row)[lots // 2] + rng.randint(-tight, tight) * unit
        rows.append(row)
        low.append(centre - rng.randint(0, tight) * unit)
        high.append(centre + rng.randint(0, tight) * unit)
    cost = tuple(F(rng.randint(10000, 30000), 100) for _ in range(lots))
    return Program(
        rows=tuple(rows),
        row_low=tuple(low),
        row_high=tuple(high),
        lower=(F(0),) * lots,
        upper=(None,) * lots,
        cost=cost,
    )


@settings(max_examples=150, deadline=None)
@given(programs())
def test_decisions_agree_with_elimination(program):
    """The decision has the oracle's verdict and passes its checker."""
    answer = decide(program)
    assert verdict(answer) == oracle(program)
    assert proven(program, answer)


@pytest.mark.parametrize("name", EDGE_CASES)
def test_edge_cases(name):
    """Empty, free, fixed, crossed and redundant parts are decided rightly."""
    program, expected = EDGE_CASES[name]
    answer = decide(program)
    assert verdict(answer) == expected
    assert proven(program, answer)


def test_blends_need_no_search():
    """On blends in mixed units the floating-point proposal nearly always is the exact answer's basis."""
    rng = random.Random(7)
    many = [blend(rng, 16, 6) for _ in range(60)]
    answers, paths = decide_counted(many)
    assert [verdict(a) for a in answers] == [verdict(exact_simplex(p)) for p in many]
    assert {type(a) for a in answers} == {Optimum, Infeasible}
    assert paths.basis + paths.farkas >= 57
    assert paths.hint + paths.basis + paths.farkas + paths.rounded + paths.simplex == 60


def test_border_cases_in_mass_fractions():
    """Limits set by one unit of the last digit beyond what can be reached, in mass fractions, are unreachable.

    Each is beyond the greatest attainable value by 1e-9, far below a solver's absolute tolerance of 1e-7.
    """
    rng = random.Random(11)
    for _ in range(25):
        program = blend(rng, 8, 3, tight=2500)
        row = tuple(F(rng.randint(1, 99), 10**7) for _ in range(8))
        reach = decide(replace(program, cost=tuple(-a for a in row)))
        if not isinstance(reach, Optimum):
            continue
        for beyond, expected in ((F(0), Optimum), (F(1, 10**9), Infeasible)):
            asked = replace(
                program,
                rows=(*program.rows, row),
                row_low=(*program.row_low, -reach.value + beyond),
                row_high=(*program.row_high, None),
            )
            answer = decide(asked)
            assert isinstance(answer, expected)
            assert proven(asked, answer)


LIARS = {
    "knows nothing": lambda program: Proposal("unknown"),
    "says feasible, empty basis": lambda program: Proposal("feasible", Basis(())),
    "says feasible, slacks": lambda program: Proposal("feasible", _slacks(program)),
    "says infeasible, slacks": lambda program: Proposal("infeasible", _slacks(program)),
    "says infeasible, wild weights": lambda program: Proposal(
        "infeasible", _slacks(program), tuple((-1.0) ** k * 3.7**k for k in range(len(program.rows)))
    ),
    "says infeasible, no basis": lambda program: Proposal("infeasible", None, (1.0,) * len(program.rows)),
    "says infeasible, not numbers": lambda program: Proposal("infeasible", None, (float("nan"),) * len(program.rows)),
    "says infeasible, no numbers on a basis": lambda program: Proposal(
        "infeasible", _slacks(program), (float("inf"),) * len(program.rows)
    ),
    "turns the status round": lambda program: replace(
        highs(program),
        status={"feasible": "infeasible", "infeasible": "feasible"}.get(highs(program).status, "unknown"),
    ),
}


def _slacks(program: Program) -> Basis:
    n, m = len(program.cost), len(program.rows)
    return Basis(tuple(range(n, n + m)), frozenset(range(n)))


@pytest.mark.parametrize("name", LIARS)
def test_wrong_proposals_cost_time_only(name, monkeypatch):
    """With a proposer that errs or lies, every verdict is right and proven all the same."""
    monkeypatch.setattr(decide_module, "highs", LIARS[name])
    rng = random.Random(3)
    many = [blend(rng, 7, 3) for _ in range(12)] + [program for program, _ in EDGE_CASES.values()]
    expected = [verdict(exact_simplex(program)) for program in many]
    answers = decide_many(many)
    assert [verdict(answer) for answer in answers] == expected
    assert all(proven(program, answer) for program, answer in zip(many, answers, strict=True))


@settings(max_examples=100, deadline=None)
@given(programs(max_rows=3, max_columns=3), st.data())
def test_any_hint_is_safe(program, data):
    """A hint, right or wrong, changes no verdict."""
    m, n = len(program.rows), len(program.cost)
    columns = data.draw(st.permutations(range(n + m)))[:m]
    answer = decide(program, Basis(tuple(sorted(columns))))
    assert verdict(answer) == oracle(program)
    assert proven(program, answer)


def test_a_good_hint_is_used():
    """The basis of a neighbouring program decides without the proposer."""
    program = blend(random.Random(5), 12, 4, tight=2000)
    first = decide(program)
    assert isinstance(first, Optimum)
    again, paths = decide_counted([program], hints=[first.basis])
    assert paths.hint == 1
    assert again == [first]


def test_unbounded_columns_get_exact_multipliers():
    """With columns without upper bounds a blocking proof needs reduced costs of exactly 0: the basis gives them."""
    rng = random.Random(2)
    many = [blend(rng, 10, 5, tight=200) for _ in range(30)]
    blocked = [p for p in many if isinstance(exact_simplex(p), Infeasible)]
    assert len(blocked) >= 10
    for program in blocked:
        settled = from_proposal(program, highs(program))
        assert settled is not None
        assert settled[1] == "farkas"


def test_order_of_rows_and_columns_changes_no_value():
    """Verdict and value are the same when rows and columns are shuffled and rows change their unit."""
    rng = random.Random(13)
    for _ in range(15):
        program = blend(rng, 9, 4)
        columns, rows = rng.sample(range(9), 9), rng.sample(range(5), 5)
        unit = [F(10) ** rng.randint(-6, 6) for _ in rows]
        shuffled = Program(
            rows=tuple(tuple(program.rows[k][j] * u for j in columns) for k, u in zip(rows, unit, strict=True)),
            row_low=tuple(program.row_low[k] * u for k, u in zip(rows, unit, strict=True)),
            row_high=tuple(program.row_high[k] * u for k, u in zip(rows, unit, strict=True)),
            lower=program.lower,
            upper=program.upper,
            cost=tuple(program.cost[j] for j in columns),
        )
        assert verdict(decide(shuffled)) == verdict(decide(program))


def test_answers_do_not_depend_on_the_hash_seed():
    """Two processes with other hash seeds print the same answers."""
    code = (
        "import random\n"
        "from tests.geometry.test_decide import blend\n"
        "from generator.geometry.decide import decide\n"
        "rng = random.Random(1)\n"
        "print([decide(blend(rng, 8, 4)) for _ in range(8)])"
    )
    root = Path(__file__).parents[2]
    seen = {
        subprocess.run(
            [sys.executable, "-c", code],
            capture_output=True,
            text=True,
            check=True,
            cwd=root,
            env={**os.environ, "PYTHONHASHSEED": seed},
        ).stdout
        for seed in ("1", "2")
    }
    assert len(seen) == 1


def test_published_two_lot_example():
    """Lots (10, 20) and (30, 5) cannot reach N ≥ 20 with K ≥ 16, and can with K ≥ 12.5."""
    program = make([[1, 1], [10, 30], [20, 5]], [1, 20, 16], [1, None, None], [0, 0], [None, None], [0, 0])
    assert isinstance(decide(program), Infeasible)
    reached = decide(replace(program, row_low=(F(1), F(20), F("12.5"))))
    assert isinstance(reached, Optimum)
    assert reached.x == (F(1, 2), F(1, 2))
