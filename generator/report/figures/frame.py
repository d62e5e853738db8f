"""A frame with two axes, and where a value stands in it: shared by hull, curve and trend figures."""

from __future__ import annotations

from dataclasses import dataclass

from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from generator import numbers
from generator.report.figures import canvas

WIDTH, HEIGHT = canvas.WIDTH, 352.0
_TOP, _RIGHT, _BOTTOM = 26.0, 14.0, 42.0
#: Share of the span of the values that stays free on each side.
_PADDING = 0.12

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

    figure: Figure
    axes: Axes
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


def padded(values: list[float]) -> Ends:
    """Axis ends with some room around ``values`` (at least one); a single value gets room of its size."""
    low, high = min(values), max(values)
    room = (high - low) * _PADDING or abs(high) * _PADDING or 1.0
    return low - room, high + room


def framed(x_axis: Axis, y_axis: Axis) -> Frame:
    """A frame with ticks, their numbers in the house style, and the names of the axes."""
    x_ticks, y_ticks = _ticks(x_axis.ends, 6), _ticks(y_axis.ends, 6)
    x_texts, y_texts = _tick_texts(x_ticks), _tick_texts(y_ticks)
    left = 14 + max(canvas.width_of(text) for text in y_texts)
    figure = canvas.blank(WIDTH, HEIGHT)
    axes = figure.add_axes(
        (
            left / WIDTH,
            _BOTTOM / HEIGHT,
            (WIDTH - left - _RIGHT) / WIDTH,
            (HEIGHT - _TOP - _BOTTOM) / HEIGHT,
        )
    )
    axes.patch.set_visible(False)
    axes.set_xlim(*x_axis.ends)
    axes.set_ylim(*y_axis.ends)
    axes.set_xticks(x_ticks, x_texts)
    axes.set_yticks(y_ticks, y_texts)
    axes.tick_params(length=0, pad=6, labelcolor=canvas.MUTED, labelsize=canvas.SMALL_SIZE)
    axes.grid(color=canvas.LINE, linewidth=1.0)
    axes.set_axisbelow(True)
    for spine in axes.spines.values():
        spine.set_color(canvas.LINE)
    size = canvas.TEXT_SIZE
    x_title, y_title = (canvas.fitted(axis.title, WIDTH / canvas.BOLD - 20, size) for axis in (x_axis, y_axis))
    figure.text(0.004, 1 - 14 / HEIGHT, y_title, color=canvas.INK, size=size, weight="bold")
    figure.text(1 - _RIGHT / WIDTH, 6 / HEIGHT, x_title, color=canvas.INK, size=size, weight="bold", ha="right")
    return Frame(figure, axes, x_axis, y_axis, left)


def _ticks(ends: Ends, most: int) -> list[float]:
    low, high = ends
    return [float(tick) for tick in MaxNLocator(nbins=most).tick_values(low, high) if low <= tick <= high]


def _tick_texts(ticks: list[float]) -> list[str]:
    """Tick values with as many decimals as tell them apart."""
    for places in range(10):
        texts = [numbers.text(tick, places) for tick in ticks]
        if all(abs(round(tick, places) - tick) <= 1e-9 * max(1e-300, abs(tick)) for tick in ticks):
            return texts
    return [numbers.significant(tick, 4) for tick in ticks]
