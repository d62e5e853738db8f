"""Limit strips: one horizontal strip for each limit, in its own unit and on its own scale."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from html import escape

from matplotlib.artist import Artist
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.transforms import IdentityTransform

from generator import numbers
from generator.report import words
from generator.report.figures import canvas

WIDTH = canvas.WIDTH
_ROW = 76.0
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
    """Markup of all strips, one above the other (at least one)."""
    figure = canvas.blank(WIDTH, _ROW * len(strips))
    for position, strip in enumerate(strips):
        _draw_one(figure, strip, _ROW * (len(strips) - position))
    return canvas.markup(figure)


def touch(keys: Sequence[str]) -> str:
    """SVG of one see-through box over each strip, by which a script finds it."""
    return "".join(
        f'<rect class="touch" data-key="{escape(key)}" x="0" y="{_ROW * position:.0f}" width="{WIDTH:.0f}" '
        f'height="{_ROW:.0f}"/>'
        for position, key in enumerate(keys)
    )


def _draw_one(figure: Figure, strip: Strip, top: float) -> None:
    scale = _scale(strip)
    track = top - 50
    title = f"{strip.label}, {strip.unit}" if strip.unit else strip.label
    value = f"blend {strip.value_text}" if strip.value is not None else ""
    room = (WIDTH - 4 * _SIDE) / canvas.BOLD - canvas.width_of(value)
    _text(figure, 0, top - 15, canvas.fitted(title, room), canvas.INK, weight="bold")
    if value:
        tone = canvas.BLEND if strip.holds else canvas.BAD
        _text(figure, WIDTH, top - 15, value, tone, side="right", weight="bold")
    _window(figure, strip, scale, track)
    if strip.lots is not None:
        low, high = _ends(strip.lots, scale)
        _add(figure, Line2D([low, high], [track, track], color=canvas.INNER, linewidth=1.5))
        for end in (low, high):
            _add(figure, Line2D([end, end], [track - 5, track + 5], color=canvas.INNER, linewidth=1.5))
        _end_texts(figure, strip.lots, scale, strip.places, track - 21)
    if strip.attainable is not None:
        low, high = _ends(strip.attainable, scale)
        _add(figure, Rectangle((low, track - 3.5), max(high - low, 2), 7, color=canvas.LOT, linewidth=0, zorder=3))
    if strip.value is not None:
        mark = Line2D([scale(strip.value)], [track], marker="D", markersize=9, markeredgecolor=canvas.PAPER, zorder=4)
        mark.set_markerfacecolor(canvas.BLEND if strip.holds else canvas.BAD)
        mark.set_markeredgewidth(1.5)
        _add(figure, mark)


def _scale(strip: Strip) -> _Scale:
    ranges = (strip.window, strip.lots or (None, None), strip.attainable or (None, None), (strip.value, None))
    known = [end for ends in ranges for end in ends if end is not None]
    low, high = (min(known), max(known)) if known else (0.0, 1.0)
    room = (high - low) * _BEYOND or abs(high) * _BEYOND or 1.0
    return _Scale(low - room, high + room)


def _ends(ends: Bounds, scale: _Scale) -> tuple[float, float]:
    low, high = ends
    return scale(scale.low if low is None else low), scale(scale.high if high is None else high)


def _window(figure: Figure, strip: Strip, scale: _Scale, track: float) -> None:
    """The window as a tinted box with a firm edge at each bound, and the bounds above it."""
    low, high = _ends(strip.window, scale)
    _add(figure, Rectangle((low, track - 11), high - low, 22, facecolor=canvas.WINDOW, alpha=0.16, linewidth=0))
    for bound, place in zip(strip.window, (low, high), strict=True):
        if bound is not None:
            _add(figure, Line2D([place, place], [track - 11, track + 11], color=canvas.WINDOW, linewidth=2))
    _text(figure, *_bound_place(strip, low, high, track), canvas.WINDOW, side="center")


def _bound_place(strip: Strip, low: float, high: float, track: float) -> tuple[float, float, str]:
    """Where the window's words stand: centred above it, but inside the figure."""
    text = words.window(*strip.window)
    centre = low if strip.window[1] is None else high if strip.window[0] is None else (low + high) / 2
    half = canvas.width_of(text) / 2
    return min(max(centre, _SIDE + half), WIDTH - _SIDE - half), track + 17, text


def _end_texts(figure: Figure, ends: Bounds, scale: _Scale, places: int, y: float) -> None:
    """The ends of the lots' range below it; as one text where two would touch."""
    low, high = ends
    if low is None or high is None:
        return
    texts = numbers.text(low, places), numbers.text(high, places)
    left, right = scale(low), scale(high)
    room = right - left - (canvas.width_of(texts[0]) + canvas.width_of(texts[1])) / 2
    if room > _GAP:
        for text, x in zip(texts, (left, right), strict=True):
            half = canvas.width_of(text) / 2
            inside = min(max(x, _SIDE + half), WIDTH - _SIDE - half)
            _text(figure, inside, y, text, canvas.MUTED, side="center")
        return
    joined = texts[0] if low == high else f"{texts[0]} to {texts[1]}"
    half = canvas.width_of(joined) / 2
    _text(figure, min(max((left + right) / 2, _SIDE + half), WIDTH - _SIDE - half), y, joined, canvas.MUTED, "center")


def _text(
    figure: Figure, x: float, y: float, text: str, colour: str, side: str = "left", weight: str = "normal"
) -> None:
    figure.text(x, y, text, color=colour, ha=side, weight=weight, transform=IdentityTransform())


def _add(figure: Figure, artist: Artist) -> None:
    artist.set_transform(IdentityTransform())
    figure.add_artist(artist)
