"""The order in which lots are loaded."""

from __future__ import annotations

import re

_NUMBERS = re.compile(r"(\d+)")


def loading_turn(typed: str) -> tuple[bool, list[tuple[int, str]]]:
    """A key for sorting by load order as typed: its numbers count as numbers; lots without one come last."""
    parts = [(int(part), "") if part.isdigit() else (0, part) for part in _NUMBERS.split(typed) if part]
    return not typed, parts
