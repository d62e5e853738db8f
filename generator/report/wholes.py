"""The ternary diagram of a campaign whose components make up a whole of three."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from generator.findings.records import OrderFinding
from generator.report.figures import ternary
from generator.report.figures.canvas import finished
from generator.report.figures.hull import Bounds
from generator.report.lookup import Lookup
from generator.report.parts import FigureView, Legend


@dataclass(slots=True)
class Wholes:
    """Draws the triangle of one campaign; its lots are drawn once and serve every order."""

    lookup: Lookup
    _base: tuple[str, str] | None = field(default=None)

    def of_campaign(self) -> FigureView | None:
        """The triangle with all lots; None where there is no whole of three."""
        return self._figure("", (), None, "Each corner is one component pure; every blend lies in the tinted shadow.")

    def of_order(self, finding: OrderFinding) -> FigureView | None:
        """The triangle with an order's window and its cheapest recipe."""
        names = self._names()
        limits = {limit.on: (limit.low, limit.high) for limit in finding.limits}
        if names is None or not set(names) & set(limits):
            return None
        total = float(self.lookup.campaign.settings.whole_total)
        bounds = tuple(
            (None if low is None else low / total, None if high is None else high / total)
            for low, high in (limits.get(name, (None, None)) for name in names)
        )
        recipe = finding.recipes.get("cheapest")
        blend = self._part(recipe.values, names) if recipe else None
        caption = f"The tinted region with a firm edge is what order {finding.order} asks for."
        return self._figure(finding.order, bounds, blend, caption)

    def _names(self) -> tuple[str, str, str] | None:
        whole = self.lookup.campaign.settings.whole
        if len(whole) != 3 or any(name not in self.lookup.measures for name in whole):
            return None
        return whole[0], whole[1], whole[2]

    def _figure(
        self, order: str, bounds: tuple[Bounds, ...], blend: ternary.Part | None, caption: str
    ) -> FigureView | None:
        names = self._names()
        lots = self._lots(names) if names else []
        if names is None or not lots:
            return None
        if self._base is None:
            shown = tuple(self.lookup.name_with_unit(name) for name in names)
            self._base = ternary.draw_base(lots, (shown[0], shown[1], shown[2]))
        text, lot_names = self._base
        title = "Composition as a whole of three"
        told = f"{caption} {len(lots)} lots over {', '.join(self.lookup.labels[name] for name in names)}."
        svg = finished(text, "fig-ternary", title, told, ternary.overlay_markup(bounds, blend) + lot_names)
        legend = [Legend(mark="corner", text="corner lot"), Legend(mark="inner", text="inner lot")]
        if order:
            legend.append(Legend(mark="window", text="window of the order"))
        if blend is not None:
            legend.append(Legend(mark="blend", text="cheapest recipe"))
        return FigureView(anchor="ternary", title=title, svg=svg, caption=caption, legend=tuple(legend))

    def _lots(self, names: tuple[str, str, str]) -> list[ternary.TernaryLot]:
        found = []
        for lot in self.lookup.campaign.lots:
            values = {name: self.lookup.value(name, lot.name) for name in names}
            known = {name: float(value) for name, value in values.items() if value is not None}
            part = self._part(known, names)
            if part is not None:
                finding = self.lookup.lot_findings.get(lot.name)
                is_corner = finding is not None and finding.role == "corner"
                found.append(ternary.TernaryLot(name=lot.name, part=part, is_corner=is_corner))
        return found

    def _part(self, values: Mapping[str, float], names: tuple[str, str, str]) -> ternary.Part | None:
        """The three values as fractions of their own sum; None where one is missing or nothing is there."""
        known = [values[name] for name in names if name in values]
        total = sum(known)
        if len(known) < 3 or total <= 0:
            return None
        return known[0] / total, known[1] / total, known[2] / total
