"""One order's system with only some of the edits made, put together from columns that are made once.

A replay differs from the next in a few cells.  Each lot's column is worked out once for every set of the edits
that touch it, so that a system costs little more than laying its columns side by side.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from itertools import pairwise

from generator.findings.columns import Column, Heading, column_of, heading_of
from generator.findings.measures import Measure, measures_of
from generator.findings.model import OrderModel, assembled
from generator.findings.values import is_wet_known, table_of
from generator.history.applying import apply
from generator.history.records import Edit
from generator.history.relevance import order_named, slim
from generator.intake.records import Campaign, Lot, Order

Subset = frozenset[int]
#: What a lot's column depends on: the edits made that touch all lots, the order and the lot itself, its name,
#: and whether any lot has a moisture.
_ColumnKey = tuple[Subset, Subset, Subset, str, bool]


@dataclass(frozen=True, slots=True)
class System:
    """A campaign with some edits made, the order there, and its model; no order or no model: None."""

    campaign: Campaign
    order: Order | None
    model: OrderModel | None


@dataclass(frozen=True, slots=True)
class _Touched:
    """Positions of the edits that touch all lots, the order, and each lot by name."""

    all: Subset
    order: Subset
    lots: Mapping[str, Subset]

    @staticmethod
    def by(edits: Sequence[Edit], names: Sequence[str]) -> _Touched:
        every, order, lots = set(), set(), dict[str, set[int]]()
        for position, edit in enumerate(edits):
            for cell in edit.cells:
                if cell.path[0] == "lot":
                    lots.setdefault(cell.path[1], set()).add(position)
                    if cell.path[2:] == ("name",):
                        lots.setdefault(str(cell.new), set()).add(position)
                elif cell.path[0] == "order":
                    if cell.path[1] in names:
                        order.add(position)
                else:
                    every.add(position)
        return _Touched(frozenset(every), frozenset(order), {name: frozenset(own) for name, own in lots.items()})


@dataclass(slots=True)
class Systems:
    """The systems of one order over the subsets of the edits from one campaign to another.

    The order is called ``names[0]`` in the newer campaign and ``names[1]`` in the older; ``needs`` are the
    components that its limits take in either.
    """

    old: Campaign
    new: Campaign
    edits: Sequence[Edit]
    names: tuple[str, ...]
    needs: frozenset[str]
    _touched: _Touched = field(init=False)
    _lot_ranks: Mapping[str, int] = field(init=False)
    _limit_ranks: Mapping[str, int] = field(init=False)
    _measures: dict[Subset, Mapping[str, Measure]] = field(default_factory=dict)
    _headings: dict[tuple[Subset, Subset], Heading] = field(default_factory=dict)
    _columns: dict[_ColumnKey, Column] = field(default_factory=dict)

    def __post_init__(self) -> None:
        """Find out which edits touch what, and in which order lots and limits stand."""
        self._touched = _Touched.by(self.edits, self.names)
        self._lot_ranks = ranks([lot.name for lot in self.old.lots], [lot.name for lot in self.new.lots])
        now, before = order_named(self.new, self.names[0]), order_named(self.old, self.names[1])
        self._limit_ranks = ranks(before.limits if before else (), now.limits if now else ())

    def of(self, subset: Subset) -> System:
        """The system with these edits made."""
        campaign = self.campaign(subset)
        order = order_named(campaign, self.names[0]) or order_named(campaign, self.names[1])
        if order is None:
            return System(campaign, None, None)
        ranked = sorted(order.limits, key=lambda name: self._limit_ranks[name])
        order = replace(order, limits={name: order.limits[name] for name in ranked})
        shared, own = subset & self._touched.all, subset & self._touched.order
        measures = self.measures(campaign, subset)
        heading = self._headings.get((shared, own))
        if heading is None:
            heading = self._headings[shared, own] = heading_of(campaign, order, measures)
        wet = is_wet_known(campaign)
        columns = []
        for lot in campaign.lots:
            key = (shared, own, subset & self._touched.lots.get(lot.name, frozenset()), lot.name, wet)
            column = self._columns.get(key)
            if column is None:
                column = self._columns[key] = _column(campaign, order, heading, lot, wet_known=wet)
            columns.append(column)
        model = assembled(campaign, order, heading, columns)
        return System(campaign, order, model if isinstance(model, OrderModel) else None)

    def measures(self, campaign: Campaign, subset: Subset) -> Mapping[str, Measure]:
        """The quantities of the campaign with these edits made."""
        shared = subset & self._touched.all
        if shared not in self._measures:
            self._measures[shared] = measures_of(campaign)
        return self._measures[shared]

    def campaign(self, subset: Subset) -> Campaign:
        """The older campaign with these edits, but for what can't concern the order.

        Its lots stand as in the newer file, those that are gone from there where they stood: between equals
        the first lot counts.
        """
        campaign = slim(apply(self.old, [self.edits[position] for position in sorted(subset)]), self.needs)
        return replace(campaign, lots=tuple(sorted(campaign.lots, key=lambda lot: self._lot_ranks[lot.name])))


def _column(campaign: Campaign, order: Order, heading: Heading, lot: Lot, *, wet_known: bool) -> Column:
    """The column of a lot, from a table of that lot alone."""
    alone = replace(campaign, lots=(lot,))
    return column_of(alone, order, heading, table_of(alone, wet_known=wet_known), 0)


def ranks(old: Iterable[str], new: Iterable[str]) -> dict[str, int]:
    """A place for every name of two lists, such that the newer order holds, and the older where it can.

    A name of the older list alone stands behind the one that it stood behind there.
    """
    merged = list(dict.fromkeys(new))
    known = set(merged)
    for before, name in pairwise((None, *dict.fromkeys(old))):
        if name is not None and name not in known:
            merged.insert(0 if before is None else merged.index(before) + 1, name)
            known.add(name)
    return {name: place for place, name in enumerate(merged)}
