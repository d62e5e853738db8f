"""Drawings show what they are given, in places that can be told."""

from __future__ import annotations

import math
import random
import re
from xml.etree import ElementTree

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from matplotlib.lines import Line2D
from matplotlib.patches import Polygon, Rectangle
from matplotlib.transforms import IdentityTransform

from generator.report.figures import canvas, curve, stencil, strips, ternary
from generator.report.figures.canvas import SMALL_SIZE, width_of
from generator.report.figures.frame import Axis, padded
from generator.report.figures.hull import (
    LotPoint,
    Overlay,
    Separation,
    clipped,
    draw_base,
    lot_names,
    overlay_markup,
    shadow,
)
from generator.report.figures.labels import place

FLOATS = st.floats(-1e6, 1e6, allow_nan=False).map(lambda value: round(value, 3))
PAIRS = st.tuples(FLOATS, FLOATS)


def drawn(points: list[LotPoint]) -> tuple[str, Axis, Axis]:
    x_axis = Axis(label="N", unit="%", ends=padded([point.x for point in points]))
    y_axis = Axis(label="K", unit="%", ends=padded([point.y for point in points]))
    base = draw_base(points, x_axis, y_axis)
    overlay = Overlay(x_window=(1.0, None), y_window=(None, 2.0), blend=(1.0, 1.0))
    above = overlay_markup(base.frame, overlay) + lot_names(base, overlay)[0]
    text = canvas.finished(base.text, "key", "T <", "D &", above)
    return text, x_axis, y_axis


def test_a_drawing_is_well_formed_and_told_in_words() -> None:
    """Hostile names stay text; title and description are there; ids begin with the figure's key."""
    names = ["x < y & z", "$x$", "]]>--><script>", '#fe0101 url(#a) id="b"']
    points = [LotPoint(name=name, x=float(n), y=float(n * n % 3), is_corner=n % 2 == 0) for n, name in enumerate(names)]
    text, _, _ = drawn(points)
    root = ElementTree.fromstring(text)
    assert root.find("{http://www.w3.org/2000/svg}title").text == "T <"
    assert set(names) <= {element.text for element in root.iter("{http://www.w3.org/2000/svg}text")}
    assert all(element.get("id", "key-").startswith("key-") for element in root.iter())


def test_a_drawing_takes_its_colours_from_the_page() -> None:
    """No fixed colour is left in styles but variables of the theme."""
    text, _, _ = drawn(
        [LotPoint(name="A", x=0.0, y=0.0, is_corner=True), LotPoint(name="B", x=1.0, y=2.0, is_corner=False)]
    )
    assert not re.findall(r"#[0-9a-f]{6}", text)
    assert "var(--lot)" in text
    strip = strips.Strip(label="N", unit="%", places=1, window=(1.0, 2.0), lots=(0.0, 3.0), attainable=(0.5, 2.5))
    assert not re.findall(r"#[0-9a-f]{6}", strips.draw([strip]))


@pytest.mark.parametrize("window", [(1.0, 2.0), (None, 2.0), (1.0, None), (1.5, 1.5)])
@pytest.mark.parametrize("attainable", [None, (None, None), (1.0, 1.0), (0.5, None)])
def test_strips_take_any_kind_of_limit(window: strips.Bounds, attainable: strips.Bounds | None) -> None:
    """One-sided, exact and unbounded ranges are all drawn."""
    strip = strips.Strip(
        label="N", unit="", places=1, window=window, lots=(1.0, 1.0), attainable=attainable, value=3.0, value_text="3.0"
    )
    ElementTree.fromstring(canvas.finished(strips.draw([strip, strip]), "k", "t", "d"))


def test_a_curve_of_one_corner_is_drawn() -> None:
    """Cheapest and roomiest may be the same recipe."""
    ElementTree.fromstring(canvas.finished(curve.draw([(1.0, 50.0)], "sd", "EUR per t"), "k", "t", "d"))


@given(st.lists(PAIRS, min_size=1, max_size=12))
def test_the_shadow_holds_every_point(points: list[tuple[float, float]]) -> None:
    """Its corners are among the points, and no point lies outside any of its edges."""
    outline = shadow(points)
    assert set(outline) <= set(points)
    for a, b in zip(outline, outline[1:] + outline[:1], strict=True):
        for c in points:
            turn = (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0])
            assert turn >= -1e-6 * (abs(b[0] - a[0]) + abs(b[1] - a[1]) + 1) * 1e6


def test_the_shadow_of_repeated_and_collinear_points_is_their_ends() -> None:
    """A flat cloud has two corners, a single place one."""
    assert shadow([(0.0, 0.0), (1.0, 1.0), (2.0, 2.0), (1.0, 1.0)]) == [(0.0, 0.0), (2.0, 2.0)]
    assert shadow([(3.0, 3.0)] * 4) == [(3.0, 3.0)]


def test_a_line_is_clipped_to_the_frame() -> None:
    """Lines that pass by are not drawn, others end on the frame."""
    frame = ((0.0, 4.0), (0.0, 2.0))
    assert clipped(Separation(across=1.0, up=0.0, level=3.0), *frame) == ((3.0, 0.0), (3.0, 2.0))
    assert clipped(Separation(across=1.0, up=1.0, level=2.0), *frame) == ((0.0, 2.0), (2.0, 0.0))
    assert clipped(Separation(across=1.0, up=1.0, level=9.0), *frame) is None


@given(st.lists(st.tuples(st.integers(0, 40), st.integers(0, 36)), min_size=1, max_size=60, unique=True))
@settings(max_examples=60, deadline=None)
def test_labels_never_overlap(places: list[tuple[int, int]]) -> None:
    """However crowded, labels stay inside the frame and clear of each other and of all points."""
    points = [(x * 10.0, y * 10.0) for x, y in places]
    texts = [f"LOT-{n:02d}" for n in range(len(points))]
    frame = (0.0, 0.0, 420.0, 380.0)
    placed, left_over = place(points, texts, frame, most=60)
    assert len(placed) + left_over == len(points)
    boxes = [(one.x, one.y - 6, one.x + canvas.width_of(one.text), one.y + 6) for one in placed]
    for n, box in enumerate(boxes):
        assert box[0] >= 0
        assert box[2] <= 420
        for other in boxes[:n]:
            assert box[2] <= other[0] or other[2] <= box[0] or box[3] <= other[1] or other[3] <= box[1]
        for x, y in points:
            assert not (box[0] < x < box[2] and box[1] < y < box[3])


def test_labels_shun_lines_where_they_can() -> None:
    """A name stands off the hull's edge through its own point, and across it where nothing else is free."""
    corner, far = (100.0, 100.0), (400.0, 400.0)
    frame = (0.0, 0.0, 420.0, 420.0)
    placed, _ = place([corner], ["LOT-1"], frame, lines=[(corner, far)])
    assert placed[0].x + canvas.width_of("LOT-1") < corner[0]
    placed, left_over = place([corner], ["LOT-1"], frame, lines=[((0.0, y), (420.0, y)) for y in range(0, 420, 5)])
    assert (len(placed), left_over) == (1, 0)


def test_no_name_covers_the_blend_of_the_order() -> None:
    """The diamond of a recipe beside a lot stays in sight."""
    points = [LotPoint(name="SWEEP-26A", x=10.0, y=10.0, is_corner=False)]
    axis = Axis(label="N", unit="%", ends=(0.0, 20.0))
    base = draw_base(points, axis, axis)
    blend = (11.0, 10.5)
    text, left_over = lot_names(base, Overlay(blend=blend))
    left, middle = (float(re.findall(rf' {name}="([^"]+)"', text)[0]) for name in "xy")
    x, y = base.frame.x(blend[0]), base.frame.y(blend[1])
    assert left_over == 0
    assert left > x + 6 or left + canvas.width_of("SWEEP-26A") < x - 6 or abs(middle - 4 - y) > 12


def test_lots_of_the_blend_are_named_first() -> None:
    """Where there is no room for every name, those of the lots in the recipe are there."""
    points = [LotPoint(name=f"L{n}", x=n % 8, y=n // 8, is_corner=False, lots=(f"L{n}",)) for n in range(64)]
    axis = Axis(label="N", unit="%", ends=(-1.0, 8.0))
    base = draw_base(points, axis, axis)
    used = {"L27", "L36", "L44"}
    text, left_over = lot_names(base, Overlay(lots=frozenset(used)))
    assert left_over > 0
    assert used <= set(re.findall(r">(L\d+)<", text))


def test_long_names_are_cut_to_their_room() -> None:
    """Text that is too long for its place ends in an ellipsis; wide characters count as such."""
    assert canvas.fitted("K₂O, %", 200) == "K₂O, %"
    cut = canvas.fitted("a name that goes on and on " * 4, 120)
    assert cut.endswith("…")
    assert canvas.width_of(cut) <= 120
    assert canvas.width_of("鉄鉱石") > 1.5 * canvas.width_of("abc")


@given(st.lists(st.tuples(st.none() | st.floats(0, 1), st.none() | st.floats(0, 1)), min_size=3, max_size=3))
def test_a_ternary_window_keeps_its_bounds(bounds: list[strips.Bounds]) -> None:
    """What is cut out of the triangle sums to 1 and breaks no bound."""
    for corner in ternary.window(bounds):
        assert sum(corner) == pytest.approx(1)
        for part, (low, high) in zip(corner, bounds, strict=True):
            assert low is None or part >= low - 1e-9
            assert high is None or part <= high + 1e-9


def test_the_triangle_has_its_corners_where_components_are_pure() -> None:
    """Left, right and top, with the middle in between."""
    left, right, top = (ternary.place_of(part) for part in ((1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0)))
    assert left[0] < top[0] < right[0]
    assert left[1] == right[1] > top[1]
    third = 1 / 3
    middle = ternary.place_of((third, third, third))
    assert middle == pytest.approx(
        (sum(p[0] for p in (left, right, top)) / 3, sum(p[1] for p in (left, right, top)) / 3)
    )


def test_labels_of_sixty_points_are_told_apart() -> None:
    """No label covers another one, a point or the frame's edge, and each is nearest to its own point."""
    chance = random.Random(2)
    points = [(chance.uniform(10, 470), chance.uniform(10, 320)) for _ in range(60)]
    names = [f"LOT-{number:02}" for number in range(60)]
    placed, left_over = place(points, names, (0.0, 0.0, 480.0, 330.0), most=60)
    assert left_over == 60 - len(placed)
    assert len(placed) > 20
    boxes = {}
    for label in placed:
        wide, high = width_of(label.text), SMALL_SIZE * 1.1
        boxes[label.text] = (label.x, label.y - high / 2, label.x + wide, label.y + high / 2)
    for name, (left, bottom, right, top) in boxes.items():
        for other, (a, b, c, d) in boxes.items():
            assert name == other or right <= a or c <= left or top <= b or d <= bottom, (name, other)
        away = [math.hypot(max(left - x, 0, x - right), max(bottom - y, 0, y - top)) for x, y in points]
        assert min(range(60), key=away.__getitem__) == names.index(name)


def test_stencils_are_what_matplotlib_draws() -> None:
    """Lines, areas, marks and words laid down by a stencil are the elements of a figure drawn whole."""
    figure = canvas.blank(40.0, 30.0)
    flat = {"transform": IdentityTransform()}
    figure.add_artist(Line2D([3, 20.5, 30], [4, 9, 2.25], color=canvas.BLEND, linewidth=2.0, **flat))
    corners = [(3, 4), (20.5, 9), (30, 2.25)]
    figure.add_artist(Polygon(corners, facecolor=canvas.FILL, edgecolor=canvas.LOT, linewidth=1.2, **flat))
    figure.add_artist(Rectangle((2, 5), 10, 4, facecolor=canvas.WINDOW, alpha=0.16, linewidth=0, **flat))
    mark = Line2D([7, 9.5], [8, 3], linestyle="none", marker="D", markersize=6, **flat)
    mark.set_markerfacecolor(canvas.PAPER)
    mark.set_markeredgecolor(canvas.BLEND)
    mark.set_markeredgewidth(1.5)
    figure.add_artist(mark)
    figure.text(10, 12, "a < b", color=canvas.INK, weight="bold", ha="right", size=12.0, **flat)
    places = [(x, 30 - y) for x, y in corners]
    laid = (
        stencil.line(places, canvas.BLEND, 2.0),
        stencil.area(places, canvas.FILL, canvas.LOT, 1.2),
        stencil.box(2, 21, 12, 25, canvas.WINDOW, opacity=0.16),
        stencil.marks([(7, 22), (9.5, 27)], "D", 6, canvas.PAPER, canvas.BLEND),
        stencil.text(10, 18, "a < b", canvas.INK, side="right", weight="bold", size=12.0),
    )
    whole = _elements(canvas.markup(figure))
    assert len(whole) > 6
    assert sorted(_elements(stencil.sheet(40, 30, *laid))) == sorted(whole)


def _elements(drawn: str) -> list[tuple[str, ...]]:
    """What is seen of a drawing: kind, style, words and places of its elements, a path's corners in any order."""
    root = ElementTree.fromstring(canvas.finished(drawn, "k", "", ""))
    found = []
    for element in root.iter():
        kind = element.tag.rpartition("}")[2]
        if kind in ("path", "use", "text"):
            corners = sorted(re.findall(r"-?[\d.]+ -?[\d.]+", element.get("d", "")))
            place = (element.get("x", ""), element.get("y", ""), *corners)
            found.append((kind, element.get("style", ""), element.text or "", *place))
    return found


def test_strips_of_one_figure_share_no_id() -> None:
    """However many limits hold or are broken, every id of the drawing is there once."""
    strip = strips.Strip(label="N", unit="%", places=1, window=(1.0, 2.0), value=1.5, value_text="1.5")
    broken = strips.Strip(label="K", unit="%", places=1, window=(1.0, 2.0), value=3.0, value_text="3.0", holds=False)
    text = strips.draw([strip, broken, strip, broken])
    ids = re.findall(r'\bid="([^"]+)"', text)
    assert len(ids) == len(set(ids)) == 2
    assert text.count("<use ") == 4
