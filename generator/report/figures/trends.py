"""Trends over revisions, and the hull before and after: light drawings, written as SVG without a plotting library.

A build draws one for many an order and lot, so each has to cost next to nothing.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from html import escape
from math import floor, log10

from generator import numbers
from generator.report.figures.hull import shadow

WIDTH, HEIGHT = 420.0, 224.0
_TOP, _BOTTOM, _RIGHT = 26.0, 26.0, 14.0
_SIZE = 11.0
_CHARACTER = 6.4
_MOST_TICKS = 6
#: Lines of several series differ by pattern too, not by colour alone.
_DASHES = ("", "7 4", "2 3", "9 3 2 3")
_COLOURS = ("--lot", "--blend", "--window", "--unreachable", "--edge", "--short")
_PADDING = 0.08

Pair = tuple[float, float]


@dataclass(frozen=True, slots=True, kw_only=True)
class Series:
    """One line: its name, its value in each revision (None: it had none), and half the length of error bars."""

    name: str
    values: Sequence[float | None]
    errors: Sequence[float | None] = ()


@dataclass(frozen=True, slots=True)
class _Frame:
    """The places of a drawing: SVG units, y downwards."""

    left: float
    right: float
    top: float
    bottom: float
    x_ends: Pair
    y_ends: Pair

    def x(self, value: float) -> float:
        low, high = self.x_ends
        return self.left + (value - low) / (high - low) * (self.right - self.left)

    def y(self, value: float) -> float:
        low, high = self.y_ends
        return self.bottom - (value - low) / (high - low) * (self.bottom - self.top)


def lines(series: Sequence[Series], dates: Sequence[str], title: str) -> str:
    """Step lines over revisions, one for each series, named at their right ends.

    ``dates`` name the n revisions; every series has n values.
    """
    known = [value for one in series for value in _with_errors(one)]
    y_ends = padded(known)
    labels = max((len(one.name) for one in series), default=0) if len(series) > 1 else 0
    frame, parts = _framed(y_ends, dates, title, right=_RIGHT + min(labels, 22) * _CHARACTER)
    ends: list[tuple[float, str, str]] = []
    for number, one in enumerate(series):
        colour, dash = _COLOURS[number % len(_COLOURS)], _DASHES[number % len(_DASHES)]
        parts += _series(frame, one, colour, dash)
        last = next((value for value in reversed(one.values) if value is not None), None)
        if last is not None:
            ends.append((frame.y(last), one.name, colour))
    if labels:
        parts += _end_labels(ends, frame)
    return _svg(parts, HEIGHT)


def counts(stacks: Sequence[Mapping[str, int]], kinds: Sequence[str], dates: Sequence[str], title: str) -> str:
    """One column for each revision, its kinds stacked from the bottom in the order of ``kinds``."""
    most = max((sum(stack.values()) for stack in stacks), default=0) or 1
    frame, parts = _framed((0.0, float(most)), dates, title, whole=True)
    step = (frame.right - frame.left) / len(stacks)
    width = max(1.0, min(34.0, step * 0.72))
    for position, stack in enumerate(stacks):
        centre = frame.left + (position + 0.5) * step
        below = 0
        for kind in kinds:
            count = stack.get(kind, 0)
            if count:
                top, bottom = frame.y(below + count), frame.y(below)
                parts.append(
                    f'<rect x="{centre - width / 2:.1f}" y="{top:.1f}" width="{width:.1f}" '
                    f'height="{bottom - top:.1f}" fill="var(--{kind})" stroke="var(--paper)"/>'
                )
            below += count
    return _svg(parts, HEIGHT)


def hulls(old: Mapping[str, Pair], new: Mapping[str, Pair], across: str, up: str) -> str:
    """The hull's shadow in a plane before (dashed) and after (filled); lots that moved, came or went are named.

    ``old`` and ``new`` map lots to (across, up).
    """
    places = [*old.values(), *new.values()]
    height = 352.0
    x_ends, y_ends = padded([x for x, _ in places], 0.12), padded([y for _, y in places], 0.12)
    frame, parts = _plane(x_ends, y_ends, across, up, height)
    parts.append(_polygon(frame, shadow(list(new.values())), 'fill="var(--hull)" stroke="var(--lot)"'))
    parts.append(
        _polygon(frame, shadow(list(old.values())), 'fill="none" stroke="var(--muted)" stroke-dasharray="6 4"')
    )
    moved = [lot for lot in new if lot in old and old[lot] != new[lot]]
    for lot in moved:
        (x0, y0), (x1, y1) = old[lot], new[lot]
        parts.append(
            f'<path d="M{frame.x(x0):.1f} {frame.y(y0):.1f}L{frame.x(x1):.1f} {frame.y(y1):.1f}" '
            'stroke="var(--bad)" stroke-width="1.5" fill="none"/>'
        )
    parts += [_ring(frame, old[lot]) for lot in old if lot not in new or lot in moved]
    parts += [_dot(frame, place, "--bad" if lot in moved or lot not in old else "--lot") for lot, place in new.items()]
    named = {lot: new.get(lot, old.get(lot, (0.0, 0.0))) for lot in (*moved, *(set(old) ^ set(new)))}
    parts += _names(frame, {lot: named[lot] for lot in sorted(named)})
    return _svg(parts, height)


def padded(values: Sequence[float], share: float = _PADDING) -> Pair:
    """Ends with some room around the values; a single value gets room of its size."""
    if not values:
        return 0.0, 1.0
    low, high = min(values), max(values)
    room = (high - low) * share or abs(high) * share or 1.0
    return low - room, high + room


def ticks(ends: Pair, most: int = _MOST_TICKS) -> tuple[float, ...]:
    """Round numbers between two ends: multiples of 1, 2 or 5 times a power of ten, at most ``most``."""
    low, high = ends
    rough = (high - low) / most
    power = 10.0 ** floor(log10(rough))
    step = next(factor * power for factor in (1.0, 2.0, 5.0, 10.0) if factor * power >= rough)
    first = floor(low / step) + 1 if low % step else round(low / step)
    return tuple(first * step + count * step for count in range(most + 2) if first * step + count * step <= high)


def _with_errors(one: Series) -> list[float]:
    errors = one.errors or [None] * len(one.values)
    found: list[float] = []
    for value, error in zip(one.values, errors, strict=True):
        if value is not None:
            found += [value - (error or 0.0), value + (error or 0.0)]
    return found


def _framed(
    y_ends: Pair, dates: Sequence[str], title: str, *, right: float = _RIGHT, whole: bool = False
) -> tuple[_Frame, list[str]]:
    """A frame over revisions: grid lines with values, dates below, the title above."""
    marks = [tick for tick in ticks(y_ends) if not whole or tick == round(tick)]
    texts = _texts(marks)
    left = 12 + max((len(text) for text in texts), default=1) * _CHARACTER
    frame = _Frame(left, WIDTH - right, _TOP, HEIGHT - _BOTTOM, (0.0, float(len(dates))), y_ends)
    parts = [_text(2, 13, title, "var(--ink)", weight=True)]
    for mark, text in zip(marks, texts, strict=True):
        y = frame.y(mark)
        parts.append(_rule(frame.left, y, frame.right, y))
        parts.append(_text(frame.left - 6, y + 4, text, "var(--muted)", anchor="end"))
    for position in _shown(len(dates), most=max(2, int((frame.right - frame.left) / 74))):
        x = frame.x(position + 0.5)
        parts.append(_text(x, HEIGHT - 8, dates[position], "var(--muted)", anchor="middle"))
    return frame, parts


def _plane(x_ends: Pair, y_ends: Pair, across: str, up: str, height: float) -> tuple[_Frame, list[str]]:
    x_marks, y_marks = ticks(x_ends), ticks(y_ends)
    y_texts = _texts(y_marks)
    left = 12 + max((len(text) for text in y_texts), default=1) * _CHARACTER
    frame = _Frame(left, WIDTH - _RIGHT, _TOP, height - 42, x_ends, y_ends)
    parts = [
        _text(2, 13, up, "var(--ink)", weight=True),
        _text(WIDTH - _RIGHT, height - 6, across, "var(--ink)", anchor="end", weight=True),
    ]
    for mark, text in zip(y_marks, y_texts, strict=True):
        parts.append(_rule(frame.left, frame.y(mark), frame.right, frame.y(mark)))
        parts.append(_text(frame.left - 6, frame.y(mark) + 4, text, "var(--muted)", anchor="end"))
    for mark, text in zip(x_marks, _texts(x_marks), strict=True):
        parts.append(_rule(frame.x(mark), frame.top, frame.x(mark), frame.bottom))
        parts.append(_text(frame.x(mark), frame.bottom + 16, text, "var(--muted)", anchor="middle"))
    return frame, parts


def _shown(count: int, most: int) -> list[int]:
    """Evenly spaced positions, the first and the last among them."""
    if count <= most:
        return list(range(count))
    return sorted({round(k * (count - 1) / (most - 1)) for k in range(most)})


def _series(frame: _Frame, one: Series, colour: str, dash: str) -> list[str]:
    """Steps that hold each value until the next revision; a gap where there is none."""
    path, before = "", False
    for position, value in enumerate(one.values):
        if value is None:
            before = False
            continue
        y = frame.y(value)
        path += f"{'V' if before else f'M{frame.x(position):.1f} '}{y:.1f}H{frame.x(position + 1):.1f}"
        before = True
    dashed = f' stroke-dasharray="{dash}"' if dash else ""
    parts = [f'<path d="{path}" fill="none" stroke="var({colour})" stroke-width="2"{dashed}/>'] if path else []
    for position, (value, error) in enumerate(zip(one.values, one.errors, strict=False)):
        if value is not None and error:
            x, low, high = frame.x(position + 0.5), frame.y(value - error), frame.y(value + error)
            parts.append(
                f'<path d="M{x:.1f} {low:.1f}V{high:.1f}M{x - 4:.1f} {low:.1f}h8M{x - 4:.1f} {high:.1f}h8" '
                f'fill="none" stroke="var({colour})" stroke-width="1.2"/>'
            )
    return parts


def _end_labels(ends: list[tuple[float, str, str]], frame: _Frame) -> list[str]:
    """Names at the right ends of lines, pushed apart so that none covers another."""
    parts = []
    least = frame.top
    for y, name, colour in sorted(ends):
        least = max(y, least)
        shown = name if len(name) <= 22 else name[:21] + "…"
        parts.append(_text(frame.right + 6, least + 4, shown, f"var({colour})"))
        least += _SIZE + 2
    return parts


def _names(frame: _Frame, places: Mapping[str, Pair]) -> list[str]:
    parts = []
    for lot, (x, y) in places.items():
        is_right = frame.x(x) > (frame.left + frame.right) / 2
        at = frame.x(x) + (-8 if is_right else 8)
        anchor = "end" if is_right else "start"
        parts.append(
            f'<text class="fig-label" x="{at:.1f}" y="{frame.y(y) - 7:.1f}" text-anchor="{anchor}">{escape(lot)}</text>'
        )
    return parts


def _polygon(frame: _Frame, corners: Sequence[Pair], style: str) -> str:
    if len(corners) < 2:
        return ""
    path = "L".join(f"{frame.x(x):.1f} {frame.y(y):.1f}" for x, y in corners)
    return f'<path d="M{path}z" stroke-width="1.4" {style}/>'


def _ring(frame: _Frame, place: Pair) -> str:
    x, y = frame.x(place[0]), frame.y(place[1])
    return f'<circle cx="{x:.1f}" cy="{y:.1f}" r="4" fill="var(--paper)" stroke="var(--muted)" stroke-width="1.5"/>'


def _dot(frame: _Frame, place: Pair, colour: str) -> str:
    x, y = frame.x(place[0]), frame.y(place[1])
    return f'<rect x="{x - 3.5:.1f}" y="{y - 3.5:.1f}" width="7" height="7" fill="var({colour})"/>'


def _rule(x0: float, y0: float, x1: float, y1: float) -> str:
    return f'<path d="M{x0:.1f} {y0:.1f}L{x1:.1f} {y1:.1f}" stroke="var(--rule)" stroke-width="1"/>'


def _text(x: float, y: float, text: str, fill: str, *, anchor: str = "start", weight: bool = False) -> str:
    bold = ' font-weight="bold"' if weight else ""
    return (
        f'<text x="{x:.1f}" y="{y:.1f}" text-anchor="{anchor}" fill="{fill}" font-size="{_SIZE:g}" '
        f'style="font-family: var(--figure-font, sans-serif)"{bold}>{escape(text)}</text>'
    )


def _texts(marks: Sequence[float]) -> list[str]:
    """Values with as many decimals as tell them apart."""
    for places in range(8):
        texts = [numbers.text(mark, places) for mark in marks]
        if all(abs(round(mark, places) - mark) <= 1e-9 * max(1e-300, abs(mark)) for mark in marks):
            return texts
    return [numbers.significant(mark, 4) for mark in marks]


def _svg(parts: Sequence[str], height: float) -> str:
    return f'<svg viewBox="0 0 {WIDTH:g} {height:g}">{"".join(parts)}</svg>'
