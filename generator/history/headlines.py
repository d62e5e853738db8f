"""Changes and their causes in words, and one headline for all that a revision changed."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import datetime
from fractions import Fraction

from generator import numbers
from generator.history.compare import is_lost
from generator.history.records import Change, Edit, Part

NO_CHANGE = "No answer changed."
FIRST = "First answers."
PROGRAM = "the program's version"

_MET = ("makeable", "edge")
_MONTHS = (
    "January",
    "February",
    "March",
    "April",
    "May",
    "June",
    "July",
    "August",
    "September",
    "October",
    "November",
    "December",
)
_RANKS = {"order gone": 4, "order new": 5, "accepted": 6, "plan": 7, "cost": 8, "amount": 9, "room": 10}
#: More edits than this are counted, not named.
_MOST_NAMED = 3
_PART_DIGITS = 3


def headline(changes: Sequence[Change], edits: Sequence[Edit], moment: datetime) -> str:
    """One sentence: the gravest change with its day and cause, and how many more changes there are.

    Lost orders come first, then won ones, then the greatest changes of cost; see :func:`importance`.
    """
    if not changes:
        return _only_edits(edits)
    first = min(changes, key=importance)
    told = _with_day(first, moment)
    more = len(changes) - 1
    same = [change for change in changes if _is_same_story(change, first)]
    if len(same) > 1:
        told = f"{len(same)} orders {_fate(first)} on {_day(moment)}, order {first.subject} first"
        more = len(changes) - len(same)
    why = cause_text(first, edits)
    joint = ": " if _fate(first) != "changed" else "; cause: "
    text = f"{told}{joint}{why}" if why else told
    return f"{text}; {more} more change{'' if more == 1 else 's'}." if more else f"{text}."


def importance(change: Change) -> tuple[int, float]:
    """The order in which changes are told: lost orders, won ones, orders that came or went, costs by size, …"""
    if change.kind == "verdict":
        return (0 if _fate(change) == "lost" else 1 if _fate(change) == "won" else 2 if is_lost(change) else 3), 0.0
    rank = _RANKS.get(change.kind, 11)
    if isinstance(change.old, float) and isinstance(change.new, float):
        return rank, -abs(change.new - change.old) / (abs(change.old) or 1.0)
    return rank, 0.0


def cause_text(change: Change, edits: Sequence[Edit]) -> str:
    """Why it changed, in a clause or two; empty where that is not known."""
    cause = change.cause
    if cause is None or not cause.is_told:
        return ""
    if cause.parts:
        return _biggest(change, cause.parts, edits)
    if cause.suffices:
        sets = [_together(change, chosen, edits) for chosen in cause.suffices[:_MOST_NAMED]]
        more = len(cause.suffices) - len(sets)
        text = ", or ".join(sets) + (f", or {more} other ways" if more else "")
        text += " (each alone suffices)" if len(cause.suffices) > 1 else ""
    elif cause.found:
        text = f"{len(cause.found)} edits together: {_together(change, cause.found, edits)}"
        text += _needed(cause.at_least)
    else:
        return PROGRAM
    return f"{PROGRAM} and {text}" if cause.by_program else text


def _needed(at_least: int) -> str:
    """What is known of how few edits would do."""
    if at_least > 2:
        return f" (at least {at_least} are needed)"
    return " (no single one does)" if at_least == 2 else ""


def with_cause(change: Change, edits: Sequence[Edit]) -> str:
    """The change as a sentence, and its cause as a second one."""
    why = cause_text(change, edits)
    return f"{change.sentence} Cause: {why}." if why else change.sentence


def part_words(part: Part, edits: Sequence[Edit], subject: str = "") -> str:
    """What a part of a change comes from: one edit in words, or how many edits of what."""
    if not part.edits:
        return PROGRAM
    if len(part.edits) == 1:
        return clause_of(edits[part.edits[0]], subject)
    count = f"{len(part.edits)} edits"
    return f"{count} of {part.group.replace('settings', 'the settings')}" if part.group else count


def clause_of(edit: Edit, subject: str) -> str:
    """An edit's clause; of the order that is spoken of: "its limit on N …"."""
    owner = f"order {edit.name}'s "
    if edit.kind == "order" and edit.name == subject and edit.clause.startswith(owner):
        return f"its {edit.clause.removeprefix(owner)}"
    return edit.clause


def _only_edits(edits: Sequence[Edit]) -> str:
    if not edits:
        return NO_CHANGE
    first = edits[0].clause if len(edits) == 1 else f"{len(edits)} edits"
    return f"No answer changed by {first}." if len(edits) > 1 else f"No answer changed, though {first}."


def _fate(change: Change) -> str:
    was, now = change.old in _MET, change.new in _MET
    if was != now and change.kind == "verdict":
        return "won" if now else "lost"
    return "changed"


def _is_same_story(change: Change, first: Change) -> bool:
    """Whether two orders were lost, or won, by the very same edits."""
    if change.kind != "verdict" or first.kind != "verdict" or change.cause is None or first.cause is None:
        return change is first
    return _fate(change) == _fate(first) and change.cause == first.cause and first.cause.is_told


def _day(moment: datetime) -> str:
    return f"{moment.day} {_MONTHS[moment.month - 1]}"


def _with_day(change: Change, moment: datetime) -> str:
    """The change without its full stop, with the day: "Order 1042 lost on 2 March"."""
    fate = _fate(change)
    if fate == "changed":
        return change.sentence.removesuffix(".")
    is_now = "" if change.new in _MET else f" ({change.new or 'no answer'})"
    return f"Order {change.subject} {fate} on {_day(moment)}{is_now}"


def _together(change: Change, chosen: Sequence[int], edits: Sequence[Edit]) -> str:
    named = [clause_of(edits[position], change.subject) for position in chosen[:_MOST_NAMED]]
    more = len(chosen) - len(named)
    text = " together with ".join(named) if more == 0 and len(named) < 3 else "; ".join(named)
    return f"{text}; and {more} more" if more else text


def _biggest(change: Change, parts: Sequence[Part], edits: Sequence[Edit]) -> str:
    text = part_words(parts[0], edits, change.subject)
    if len(parts) == 1:
        return text
    return f"most of all {text} ({part_size(change, parts[0].amount)})"


def part_size(change: Change, amount: float) -> str:
    """What a part adds, with its sign and the unit of the change, in the places in which that is told."""
    percent = 100 if change.kind == "conformity" else 1
    places = change.places
    exact = Fraction(amount) * percent
    if places is None or not round(exact * 10**places):
        # A part that would print as 0 still has a size.
        size = numbers.significant(abs(exact), _PART_DIGITS if places is None else 1)
    else:
        size = numbers.text(abs(exact), places)
    sign = numbers.MINUS if amount < 0 else "+"
    return f"{sign}{size} {change.unit}".rstrip()
