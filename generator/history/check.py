"""Verify a history: every byte of every revision, the chain between them, and that none is missing."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path

from generator.disk import read_file
from generator.history.archive import (
    HEAD_NAME,
    DamagedError,
    Entry,
    Revision,
    damaged,
    entries,
    read_revision,
    verified,
)
from generator.problems import Problem


def check_history(folder: Path) -> tuple[Problem, ...]:
    """Verify the chain and every byte of a history; one problem for each thing that is not right."""
    problems: list[Problem] = []
    intact: dict[int, Revision] = {}
    found = entries(folder)
    for entry in found:
        try:
            intact[entry.number] = _check_revision(entry)
        except DamagedError as error:
            problems.append(damaged(entry.name, str(error), "drops"))
    problems += _missing(folder, found)
    problems += _broken_links(found, intact)
    return tuple(problems)


def _check_revision(entry: Entry) -> Revision:
    """Verify one revision alone; DamagedError naming the first thing that is not right."""
    revision = read_revision(entry)
    for path in revision.files:
        verified(revision, path)
    listed = {*revision.files, "revision.json"}
    for found in sorted(entry.path.rglob("*")):
        inner = found.relative_to(entry.path).as_posix()
        if found.is_file() and inner not in listed:
            raise DamagedError(f"{inner} was added: revision.json does not list it")
    return revision


def _missing(folder: Path, found: list[Entry]) -> list[Problem]:
    """Numbers that no folder has, up to the newest that was ever recorded, and numbers used twice."""
    numbers = [entry.number for entry in found]
    newest = max([*numbers, _stated_head(folder)], default=0)
    problems = [
        Problem(
            file=f"history/{number:04d}",
            message=f"revision {number} is missing",
            remedy="bring its folder back from a backup; the others are not affected",
            severity="drops",
        )
        for number in range(1, newest + 1)
        if number not in set(numbers)
    ]
    doubled = sorted({number for number in numbers if numbers.count(number) > 1})
    return problems + [damaged(f"{number:04d}", "two folders have this number", "drops") for number in doubled]


def _stated_head(folder: Path) -> int:
    try:
        return int(json.loads(read_file(folder / HEAD_NAME))["number"])
    except (OSError, ValueError, TypeError, KeyError):
        return 0


def _broken_links(found: list[Entry], intact: Mapping[int, Revision]) -> list[Problem]:
    """Intact revisions that were not recorded after the one that stands before them now.

    After a damaged one either its own digest (known by six digits) or that of the last intact one
    before it is right: which one depends on whether the damage came first.
    """
    problems: list[Problem] = []
    allowed = {""}
    last_number = 0
    for entry in found:
        revision = intact.get(entry.number)
        gap = entry.number > last_number + 1
        last_number = entry.number
        if revision is None:
            allowed.add(entry.short_digest)
            continue
        if not gap and not any(revision.previous == known or _shortened(revision.previous, known) for known in allowed):
            problems.append(
                damaged(entry.name, "it was not recorded after the revision that stands before it", "drops")
            )
        allowed = {revision.digest}
    return problems


def _shortened(digest: str, known: str) -> bool:
    return len(known) == 6 and digest.startswith(known)
