"""Limit strips: one horizontal strip for each limit, in its own unit and on its own scale."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from html import escape

from generator import numbers
from generator.report import words
from generator.report.figures import canvas, stencil

WIDTH = canvas.WIDTH
_ROW = 76.0
#: From the top of a row down to the line on which values stand.
_TRACK = 50.0
_SIDE = 8.0
#: A range without an end, or a one-sided window, is drawn to the edge of the strip, this much beyond the rest.
_BEYOND = 0.08
_GAP = 6.0

Bounds = tuple[float | None, float | None]


@dataclass(frozen=True, slots=True, kw_only=True)
class Strip:
    """One limit: what all lots have, what blends can attain, what the order asks, what the recipe has."""

    label: str
    unit: str
    places: int
    window: Bounds
    lots: Bounds | None = None
    attainable: Bounds | None = None
    value: float | None = None
    value_text: str = ""
    holds: bool = True


@dataclass(frozen=True, slots=True)
class _Scale:
    """A strip's own scale, from values to SVG units."""

    low: float
    high: float

    def __call__(self, value: float) -> float:
        return _SIDE + (value - self.low) / (self.high - self.low) * (WIDTH - 2 * _SIDE)


def draw(strips: Sequence[Strip]) -> str:
    """Markup of all strips, one below the other (at least one)."""
    parts = [part for position, strip in enumerate(strips) for part in _draw_one(strip, _ROW * position)]
    for holds in (True, False):
        blends = [
            (_scale(strip)(strip.value), _ROW * position + _TRACK)
            for position, strip in enumerate(strips)
            if strip.value is not None and strip.holds is holds
        ]
        parts.append(stencil.marks(blends, "D", 9, _tone(holds), canvas.PAPER))
    return stencil.sheet(WIDTH, _ROW * len(strips), *parts)


def _tone(holds: bool) -> str:
    return canvas.BLEND if holds else canvas.BAD


def touch(keys: Sequence[str]) -> str:
    """SVG of one see-through box over each strip, by which a script finds it."""
    return "".join(
        f'<rect class="touch" data-key="{escape(key)}" x="0" y="{_ROW * position:.0f}" width="{WIDTH:.0f}" '
        f'height="{_ROW:.0f}"/>'
        for position, key in enumerate(keys)
    )


def _draw_one(strip: Strip, top: float) -> Iterator[str]:
    scale = _scale(strip)
    track = top + _TRACK
    yield from _window(strip, scale, track)
    if strip.lots is not None:
        low, high = _ends(strip.lots, scale)
        for ends in (((low, track), (high, track)), *(((end, track + 5), (end, track - 5)) for end in (low, high))):
            yield stencil.line(ends, canvas.INNER, 1.5)
    if strip.attainable is not None:
        low, high = _ends(strip.attainable, scale)
        yield stencil.box(low, track - 3.5, max(high, low + 2), track + 3.5, canvas.LOT)
    title = f"{strip.label}, {strip.unit}" if strip.unit else strip.label
    value = f"blend {strip.value_text}" if strip.value is not None else ""
    room = (WIDTH - 4 * _SIDE) / canvas.BOLD - canvas.width_of(value)
    yield stencil.text(0, top + 15, canvas.fitted(title, room), canvas.INK, weight="bold")
    if value:
        yield stencil.text(WIDTH, top + 15, value, _tone(strip.holds), side="right", weight="bold")
    yield _bound_text(strip, scale, track)
    if strip.lots is not None:
        yield from _end_texts(strip.lots, scale, strip.places, track + 21)


def _scale(strip: Strip) -> _Scale:
    ranges = (strip.window, strip.lots or (None, None), strip.attainable or (None, None), (strip.value, None))
    known = [end for ends in ranges for end in ends if end is not None]
    low, high = (min(known), max(known)) if known else (0.0, 1.0)
    room = (high - low) * _BEYOND or abs(high) * _BEYOND or 1.0
    return _Scale(low - room, high + room)


def _ends(ends: Bounds, scale: _Scale) -> tuple[float, float]:
    low, high = ends
    return scale(scale.low if low is None else low), scale(scale.high if high is None else high)


def _window(strip: Strip, scale: _Scale, track: float) -> Iterator[str]:
    """The window as a tinted box with a firm edge at each bound."""
    low, high = _ends(strip.window, scale)
    yield stencil.box(low, track - 11, high, track + 11, canvas.WINDOW, opacity=0.16)
    for bound, place in zip(strip.window, (low, high), strict=True):
        if bound is not None:
            yield stencil.line(((place, track + 11), (place, track - 11)), canvas.WINDOW, 2.0)


def _bound_text(strip: Strip, scale: _Scale, track: float) -> str:
    """The window's words, centred above it, but inside the figure."""
    low, high = _ends(strip.window, scale)
    text = words.window(*strip.window)
    centre = low if strip.window[1] is None else high if strip.window[0] is None else (low + high) / 2
    return stencil.text(_inside(centre, text), track - 17, text, canvas.WINDOW, side="center")


def _inside(centre: float, text: str) -> float:
    """The middle of a text as near to ``centre`` as keeps it inside the figure."""
    half = canvas.width_of(text) / 2
    return min(max(centre, _SIDE + half), WIDTH - _SIDE - half)


def _end_texts(ends: Bounds, scale: _Scale, places: int, y: float) -> Iterator[str]:
    """The ends of the lots' range below it; as one text where two would touch."""
    low, high = ends
    if low is None or high is None:
        return
    texts = numbers.text(low, places), numbers.text(high, places)
    left, right = scale(low), scale(high)
    room = right - left - (canvas.width_of(texts[0]) + canvas.width_of(texts[1])) / 2
    if room > _GAP:
        for text, x in zip(texts, (left, right), strict=True):
            yield stencil.text(_inside(x, text), y, text, canvas.MUTED, side="center")
        return
    joined = texts[0] if low == high else f"{texts[0]} to {texts[1]}"
    yield stencil.text(_inside((left + right) / 2, joined), y, joined, canvas.MUTED, side="center")
