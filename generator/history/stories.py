"""One revision's story: what was edited, what that changed and why, and its answers in brief."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import datetime, timedelta
from fractions import Fraction

from generator.findings.records import Findings, OrderFinding
from generator.findings.uncertainty import uncertainty_of
from generator.findings.values import Table, table_of, typed_values
from generator.history.causes import MOST_IN_ALL, Side, explained
from generator.history.compare import changes
from generator.history.edits import edits, renamed
from generator.history.headlines import FIRST, headline
from generator.history.outlines import outline
from generator.history.records import Comparison, LotPoint, OrderPoint, Story, Summary
from generator.intake.records import Campaign

PREVIOUS = "the revision before"
UNREADABLE_ANSWERS = "The answers before can't be read."
UNREADABLE_INPUT = "This version of the program can't read the input of that revision, so no cause is known."
#: Earlier revisions that a new one is compared with besides: the newest that is at least so old.
INTERVALS = ((timedelta(days=7), "a week before"), (timedelta(days=28), "four weeks before"))
FIRST_TITLE = "the first revision"
#: Replays for comparisons further back, of which the edits and changes matter more than the causes.
_MOST_FURTHER_BACK = 600


@dataclass(frozen=True, slots=True, kw_only=True)
class Earlier:
    """An earlier revision to compare with.

    ``side`` None: its input can't be read any more, ``findings`` are all there is; both None: damaged.
    ``is_other_engine``: its answers were found by other code.
    """

    number: int
    recorded: str
    title: str
    campaign: Campaign | None
    findings: Findings | None
    is_other_engine: bool = False


def tell(earlier: Sequence[Earlier], campaign: Campaign, findings: Findings, moment: datetime) -> Story:
    """The story of a new revision; ``earlier`` begins with the revision before, and is empty for the first."""
    new = Side(campaign=campaign, findings=findings)
    told = tuple(compared(one, new, first=not position) for position, one in enumerate(earlier))
    if not told:
        return Story(headline=FIRST, summary=summary(campaign, findings))
    before = earlier[0].campaign
    return Story(
        headline=headline(told[0].changes, told[0].edits, moment) if earlier[0].findings else told[0].remark,
        comparisons=told,
        summary=summary(campaign, findings),
        outline=None if before is None else outline(before, campaign, findings),
    )


def compared(earlier: Earlier, new: Side, *, first: bool = True) -> Comparison:
    """What changed since an earlier revision; further back fewer causes are looked for."""
    plain = Comparison(
        number=earlier.number, recorded=earlier.recorded, title=earlier.title, by_program=earlier.is_other_engine
    )
    if earlier.findings is None:
        return replace(plain, remark=UNREADABLE_ANSWERS)
    if earlier.campaign is None:
        return replace(plain, changes=changes(earlier.findings, new.findings), remark=UNREADABLE_INPUT)
    old = Side(campaign=earlier.campaign, findings=earlier.findings)
    made = edits(old.campaign, new.campaign)
    found = changes(
        old.findings, new.findings, renamed_orders=renamed(made, "order"), renamed_lots=renamed(made, "lot")
    )
    most = MOST_IN_ALL if first else _MOST_FURTHER_BACK
    told = explained(old, new, made, found, same_program=not earlier.is_other_engine, most=most)
    return replace(plain, edits=made, changes=told)


def further_back(moments: Sequence[datetime], moment: datetime) -> dict[int, str]:
    """Positions of useful earlier revisions among all, oldest first, but for the newest one: with their titles.

    ``moments`` are when the earlier ones were recorded.
    """
    wanted: dict[int, str] = {}
    for age, title in INTERVALS:
        old_enough = [position for position, when in enumerate(moments) if moment - when >= age]
        if old_enough and old_enough[-1] < len(moments) - 1:
            wanted.setdefault(old_enough[-1], title)
    if len(moments) > 1:
        wanted[0] = FIRST_TITLE
    return wanted


def summary(campaign: Campaign, findings: Findings) -> Summary:
    """One revision's answers and assays in brief."""
    plan = findings.plan.orders if findings.plan else {}
    return Summary(
        orders={
            order.order: _order_point(order, plan[order.order].accepted if order.order in plan else None)
            for order in findings.orders
        },
        lots=_lot_points(campaign),
    )


def _order_point(order: OrderFinding, accepted: float | None) -> OrderPoint:
    cheapest = order.recipes.get("cheapest")
    return OrderPoint(
        verdict=order.verdict or "none",
        cost=cheapest.cost if cheapest else None,
        # Other rooms are in steps that differ from limit to limit: no number to follow over time.
        room=order.room if order.room_unit == "sd" else None,
        accepted=accepted,
    )


def _lot_points(campaign: Campaign) -> Mapping[str, LotPoint]:
    table = table_of(campaign)
    spread = uncertainty_of(campaign, table).of
    below = campaign.settings.below_detection
    points = {}
    for position, lot in enumerate(campaign.lots):
        values = {name: typed_values(measured, below).stated for name, measured in lot.assay.items()}
        points[lot.name] = LotPoint(
            stock=float(lot.stock.value) if lot.stock else None,
            cost=float(lot.cost.value) if lot.cost else None,
            assay={
                name: (float(value), _own_spread(table, name, value, spread[name][position]))
                for name, value in values.items()
                if name in spread
            },
        )
    return points


def _own_spread(table: Table, name: str, value: Fraction, in_index: Fraction | None) -> float | None:
    """A standard uncertainty in the component's own unit, from that of its index value."""
    rule = table.rules[name]
    slope = 1.0 if rule.name == "linear" else abs(rule.slope(value))
    return None if in_index is None or not slope else float(in_index) / slope
