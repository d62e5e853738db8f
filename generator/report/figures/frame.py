"""A frame with two axes, and where a value stands in it: shared by hull, curve and trend figures."""

from __future__ import annotations

import functools
from collections.abc import Iterator
from dataclasses import dataclass

from matplotlib.ticker import MaxNLocator

from generator import numbers
from generator.report.figures import canvas, stencil

WIDTH, HEIGHT = canvas.WIDTH, 352.0
_TOP, _RIGHT, _BOTTOM = 26.0, 14.0, 42.0
#: Share of the span of the values that stays free on each side.
_PADDING = 0.12
#: Where numbers stand below and beside the frame, and how far below the middle of a number its base line is.
_BELOW, _BESIDE, _TO_MIDDLE = 14.4, 6.0, 4.1
_EDGE, _MARGIN = 0.8, 1.7
_LOCATOR = MaxNLocator(nbins=6)

Ends = tuple[float, float]


@dataclass(frozen=True, slots=True, kw_only=True)
class Axis:
    """An axis: what it shows, in which unit, from where to where."""

    label: str
    unit: str
    ends: Ends

    @property
    def title(self) -> str:
        """The axis in words: "K₂O, %"."""
        return f"{self.label}, {self.unit}" if self.unit else self.label


@dataclass(frozen=True, slots=True)
class Frame:
    """An empty drawing between two axes.  Places are SVG units, y downwards."""

    x_axis: Axis
    y_axis: Axis
    left: float

    @property
    def box(self) -> tuple[float, float, float, float]:
        """The frame's left, top, right and bottom."""
        return self.left, _TOP, WIDTH - _RIGHT, HEIGHT - _BOTTOM

    def x(self, value: float) -> float:
        """Where a horizontal value stands; outside the frame for values beyond the axis."""
        left, _, right, _ = self.box
        low, high = self.x_axis.ends
        return left + (value - low) / (high - low) * (right - left)

    def y(self, value: float) -> float:
        """Where a vertical value stands."""
        _, top, _, bottom = self.box
        low, high = self.y_axis.ends
        return bottom - (value - low) / (high - low) * (bottom - top)

    def drawn(self, inside: str, above: str = "") -> str:
        """The drawing: grid, ticks with their numbers in the house style, names of the axes, and what is given.

        ``inside`` is SVG below the frame's edge, ``above`` SVG over it.
        """
        left, top, right, bottom = self.box
        corners = ((left, bottom), (right, bottom), (left, top), (right, top))
        edges = [(corners[a], corners[b]) for a, b in ((0, 2), (1, 3), (0, 1), (2, 3))]
        return stencil.sheet(
            WIDTH,
            HEIGHT,
            *self._ticked(),
            inside,
            *(stencil.line(edge, canvas.LINE, _EDGE) for edge in edges),
            above,
            _title(_MARGIN, 14.0, self.y_axis.title, "left"),
            _title(right, HEIGHT - 6, self.x_axis.title, "right"),
        )

    def _ticked(self) -> Iterator[str]:
        left, top, right, bottom = self.box
        ticks = _ticks(self.x_axis.ends)
        for tick, words in zip(ticks, _tick_texts(ticks), strict=True):
            x = self.x(tick)
            yield stencil.line(((x, bottom), (x, top)), canvas.LINE, 1.0)
            yield stencil.text(x, bottom + _BELOW, words, canvas.MUTED, side="center")
        ticks = _ticks(self.y_axis.ends)
        for tick, words in zip(ticks, _tick_texts(ticks), strict=True):
            y = self.y(tick)
            yield stencil.line(((left, y), (right, y)), canvas.LINE, 1.0)
            yield stencil.text(left - _BESIDE, y + _TO_MIDDLE, words, canvas.MUTED, side="right")


def padded(values: list[float]) -> Ends:
    """Axis ends with some room around ``values`` (at least one); a single value gets room of its size."""
    low, high = min(values), max(values)
    room = (high - low) * _PADDING or abs(high) * _PADDING or 1.0
    return low - room, high + room


def framed(x_axis: Axis, y_axis: Axis) -> Frame:
    """A frame with as much room on the left as the numbers there need."""
    texts = _tick_texts(_ticks(y_axis.ends))
    return Frame(x_axis, y_axis, 14 + max(canvas.width_of(text) for text in texts))


def _title(x: float, y: float, words: str, side: str) -> str:
    shown = canvas.fitted(words, WIDTH / canvas.BOLD - 20, canvas.TEXT_SIZE)
    return stencil.text(x, y, shown, canvas.INK, side=side, weight="bold", size=canvas.TEXT_SIZE)


@functools.lru_cache(maxsize=1024)
def _ticks(ends: Ends) -> list[float]:
    low, high = ends
    return [float(tick) for tick in _LOCATOR.tick_values(low, high) if low <= tick <= high]


def _tick_texts(ticks: list[float]) -> list[str]:
    """Tick values with as many decimals as tell them apart."""
    for places in range(10):
        texts = [numbers.text(tick, places) for tick in ticks]
        if all(abs(round(tick, places) - tick) <= 1e-9 * max(1e-300, abs(tick)) for tick in ticks):
            return texts
    return [numbers.significant(tick, 4) for tick in ticks]
