"""Rows that hold with a probability: published cases, a general convex solver, and proofs on both sides."""

from dataclasses import replace
from fractions import Fraction
from statistics import NormalDist

import numpy as np
import pytest
from scipy.optimize import LinearConstraint, NonlinearConstraint, minimize
from scipy.special import ndtr

from generator.geometry.chance import Chance, Image, holds, probability, tangent
from generator.geometry.cone import assured, surest
from generator.geometry.decide import decide
from generator.geometry.program import Program


def vector(*values) -> tuple[Fraction, ...]:
    return tuple(Fraction(str(value)) for value in values)


def make_program(rows, low, high, cost) -> Program:
    """Shares that sum to 1, with further rows."""
    n = len(cost)
    one = Fraction(1)
    return Program(
        rows=(*(vector(*row) for row in rows), (one,) * n),
        row_low=(*(None if v is None else Fraction(str(v)) for v in low), one),
        row_high=(*(None if v is None else Fraction(str(v)) for v in high), one),
        lower=(Fraction(0),) * n,
        upper=(one,) * n,
        cost=vector(*cost),
    )


#: Bracken and McCormick (1968), Selected Applications of Nonlinear Programming, chapter 9: barley, oats,
#: sesame and groundnut meal; protein with its variance, fat at least 5.
PROTEIN = (12.0, 11.9, 41.8, 52.1)
VARIANCE = (0.28, 0.19, 20.5, 0.62)
FEED = make_program([(2.3, 5.6, 11.1, 1.3)], [5], [None], (24.55, 26.75, 39.0, 40.5))


def protein(bias=(0, 0, 0, 0), least=21) -> Chance:
    return Chance(low=tuple(least - a for a in vector(*PROTEIN)), variance=vector(*VARIANCE), bias=vector(*bias))


def test_published_feed_at_95_percent():
    """Problem 73 of Hock and Schittkowski (1981): 29.894378 at (0.6355216, 0, 0.3127019, 0.05177655)."""
    found = assured(FEED, [protein()], float(ndtr(1.645)))
    assert found.status == "solved"
    assert float(found.value) == pytest.approx(29.894378, abs=1e-6)
    np.testing.assert_allclose([float(x) for x in found.x], [0.6355216, 0, 0.3127019, 0.05177655], atol=1e-6)
    assert 0 <= found.value - found.least <= Fraction(1, 10**7)


def test_a_bias_common_to_all_costs_more():
    """With a common bias of 0.3, 0.3, 0.8, 0.8 three convex solvers (Clarabel, SCS, SLSQP) gave 29.9472338."""
    found = assured(FEED, [protein(("0.3", "0.3", "0.8", "0.8"))], float(ndtr(1.645)))
    assert float(found.value) == pytest.approx(29.9472338, abs=2e-6)


def test_one_half_is_the_linear_program():
    """At p = ½ the mean must meet the limit and nothing more: 28.9426476517 (HiGHS and Clarabel)."""
    found = assured(FEED, [protein()], 0.5)
    plain = make_program([(2.3, 5.6, 11.1, 1.3), PROTEIN], [5, 21], [None, None], (24.55, 26.75, 39.0, 40.5))
    assert found.value == found.least == decide(plain).value
    assert float(found.value) == pytest.approx(28.9426476517, abs=1e-9)


def test_probability_of_a_window():
    """JCGM 106:2012, clause 7: 12.5 to 16.3 at 13.6 with u 1.8 holds with 0.66; −5.40 at −5.47 with 0.05, 0.92."""
    window = Chance(low=vector("-1.1"), high=vector("-2.7"), variance=vector("3.24"), bias=vector(0))
    assert probability(window, vector(1)) == pytest.approx(0.66, abs=0.005)
    upper = Chance(high=vector("-0.07"), variance=vector("0.0025"), bias=vector(0))
    assert probability(upper, vector(1)) == pytest.approx(0.92, abs=0.005)


def test_errors_in_common_do_not_average_out():
    """JCGM 100:2008, 5.2.2: ten terms of u 0.1 give 1.0 where they share one error, else 0.32."""
    ten, row = vector(*[1] * 10), (Fraction(-1),) * 10
    shared = Image.of(Chance(high=row, variance=vector(*[0] * 10), bias=vector(*["0.1"] * 10)))
    alone = Image.of(Chance(high=row, variance=vector(*["0.01"] * 10), bias=vector(*[0] * 10)))
    x = np.array([float(v) for v in ten])
    assert shared.deviation(x) == pytest.approx(1.0)
    assert alone.deviation(x) == pytest.approx(0.316, abs=0.001)


def test_certain_rows_hold_or_fail():
    """Without any uncertainty a row holds with probability 1 or 0."""
    chance = Chance(high=vector(-1, 1), variance=vector(0, 0), bias=vector(0, 0))
    assert probability(chance, vector(1, 0)) == 1.0
    assert probability(chance, vector(0, 1)) == 0.0
    assert holds(chance, vector("1/2", "1/2"), 0.99)


def random_case(seed: int, *, two_sided: bool) -> tuple[Program, list[Chance]]:
    """Eight columns, three chances around a mixture, some with a bias."""
    rng = np.random.default_rng(seed)
    n = 8
    program = make_program([], [], [], rng.uniform(10, 40, n).round(2))
    chances = []
    mixed = rng.dirichlet(np.ones(n))
    for k in range(3):
        values = rng.uniform(0, 50, n).round(1)
        middle, half = round(float(values @ mixed), 1), round(float(rng.uniform(4, 7)), 1)
        exact = vector(*values)
        low = tuple(Fraction(str(round(middle - half, 1))) - a for a in exact)
        high = tuple(a - Fraction(str(round(middle + half, 1))) for a in exact)
        chances.append(
            Chance(
                low=low if two_sided or k % 2 else None,
                high=high if two_sided or not k % 2 else None,
                variance=vector(*rng.uniform(0.5, 9, n).round(2)),
                bias=vector(*(rng.uniform(0, 0.6, n).round(2) if k else np.zeros(n))),
            )
        )
    return program, chances


def by_general_solver(program: Program, chances: list[Chance], wanted: float) -> float:
    """The value that scipy's trust-constr and SLSQP find, the lesser of the feasible ones."""
    cost = np.array([float(c) for c in program.cost])
    images = [Image.of(chance) for chance in chances]

    def margins(x):
        found = []
        for image in images:
            slacks, deviation = image.slacks(x), image.deviation(x)
            if len(slacks) == 1:
                found.append(slacks[0] - NormalDist().inv_cdf(wanted) * deviation)
            else:
                found.append(sum(ndtr(slack / deviation) for slack in slacks) - 1 - wanted)
        return np.array(found)

    n = cost.size
    best = np.inf
    for start in (np.full(n, 1 / n), *np.random.default_rng(0).dirichlet(np.ones(n), 3)):
        result = minimize(
            cost.__matmul__,
            start,
            jac=lambda _: cost,
            bounds=[(0, 1)] * n,
            constraints=[
                LinearConstraint(np.ones((1, n)), 1, 1),
                NonlinearConstraint(margins, 0, np.inf),
            ],
            method="SLSQP",
            options={"ftol": 1e-12, "maxiter": 500},
        )
        if margins(result.x).min() > -1e-7 and abs(result.x.sum() - 1) < 1e-9:
            best = min(best, float(cost @ result.x))
    return best


@pytest.mark.parametrize("two_sided", [False, True])
@pytest.mark.parametrize("seed", range(5))
def test_agrees_with_a_general_convex_solver(seed, two_sided):
    """Value and bound bracket what SLSQP finds; the shares returned hold all rows as wanted."""
    program, chances = random_case(seed, two_sided=two_sided)
    found = assured(program, chances, 0.9)
    other = by_general_solver(program, chances, 0.9)
    assert found.status == "solved"
    assert float(found.value) == pytest.approx(other, abs=2e-4)
    assert found.least <= found.value <= found.least + Fraction(1, 10**6)
    assert min(probability(chance, found.x) for chance in chances) >= 0.9
    assert sum(found.x) == 1
    assert min(found.x) >= 0


@pytest.mark.parametrize("two_sided", [False, True])
def test_tangents_cut_off_no_allowed_point(two_sided):
    """Every tangent, at points allowed or not, is kept by every point that holds the row; exactly."""
    rng = np.random.default_rng(3)
    _, chances = random_case(1, two_sided=two_sided)
    allowed = 0
    for chance in chances:
        image = Image.of(chance)
        points = rng.dirichlet(np.full(8, 0.4), 60)
        cuts = [cut for x in points if (cut := tangent(image, x, 0.8)) is not None]
        for x in points:
            exact = tuple(Fraction(float(v)) for v in x)
            if holds(chance, exact, 0.8):
                allowed += 1
                assert all(sum(a * b for a, b in zip(cut, exact, strict=True)) <= 0 for cut in cuts)
    assert allowed > 10


def test_what_cannot_hold_is_proven_impossible():
    """Protein ≥ 53 is in no meal; ≥ 52 is in groundnut, but not with 99.9 % sureness."""
    assert assured(FEED, [protein(least=53)], 0.95).status == "impossible"
    loose = make_program([], [], [], (24.55, 26.75, 39.0, 40.5))
    assert assured(loose, [protein(least=52)], 0.5).status == "solved"
    assert assured(loose, [protein(least=52)], 0.999).status == "impossible"


def test_greatest_probability_is_bracketed():
    """Protein ≥ 45 with fat ≥ 1.3: the best is found by hand over one mixture, and proven within 1e-6."""
    loose = make_program([], [], [], (1, 1, 1, 1))
    chance = protein(least=51)
    found = surest(loose, [chance])
    assert found.probability == pytest.approx(probability(chance, found.x))
    assert found.probability <= found.at_most <= found.probability + 1e-6
    grid = [
        probability(chance, (Fraction(0), Fraction(0), Fraction(k, 1000), Fraction(1000 - k, 1000)))
        for k in range(1001)
    ]
    assert found.probability >= max(grid) - 1e-6


def test_greatest_probability_of_a_window():
    """One column at the middle of a window of ± 2 with σ 1: 2Φ(2) − 1, which is all that can be had."""
    program = make_program([], [], [], (1,))
    window = Chance(low=vector(-2), high=vector(-2), variance=vector(1), bias=vector(0))
    found = surest(program, [window])
    assert found.probability == pytest.approx(2 * NormalDist().cdf(2) - 1, abs=1e-9)
    assert found.at_most == pytest.approx(found.probability, abs=1e-6)


def test_less_than_one_half_is_no_answer():
    """Where not even the mean can meet the row there is no greatest probability to speak of."""
    assert surest(FEED, [protein(least=53)]) is None


@pytest.mark.parametrize(
    ("change", "wanted", "message"),
    [
        ({}, 0.4, "from 0.5 up to"),
        ({}, 1.0, "from 0.5 up to"),
        ({"lower": (None, Fraction(0), Fraction(0), Fraction(0))}, 0.9, "≥ 0"),
    ],
)
def test_wrong_use_is_refused(change, wanted, message):
    """Probabilities outside their range and columns that may be negative raise ValueError."""
    with pytest.raises(ValueError, match=message):
        assured(replace(FEED, **change), [protein()], wanted)


def test_a_chance_needs_sides_and_variances():
    """No side, or a negative variance, raises ValueError."""
    with pytest.raises(ValueError, match="without a side"):
        Chance(variance=vector(1), bias=vector(0))
    with pytest.raises(ValueError, match="negative variance"):
        Chance(high=vector(1), variance=vector(-1), bias=vector(0))
