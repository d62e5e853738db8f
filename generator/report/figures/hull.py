"""The hull seen in a plane: lots as points, and over it what belongs to one order."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from html import escape

from generator.report.figures import canvas, labels, stencil
from generator.report.figures.frame import Axis, Frame, framed

Pair = tuple[float, float]
Bounds = tuple[float | None, float | None]

#: From the middle of a blend's diamond to its corners, in SVG units.
_DIAMOND = 7.0


@dataclass(frozen=True, slots=True, kw_only=True)
class LotPoint:
    """A lot in the plane; ``name`` may join several lots of one place, which ``lots`` lists."""

    name: str
    x: float
    y: float
    is_corner: bool
    lots: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Separation:
    """The line across·x + up·y = level that parts all lots from what the limits ask together."""

    across: float
    up: float
    level: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Overlay:
    """What one order adds to the plane; None where it doesn't apply.  ``lots`` are those of its blend."""

    x_window: Bounds = (None, None)
    y_window: Bounds = (None, None)
    blend: Pair | None = None
    nearest: Pair | None = None
    separation: Separation | None = None
    lots: frozenset[str] = frozenset()


@dataclass(frozen=True, slots=True)
class Base:
    """A drawn plane with its lots, to lay overlays and names on."""

    text: str
    frame: Frame
    points: tuple[LotPoint, ...]


def draw_base(points: Sequence[LotPoint], x_axis: Axis, y_axis: Axis) -> Base:
    """The plane with the hull's shadow and the lots: corners as filled squares, inner lots as rings."""
    frame = framed(x_axis, y_axis)
    outline = [(frame.x(x), frame.y(y)) for x, y in shadow([(point.x, point.y) for point in points])]
    tinted = stencil.area(outline, canvas.FILL, canvas.LOT, 1.2) if len(outline) > 1 else ""
    lots = ""
    for is_corner, mark, fill, edge in ((False, "o", canvas.PAPER, canvas.INNER), (True, "s", canvas.LOT, canvas.LOT)):
        places = [(frame.x(point.x), frame.y(point.y)) for point in points if point.is_corner == is_corner]
        lots += stencil.marks(places, mark, 6.5, fill, edge)
    return Base(frame.drawn(tinted, lots), frame, tuple(points))


def lot_names(base: Base, overlay: Overlay) -> tuple[str, int]:
    """Names beside the lots as SVG to draw last, and how many found no room.

    Those in the order's blend come first, then the outline's, then corners.

    No name covers the order's blend, and where there is a choice none crosses the hull's edge, the window or
    the separating line.
    """
    frame, points = base.frame, base.points
    left, top, right, bottom = frame.box

    def at(place: Pair) -> Pair:
        return frame.x(place[0]), bottom - frame.y(place[1])

    outline = shadow([(point.x, point.y) for point in points])

    def rank(point: LotPoint) -> tuple[bool, bool, bool]:
        return overlay.lots.isdisjoint(point.lots), (point.x, point.y) not in outline, not point.is_corner

    first = sorted(points, key=rank)
    marks = [at(place) for place in (overlay.blend, overlay.nearest) if place is not None]
    placed, left_over = labels.place(
        [at((point.x, point.y)) for point in first],
        [point.name for point in first],
        (left, 0, right, bottom - top),
        obstacles=[(x - _DIAMOND, y - _DIAMOND, x + _DIAMOND, y + _DIAMOND) for x, y in marks],
        lines=[(at(a), at(b)) for a, b in [*_edges(outline), *_overlay_lines(frame, overlay)]],
    )
    return labels.markup(placed, bottom), left_over


def _edges(outline: Sequence[Pair]) -> list[tuple[Pair, Pair]]:
    return list(zip(outline, [*outline[1:], *outline[:1]], strict=True)) if len(outline) > 1 else []


def _overlay_lines(frame: Frame, overlay: Overlay) -> list[tuple[Pair, Pair]]:
    """The sides of the window and the separating line, in values."""
    x0, x1 = _within(overlay.x_window, frame.x_axis.ends)
    y0, y1 = _within(overlay.y_window, frame.y_axis.ends)
    found = [((x, y0), (x, y1)) for x in overlay.x_window if x is not None]
    found += [((x0, y), (x1, y)) for y in overlay.y_window if y is not None]
    line = clipped(overlay.separation, frame.x_axis.ends, frame.y_axis.ends) if overlay.separation else None
    return [*found, line] if line else found


def _within(bounds: Bounds, ends: Pair) -> Pair:
    low, high = bounds
    return ends[0] if low is None else low, ends[1] if high is None else high


def touch(frame: Frame, x: float, y: float, keys: Sequence[str]) -> str:
    """SVG of a see-through disc for each lot of one place, by which a script finds the mark."""
    return "".join(
        f'<circle class="touch" data-key="{escape(key)}" cx="{frame.x(x):.1f}" cy="{frame.y(y):.1f}" r="8"/>'
        for key in keys
    )


def shadow(points: Sequence[Pair]) -> list[Pair]:
    """Corners of the convex hull of points in the plane, counter-clockwise (Andrew's monotone chain, 1979).

    One corner for one place, two for points in a line.  For drawing only: in floating point.
    """
    ordered = sorted(set(points))
    if len(ordered) < 3:
        return ordered
    chains = []
    for run in (ordered, ordered[::-1]):
        chain: list[Pair] = []
        for point in run:
            while len(chain) > 1 and _turn(chain[-2], chain[-1], point) <= 0:
                chain.pop()
            chain.append(point)
        chains.append(chain[:-1])
    return chains[0] + chains[1]


def _turn(a: Pair, b: Pair, c: Pair) -> float:
    return (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0])


def overlay_markup(frame: Frame, overlay: Overlay) -> str:
    """SVG for one order: its window as a box, the separating line, the blend as a diamond."""
    parts = []
    if (*overlay.x_window, *overlay.y_window) != (None,) * 4:
        parts.append(_window(frame, overlay))
    if overlay.separation is not None:
        parts.append(_line(frame, overlay.separation))
    for place, name in ((overlay.nearest, "fig-nearest"), (overlay.blend, "fig-blend")):
        if place is not None:
            x, y = frame.x(place[0]), frame.y(place[1])
            parts.append(f'<path class="{name}" d="M{x:.1f} {y - 7:.1f}l7 7-7 7-7-7z"/>')
    return "".join(parts)


def _window(frame: Frame, overlay: Overlay) -> str:
    left, top, right, bottom = frame.box
    (x_low, x_high), (y_low, y_high) = overlay.x_window, overlay.y_window
    x0 = left if x_low is None else min(max(frame.x(x_low), left), right)
    x1 = right if x_high is None else min(max(frame.x(x_high), left), right)
    y0 = bottom if y_low is None else min(max(frame.y(y_low), top), bottom)
    y1 = top if y_high is None else min(max(frame.y(y_high), top), bottom)
    return f'<path class="fig-window" d="M{x0:.1f} {y0:.1f}H{x1:.1f}V{y1:.1f}H{x0:.1f}z"/>'


def _line(frame: Frame, line: Separation) -> str:
    ends = clipped(line, frame.x_axis.ends, frame.y_axis.ends)
    if ends is None:
        return ""
    (x0, y0), (x1, y1) = ends
    return (
        f'<path class="fig-separation" d="M{frame.x(x0):.1f} {frame.y(y0):.1f}L{frame.x(x1):.1f} {frame.y(y1):.1f}"/>'
    )


def clipped(line: Separation, x_ends: Pair, y_ends: Pair) -> tuple[Pair, Pair] | None:
    """The two ends of a line inside a rectangle, or None where it passes by."""
    found: list[Pair] = []
    if line.up:
        found += [(x, (line.level - line.across * x) / line.up) for x in x_ends]
    if line.across:
        found += [((line.level - line.up * y) / line.across, y) for y in y_ends]
    slack_x, slack_y = ((ends[1] - ends[0]) * 1e-9 for ends in (x_ends, y_ends))
    inside = sorted(
        {
            (x, y)
            for x, y in found
            if x_ends[0] - slack_x <= x <= x_ends[1] + slack_x and y_ends[0] - slack_y <= y <= y_ends[1] + slack_y
        }
    )
    return (inside[0], inside[-1]) if len(inside) > 1 else None
