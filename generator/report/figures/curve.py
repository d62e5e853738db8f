"""The cost–room curve: what a recipe costs that leaves more room."""

from __future__ import annotations

from collections.abc import Sequence

from generator.report.figures import canvas, stencil
from generator.report.figures.frame import Axis, framed, padded


def draw(points: Sequence[tuple[float, float]], room_unit: str, money: str) -> str:
    """Markup of the line through (room, cost) corners, in order of room (at least one)."""
    rooms, costs = [room for room, _ in points], [cost for _, cost in points]
    frame = framed(
        Axis(label="Room", unit=room_unit, ends=padded(rooms)), Axis(label="Cost", unit=money, ends=padded(costs))
    )
    places = [(frame.x(room), frame.y(cost)) for room, cost in points]
    corners = stencil.marks(places, "D", 6, canvas.PAPER, canvas.BLEND)
    return frame.drawn(stencil.line(places, canvas.BLEND, 2.0) + corners)
