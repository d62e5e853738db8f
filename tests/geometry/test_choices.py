"""Shares of which only few may be used, against brute force over every set of used shares."""

from __future__ import annotations

import random
from itertools import combinations
from math import inf

import numpy as np
import pytest
from scipy.optimize import linprog

from generator.geometry.choices import Choosing, choose_many


def drawn(rng: random.Random) -> Choosing:
    """Six shares under three rows around one blend, at most three used, each at least a tenth."""
    n = 6
    values = np.array([[rng.randint(0, 9) for _ in range(n)] for _ in range(3)], dtype=float)
    middle = values @ np.array([0.3, 0.3, 0.4, 0, 0, 0])
    return Choosing(
        cost=np.array([float(rng.randint(1, 9)) for _ in range(n)]),
        rows=values - middle[:, None],
        low=np.full(3, -1.0),
        high=np.full(3, 1.0),
        cap=np.array([rng.choice([1.0, 0.6]) for _ in range(n)]),
        least=np.array([rng.choice([0.0, 0.1, 0.2]) for _ in range(n)]),
        most=3,
        apart=((frozenset([0]), frozenset([3, 4])),) if rng.random() < 0.5 else (),
    )


def by_force(problem: Choosing) -> float:
    best = inf
    for size in range(1, (problem.most or 6) + 1):
        for used in combinations(range(6), size):
            if any(one & set(used) and other & set(used) for one, other in problem.apart):
                continue
            bounds = [(problem.least[i], problem.cap[i]) if i in used else (0, 0) for i in range(6)]
            if any(low > high for low, high in bounds):
                continue
            answer = linprog(
                problem.cost,
                A_ub=np.vstack([problem.rows, -problem.rows]),
                b_ub=np.concatenate([problem.high, -problem.low]),
                A_eq=np.ones((1, 6)),
                b_eq=[1],
                bounds=bounds,
            )
            best = min(best, answer.fun if answer.status == 0 else inf)
    return best


@pytest.mark.parametrize("seed", range(4))
def test_the_best_choice(seed: int) -> None:
    """Of several problems side by side each finds its best shares, within every rule, and a bound that holds."""
    rng = random.Random(seed)
    problems = [drawn(rng) for _ in range(6)]
    found, spent = choose_many(problems, [1e6] * 6, 1e-9)
    assert spent >= 6
    for problem, chosen in zip(problems, found, strict=True):
        best = by_force(problem)
        if best == inf:
            assert chosen.x is None
            continue
        assert chosen.value == pytest.approx(best, abs=1e-6)
        assert chosen.bound <= best + 1e-9
        assert chosen.x is not None
        used = np.flatnonzero(chosen.x > 1e-9)
        assert len(used) <= 3
        assert (chosen.x[used] >= problem.least[used] - 1e-7).all()
        assert not any(one & set(used.tolist()) and other & set(used.tolist()) for one, other in problem.apart)


def test_what_is_known_is_not_sought_again() -> None:
    """Where nothing gains the slack over what is known, no shares are given, and the bound says how little could."""
    problem = drawn(random.Random(1))
    best = by_force(problem)
    (chosen,), _ = choose_many([problem], [best], 0.5)
    assert chosen.x is None
    assert best - 0.5 - 1e-9 <= chosen.bound <= best


def test_effort_that_ends_leaves_a_bound() -> None:
    """Stopped at once, the bound still lies below the best."""
    problem = drawn(random.Random(2))
    (chosen,), spent = choose_many([problem], [1e6], 1e-9, nodes=1)
    assert spent <= 4
    assert chosen.bound <= by_force(problem)
