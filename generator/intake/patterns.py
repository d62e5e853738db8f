"""Wildcards that name lots: by lot name or by material."""

from __future__ import annotations

import fnmatch

from generator.intake.faults import fold
from generator.intake.records import Lot


def matches(pattern: str, lot: Lot) -> bool:
    """Whether the pattern (``*``, ``?``, ``[abc]``; case ignored) names the lot or one of its materials."""
    folded = fold(pattern)
    return any(fold(name) == folded or fnmatch.fnmatchcase(fold(name), folded) for name in (lot.name, *lot.materials))


def split_patterns(text: str) -> tuple[str, ...]:
    """The patterns of a cell, separated by ``;``."""
    return tuple(" ".join(part.split()) for part in text.split(";") if part.strip())
