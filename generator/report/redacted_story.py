"""What changed, as one audience may see it: edits and changes that tell nothing hidden, and causes made of those.

What is not known to be harmless is left out: of edits those of visible assays, limits and amounts stay, of
changes those of visible orders and lots whose kind tells no hidden number.
"""

from __future__ import annotations

from dataclasses import replace

from generator.history.records import Cause, Change, Edit, Part, Story
from generator.intake.records import Campaign
from generator.report.veil import Veil

#: Changes by kind, and the inputs that they are computed from; a kind that is not here is never told.
_TELLS: dict[str, tuple[str, ...]] = {
    "verdict": (),
    "order new": (),
    "order gone": (),
    "room": (),
    "conformity": (),
    "role": (),
    "lot new": (),
    "cost": ("cost",),
    "amount": ("stock", "amount"),
    "accepted": ("stock", "amount", "cost", "price"),
}


def redacted_story(story: Story, campaign: Campaign, veil: Veil) -> tuple[tuple[Edit, ...], tuple[Change, ...]]:
    """The edits and changes of the newest revision without what is hidden; ``campaign`` is the present one as read."""
    positions: dict[int, int] = {}
    edits: list[Edit] = []
    for position, edit in enumerate(story.edits):
        shown = _edit(edit, campaign, veil)
        if shown is not None:
            positions[position] = len(edits)
            edits.append(shown)
    changes = tuple(_change(change, positions, veil) for change in story.changes if _is_shown(change, campaign, veil))
    return tuple(edits), changes


def _edit(edit: Edit, campaign: Campaign, veil: Veil) -> Edit | None:
    """An edit under shown names; None where it tells what is hidden, or might."""
    if edit.kind == "setting" or edit.renamed_from or not _knows(edit.kind, edit.name, campaign, veil):
        return None
    shown = replace(
        edit, name=veil.lot(edit.name) if edit.kind == "lot" else edit.name, clause=veil.text(edit.clause), cells=()
    )
    if not edit.field:
        # Why a row was left out or used again may be told by a remark.
        return replace(shown, clause=f"{edit.kind} {shown.name} is new") if edit.new else None
    visible = {item.name for item in campaign.components} if edit.kind == "lot" else set(campaign.quantities())
    quantity = edit.field.removesuffix(" sd") if edit.kind == "lot" else edit.field.removeprefix("limit on ")
    is_amount = edit.kind == "order" and edit.field == "amount"
    if (quantity in visible and not veil.hides(quantity)) or (is_amount and not veil.hides("amount")):
        return shown
    return None


def _knows(kind: str, name: str, campaign: Campaign, veil: Veil) -> bool:
    """Whether a lot or an order stands in the present campaign, and is shown."""
    if kind == "lot":
        return name in veil.lots
    return any(order.name == name and veil.shows_client(order.client) for order in campaign.orders)


def _is_shown(change: Change, campaign: Campaign, veil: Veil) -> bool:
    if change.kind not in _TELLS or veil.hides(*_TELLS[change.kind]):
        return False
    if change.kind == "order gone":
        return not veil.client
    return _knows("lot" if change.kind in ("role", "lot new") else "order", change.subject, campaign, veil)


def _change(change: Change, positions: dict[int, int], veil: Veil) -> Change:
    subject = veil.lot(change.subject) if change.kind in ("role", "lot new") else change.subject
    cause = None if change.cause is None else _cause(change.cause, positions)
    return replace(change, subject=subject, sentence=veil.text(change.sentence), cause=cause)


def _cause(cause: Cause, positions: dict[int, int]) -> Cause | None:
    """A cause made of shown edits alone; None where a hidden one takes part."""

    def moved(chosen: tuple[int, ...]) -> tuple[int, ...]:
        return tuple(positions[position] for position in chosen)

    named = {position for chosen in (*cause.suffices, cause.found, cause.restores) for position in chosen}
    named |= {position for part in cause.parts for position in part.edits}
    if not named <= set(positions):
        return None
    return replace(
        cause,
        suffices=tuple(map(moved, cause.suffices)),
        found=moved(cause.found),
        restores=moved(cause.restores),
        parts=tuple(
            Part(group="", edits=moved(part.edits), amount=part.amount, error=part.error) for part in cause.parts
        ),
        remark="",
    )
