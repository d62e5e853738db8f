"""Marks that matplotlib has drawn once, laid down again at other places.

A figure of matplotlib costs some 70 ms, nearly all of it for laying out artists one by one; a build draws one for
nearly every section.  So matplotlib draws each kind of text, line, area and mark once in a process, on a sheet of its
own; what it wrote is kept as a stencil, and figures put it where they want it.  Places are SVG units, y downwards.
"""

from __future__ import annotations

import functools
import re
from collections.abc import Sequence
from dataclasses import dataclass
from html import escape

from matplotlib.artist import Artist
from matplotlib.lines import Line2D
from matplotlib.patches import Polygon
from matplotlib.transforms import IdentityTransform

from generator.report.figures import canvas

Pair = tuple[float, float]

_SHEET = 20.0
_TRIANGLE = ((2.0, 2.0), (8.0, 2.0), (2.0, 8.0))


@dataclass(frozen=True, slots=True)
class _Mark:
    """A mark around (0, 0): its outline, the style of that, and the style that each use adds."""

    name: str
    outline: str
    style: str
    used: str


def text(
    x: float,
    y: float,
    words: str,
    colour: str,
    *,
    side: str = "left",
    weight: str = "normal",
    size: float = canvas.SMALL_SIZE,
) -> str:
    """SVG of words whose base line begins, ends or has its middle at a place (``side``: left, right, center)."""
    style = _text_style(colour, side, weight, size)
    return f'<text style="{style}" x="{canvas.short(x)}" y="{canvas.short(y)}">{escape(words, quote=False)}</text>'


def line(places: Sequence[Pair], colour: str, width: float) -> str:
    """SVG of a line through places."""
    return f'<path d="{_through(places)}" style="{_line_style(colour, width)}"/>'


def area(corners: Sequence[Pair], fill: str, edge: str = "none", width: float = 0.0, opacity: float = 1.0) -> str:
    """SVG of a closed area; without an edge where ``width`` is 0."""
    return f'<path d="{_through(corners)}z" style="{_area_style(fill, edge, width, opacity)}"/>'


def box(left: float, top: float, right: float, bottom: float, fill: str, opacity: float = 1.0) -> str:
    """SVG of a rectangle without an edge."""
    return area(((left, top), (right, top), (right, bottom), (left, bottom)), fill, opacity=opacity)


def marks(places: Sequence[Pair], kind: str, size: float, fill: str, edge: str, width: float = 1.5) -> str:
    """SVG of one mark at each place; ``kind`` as matplotlib names it ("s" square, "o" ring, "D" diamond)."""
    if not places:
        return ""
    mark = _mark(kind, size, fill, edge, width)
    uses = "".join(
        f'<use xlink:href="#{mark.name}" x="{canvas.short(x)}" y="{canvas.short(y)}" style="{mark.used}"/>'
        for x, y in places
    )
    return f'<defs><path id="{mark.name}" d="{mark.outline}" style="{mark.style}"/></defs>{uses}'


def sheet(width: float, height: float, *parts: str) -> str:
    """A whole drawing of these parts, as :func:`canvas.finished` takes it."""
    return f'<svg viewBox="0 0 {width:g} {height:g}">{"".join(parts)}</svg>'


def _through(places: Sequence[Pair]) -> str:
    return "M" + "L".join(f"{canvas.short(x)} {canvas.short(y)}" for x, y in places)


@functools.cache
def _text_style(colour: str, side: str, weight: str, size: float) -> str:
    figure = canvas.blank(_SHEET, _SHEET)
    figure.text(0.5, 0.5, "x", color=colour, ha=side, weight=weight, size=size)
    return _found(r'<text style="([^"]*)"', canvas.markup(figure))[0]


@functools.cache
def _line_style(colour: str, width: float) -> str:
    return _found(r'style="([^"]*)"', _drawn(Line2D(*zip(*_TRIANGLE, strict=True), color=colour, linewidth=width)))[0]


@functools.cache
def _area_style(fill: str, edge: str, width: float, opacity: float) -> str:
    whole = Polygon(_TRIANGLE, facecolor=fill, edgecolor=edge, linewidth=width, alpha=None if opacity == 1 else opacity)
    return _found(r'style="([^"]*)"', _drawn(whole))[0]


@functools.cache
def _mark(kind: str, size: float, fill: str, edge: str, width: float) -> _Mark:
    artist = Line2D([8.0], [8.0], linestyle="none", marker=kind, markersize=size)
    artist.set_markerfacecolor(fill)
    artist.set_markeredgecolor(edge)
    artist.set_markeredgewidth(width)
    drawn = _drawn(artist)
    name, outline, style = _found(r'<path id="([^"]*)" d="([^"]*)" style="([^"]*)"', drawn)
    return _Mark(name, outline, style, _found(r'<use [^>]*style="([^"]*)"', drawn)[0])


def _drawn(artist: Artist) -> str:
    figure = canvas.blank(_SHEET, _SHEET)
    artist.set_transform(IdentityTransform())
    figure.add_artist(artist)
    return canvas.markup(figure)


def _found(pattern: str, drawn: str) -> tuple[str, ...]:
    match = re.search(pattern, drawn)
    assert match is not None, f"matplotlib writes this otherwise now: {drawn}"
    return match.groups()
