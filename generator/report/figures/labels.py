"""Labels beside points, placed so that none covers another label, a point or the frame, and few cross a line."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from html import escape

from generator.report.figures.canvas import SMALL_SIZE, width_of

Box = tuple[float, float, float, float]
Segment = tuple[tuple[float, float], tuple[float, float]]

#: Where a label may stand around its point: (horizontal, vertical) side, best first.
_SIDES = ((1, 1), (-1, 1), (1, -1), (-1, -1), (1, 0), (-1, 0), (0, 1), (0, -1))
#: Distances from the point at which all sides are tried in turn, in SVG units.
_GAPS = (5.0, 9.0, 14.0)
_MARK = 5.0
#: So much further from a label another point has to be than its own, in SVG units.
_CLEARLY = 2.0
#: So much stays free on both sides of a label, in SVG units.
_APART = 4.0
#: From the middle of a line of small text down to its base line.
_BELOW_MIDDLE = 4.0


@dataclass(frozen=True, slots=True)
class Placed:
    """A label's text and the left end and middle height of where it stands, in SVG units."""

    text: str
    x: float
    y: float


def place(
    points: Sequence[tuple[float, float]],
    texts: Sequence[str],
    frame: Box,
    obstacles: Sequence[Box] = (),
    lines: Sequence[Segment] = (),
    most: int = 25,
) -> tuple[list[Placed], int]:
    """Labels for ``points`` (SVG units, y upwards), and how many found no room.

    Greedy, in the order given, at most ``most``: a label that would overlap a point, an obstacle, an
    earlier label or leave the frame, or would stand as near to another point as to its own, tries the next
    place, and is left out when there is none.  Of the free places the first that crosses none of ``lines`` is
    taken, else the first.  Boxes are (left, bottom, right, top).
    """
    taken: list[Box] = [(x - _MARK, y - _MARK, x + _MARK, y + _MARK) for x, y in points]
    taken.extend(obstacles)
    placed: list[Placed] = []
    for (x, y), text in zip(points, texts, strict=True):
        if len(placed) == most:
            break
        free = (box for box in _candidates(x, y, text) if _is_free(box, taken, frame) and _is_own(box, (x, y), points))
        box = _clearest(free, lines)
        if box is not None:
            taken.append((box[0] - _APART, box[1], box[2] + _APART, box[3]))
            placed.append(Placed(text, box[0], (box[1] + box[3]) / 2))
    return placed, len(points) - len(placed)


def markup(placed: Sequence[Placed], floor: float) -> str:
    """SVG of placed labels, whose heights count upwards from ``floor`` (in SVG units, y downwards)."""
    return "".join(
        f'<text class="fig-label" x="{label.x:.1f}" y="{floor - label.y + _BELOW_MIDDLE:.1f}">'
        f"{escape(label.text)}</text>"
        for label in placed
    )


def _candidates(x: float, y: float, text: str) -> list[Box]:
    wide, high = width_of(text), SMALL_SIZE * 1.1
    boxes = []
    for gap in _GAPS:
        for across, up in _SIDES:
            left = x + across * gap + (0 if across > 0 else -wide if across < 0 else -wide / 2)
            bottom = y + up * gap + (-high / 2 + up * high / 2 if across == 0 or up == 0 else up * high / 2 - high / 2)
            boxes.append((left, bottom, left + wide, bottom + high))
    return boxes


def _clearest(boxes: Iterable[Box], lines: Sequence[Segment]) -> Box | None:
    """Find the first box that no line crosses, else the first, else none."""
    first = None
    for box in boxes:
        if not any(_is_crossed(box, line) for line in lines):
            return box
        first = first or box
    return first


def _is_crossed(box: Box, line: Segment) -> bool:
    """Whether a segment has a point in a box: its part within each pair of sides (Liang and Barsky 1984)."""
    (x0, y0), (x1, y1) = line
    left, bottom, right, top = box
    enters, leaves = 0.0, 1.0
    for start, step, low, high in ((x0, x1 - x0, left, right), (y0, y1 - y0, bottom, top)):
        if step == 0:
            if not low < start < high:
                return False
            continue
        ends = sorted(((low - start) / step, (high - start) / step))
        enters, leaves = max(enters, ends[0]), min(leaves, ends[1])
    return enters < leaves


def _is_own(box: Box, point: tuple[float, float], points: Sequence[tuple[float, float]]) -> bool:
    """Whether a reader takes the label for its own point's: every other one is clearly further away."""
    reach = _distance(box, point) + _CLEARLY
    return all(other == point or _distance(box, other) >= reach for other in points)


def _distance(box: Box, point: tuple[float, float]) -> float:
    left, bottom, right, top = box
    x, y = point
    return math.hypot(max(left - x, 0.0, x - right), max(bottom - y, 0.0, y - top))


def _is_free(box: Box, taken: Sequence[Box], frame: Box) -> bool:
    left, bottom, right, top = box
    if left < frame[0] or bottom < frame[1] or right > frame[2] or top > frame[3]:
        return False
    return all(right <= other[0] or other[2] <= left or top <= other[1] or other[3] <= bottom for other in taken)
