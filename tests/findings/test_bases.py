"""Mixed bases and blend rules against a bisection reference that is written anew in floats.

The reference knows only the textbook form of each rule: a blend's index is the average of the lots'
indices, weighted by what the basis counts.  Ranges and room come from bisection over feasibility, each
step a HiGHS program.
"""

from __future__ import annotations

import math
import random
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import linprog

from generator.findings.records import Findings
from tests.findings.making import answers

RULES: dict[str, tuple[Callable[[float], float], Callable[[float], float]]] = {
    "linear": (lambda a: a, lambda i: i),
    "harmonic": (lambda a: 1 / a, lambda i: 1 / i),
    "log": (math.log, math.exp),
    "loglog": (lambda a: math.log(math.log(a + 0.8)), lambda i: math.exp(math.exp(i)) - 0.8),
    "power:1.25": (lambda a: a**1.25, lambda i: i**0.8),
    "flash": (
        lambda t: 10 ** (-6.1188 + 2414 / (t + 273.15 - 42.6)),
        lambda i: 2414 / (math.log10(i) + 6.1188) + 42.6 - 273.15,
    ),
}
Bounds = dict[str, tuple[float | None, float | None]]
BASES = ("as received", "dry", "ignited", "volume", "mole")


@dataclass(frozen=True)
class Trial:
    """Lots in columns, and for each component its bases and rule."""

    columns: Mapping[str, list[float]]
    components: Mapping[str, tuple[str, str, str]]
    windows: Mapping[str, tuple[float, float]]

    def carrier(self, basis: str) -> np.ndarray:
        """What each lot counts on a basis, per unit as received."""
        column = {name: np.array(values) for name, values in self.columns.items()}
        dry = 1 - column["moisture"] / 100
        return {
            "as received": np.ones(len(dry)),
            "dry": dry,
            "ignited": dry * (1 - column["LOI"] / 100),
            "volume": 1 / column["density"],
            "mole": 1 / column["molar mass"],
        }[basis]

    def parts(self, name: str) -> tuple[np.ndarray, np.ndarray]:
        """Numerator and denominator of a component in index values."""
        basis, limit_basis, rule = self.components[name]
        index = np.array([RULES[rule][0](value) for value in self.columns[name]])
        return index * self.carrier(basis), self.carrier(limit_basis)

    def is_possible(self, bounds: Mapping[str, tuple[float | None, float | None]]) -> bool:
        """Whether shares exist whose indices lie between the bounds' indices."""
        rows = []
        for name, ends in bounds.items():
            above, below = self.parts(name)
            indices = [None if end is None else RULES[self.components[name][2]][0](end) for end in ends]
            if RULES[self.components[name][2]][0](2.0) > RULES[self.components[name][2]][0](3.0):
                indices = indices[::-1]
            for sign, bound in zip((-1, 1), indices, strict=True):
                if bound is not None:
                    terms = sign * (above - bound * below)
                    rows.append(terms / np.abs(terms).max())
        n = len(self.columns["moisture"])
        a = np.array(rows) if rows else None
        found = linprog(np.zeros(n), A_ub=a, b_ub=None if a is None else np.zeros(len(a)), A_eq=[[1.0] * n], b_eq=[1.0])
        return found.status == 0

    def findings(self) -> Findings:
        """The program's answer, through the text of the files."""
        names = list(self.columns)
        lines = ["lot," + ",".join(names)]
        for i, values in enumerate(zip(*self.columns.values(), strict=True)):
            lines += [f"L{i}," + ",".join(f"{value:.4f}" for value in values)]
        settings = 'basis = "as received"\n'
        for name, (basis, limit_basis, rule) in self.components.items():
            settings += f'[components.{name}]\nbasis = "{basis}"\nlimit_basis = "{limit_basis}"\nrule = "{rule}"\n'
        header = ",".join(self.windows)
        cells = ",".join(f"{low:.4f}..{high:.4f}" for low, high in self.windows.values())
        return answers("\n".join(lines) + "\n", f"order,{header}\n1,{cells}\n", settings)


def draw(number: int) -> Trial:
    """Five lots with all carriers, three components on any two bases and by any rule."""
    pick = random.Random(number)
    n = 5
    columns = {
        "moisture": [round(pick.uniform(0, 15), 2) for _ in range(n)],
        "LOI": [round(pick.uniform(0, 30), 2) for _ in range(n)],
        "density": [round(pick.uniform(0.7, 3), 3) for _ in range(n)],
        "molar mass": [round(pick.uniform(16, 90), 2) for _ in range(n)],
    }
    components, windows = {}, {}
    for name in ("p", "q", "r"):
        rule = pick.choice(list(RULES))
        basis = pick.choice(BASES)
        limit_basis = pick.choice(BASES) if rule == "linear" else basis
        components[name] = (basis, limit_basis, rule)
        columns[name] = [round(pick.uniform(4, 60), 2) for _ in range(n)]
        trial = Trial(columns, components, {})
        above, below = trial.parts(name)
        values = sorted(RULES[rule][1](ratio) for ratio in above / below)
        middle = pick.uniform(values[0], values[-1])
        width = (values[-1] - values[0]) * pick.uniform(0.05, 0.4)
        windows[name] = (round(middle - width / 2, 4), round(middle + width / 2, 4))
    if windows[name][0] < 1:
        return draw(number + 1000)
    return Trial(columns, components, windows)


def last(holds: Callable[[float], bool], inside: float, outside: float) -> float:
    """Where a claim that holds inside ends, by bisection."""
    for _ in range(60):
        middle = (inside + outside) / 2
        inside, outside = (middle, outside) if holds(middle) else (inside, middle)
    return inside


@pytest.mark.parametrize("number", range(20))
def test_attainable_ranges_are_those_of_bisection(number: int) -> None:
    """Each quantity's range with the other limits kept, whatever the bases and rules."""
    trial = draw(number)
    (order,) = trial.findings().orders
    for limit in order.limits:
        others: Bounds = {name: window for name, window in trial.windows.items() if name != limit.on}
        if not trial.is_possible(others):
            assert limit.attainable is None
            continue
        assert limit.attainable is not None
        least, greatest = limit.attainable
        assert least is not None
        assert greatest is not None
        above, below = trial.parts(limit.on)
        values = [RULES[trial.components[limit.on][2]][1](ratio) for ratio in above / below]
        span = max(values) - min(values)
        low_end, high_end = min(values) - 1e-9, max(values) + 1e-9

        def at_least(v: float, name: str = limit.on, kept: Bounds = others) -> bool:
            return trial.is_possible({**kept, name: (v, None)})

        def at_most(v: float, name: str = limit.on, kept: Bounds = others) -> bool:
            return trial.is_possible({**kept, name: (None, v)})

        top = last(at_least, low_end, high_end + span)
        floor = 0.25 if trial.components[limit.on][2] == "loglog" else 1e-3
        bottom = last(at_most, high_end, max(floor, low_end - span))
        assert greatest == pytest.approx(top, rel=1e-5)
        assert least == pytest.approx(bottom, rel=1e-5)


@pytest.mark.parametrize("number", range(20))
def test_room_is_that_of_bisection(number: int) -> None:
    """The greatest common tightening by half windows, whatever the bases and rules, above and below 0."""
    trial = draw(number)
    (order,) = trial.findings().orders

    def holds(t: float) -> bool:
        bounds: Bounds = {}
        for name, (low, high) in trial.windows.items():
            half = (high - low) / 2
            ends = (low + t * half, high - t * half)
            if ends[0] > ends[1] or ends[0] <= 0.21:
                return ends[0] <= ends[1]
            bounds[name] = ends
        return trial.is_possible(bounds)

    assert order.room is not None
    lowest = -1.0
    while not holds(lowest) and lowest > -30:
        lowest *= 1.5
    if lowest <= -30 or not all(low + lowest * (high - low) / 2 > 0.25 for low, high in trial.windows.values()):
        return
    assert order.room == pytest.approx(last(holds, lowest, 1.0), rel=1e-4, abs=1e-5)


def test_known_weights_are_recovered_from_open_data() -> None:
    """Four wines of the UCI data set (Aeberhard and Forina 1992), mixed at 10, 20, 30 and 40 %, are found again.

    An exact order on three constituents of the mixture has these weights as its only shares.
    """
    text = (Path(__file__).parent.parent / "published" / "wine.csv").read_text(encoding="utf-8")
    rows = [line.split(",")[1:] for line in text.splitlines() if line[:1].isdigit()][::45]
    weights = [10, 20, 30, 40]
    mixed = [sum(Fraction(row[j]) * w for row, w in zip(rows, weights, strict=True)) / 100 for j in range(3)]
    assays = "lot,alcohol,acid,ash\n" + "".join(f"W{i},{','.join(row)}\n" for i, row in enumerate(rows))
    cells = ",".join(f"{float(value):.10g}" for value in mixed)
    (order,) = answers(assays, f"order,alcohol,acid,ash\n1,{cells}\n").orders
    assert order.verdict == "makeable"
    shares = {lot: share * 100 for lot, share in order.recipes["cheapest"].exact.items()}
    assert shares == {f"W{i}": w for i, w in enumerate(weights)}
