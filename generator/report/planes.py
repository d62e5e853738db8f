"""Which plane a hull is seen in, and what is seen there: from answers to the figures' own records."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

from generator import numbers
from generator.findings.records import BlockingProof, HullFinding, LimitFinding, OrderFinding, Recipe
from generator.report import words
from generator.report.figures.canvas import finished, fitted
from generator.report.figures.frame import Axis, padded
from generator.report.figures.hull import (
    Base,
    LotPoint,
    Overlay,
    Separation,
    clipped,
    draw_base,
    lot_names,
    overlay_markup,
    touch,
)
from generator.report.lookup import Lookup
from generator.report.parts import FigureView, Legend
from generator.report.shares import lot_key

Bounds = tuple[float | None, float | None]

#: More names than this at one point are counted instead.
_MOST_JOINED = 3
#: A longer name is cut in a figure, in SVG units: it would cover too much.
_LONGEST_NAME = 130.0
#: How many spans of the lots' values a window may lie outside before the view leaves it out.
_FARTHEST = 2.0


@dataclass(frozen=True, slots=True)
class Coordinate:
    """One direction of the plane: a component, or a weighted sum of components."""

    label: str
    unit: str
    factors: tuple[tuple[str, float], ...]

    def of(self, values: Mapping[str, float]) -> float | None:
        """The coordinate of a composition; None where a component is missing."""
        if any(name not in values for name, _ in self.factors):
            return None
        return sum(factor * values[name] for name, factor in self.factors)


@dataclass(slots=True)
class Planes:
    """Draws hull figures of one campaign; each plane's lots are drawn once and serve every order."""

    lookup: Lookup
    _bases: dict[tuple[Axis, Axis], Base] = field(default_factory=dict)
    _values: dict[str, dict[str, float]] = field(default_factory=dict)

    def of_campaign(self) -> tuple[FigureView, ...]:
        """The hull in each plane that the settings name, else in the plane limited most often."""
        figures = []
        for number, pair in enumerate(self._campaign_pairs(), 1):
            across, up = (self._component(name) for name in pair)
            figure = self._figure(f"hull-{number}", across, up, Overlay(), "")
            if figure is not None:
                figures.append(figure)
        return tuple(figures)

    def of_order(self, finding: OrderFinding) -> FigureView | None:
        """The hull with one order's window, blend and separating line; None where no plane is to be had."""
        chosen = self._order_plane(finding)
        if chosen is None:
            return None
        across, up = chosen
        recipe = finding.recipes.get("cheapest")
        overlay = Overlay(
            x_window=_asked(finding, across) if len(across.factors) > 1 else _window(finding.limits, across),
            y_window=_window(finding.limits, up),
            blend=_pair(across, up, recipe.values if recipe else None),
            nearest=_pair(across, up, finding.nearest.values if finding.nearest else None),
            separation=self._separation(finding, across, up),
            lots=frozenset(recipe.shares if recipe else finding.nearest.shares if finding.nearest else ()),
        )
        return self._figure("hull", across, up, overlay, finding.order)

    def _campaign_pairs(self) -> list[tuple[str, str]]:
        named = self._named_pairs()
        if named:
            return named
        limited = Counter(limit.on for finding in self.lookup.book.findings.orders for limit in finding.limits)
        for hull in self.lookup.book.findings.hulls:
            if len(hull.over) > 1:
                first = sorted(hull.over, key=lambda name: -limited[name])[:2]
                return [(first[0], first[1])]
        return []

    def _named_pairs(self) -> list[tuple[str, str]]:
        return [pair for pair in self.lookup.campaign.settings.planes if all(self._is_drawable(n) for n in pair)]

    def _order_plane(self, finding: OrderFinding) -> tuple[Coordinate, Coordinate] | None:
        hull = self._hull_of(finding)
        if hull is None:
            named = self._named_pairs()
            return (self._component(named[0][0]), self._component(named[0][1])) if named else None
        blocking = _blocking_names(finding, hull)
        if len(blocking) > 2:
            return self._edge_on(finding, blocking[0])
        recipe = finding.recipes.get("cheapest")
        by_spare = sorted(
            (limit.on for limit in finding.limits if limit.on in hull.over),
            key=lambda name: self._tightness(finding, recipe, name),
        )
        wanted = list(dict.fromkeys([*blocking, *by_spare, *hull.over]))[:2]
        return self._component(wanted[0]), self._component(wanted[1])

    def _hull_of(self, finding: OrderFinding) -> HullFinding | None:
        """The hull of the basis on which the order limits most."""
        limited = {limit.on for limit in finding.limits}
        hulls = [hull for hull in self.lookup.book.findings.hulls if len(hull.over) > 1 and limited & set(hull.over)]
        return max(hulls, key=lambda hull: len(limited & set(hull.over)), default=None)

    def _tightness(self, finding: OrderFinding, recipe: Recipe | None, name: str) -> float:
        """How near the recipe is to a limit, as a share of the lots' range of that component."""
        limit = next(limit for limit in finding.limits if limit.on == name)
        if recipe is None or name not in recipe.values:
            return 0.0
        values = [values[name] for values in self._lot_values().values() if name in values]
        spread = (max(values) - min(values)) if values else 0.0
        sides = [abs(recipe.values[name] - bound) for bound in (limit.low, limit.high) if bound is not None]
        return min(sides, default=0.0) / (spread or 1.0)

    def _edge_on(self, finding: OrderFinding, other: str) -> tuple[Coordinate, Coordinate]:
        """The combined limit across, so that the separation is seen from its edge."""
        assert isinstance(finding.proof, BlockingProof), "only blocking proofs have blocking names"
        factors = []
        for multiplier in finding.proof.multipliers:
            sign = 1 if multiplier.side == "low" else -1
            factors.append((multiplier.on, float(sign * multiplier.weight)))
        if all(factor < 0 for _, factor in factors):
            factors = [(name, -factor) for name, factor in factors]
        text = ""
        for name, factor in factors:
            sign_text = numbers.MINUS if factor < 0 else "+" if text else ""
            size = "" if abs(factor) == 1 else numbers.significant(abs(factor), 3) + "\N{NO-BREAK SPACE}"
            text += f"{' ' if text else ''}{sign_text}{' ' if text else ''}{size}{self.lookup.labels[name]}"
        if len(text) > 48:
            text = "combined limit"
        return Coordinate(text, "", tuple(factors)), self._component(other)

    def _separation(self, finding: OrderFinding, across: Coordinate, up: Coordinate) -> Separation | None:
        """Midway between the best that lots have and what the limits ask, where both are seen in this plane."""
        proof = finding.proof
        if not isinstance(proof, BlockingProof) or proof.least is not None:
            return None
        factors: dict[str, float] = {}
        asked = 0.0
        for multiplier in proof.multipliers:
            factor = float(multiplier.weight) * (1 if multiplier.side == "low" else -1)
            factors[multiplier.on] = factors.get(multiplier.on, 0.0) + factor
            asked += factor * float(multiplier.bound)
        whole = Coordinate("", "", tuple(factors.items()))
        values = [whole.of(self._lot_values()[lot]) for lot in proof.scores if lot in self._lot_values()]
        known = [value for value in values if value is not None]
        if not known:
            return None
        level = (max(known) + asked) / 2
        if len(across.factors) > 1:
            flip = next(factor for name, factor in across.factors) / factors[across.factors[0][0]]
            return Separation(across=1.0, up=0.0, level=level * flip)
        names = (across.factors[0][0], up.factors[0][0])
        if set(factors) - set(names):
            return None
        return Separation(across=factors.get(names[0], 0.0), up=factors.get(names[1], 0.0), level=level)

    def _component(self, name: str) -> Coordinate:
        return Coordinate(self.lookup.labels[name], self.lookup.units[name], ((name, 1.0),))

    def _is_drawable(self, name: str) -> bool:
        return any(name in values for values in self._lot_values().values())

    def _lot_values(self) -> dict[str, dict[str, float]]:
        if not self._values:
            for lot in self.lookup.campaign.lots:
                found = {name: self.lookup.value(name, lot.name) for name in self.lookup.measures}
                self._values[lot.name] = {name: float(value) for name, value in found.items() if value is not None}
        return self._values

    def _points(self, across: Coordinate, up: Coordinate) -> list[LotPoint]:
        """Lots by place; lots of one place are one point."""
        places: dict[tuple[float, float], list[str]] = {}
        for lot, values in self._lot_values().items():
            pair = _pair(across, up, values)
            if pair is not None:
                places.setdefault(pair, []).append(lot)
        roles = {name: finding.role for name, finding in self.lookup.lot_findings.items()}
        return [
            LotPoint(
                name=_joined(names),
                x=x,
                y=y,
                is_corner=any(roles.get(name) == "corner" for name in names),
                lots=tuple(names),
            )
            for (x, y), names in places.items()
        ]

    def _figure(self, key: str, across: Coordinate, up: Coordinate, overlay: Overlay, order: str) -> FigureView | None:
        points = self._points(across, up)
        if not points:
            return None
        (x0, x1), (y0, y1) = overlay.x_window, overlay.y_window
        extra = [place for place in (overlay.blend, overlay.nearest) if place is not None]
        x_axis = _axis(across, [point.x for point in points], [x0, x1, *(place[0] for place in extra)])
        y_axis = _axis(up, [point.y for point in points], [y0, y1, *(place[1] for place in extra)])
        base = self._bases.get((x_axis, y_axis))
        if base is None:
            base = self._bases[(x_axis, y_axis)] = draw_base(points, x_axis, y_axis)
        title = f"Hull: {up.label} against {across.label}"
        asks = _has_window(overlay)
        overlay = _in_view(overlay, x_axis, y_axis)
        caption = _caption(overlay, order, is_outside=asks and not _has_window(overlay))
        named, unlabelled = lot_names(base, overlay)
        if unlabelled:
            stand = "point stands" if unlabelled == 1 else "points stand"
            caption += f" For want of room {unlabelled} {stand} without a name; the table of lots has all."
        description = f"{caption} {_description(points, across, up, overlay)}"
        above = overlay_markup(base.frame, overlay) + named
        above += "".join(touch(base.frame, item.x, item.y, [lot_key(name) for name in item.lots]) for item in points)
        svg = finished(base.text, f"fig-{key}", title, description, above)
        return FigureView(anchor=key, title=title, svg=svg, caption=caption, legend=_legend(overlay, points))


def _axis(coordinate: Coordinate, of_lots: Sequence[float], of_order: Sequence[float | None]) -> Axis:
    """Ends around the lots; wider only where the order's window, if not too far off, needs it."""
    low, high = padded(list(of_lots))
    span = high - low
    further = [value for value in of_order if value is not None and not low <= value <= high]
    near = [value for value in further if low - _FARTHEST * span <= value <= high + _FARTHEST * span]
    if near:
        low, high = padded([*of_lots, *near])
    return Axis(label=coordinate.label, unit=coordinate.unit, ends=(low, high))


def _asked(finding: OrderFinding, combined: Coordinate) -> Bounds:
    """What the blocking limits ask of their weighted sum."""
    assert isinstance(finding.proof, BlockingProof), "only blocking proofs have a combined limit"
    factors = dict(combined.factors)
    asked = sum(factors[multiplier.on] * float(multiplier.bound) for multiplier in finding.proof.multipliers)
    low_first = finding.proof.multipliers[0]
    is_flipped = (factors[low_first.on] > 0) != (low_first.side == "low")
    return (None, asked) if is_flipped else (asked, None)


def _window(limits: Sequence[LimitFinding], coordinate: Coordinate) -> Bounds:
    name = coordinate.factors[0][0]
    return next(((limit.low, limit.high) for limit in limits if limit.on == name), (None, None))


def _pair(across: Coordinate, up: Coordinate, values: Mapping[str, float] | None) -> tuple[float, float] | None:
    if values is None:
        return None
    x, y = across.of(values), up.of(values)
    return None if x is None or y is None else (x, y)


def _blocking_names(finding: OrderFinding, hull: HullFinding) -> list[str]:
    """Components that block, heaviest evidence first; none where something else than this hull's takes part."""
    if not isinstance(finding.proof, BlockingProof):
        return []
    names = list(dict.fromkeys(multiplier.on for multiplier in finding.proof.multipliers))
    return names if set(names) <= set(hull.over) else []


def _joined(names: Sequence[str]) -> str:
    shown = [fitted(name, _LONGEST_NAME) for name in names]
    if len(shown) <= _MOST_JOINED:
        return ", ".join(shown)
    return f"{', '.join(shown[: _MOST_JOINED - 1])} +{len(shown) - _MOST_JOINED + 1}"


def _has_window(overlay: Overlay) -> bool:
    return (*overlay.x_window, *overlay.y_window) != (None,) * 4


def _in_view(overlay: Overlay, x_axis: Axis, y_axis: Axis) -> Overlay:
    """The overlay without a window or a line that lies wholly outside the frame."""
    is_seen = all(
        (low is None or low <= axis.ends[1]) and (high is None or high >= axis.ends[0])
        for (low, high), axis in ((overlay.x_window, x_axis), (overlay.y_window, y_axis))
    )
    line = overlay.separation
    if line is not None and clipped(line, x_axis.ends, y_axis.ends) is None:
        line = None
    if is_seen:
        return replace(overlay, separation=line)
    return replace(overlay, separation=line, x_window=(None, None), y_window=(None, None))


def _caption(overlay: Overlay, order: str, is_outside: bool) -> str:
    sentences = ["Every blend lies inside the tinted shadow of the hull."]
    if order and _has_window(overlay):
        sentences = [f"The box is what order {order} asks for; every blend lies inside the tinted shadow of the hull."]
    if is_outside:
        sentences.append(f"What order {order} asks for lies far outside this view.")
    if overlay.separation is not None:
        sentences.append("The dashed line parts all lots from what the limits ask together.")
    sentences.append(words.SHADOW)
    return " ".join(sentences)


def _legend(overlay: Overlay, points: Sequence[LotPoint]) -> tuple[Legend, ...]:
    entries = []
    if any(point.is_corner for point in points):
        entries.append(Legend(mark="corner", text="corner lot"))
    if any(not point.is_corner for point in points):
        entries.append(Legend(mark="inner", text="inner lot"))
    if _has_window(overlay):
        entries.append(Legend(mark="window", text="window of the order"))
    if overlay.blend is not None:
        entries.append(Legend(mark="blend", text="cheapest recipe"))
    if overlay.nearest is not None:
        entries.append(Legend(mark="nearest", text="nearest blend"))
    if overlay.separation is not None:
        entries.append(Legend(mark="separation", text="separating line"))
    return tuple(entries)


def _description(points: Sequence[LotPoint], across: Coordinate, up: Coordinate, overlay: Overlay) -> str:
    xs, ys = [point.x for point in points], [point.y for point in points]
    text = (
        f"{words.plural(len(points), 'point')}, {across.label} from {numbers.significant(min(xs), 4)} to "
        f"{numbers.significant(max(xs), 4)}, {up.label} from {numbers.significant(min(ys), 4)} to "
        f"{numbers.significant(max(ys), 4)}."
    )
    corners = [point.name for point in points if point.is_corner]
    if corners:
        text += f" Corner lots: {', '.join(corners[:40])}."
    for place, name in ((overlay.blend, "The cheapest recipe"), (overlay.nearest, "The nearest blend")):
        if place is not None:
            text += f" {name} is at {numbers.significant(place[0], 4)}, {numbers.significant(place[1], 4)}."
    return text
