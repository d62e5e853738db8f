"""Trends over a stretch of revisions: what moved, drawn; what did not is not drawn."""

from __future__ import annotations

import datetime
from collections.abc import Mapping, Sequence

from generator import numbers
from generator.history.chronicle import Line
from generator.history.records import LotPoint, OrderPoint
from generator.report import addresses, words
from generator.report.figures import trends
from generator.report.figures.canvas import finished
from generator.report.parts import FigureView, Legend

#: Lines in one trend figure: those that moved most.
MOST_LINES = 6
_MONTHS = ("Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec")
_DIGITS = 4


def day(recorded: str) -> str:
    """The day of a moment, short: "2 Mar"."""
    when = datetime.datetime.fromisoformat(recorded)
    return f"{when.day} {_MONTHS[when.month - 1]}"


def trend_figures(lines: Sequence[Line], money: str, unit: str) -> tuple[FigureView, ...]:
    """Orders by verdict, costs, room and stock over revisions; only what moved, and no figure of nothing."""
    told = [line for line in lines if line.story is not None]
    if len(told) < 2:
        return ()
    dates = [day(line.recorded) for line in told]
    points = [line.story.summary.orders for line in told if line.story is not None]
    lots = [line.story.summary.lots for line in told if line.story is not None]
    found = [
        _verdicts(points, dates),
        lines_figure("costs", "Cost of the cheapest recipe", money, _order_values(points, "cost"), dates),
        lines_figure("rooms", "Room", "sd", _order_values(points, "room"), dates),
        lines_figure("stocks", "Stock", unit, _stocks(lots), dates),
    ]
    return tuple(figure for figure in found if figure is not None)


def _verdicts(points: Sequence[Mapping[str, OrderPoint]], dates: Sequence[str]) -> FigureView:
    kinds = [kind for kind in words.VERDICTS if any(p.verdict == kind for one in points for p in one.values())]
    stacks = [{kind: sum(p.verdict == kind for p in one.values()) for kind in kinds} for one in points]
    drawn = trends.counts(
        [{"muted" if kind == "none" else kind: count for kind, count in stack.items()} for stack in stacks],
        ["muted" if kind == "none" else kind for kind in kinds],
        dates,
        "Orders by verdict",
    )
    first, last = (words.counts_in_words(stack) or "no orders" for stack in (stacks[0], stacks[-1]))
    caption = f"One column for each revision. First {first}; last {last}."
    svg = finished(drawn, "fig-verdicts", "Orders by verdict", caption)
    legend = tuple(Legend(mark=kind, text=words.VERDICT_WORDS[kind]) for kind in kinds)
    return FigureView(anchor="verdicts", title="Orders by verdict", svg=svg, caption=caption, legend=legend)


def _order_values(points: Sequence[Mapping[str, OrderPoint]], what: str) -> dict[str, list[float | None]]:
    names = dict.fromkeys(name for one in points for name in one)
    return {name: [getattr(one.get(name), what, None) for one in points] for name in names}


def _stocks(lots: Sequence[Mapping[str, LotPoint]]) -> dict[str, list[float | None]]:
    names = dict.fromkeys(name for one in lots for name in one)
    return {name: [one[name].stock if name in one else None for one in lots] for name in names}


def lines_figure(
    key: str, title: str, unit: str, values: Mapping[str, Sequence[float | None]], dates: Sequence[str]
) -> FigureView | None:
    """One line for each name, of those that moved most; None where nothing moved."""
    moved = {name: spread for name, row in values.items() if (spread := moved_by(row)) > 0}
    if not moved:
        return None
    chosen = sorted(sorted(moved, key=lambda name: -moved[name])[:MOST_LINES])
    series = [trends.Series(name=name, values=values[name]) for name in chosen]
    heading = f"{title}, {unit}" if unit else title
    less, still = len(moved) - len(chosen), len(values) - len(moved)
    told = "; ".join(f"{name} from {_end_text(values[name], 0)} to {_end_text(values[name], -1)}" for name in chosen)
    caption = told + "."
    caption += f" {less} more moved less." if less else ""
    caption += f" {still} did not move." if still else ""
    svg = finished(trends.lines(series, dates, heading), f"fig-{key}", title, caption)
    return FigureView(anchor=key, title=title, svg=svg, caption=caption)


def moved_by(row: Sequence[float | None]) -> float:
    """How far a row of values moves, relative to its size; 0 for fewer than two values."""
    known = [value for value in row if value is not None]
    if len(known) < 2:
        return 0.0
    return (max(known) - min(known)) / (max(abs(value) for value in known) or 1.0)


def _end_text(row: Sequence[float | None], end: int) -> str:
    known = [value for value in row if value is not None]
    return numbers.significant(known[end], _DIGITS)


def assay_figure(
    component: str, label: str, pairs: Sequence[tuple[float | None, float | None]], dates: Sequence[str]
) -> FigureView:
    """One component of one lot, as (value, standard uncertainty), over revisions."""
    values, errors = [pair[0] for pair in pairs], [pair[1] for pair in pairs]
    series = trends.Series(name=label, values=values, errors=errors)
    caption = f"From {_end_text(values, 0)} to {_end_text(values, -1)}."
    if any(errors):
        caption += " Bars: one standard uncertainty to each side (assay error only)."
    key = addresses.anchor("own", component)
    title = f"Assay of {label}"
    svg = finished(trends.lines([series], dates, label), f"fig-{key}", title, caption)
    return FigureView(anchor=key, title=title, svg=svg, caption=caption)
