"""House rules: verdicts, costs and proofs hold against brute force over every set of used lots."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import combinations

import pytest

from generator.findings.records import BranchProof, Findings, OrderFinding
from tests.findings import oracle
from tests.findings.drawing import Drawn, draw_campaign
from tests.findings.judging import row
from tests.findings.making import answers, only_order

ZERO = Fraction(0)
LEAST = Fraction(25, 100)
RULES = '[house]\nmax_lots = 2\nleast_if_used = 25\nkeep_apart = [["salt*", "acid*"]]\n'


def test_many_lots_under_both_counts_are_answered_as_by_brute_force() -> None:
    """Most lots and least share together, with far more lots than may be used: no crash, the least cost."""
    least, most = Fraction(20, 100), 3
    for number in range(12):
        pick = random.Random(number).randint
        drawn = draw_campaign(pick, orders=2, most_lots=3)
        width = len(drawn.values[0])
        drawn.values = [[Fraction(pick(0, 8), 2) for _ in range(width)] for _ in range(7)]
        drawn.cost = [pick(1, 9) for _ in range(7)]
        drawn.moisture, drawn.stock, drawn.ratio = None, None, False
        drawn.lower, drawn.upper = [ZERO] * 7, [None] * 7
        for order in drawn.orders:
            order.windows.pop("ratio", None)
        rules = f"[house]\nmax_lots = {most}\nleast_if_used = 20\n"
        for order, finding in zip(
            drawn.orders, answers(drawn.assays(), drawn.targets(), drawn.settings() + rules).orders, strict=True
        ):
            windows = {name: window for name, window in order.windows.items() if window != (None, None)}
            points = allowed_points(drawn, windows, ["plain"] * 7, most, least)
            if not points:
                assert finding.verdict in ("unreachable", "barred")
                continue
            cheapest = min(sum(c * x for c, x in zip(drawn.cost, p, strict=True)) for p in points)
            assert finding.recipes["cheapest"].cost == float(cheapest)
            for recipe in finding.recipes.values():
                assert len(recipe.exact) <= most
                assert min(recipe.exact.values()) >= least


def ruled(number: int) -> tuple[Drawn, Findings, list[str]]:
    """A drawn campaign of plain lots under three house rules, and each lot's material."""
    pick = random.Random(number).randint
    drawn = draw_campaign(pick, orders=4, most_lots=5)
    drawn.lower = [ZERO] * len(drawn.values)
    drawn.upper = [None] * len(drawn.values)
    drawn.stock = None
    materials = [("salt", "acid", "plain")[pick(0, 2)] for _ in drawn.values]
    materials[0], materials[-1] = "salt", ("acid" if len(materials) > 1 else "salt")
    lines = drawn.assays().splitlines()
    text = "\n".join([lines[0] + ",material", *(f"{a},{m}" for a, m in zip(lines[1:], materials, strict=True))])
    rules = RULES if "acid" in materials else RULES.replace('keep_apart = [["salt*", "acid*"]]\n', "")
    return drawn, answers(text + "\n", drawn.targets(), drawn.settings() + rules), materials


def allowed_points(
    drawn: Drawn, windows: dict, materials: list[str], most: int = 2, floor: Fraction = LEAST
) -> list[oracle.Point]:
    """Vertices of the blends of every set of lots that the rules allow."""
    n = len(drawn.values)
    points: list[oracle.Point] = []
    for size in range(1, most + 1):
        for used in combinations(range(n), size):
            kinds = {materials[i] for i in used}
            if {"salt", "acid"} <= kinds:
                continue
            rows = [
                (row(drawn, used, name, side, bound), ZERO)
                for name, window in windows.items()
                for side, bound in zip(("low", "high"), window, strict=True)
                if bound is not None
            ]
            least = [([-Fraction(int(j == k)) for j in range(size)], -floor) for k in range(size)]
            for vertex in oracle.shares(size, [*rows, *least]):
                whole = [ZERO] * n
                for i, share in zip(used, vertex, strict=True):
                    whole[i] = share
                points.append(tuple(whole))
    return points


def check(drawn: Drawn, windows: dict, finding: OrderFinding, materials: list[str]) -> None:
    """One order's verdict, costs, recipes and proof under the rules."""
    n = len(drawn.values)
    points = allowed_points(drawn, windows, materials)
    if finding.verdict == "unreachable" or finding.verdict is None:
        assert points == []
        return
    if not points:
        assert finding.verdict == "barred"
        check_branches(drawn, windows, finding, materials)
        return
    assert finding.verdict in ("makeable", "edge")
    least = min(sum(c * x for c, x in zip(drawn.cost, p, strict=True)) for p in points)
    assert finding.recipes["cheapest"].cost == float(least)
    for name, recipe in finding.recipes.items():
        used = [int(lot[1:]) for lot in recipe.exact]
        assert len(used) <= 2, name
        assert all(share >= LEAST for share in recipe.exact.values()), name
        assert not {"salt", "acid"} <= {materials[i] for i in used}, name
    for point in finding.curve:
        assert not {"salt", "acid"} <= {materials[int(lot[1:])] for lot in point.shares}
        assert len(point.shares) <= 2
    fewest = min(sum(1 for x in p if x) for p in points)
    assert len(finding.recipes["fewest"].shares) == fewest
    assert n >= fewest


def check_branches(drawn: Drawn, windows: dict, finding: OrderFinding, materials: list[str]) -> None:
    """Every set of lots that the rules allow is closed by a branch whose scores are right and positive."""
    assert isinstance(finding.proof, BranchProof)
    assert finding.barred_by
    for branch in finding.proof.branches:
        if not branch.multipliers:
            continue
        for lot, score in branch.scores.items():
            total = ZERO
            for m in branch.multipliers:
                low, high = windows[m.on]
                bound = low if m.side in ("low", "exact") else high
                total += m.weight * row(drawn, [int(lot[1:])], m.on, m.side, bound)[0]
            assert total == score
        assert branch.least is None or branch.least > 0
        assert branch.least is not None or all(score > 0 for score in branch.scores.values())


@pytest.mark.parametrize("number", range(25))
def test_rules_are_kept_and_verdicts_are_those_of_brute_force(number: int) -> None:
    """Under three rules each order's verdict, least cost, fewest lots and recipes are those of brute force."""
    drawn, findings, materials = ruled(number)
    for order, finding in zip(drawn.orders, findings.orders, strict=True):
        windows = {name: window for name, window in order.windows.items() if window != (None, None)}
        check(drawn, windows, finding, materials)


def test_a_barred_order_names_the_rule_and_what_lifting_it_allows() -> None:
    """Two lots are needed and are kept apart: barred by that rule, which lifted alone would allow it."""
    order = only_order(answers(settings='[house]\nkeep_apart = [["A", "B"]]\n'))
    assert (order.verdict, order.barred_by) == ("barred", ("keep_apart: A from B",))
    assert order.lifted == {"keep_apart: A from B": ("makeable", 25.0)}
    assert order.sentence == "Barred: these lots could make it, but not within the house rules (A kept apart from B)."
    assert order.greatest_amount == 0.0
    assert order.recipes == {}


def test_a_lot_of_both_materials_is_left_out() -> None:
    """A lot that is itself two materials kept apart is used by no order, and the page says why."""
    assays = "lot,material,cost,N\nA,urea;nitrate,1,10\nB,sand,2,10\n"
    findings = answers(assays, "order,N\n1,>= 5\n", '[house]\nkeep_apart = [["urea", "nitrate"]]\n')
    order = only_order(findings)
    assert order.left_out == {"A": "it is both urea and nitrate, which are kept apart"}
    assert list(order.recipes["cheapest"].shares) == ["B"]


def test_an_imitation_that_would_join_kept_apart_lots_is_not_shown() -> None:
    """An inner lot whose imitation needs two lots kept apart keeps its role and shows no imitation."""
    assays = "lot,cost,N\nA,1,10\nB,2,30\nC,2,20\n"
    findings = answers(assays, "order,N\n1,>= 15\n", '[house]\nkeep_apart = [["A", "B"]]\n')
    middle = findings.lots[2]
    assert (middle.role, middle.imitated_by) == ("inner", None)


@pytest.mark.parametrize("limit, verdict", [("10.4..10.6", "barred"), (">= 30", "unreachable")])
def test_a_forced_lot_that_no_rule_lets_fill_an_order_leaves_no_nearest_blend(limit: str, verdict: str) -> None:
    """One lot at most, and one that must be in but may not fill the order: no blend at all, and that is an answer."""
    assays = "lot,cost,min share,max share,N\nA,1,,,16\nB,2,5,60,10\nC,3,,,5\n"
    order = only_order(answers(assays, f"order,N\n1,{limit}\n", "[house]\nmax_lots = 1\n"))
    assert (order.verdict, order.nearest, order.room) == (verdict, None, None)
