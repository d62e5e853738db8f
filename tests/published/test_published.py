"""Published cases through the command line: one build of all of them, each answered in its ``results.json``."""

from __future__ import annotations

import json
import subprocess
import sys
from collections.abc import Mapping
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest

from generator.findings.rules import rule_named
from generator.report.addresses import slugify
from tests.published.case import Case
from tests.published.hulls import HULLS, HullCase
from tests.published.recipes import RECIPES
from tests.published.values import VALUES

ROOT = Path(__file__).parents[2]

CASES: Mapping[str, Case] = {**RECIPES, **VALUES}

#: Wickey, R.O.; Chittenden, D.H. (1963), Hydrocarbon Processing 42(6), 157-158: index by flash point from 20 °C up.
FLASH_INDEX = (
    *(3281, 3004, 2752, 2524, 2315, 2126, 1953, 1795, 1652, 1520, 1400, 1291, 1190, 1098, 1014, 937, 866, 801, 742),
    *(687, 636, 590, 547, 508, 472, 438, 408, 379, 353, 328, 306, 285, 266, 248, 232, 216, 202, 189, 177, 165, 155),
    *(145, 136, 127, 119),
)

Results = Mapping[str, Any]


@pytest.fixture(scope="module")
def results(tmp_path_factory: pytest.TempPathFactory) -> Mapping[str, Results]:
    """The results of all cases by name, made by one ``build`` of all their folders."""
    root = tmp_path_factory.mktemp("published")
    every: dict[str, Case | HullCase] = {**CASES, **HULLS}
    for name, case in every.items():
        folder = root / "campaigns" / slugify(name)
        folder.mkdir(parents=True)
        for file, text in case.files().items():
            (folder / file).write_text(text, encoding="utf-8")
    command = [sys.executable, "-m", "generator", "build", "--quiet", str(root / "campaigns"), str(root / "output")]
    done = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    found = ((name, root / "output" / slugify(name) / "results.json") for name in every)
    return {name: json.loads(path.read_text(encoding="utf-8")) for name, path in found}


def order_of(results: Results) -> Results:
    order: Results
    (order,) = results["orders"]
    return order


def having(key: str) -> list[str]:
    """The names of the cases of which this is known."""
    return [name for name, case in CASES.items() if getattr(case, key) not in (None, {})]


@pytest.mark.parametrize("name", CASES)
def test_verdict(name: str, results: Mapping[str, Results]) -> None:
    """An order is unreachable where the published case has no blend, and makeable where it has one."""
    verdict = order_of(results[name])["verdict"]
    assert verdict == "unreachable" if CASES[name].verdict == "unreachable" else verdict in ("makeable", "edge")


@pytest.mark.parametrize("name", having("shares"))
def test_shares(name: str, results: Mapping[str, Results]) -> None:
    """The cheapest recipe has the published shares."""
    case = CASES[name]
    shares = order_of(results[name])["recipes"]["cheapest"]["shares"]
    assert {lot: shares.get(lot, 0) * case.share_unit for lot in case.shares} == pytest.approx(
        case.shares, rel=0, abs=case.shares_within
    )
    assert set(shares) <= set(case.shares)


@pytest.mark.parametrize("name", having("cost"))
def test_cost(name: str, results: Mapping[str, Results]) -> None:
    """The cheapest recipe costs what the published optimum costs."""
    case = CASES[name]
    cost = order_of(results[name])["recipes"]["cheapest"]["cost"]
    assert cost * case.cost_of == pytest.approx(case.cost, rel=0, abs=case.cost_within)


@pytest.mark.parametrize("name", having("values"))
def test_values(name: str, results: Mapping[str, Results]) -> None:
    """A blend whose shares are given has the published values."""
    case = CASES[name]
    values = order_of(results[name])["recipes"]["cheapest"]["values"]
    assert {on: values[on] for on in case.values} == pytest.approx(case.values, rel=0, abs=case.values_within)


@pytest.mark.parametrize("name", having("ranges"))
def test_attainable_ranges(name: str, results: Mapping[str, Results]) -> None:
    """Attainable ranges of shares and values are the published ones."""
    case = CASES[name]
    limits = {limit["on"]: limit["attainable"] for limit in order_of(results[name])["limits"]}
    for on, expected in case.ranges.items():
        assert limits[on] == pytest.approx(expected, rel=0, abs=case.ranges_within)


@pytest.mark.parametrize("name", [name for name, case in CASES.items() if case.verdict == "unreachable"])
def test_blocking_proof_adds_up(name: str, results: Mapping[str, Results]) -> None:
    """A blocking proof, re-added from the case as typed, is broken by every lot (or by every allowed share)."""
    proof = order_of(results[name])["proof"]
    table, bounds = assays_of(CASES[name]), limits_of(CASES[name])
    scores = dict.fromkeys(table, Fraction(0))
    for multiplier in proof["multipliers"]:
        on, side, weight = multiplier["on"], multiplier["side"], Fraction(multiplier["weight"])
        assert weight > 0 or side == "exact"
        low, high = bounds[on]
        for lot, row in table.items():
            value = Fraction(row[on])
            scores[lot] += weight * (low - value if side == "low" else value - high)
    assert {lot: str(score) for lot, score in scores.items()} == proof["scores"]
    if proof["least"] is None:
        assert min(scores.values()) > 0
    else:
        fixed = {lot: Fraction(row["min share"]) / 100 for lot, row in table.items()}
        assert sum(fixed.values()) == 1
        assert sum(fixed[lot] * score for lot, score in scores.items()) == Fraction(proof["least"]) > 0


def assays_of(case: Case) -> dict[str, dict[str, str]]:
    header, *rows = (line.split(",") for line in case.assays.splitlines())
    return {row[0]: dict(zip(header, row, strict=True)) for row in rows}


def limits_of(case: Case) -> dict[str, tuple[Fraction, Fraction]]:
    """Low and high of ``a - b``, ``>= a`` (high then is low, and never used) and exact cells."""
    header, row = (line.split(",") for line in case.targets.splitlines())
    bounds: dict[str, tuple[Fraction, Fraction]] = {}
    for on, cell in zip(header, row, strict=True):
        if on in ("order", "amount"):
            continue
        ends = [Fraction(part) for part in cell.removeprefix(">=").strip().split(" - ")]
        bounds[on] = (ends[0], ends[-1])
    return bounds


@pytest.mark.parametrize("name", [name for name, case in HULLS.items() if case.volume is not None])
def test_volume_and_facets(name: str, results: Mapping[str, Results]) -> None:
    """Hulls of known polytopes have their volume and number of facets."""
    (hull,) = results[name]["hulls"]
    assert hull["volume"] == pytest.approx(HULLS[name].volume, rel=1e-12)
    assert len(hull["facets"]) == HULLS[name].facets


@pytest.mark.parametrize("name", [name for name, case in HULLS.items() if case.corners is not None])
def test_corner_lots(name: str, results: Mapping[str, Results]) -> None:
    """Corner lots are those that the others can't imitate."""
    corners = [lot["lot"] for lot in results[name]["lots"] if lot["role"] == "corner"]
    assert corners == list(HULLS[name].corners or ())
    (hull,) = results[name]["hulls"]
    assert sorted(hull["corners"], key=int) == corners


def test_flash_point_index() -> None:
    """The flash point rule gives the published table of indices, each rounded to a whole number."""
    rule = rule_named("flash")
    assert [round(rule.index(Fraction(20 + row))) for row in range(len(FLASH_INDEX))] == list(FLASH_INDEX)


def test_viscosity_index() -> None:
    """The viscosity index 14.534 I + 10.975 at 2.234 mm²/s is the published 12.49 (Maples 2000; recomputed)."""
    index = rule_named("loglog").index(Fraction("2.234"))
    assert 14.534 * float(index) + 10.975 == pytest.approx(12.4902217655, abs=1e-10)
    assert 14.534 * float(index) + 10.975 == pytest.approx(12.492, abs=0.003)
