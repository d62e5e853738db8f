"""The trial blend of an order's page: what its script needs to answer a reader's own shares at once."""

from __future__ import annotations

import json
from collections.abc import Mapping
from fractions import Fraction
from typing import Any

from generator.findings.house_rules import rules_of
from generator.findings.records import LimitFinding, OrderFinding
from generator.intake.records import Number
from generator.report import words
from generator.report.lookup import Lookup
from generator.report.parts import Section

#: More lots than this make a page heavy and a list that nobody picks from.
_MOST_LOTS = 120
_SENTENCE = (
    "Type shares to see what the blend would be. The arithmetic is that of the recipes above, in floating point: a "
    "trial, and no answer. Lots that the house rules keep apart can't stand in it together."
)


def trial_section(lookup: Lookup, finding: OrderFinding) -> Section | None:
    """The trial blend of one order; None where it has no limits, or no lots to try."""
    data = _data(lookup, finding)
    if data is None:
        return None
    # In markup "<" would begin a tag, and "&" a character, wherever the text says so.
    text = json.dumps(data, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    for character in "<>&\u2028\u2029":
        text = text.replace(character, f"\\u{ord(character):04x}")
    return Section(anchor="trial", title="Trial blend", sentences=(_SENTENCE,), trial=text)


def _data(lookup: Lookup, finding: OrderFinding) -> dict[str, Any] | None:
    limits = [limit for limit in finding.limits if limit.on in lookup.measures]
    parts = {lot.name: [lookup.parts(limit.on, lot.name) for limit in limits] for lot in lookup.campaign.lots}
    names = [name for name, found in parts.items() if name not in finding.left_out and None not in found]
    if not limits or not names or len(names) > _MOST_LOTS:
        return None
    position = {name: number for number, name in enumerate(names)}
    settings, house = lookup.campaign.settings, lookup.campaign.house
    lots = [lookup.lot(name) for name in names]
    least = rules_of(lookup.campaign, lots).least
    return {
        "lots": [
            {
                "name": lot.name,
                "parts": [[float(number) for number in pair] for pair in parts[lot.name] if pair is not None],
                "cost": _value(lot.cost),
                "stock": _value(lot.stock),
                "min": _percent(lot.min_share),
                "max": _percent(lot.max_share),
                "least": None if share is None else float(share * 100),
            }
            for lot, share in zip(lots, least, strict=True)
        ],
        "limits": [_limit(lookup, limit) for limit in limits],
        "most": house.max_lots,
        "apart": [[position[a], position[b]] for a, b in lookup.book.apart if a in position and b in position],
        "amount": finding.amount,
        "money": "" if lookup.hides("cost") else f"{settings.currency} per {settings.quantity_unit}",
        "starts": [
            {"name": title, "shares": [[position[lot], share * 100] for lot, share in shares.items()]}
            for title, shares in _starts(finding).items()
            if all(lot in position for lot in shares)
        ],
    }


def _starts(finding: OrderFinding) -> dict[str, Mapping[str, float]]:
    """The blends that a trial can begin with, by what their buttons say."""
    starts: dict[str, Mapping[str, float]] = {
        words.RECIPE_WORDS[name]: recipe.shares
        for name, recipe in finding.recipes.items()
        if name in ("cheapest", "assured", "roomiest")
    }
    if finding.verdict == "short" and finding.greatest_recipe:
        starts["Greatest amount"] = finding.greatest_recipe
    if finding.nearest is not None:
        starts["Nearest blend"] = finding.nearest.shares
    return starts


def _limit(lookup: Lookup, limit: LimitFinding) -> dict[str, Any]:
    component = next((item for item in lookup.campaign.components if item.name == limit.on), None)
    unit = lookup.units.get(limit.on, "")
    return {
        "label": lookup.labels.get(limit.on, limit.on),
        "asked": words.with_unit(words.window(limit.low, limit.high), unit),
        "low": limit.low,
        "high": limit.high,
        "places": lookup.places.get(limit.on, 2),
        "rule": _rule(component.rule if component is not None else "linear"),
    }


def _rule(name: str) -> str:
    """A blend rule's name with its exponent as a decimal."""
    kind, _, exponent = name.partition(":")
    return f"{kind}:{float(Fraction(exponent.strip()))!r}" if exponent else kind


def _value(number: Number | None) -> float | None:
    return None if number is None else float(number.value)


def _percent(share: Number | None) -> float | None:
    return None if share is None else float(share.value * 100)
