"""Uncertainty, conformity and the assured recipe against published cases, simulation and a general solver."""

from __future__ import annotations

import random
from math import sqrt
from statistics import NormalDist

import numpy as np
import pytest
from scipy.optimize import minimize

from generator.findings.conformity import _inside
from generator.findings.records import OrderFinding
from tests.findings.making import answers, only_order

PHI = NormalDist().cdf


def chance_feed(confidence: float, *, bias: bool = False) -> OrderFinding:
    """Four feeds, protein at least 21 % with a probability, fat at least 5 %.

    Source: J. Bracken, G. P. McCormick (1968), Selected Applications of Nonlinear Programming, ch. 9, as
    problem 73 of W. Hock, K. Schittkowski (1981), Test Examples for Nonlinear Programming Codes.
    """
    feeds = {
        "barley": (24.55, 12.0, 0.28, 2.3),
        "oats": (26.75, 11.9, 0.19, 5.6),
        "sesame": (39.0, 41.8, 20.5, 11.1),
        "groundnut": (40.5, 52.1, 0.62, 1.3),
    }
    lines = [f"{name},{cost},{p},{sqrt(var):.16g},{fat}" for name, (cost, p, var, fat) in feeds.items()]
    assays = "lot,cost,protein,protein sd,fat\n" + "\n".join(lines) + "\n"
    settings = f"confidence = {confidence:.16g}\n"
    if bias:
        settings += "[components.protein]\nbias_sd = 0.3\n"
    return only_order(answers(assays, "order,protein,fat\no,>= 21,>= 5\n", settings))


def test_chance_constrained_feed_as_published() -> None:
    """Hock and Schittkowski's problem 73: cost 29.894378 with k = 1.645 (published answer, seen)."""
    recipe = chance_feed(PHI(1.645)).recipes["assured"]
    assert recipe.cost == pytest.approx(29.894378, abs=1e-6)
    expected = {"barley": 0.6355216, "sesame": 0.3127019, "groundnut": 0.05177655}
    assert recipe.shares == {name: pytest.approx(share, abs=2e-6) for name, share in expected.items()}
    assert recipe.conformity.each["protein"] == pytest.approx(PHI(1.645), abs=2e-6)
    assert recipe.conformity.each["fat"] is None


def test_on_values_alone_the_feed_conforms_half_the_time() -> None:
    """The deterministic answer has its protein on the limit (28.94264765: computed by two solvers)."""
    order = chance_feed(0.95)
    assert order.recipes["cheapest"].cost == pytest.approx(28.9426476517, abs=1e-9)
    assert order.recipes["cheapest"].conformity.each["protein"] == pytest.approx(0.5, abs=1e-6)


def test_a_common_bias_is_not_averaged_away() -> None:
    """With a bias sd common to all lots the assured cost is that of a general nonlinear solver."""
    recipe = chance_feed(0.95, bias=True).recipes["assured"]
    protein, cost = np.array([12.0, 11.9, 41.8, 52.1]), np.array([24.55, 26.75, 39.0, 40.5])
    variance, fat = np.array([0.28, 0.19, 20.5, 0.62]), np.array([2.3, 5.6, 11.1, 1.3])
    z = NormalDist().inv_cdf(0.95)

    def spare(x: np.ndarray) -> float:
        return float(protein @ x - 21 - z * np.sqrt(variance @ (x * x) + (0.3 * x.sum()) ** 2))

    best = minimize(
        lambda x: cost @ x,
        np.array([0.6, 0.0, 0.3, 0.1]),
        method="SLSQP",
        bounds=[(0, 1)] * 4,
        constraints=[
            {"type": "eq", "fun": lambda x: x.sum() - 1},
            {"type": "ineq", "fun": lambda x: fat @ x - 5},
            {"type": "ineq", "fun": spare},
        ],
        options={"ftol": 1e-12, "maxiter": 500},
    )
    assert recipe.cost == pytest.approx(best.fun, abs=1e-5)


def one_lot(value: float, sd: float, limit: str) -> OrderFinding:
    """One lot of one component, blended with itself."""
    settings = f"[components.y]\nsd = {sd}\n"
    return only_order(answers(f"lot,y\nA,{value}\n", f"order,y\n1,{limit}\n", settings))


@pytest.mark.parametrize(
    ("value", "sd", "limit", "probability"),
    [(13.6, 1.8, "12.5..16.3", 0.66), (-5.47, 0.05, "<= -5.40", 0.92)],
)
def test_conformity_of_one_value_as_in_the_guide(value: float, sd: float, limit: str, probability: float) -> None:
    """JCGM 106:2012, clause 7: 0.66 for a two-sided and 0.92 for an upper limit (from memory)."""
    order = one_lot(value, sd, limit)
    conformity = order.recipes["closest"].conformity
    assert conformity.each["y"] == pytest.approx(probability, abs=0.005)
    assert conformity.all == conformity.each["y"]


def test_a_blend_of_ten_lots_with_one_common_error_keeps_it_whole() -> None:
    """Ten equal parts of u = 0.1 that share one error have u = 0.1 together, not 0.1/√10.

    JCGM 100:2008, 5.2.2, example, in the form of a mean (from memory).
    """
    lots = "".join(f"L{i},10,0\n" for i in range(10))
    shares = "".join(f'[groups."part {i}"]\nlots = ["L{i}"]\nshare = "10"\n' for i in range(10))
    settings = f"[components.y]\nbias_sd = 0.1\n{shares}"
    order = only_order(answers("lot,y,y sd\n" + lots, "order,y\n1,>= 9.9\n", settings))
    assert order.recipes["closest"].conformity.each["y"] == pytest.approx(PHI(1.0), abs=1e-6)


def test_replicates_are_pooled() -> None:
    """Two lots of two rows each: pooled sd √((0.02+0.08)/2), over √2 for each lot's mean."""
    assays = "lot,y\nA,10.0\nA,10.2\nB,10.0\nB,10.4\n"
    order = only_order(answers(assays, "order,y,only lots\n1,<= 10.2,A\n"))
    u = sqrt((0.02 + 0.08) / 2) / sqrt(2)
    assert order.recipes["closest"].conformity.each["y"] == pytest.approx(PHI(0.1 / u), abs=1e-6)


@pytest.mark.parametrize(
    ("rule", "makeable", "probability"),
    [("half", True, PHI((0.02 - 0.015) / (0.03 / sqrt(12)))), ("zero", True, None), ("limit", False, None)],
)
def test_below_detection_in_its_three_ways(rule: str, makeable: bool, probability: float | None) -> None:
    """A lot below 0.03 against a limit of 0.02: half of it passes, 0 passes, the limit itself does not."""
    settings = f'below_detection = "{rule}"\n'
    order = only_order(answers("lot,As\nA,<0.03\nB,<0.03\n", "order,As\n1,<= 0.02\n", settings))
    assert (order.verdict != "unreachable") == makeable
    if probability is not None:
        # One lot of the two is used: its error is not averaged.
        assert order.recipes["closest"].conformity.each["As"] == pytest.approx(probability, abs=1e-6)


def test_the_limit_rule_is_safe_on_both_sides() -> None:
    """Under ``limit`` a value below detection counts as 0 against a low limit."""
    order = only_order(answers("lot,As\nA,<0.03\n", "order,As\n1,>= 0.01\n", 'below_detection = "limit"\n'))
    assert order.verdict == "unreachable"


def test_joint_conformity_agrees_with_simulation() -> None:
    """The probability that all limits hold together is that of a seeded simulation of assays."""
    values = np.array([[10.0, 20.0, 5.0], [30.0, 5.0, 6.0], [20.0, 12.0, 5.5]])
    sd = np.array([0.8, 0.6, 0.1])
    bias = np.array([0.4, 0.0, 0.05])
    assays = "lot,cost,a,b,c\n" + "".join(f"L{i},{i + 1},{','.join(map(str, v))}\n" for i, v in enumerate(values))
    settings = "".join(f"[components.{name}]\nsd = {sd[j]}\nbias_sd = {bias[j]}\n" for j, name in enumerate("abc"))
    order = only_order(answers(assays, "order,a,b,c\n1,19..22,>= 11,<= 5.6\n", settings))
    for recipe in order.recipes.values():
        x = np.array([recipe.shares.get(f"L{i}", 0.0) for i in range(3)])
        rng = np.random.default_rng(7)
        n = 400_000
        blend = values.T @ x + (rng.standard_normal((n, 3, 3)) * sd * x[None, :, None]).sum(axis=1)
        blend += rng.standard_normal((n, 3)) * bias
        held = (blend[:, 0] >= 19) & (blend[:, 0] <= 22) & (blend[:, 1] >= 11) & (blend[:, 2] <= 5.6)
        assert recipe.conformity.all == pytest.approx(held.mean(), abs=0.004)


def test_sure_rows_take_no_digits_from_the_joint_probability() -> None:
    """Two sides of one ratio, 3.7 deviations away, hold together with Φ(3.74) + Φ(3.67) − 1, whatever else is sure.

    With four sure rows that nearly repeat each other in it, a lattice gave 0.99988 for 0.99979.
    """
    high = np.array([3.74, 3.67, 16.0, 14.07, 13.03, 11.53])
    signs = np.array([1.0, -1.0, -0.325, 0.325, -0.035, 0.035])
    spread = np.outer(signs, signs)
    spread[2:, 2:] = np.kron(np.eye(2), np.array([[1.0, -0.996], [-0.996, 1.0]]))
    expected = NormalDist().cdf(3.74) + NormalDist().cdf(3.67) - 1
    assert _inside(np.full(6, -np.inf), high, spread) == pytest.approx(expected, abs=1e-7)


def test_assured_holds_its_confidence_and_costs_no_less_than_the_cheapest() -> None:
    """On random orders with known sds each uncertain limit of the assured recipe holds at 95 %, or says it can't."""
    pick = random.Random(5)
    said = 0
    for _ in range(15):
        lots = "".join(f"L{i},{pick.randint(10, 30)},{pick.randint(0, 40)},{pick.randint(0, 40)}\n" for i in range(5))
        settings = '[components.a]\nsd = 0.5\n[components.b]\nsd = "2 %"\n'
        order = only_order(answers("lot,cost,a,b\n" + lots, "order,a,b\n1,15..19,12..30\n", settings))
        if order.verdict not in ("makeable", "edge"):
            continue
        recipe, cheapest = order.recipes["assured"], order.recipes["cheapest"]
        assert recipe.cost is not None
        assert cheapest.cost is not None
        assert recipe.cost >= cheapest.cost - 1e-9
        if recipe.remark:
            said += 1
            assert "cannot be had" in recipe.remark
        else:
            assert min(p for p in recipe.conformity.each.values() if p is not None) >= 0.95 - 1e-6
    assert said < 15


def test_a_miss_within_assay_error_is_said() -> None:
    """An order that is out of reach by half a laboratory sd says so in its sentence."""
    order = one_lot(10.0, 1.0, ">= 10.5")
    assert order.verdict == "unreachable"
    assert order.room == pytest.approx(-0.5)
    assert order.sentence == (
        "Not makeable from these lots: y must be at least 10.5, and no lot has more than 10 "
        "(it misses by 0.5 sd, within assay error)."
    )
