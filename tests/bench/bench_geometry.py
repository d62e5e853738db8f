"""How fast the certified engine is against calling a solver program by program; on one thread.

    python -m tests.bench.bench_geometry [--json FILE] [--repeats 5]

Each line of the table is one kind of work.  Ours starts from exact rational data and ends with every verdict
proven; the other side starts from float arrays and certifies nothing.  Every time is the median of the
repeats, in one process on one thread; what matters are the ratios.
"""

from __future__ import annotations

import argparse
import json
import platform
import sys
import time
from collections.abc import Callable
from dataclasses import asdict, dataclass
from fractions import Fraction
from pathlib import Path
from statistics import median

from tests.bench.one_thread import THREADS  # isort: skip  (numpy reads the number of threads when it is imported)

import highspy
import numpy as np
import scipy
from scipy.optimize import linprog

from generator.geometry.corners import corners
from generator.geometry.reach import Reached, Window, cheapest_many, ranges_many


@dataclass(frozen=True)
class Case:
    """n points of d values, K windows (half of them out of reach), as floats and exact."""

    values: np.ndarray
    low: np.ndarray
    high: np.ndarray
    cost: np.ndarray
    windows: list[Window]
    prices: tuple[Fraction, ...]


@dataclass(frozen=True)
class Line:
    """One line of the table: seconds for ``count`` programs on either side."""

    work: str
    against: str
    count: int
    ours_ms_each: float
    theirs_ms_each: float
    ratio: float
    at_least: float
    note: str


def exact(values: np.ndarray) -> tuple[Fraction, ...]:
    """Two-decimal floats as the numbers typed."""
    return tuple(Fraction(round(float(value) * 100), 100) for value in values)


def make_case(n: int, d: int, count: int, seed: int) -> Case:
    """Points uniform in [0, 100]^d; windows around mixtures, every second one pushed out of the hull."""
    rng = np.random.default_rng(seed)
    values = rng.uniform(0, 100, (d, n)).round(2)
    cost = rng.uniform(10, 100, n).round(2)
    low, high = np.empty((count, d)), np.empty((count, d))
    for k in range(count):
        middle = values @ rng.dirichlet(np.full(n, 0.3))
        half = rng.uniform(1, 6, d)
        if k % 2:
            middle = pushed_out(values, middle, half, rng)
        low[k], high[k] = (middle - half).round(2), (middle + half).round(2)
    rows = tuple(exact(row) for row in values)
    windows = [Window(rows=rows, low=exact(low[k]), high=exact(high[k])) for k in range(count)]
    return Case(values, low, high, cost, windows, exact(cost))


def pushed_out(values: np.ndarray, middle: np.ndarray, half: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """The middle moved along a random direction until the window has just left the hull, and 1 to 10 further."""
    direction = rng.normal(size=middle.size)
    direction /= np.linalg.norm(direction)
    reach = (direction @ values).max() + np.abs(direction) @ half
    return middle + direction * (reach - direction @ middle + rng.uniform(1, 10))


def timed(work: Callable[[], object], repeats: int) -> float:
    """The median of the seconds that ``work`` takes."""
    seconds = []
    for _ in range(repeats):
        begin = time.perf_counter()
        work()
        seconds.append(time.perf_counter() - begin)
    return median(seconds)


def loop_linprog(case: Case, which: range) -> list[tuple[int, float]]:
    """(status, value) of each window by ``linprog``."""
    n = case.cost.size
    both, one, bounds = np.vstack([case.values, -case.values]), np.ones((1, n)), (0.0, 1.0)
    found = []
    for k in which:
        right = np.concatenate([case.high[k], -case.low[k]])
        result = linprog(case.cost, A_ub=both, b_ub=right, A_eq=one, b_eq=[1.0], bounds=bounds, method="highs")
        found.append((result.status, result.fun if result.status == 0 else np.nan))
    return found


def loop_linprog_ranges(case: Case) -> list[float | None]:
    """Both ends of every row of every window by ``linprog``."""
    d, n = case.values.shape
    found = []
    for k in range(len(case.windows)):
        for row in range(d):
            others = np.arange(d) != row
            matrix = np.vstack([case.values[others], -case.values[others]])
            right = np.concatenate([case.high[k, others], -case.low[k, others]])
            for sign in (1.0, -1.0):
                result = linprog(
                    sign * case.values[row],
                    A_ub=matrix,
                    b_ub=right,
                    A_eq=np.ones((1, n)),
                    b_eq=[1.0],
                    bounds=(0.0, 1.0),
                    method="highs",
                )
                found.append(sign * result.fun if result.status == 0 else None)
    return found


def warm_highs(case: Case) -> highspy.Highs:
    """One model of the case's rows, ready for changed bounds."""
    d, n = case.values.shape
    solver = highspy.Highs()
    solver.setOptionValue("output_flag", False)
    solver.setOptionValue("threads", 1)
    model = highspy.HighsLp()
    model.num_col_, model.num_row_ = n, d + 1
    model.col_cost_, model.col_lower_, model.col_upper_ = case.cost, np.zeros(n), np.ones(n)
    model.row_lower_, model.row_upper_ = np.append(case.low[0], 1.0), np.append(case.high[0], 1.0)
    matrix = np.vstack([case.values, np.ones(n)])
    model.a_matrix_.format_ = highspy.MatrixFormat.kRowwise
    model.a_matrix_.start_ = np.arange(0, matrix.size + 1, n)
    model.a_matrix_.index_ = np.tile(np.arange(n), d + 1)
    model.a_matrix_.value_ = matrix.ravel()
    solver.passModel(model)
    return solver


def loop_highs(case: Case, solver: highspy.Highs) -> list[tuple[bool, float]]:
    """(feasible, value) of each window by one warm model with changed bounds."""
    rows = np.arange(case.values.shape[0], dtype=np.int32)
    found = []
    for k in range(len(case.windows)):
        solver.changeRowsBounds(rows.size, rows, case.low[k], case.high[k])
        solver.run()
        optimal = solver.getModelStatus() == highspy.HighsModelStatus.kOptimal
        found.append((optimal, solver.getObjectiveValue() if optimal else np.nan))
    return found


def agree(reached: Reached, others: list[tuple[bool, float]]) -> None:
    """Stop where both sides differ: a fast wrong answer is worth nothing."""
    for k, (feasible, value) in enumerate(others):
        if bool(reached.is_feasible[k]) != feasible or (feasible and abs(reached.value[k] - value) > 1e-5):
            raise SystemExit(f"program {k}: ours {reached.is_feasible[k]} {reached.value[k]}, other {feasible} {value}")


def cheapest_lines(n: int, d: int, count: int, least: tuple[float, float], repeats: int) -> list[Line]:
    """Verdict and cheapest shares against linprog and against a warm HiGHS model."""
    case = make_case(n, d, count, seed=n)
    reached = cheapest_many(case.windows, case.prices)
    agree(reached, [(status == 0, value) for status, value in loop_linprog(case, range(count))])
    solver = warm_highs(case)
    agree(reached, loop_highs(case, solver))
    ours = timed(lambda: cheapest_many(case.windows, case.prices), 3 * repeats)
    proofs = timed(reached.answers, 1)
    slow = timed(lambda: loop_linprog(case, range(count)), repeats)
    warm = timed(lambda: loop_highs(case, solver), repeats)
    work = f"verdict and cheapest, {n} × {d} × {count}"
    note = (
        f"{int(reached.is_feasible.sum())} of {count} within reach; proven by floats {reached.tally.floats}, exactly "
        f"{reached.tally.total - reached.tally.floats}; writing a proof {1000 * proofs / count:.2f} ms"
    )
    return [
        line(work, "linprog", count, ours, slow, least[0], note),
        line(work, "warm highspy", count, ours, warm, least[1], note),
    ]


def ranges_line(n: int, d: int, count: int, least: float, repeats: int) -> Line:
    """Attainable ranges of all rows of all windows."""
    case = make_case(n, d, count, seed=n + 1)
    ranges = ranges_many(case.windows)
    others = loop_linprog_ranges(case)
    ends = np.stack([ranges.least, ranges.greatest], axis=2).ravel()
    for k, value in enumerate(others):
        if (value is None) != bool(np.isnan(ends[k])) or (value is not None and abs(ends[k] - value) > 1e-5):
            raise SystemExit(f"range {k}: ours {ends[k]}, other {value}")
    ours = timed(lambda: ranges_many(case.windows), 3 * repeats)
    slow = timed(lambda: loop_linprog_ranges(case), repeats)
    note = f"largest proven error {np.nanmax(ranges.error):.0e}"
    return line(f"attainable ranges, {n} × {d} × {count}", "linprog", 2 * d * count, ours, slow, least, note)


def corners_line(n: int, d: int, sample: int, least: float, repeats: int) -> Line:
    """Corner or inner for n points; linprog on an evenly spaced sample of them."""
    values = np.random.default_rng(n).uniform(0, 100, (n, d)).round(2)
    points = [exact(row) for row in values]
    found = corners(points)
    columns = np.vstack([values.T, np.ones(n)])
    asked = range(0, n, n // sample)

    def loop() -> list[bool]:
        upper = np.ones(n)
        roles = []
        for k in asked:
            upper[k] = 0.0
            bounds = np.column_stack([np.zeros(n), upper])
            roles.append(
                linprog(np.zeros(n), A_eq=columns, b_eq=columns[:, k], bounds=bounds, method="highs").status == 2
            )
            upper[k] = 1.0
        return roles

    if loop() != [bool(found.is_corner[k]) for k in asked]:
        raise SystemExit("roles differ")
    ours = timed(lambda: corners(points), repeats)
    slow = timed(loop, repeats) * n / len(asked)
    note = f"{int(found.is_corner.sum())} corners; linprog timed on {len(asked)} of the points"
    return line(f"corner or inner, {n} points in {d} dimensions", "linprog", n, ours, slow, least, note)


def line(work: str, against: str, count: int, ours: float, theirs: float, least: float, note: str) -> Line:
    """One line from the seconds of both sides."""
    return Line(
        work=work,
        against=against,
        count=count,
        ours_ms_each=1000 * ours / count,
        theirs_ms_each=1000 * theirs / count,
        ratio=theirs / ours,
        at_least=least,
        note=note,
    )


def run(repeats: int) -> list[Line]:
    """All lines of the table."""
    return [
        *cheapest_lines(24, 8, 500, (30, 4), repeats),
        *cheapest_lines(120, 12, 500, (20, 2), repeats),
        ranges_line(24, 8, 50, 60, repeats),
        corners_line(2000, 8, 40, 10, repeats),
    ]


def table(lines: list[Line]) -> str:
    """The lines as text."""
    head = f"{'work':<46}{'against':<15}{'ours ms':>9}{'theirs ms':>11}{'ratio':>8}{'at least':>10}  note"
    rows = [
        f"{entry.work:<46}{entry.against:<15}{entry.ours_ms_each:>9.4f}{entry.theirs_ms_each:>11.3f}"
        f"{entry.ratio:>7.1f}×{entry.at_least:>9.0f}×  {entry.note}"
        for entry in lines
    ]
    return "\n".join([head, *rows])


def main(arguments: list[str] | None = None) -> int:
    """Print the table; write JSON where asked."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--json", type=Path, help="write the lines there as well")
    parser.add_argument("--repeats", type=int, default=5, help="repeats of each time (median)")
    asked = parser.parse_args(arguments)
    lines = run(asked.repeats)
    print(table(lines))
    if asked.json is not None:
        versions = {
            "python": platform.python_version(),
            "numpy": np.__version__,
            "scipy": scipy.__version__,
            "highspy": highspy.Highs().version(),
        }
        lines_kept = [asdict(entry) for entry in lines]
        record = {"threads": THREADS, "repeats": asked.repeats, "versions": versions, "lines": lines_kept}
        asked.json.write_text(json.dumps(record, indent=1, ensure_ascii=False) + "\n", encoding="utf-8")
    return 0


if __name__ == "__main__":
    sys.exit(main())
