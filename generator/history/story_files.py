"""Stories to and from the bytes of ``changes.json``: the format ``hullbook-changes-2``.

The first format was a bare list of changes without causes: it still reads.  Reading is lenient towards keys
that are not there; a newer format is refused.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import Any

from generator.history.records import (
    Cause,
    Change,
    Comparison,
    Edit,
    LotPoint,
    OrderPoint,
    Outline,
    Part,
    Story,
    Summary,
)
from generator.problems import HullbookError

FORMAT = "hullbook-changes-2"
Json = dict[str, Any]


class UnreadableStoryError(HullbookError):
    """A changes.json is no JSON of a known format."""


def to_bytes(story: Story) -> bytes:
    """Make the content of ``changes.json``: changes on lines of their own, numbers without noise."""
    return json.dumps(_to_json(story), ensure_ascii=False, indent=0, allow_nan=False).encode() + b"\n"


def from_bytes(data: bytes) -> Story:
    """Read what :func:`to_bytes` made, or the first format; UnreadableStoryError for anything else."""
    try:
        content = json.loads(data)
        if isinstance(content, list):
            return _first_format(content)
        if content["format"] != FORMAT:
            raise UnreadableStoryError(f"changes.json has the format {content['format']!r}, which is not known")
        return _from_json(content)
    except (ValueError, TypeError, KeyError, AttributeError, IndexError) as error:
        raise UnreadableStoryError(f"changes.json is not of the format {FORMAT}: {error}") from error


def _first_format(content: list[Json]) -> Story:
    changes = tuple(_change_from(item) for item in content)
    return Story(headline="", comparisons=(Comparison(number=0, recorded="", title="", changes=changes),))


def _to_json(story: Story) -> Json:
    outline = story.outline
    return {
        "format": FORMAT,
        "headline": story.headline,
        "comparisons": [_comparison_to(comparison) for comparison in story.comparisons],
        "summary": {
            "orders": {name: _without_nulls(_plain(point, _ORDER)) for name, point in story.summary.orders.items()},
            "lots": {name: _lot_to(point) for name, point in story.summary.lots.items()},
        },
        "outline": None if outline is None else _plain(outline, ("labels", "units", "old", "new")),
    }


def _from_json(content: Json) -> Story:
    outline, brief = content.get("outline"), content.get("summary", {})
    return Story(
        headline=content["headline"],
        comparisons=tuple(_comparison_from(item) for item in content.get("comparisons", ())),
        summary=Summary(
            orders={name: OrderPoint(**_named(item, _ORDER)) for name, item in brief.get("orders", {}).items()},
            lots={name: _lot_from(item) for name, item in brief.get("lots", {}).items()},
        ),
        outline=None if outline is None else _outline_from(outline),
    )


_ORDER = ("verdict", "cost", "room", "accepted")
_EDIT = ("kind", "name", "field", "old", "new", "clause", "renamed_from")
_CHANGE = ("kind", "subject", "old", "new", "sentence", "unit", "places")
_COMPARISON = ("number", "recorded", "title", "by_program", "remark")
_PART = ("group", "edits", "amount", "error")
_CAUSE = ("at_least", "by_program", "remark")


def _plain(record: object, keys: tuple[str, ...]) -> Json:
    return {key: getattr(record, key) for key in keys}


def _named(item: Mapping[str, Any], keys: tuple[str, ...]) -> Json:
    return {key: item[key] for key in keys if key in item}


def _without_nulls(item: Json) -> Json:
    return {key: value for key, value in item.items() if value is not None}


def _comparison_to(comparison: Comparison) -> Json:
    return {
        **_plain(comparison, _COMPARISON),
        "edits": [_plain(edit, _EDIT) for edit in comparison.edits],
        "changes": [_change_to(change) for change in comparison.changes],
    }


def _comparison_from(item: Json) -> Comparison:
    return Comparison(
        **_named(item, _COMPARISON),
        edits=tuple(Edit(**_named(edit, _EDIT)) for edit in item.get("edits", ())),
        changes=tuple(_change_from(change) for change in item.get("changes", ())),
    )


def _change_to(change: Change) -> Json:
    cause = change.cause
    told = None
    if cause is not None:
        told = {
            **_plain(cause, _CAUSE),
            "suffices": [list(chosen) for chosen in cause.suffices],
            "found": list(cause.found),
            "restores": list(cause.restores),
            "parts": [_plain(part, _PART) for part in cause.parts],
        }
    return {**_plain(change, _CHANGE), "cause": told}


def _change_from(item: Json) -> Change:
    told = item.get("cause")
    cause = None
    if told is not None:
        cause = Cause(
            **_named(told, _CAUSE),
            suffices=tuple(tuple(chosen) for chosen in told.get("suffices", ())),
            found=tuple(told.get("found", ())),
            restores=tuple(told.get("restores", ())),
            parts=tuple(Part(**{**_named(part, _PART), "edits": tuple(part["edits"])}) for part in told["parts"]),
        )
    return Change(**_named(item, _CHANGE), cause=cause)


def _lot_to(point: LotPoint) -> Json:
    return {
        **_without_nulls(_plain(point, ("stock", "cost"))),
        "assay": {name: list(pair) for name, pair in point.assay.items()},
    }


def _lot_from(item: Json) -> LotPoint:
    assay = {name: (pair[0], pair[1]) for name, pair in item.get("assay", {}).items()}
    return LotPoint(**_named(item, ("stock", "cost")), assay=assay)


def _outline_from(item: Json) -> Outline:
    return Outline(
        labels=(item["labels"][0], item["labels"][1]),
        units=(item["units"][0], item["units"][1]),
        old={name: (place[0], place[1]) for name, place in item["old"].items()},
        new={name: (place[0], place[1]) for name, place in item["new"].items()},
    )
