"""The plain way: pandas-like reading, ``linprog`` for every question, a matplotlib figure for every picture, jinja2.

This is what a planner's own script would do, with nothing kept, proven or checked; :mod:`tests.bench.bench_build`
times it.  It answers for each order: whether it can be made, the greatest amount, the cheapest, the roomiest and the
closest recipe, the fewest lots, which lots are stuck, the range of each limited component, the nearest blend, the
wanted lot at four shares, each used lot left out and its price, and eight points of the cost-room curve.
"""

from __future__ import annotations

import csv
import io
import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import jinja2
import matplotlib as mpl
import numpy as np
from scipy.optimize import LinearConstraint, linprog, milp

mpl.use("svg")
import matplotlib.pyplot as plt

_PAGE = jinja2.Template(
    """<!doctype html><html lang="en"><head><meta charset="utf-8"><title>{{ title }}</title></head><body>
<h1>{{ title }}</h1>{% for picture in pictures %}{{ picture }}{% endfor %}
<table>{% for row in rows %}<tr>{% for cell in row %}<td>{{ cell }}</td>{% endfor %}</tr>{% endfor %}</table>
<p>{% for link in links %}<a href="{{ link }}">{{ link }}</a> {% endfor %}</p></body></html>""",
    autoescape=False,
)


@dataclass(frozen=True)
class Plain:
    """What the script took, and of what."""

    seconds: float
    programs: int
    program_seconds: float
    figures: int
    figure_seconds: float


@dataclass(frozen=True)
class _Order:
    low: np.ndarray
    high: np.ndarray
    amount: float


class _Script:
    def __init__(self) -> None:
        self.programs = 0
        self.program_seconds = 0.0
        self.figures = 0
        self.figure_seconds = 0.0

    def solve(self, cost: np.ndarray, rows: np.ndarray, at_most: np.ndarray, width: int) -> np.ndarray | None:
        """One linear program over shares that sum to 1, with further columns that don't count."""
        began = time.perf_counter()
        total = np.zeros((1, len(cost)))
        total[0, :width] = 1
        found = linprog(cost, A_ub=rows, b_ub=at_most, A_eq=total, b_eq=[1.0], method="highs")
        self.programs += 1
        self.program_seconds += time.perf_counter() - began
        return found.x if found.status == 0 else None

    def answers(self, values: np.ndarray, cost: np.ndarray, stock: np.ndarray, order: _Order) -> list[list[str]]:
        """Everything about one order, as rows of a table."""
        lots = len(cost)
        has_low, has_high = np.isfinite(order.low), np.isfinite(order.high)
        rows = np.vstack([values[has_high], -values[has_low]])
        limits = np.concatenate([order.high[has_high], -order.low[has_low]])
        recipe = self.solve(cost, rows, limits, lots)
        told = [["makeable", str(recipe is not None)]]
        scale = np.ones(len(limits)) * 0.1
        if recipe is not None:
            capped = np.vstack([rows, np.eye(lots)])
            told.append(["greatest", str(self.solve(cost, capped, np.append(limits, stock / order.amount), lots))])
            told += [["stuck", str(self.solve(-np.eye(lots)[lot], rows, limits, lots))] for lot in range(lots)]
            for lot in np.flatnonzero(recipe > 1e-9):
                without = np.delete(rows, lot, axis=1)
                told.append(["without", str(self.solve(np.delete(cost, lot), without, limits, lots - 1))])
                dearer = cost + 1000 * np.eye(lots)[lot]
                told.append(["price", str(self.solve(dearer, rows, limits, lots))])
            told += [
                ["curve", str(self.solve(cost, rows, limits - room * scale, lots))] for room in np.linspace(0, 1, 8)
            ]
            self._fewest(rows, limits, lots)
        for extra in (np.full(len(limits), -1.0) * scale, -np.eye(len(limits))):
            wide = np.hstack([rows, -extra.reshape(-1, 1) if extra.ndim == 1 else extra])
            told.append(
                ["room", str(self.solve(np.append(np.zeros(lots), np.ones(wide.shape[1] - lots)), wide, limits, lots))]
            )
        told += [["closest", str(self.solve(cost, rows, limits, lots))]]
        for row in range(len(values)):
            mine = np.abs(rows - values[row]).sum(axis=1) > 0
            mine &= np.abs(rows + values[row]).sum(axis=1) > 0
            for sign in (1, -1):
                told.append(["range", str(self.solve(sign * values[row], rows[mine], limits[mine], lots))])
        if recipe is None:
            for share in (0.05, 0.1, 0.2, 0.3):
                told.append(["wanted", str(self.solve(cost, rows * (1 - share), limits, lots))])
        return told

    def _fewest(self, rows: np.ndarray, limits: np.ndarray, lots: int) -> None:
        began = time.perf_counter()
        empty = np.zeros_like(rows)
        milp(
            np.concatenate([np.zeros(lots), np.ones(lots)]),
            constraints=[
                LinearConstraint(np.hstack([rows, empty]), ub=limits),
                LinearConstraint(np.hstack([np.eye(lots), -np.eye(lots)]), ub=np.zeros(lots)),
                LinearConstraint(np.concatenate([np.ones(lots), np.zeros(lots)])[None], lb=1, ub=1),
            ],
            integrality=np.concatenate([np.zeros(lots), np.ones(lots)]),
            bounds=(0, 1),
        )
        self.programs += 1
        self.program_seconds += time.perf_counter() - began

    def picture(self, values: np.ndarray, order: _Order | None) -> str:
        """One figure: the lots in a plane, and an order's window."""
        began = time.perf_counter()
        figure, axes = plt.subplots(figsize=(6, 4))
        axes.scatter(values[0], values[1])
        for lot in range(values.shape[1]):
            axes.annotate(f"L{lot}", (values[0, lot], values[1, lot]))
        if order is not None:
            low, high = np.nan_to_num(order.low[:2], neginf=0), np.nan_to_num(order.high[:2], posinf=20)
            axes.add_patch(plt.Rectangle(tuple(low), *(high - low), fill=False))
        axes.set_xlabel("C0")
        axes.set_ylabel("C1")
        stream = io.StringIO()
        figure.savefig(stream, format="svg")
        plt.close(figure)
        self.figures += 1
        self.figure_seconds += time.perf_counter() - began
        return stream.getvalue()


def plain_build(campaigns: Path, output: Path, pictures: Mapping[str, int]) -> Plain:
    """Answer and draw every campaign; ``pictures`` says which pages there are, and how many pictures on each."""
    began = time.perf_counter()
    script = _Script()
    for folder in sorted(campaigns.iterdir()):
        values, cost, stock, orders = _read(folder)
        told = [script.answers(values, cost, stock, order) for order in orders]
        pages = [page for page in pictures if page.startswith(f"{folder.name}/")]
        for number, page in enumerate(pages):
            order = orders[number % len(orders)]
            drawn = [script.picture(values, order) for _ in range(pictures[page])]
            _write(output / page, page, drawn, told[number % len(orders)], pages)
    for page in (page for page in pictures if "/" not in page):
        _write(output / page, page, [], [], sorted(pictures))
    return Plain(
        time.perf_counter() - began, script.programs, script.program_seconds, script.figures, script.figure_seconds
    )


def _write(path: Path, title: str, pictures: Sequence[str], rows: list[list[str]], links: Sequence[str]) -> None:
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(_PAGE.render(title=title, pictures=pictures, rows=rows, links=links), encoding="utf-8")


def _read(folder: Path) -> tuple[np.ndarray, np.ndarray, np.ndarray, list[_Order]]:
    """Values (components × lots), costs, stocks, orders."""
    with (folder / "assays.csv").open(encoding="utf-8") as stream:
        lots = list(csv.DictReader(stream))
    names = [name for name in lots[0] if name not in ("lot", "stock", "cost")]
    values = np.array([[float(lot[name]) for lot in lots] for name in names])
    with (folder / "targets.csv").open(encoding="utf-8") as stream:
        rows = list(csv.DictReader(stream))
    orders = []
    for row in rows:
        bounds = [_bounds(row[name]) for name in names]
        orders.append(_Order(*(np.array(side) for side in zip(*bounds, strict=True)), float(row["amount"])))
    costs, stocks = (np.array([float(lot[name]) for lot in lots]) for name in ("cost", "stock"))
    return values, costs, stocks, orders


def _bounds(cell: str) -> tuple[float, float]:
    if ".." in cell:
        low, high = cell.split("..")
        return float(low), float(high)
    value = float(cell[2:])
    return (-np.inf, value) if cell.startswith("<=") else (value, np.inf)
