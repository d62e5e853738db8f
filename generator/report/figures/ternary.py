"""Three components that sum to a whole, as a triangle: each corner is one of them pure."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from matplotlib.lines import Line2D
from matplotlib.patches import Polygon
from matplotlib.transforms import IdentityTransform

from generator.report.figures import canvas, labels
from generator.report.figures.hull import Bounds, Pair, shadow

WIDTH, HEIGHT = canvas.WIDTH, 386.0
_SIDE = 360.0
_LEFT, _FOOT = (WIDTH - _SIDE) / 2, 40.0
_TALL = _SIDE * 3**0.5 / 2
_STEPS = 5

#: Fractions of the whole: (left corner, right corner, top corner), summing to 1.
Part = tuple[float, float, float]


@dataclass(frozen=True, slots=True, kw_only=True)
class TernaryLot:
    """A lot in the triangle."""

    name: str
    part: Part
    is_corner: bool


def place_of(part: Part) -> Pair:
    """Where a composition stands, in SVG units with y downwards."""
    _, right, top = part
    return _LEFT + _SIDE * (right + top / 2), HEIGHT - _FOOT - _TALL * top


def draw_base(lots: Sequence[TernaryLot], names: tuple[str, str, str]) -> tuple[str, str]:
    """The triangle with its grid, the hull's shadow and the lots; and the lots' names to draw last."""
    figure = canvas.blank(WIDTH, HEIGHT)
    flat = IdentityTransform()
    for step in range(_STEPS):
        share = step / _STEPS
        for ends in (
            ((share, 1 - share, 0.0), (share, 0.0, 1 - share)),
            ((1 - share, share, 0.0), (0.0, share, 1 - share)),
            ((1 - share, 0.0, share), (0.0, 1 - share, share)),
        ):
            (x0, y0), (x1, y1) = (_upwards(place_of(end)) for end in ends)
            line = Line2D([x0, x1], [y0, y1], color=canvas.LINE, linewidth=1.0 if step else 1.4, transform=flat)
            figure.add_artist(line)
    places = [_upwards(place_of(lot.part)) for lot in lots]
    outline = shadow(places)
    if len(outline) > 1:
        figure.add_artist(
            Polygon(outline, closed=True, facecolor=canvas.FILL, edgecolor=canvas.LOT, linewidth=1.2, transform=flat)
        )
    for lot, (x, y) in zip(lots, places, strict=True):
        mark = Line2D([x], [y], marker="s" if lot.is_corner else "o", markersize=6.5, linestyle="none", transform=flat)
        mark.set_markerfacecolor(canvas.LOT if lot.is_corner else canvas.PAPER)
        mark.set_markeredgecolor(canvas.LOT if lot.is_corner else canvas.INNER)
        mark.set_markeredgewidth(1.5)
        figure.add_artist(mark)
    for name, part, side, drop in zip(names, _PURE, ("left", "right", "center"), (-18, -18, 8), strict=True):
        x, y = _upwards(place_of(part))
        x = {"left": 4.0, "right": WIDTH - 4.0}.get(side, x)
        figure.text(x, y + drop, name, color=canvas.INK, ha=side, weight="bold", size=canvas.TEXT_SIZE, transform=flat)
    return canvas.markup(figure), _labels(lots, places)


_PURE: tuple[Part, Part, Part] = ((1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0))


def _upwards(place: Pair) -> Pair:
    return place[0], HEIGHT - place[1]


def _labels(lots: Sequence[TernaryLot], places: Sequence[Pair]) -> str:
    order = sorted(range(len(lots)), key=lambda position: not lots[position].is_corner)
    placed, _ = labels.place(
        [places[position] for position in order],
        [lots[position].name for position in order],
        (0.0, _FOOT - 12, WIDTH, HEIGHT),
    )
    return labels.markup(placed, HEIGHT)


def window(bounds: Sequence[Bounds]) -> list[Part]:
    """Corners of the part of the triangle within ``bounds`` (fractions, one pair for each corner).

    The triangle is cut by each bound in turn (Sutherland and Hodgman 1974); empty where nothing is left.
    """
    corners: list[Part] = list(_PURE)
    for position, (low, high) in enumerate(bounds):
        if low is not None:
            corners = _cut(corners, position, low, 1.0)
        if high is not None:
            corners = _cut(corners, position, high, -1.0)
    return corners


def _cut(corners: Sequence[Part], position: int, bound: float, sign: float) -> list[Part]:
    """What is left of a polygon where sign·(part − bound) ≥ 0."""
    kept: list[Part] = []
    for number, corner in enumerate(corners):
        before = corners[number - 1]
        here, there = sign * (corner[position] - bound), sign * (before[position] - bound)
        if (here >= 0) != (there >= 0):
            share = there / (there - here)
            mixed = [a + share * (b - a) for a, b in zip(before, corner, strict=True)]
            kept.append((mixed[0], mixed[1], mixed[2]))
        if here >= 0:
            kept.append(corner)
    return kept


def overlay_markup(bounds: Sequence[Bounds], blend: Part | None) -> str:
    """SVG for one order: its window and its blend."""
    parts = []
    corners = window(bounds) if any(bound is not None for pair in bounds for bound in pair) else []
    if corners:
        path = "L".join("{:.1f} {:.1f}".format(*place_of(corner)) for corner in corners)
        parts.append(f'<path class="fig-window" d="M{path}z"/>')
    if blend is not None:
        x, y = place_of(blend)
        parts.append(f'<path class="fig-blend" d="M{x:.1f} {y - 7:.1f}l7 7-7 7-7-7z"/>')
    return "".join(parts)
