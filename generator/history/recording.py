"""Recording: findings become a revision, with the story of what changed since earlier ones."""

from __future__ import annotations

import contextlib
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from pathlib import Path

from generator import identity
from generator.findings import results
from generator.findings.records import Findings
from generator.history import story_files
from generator.history.archive import (
    DamagedError,
    Draft,
    Entry,
    OvertakenError,
    Revision,
    contents,
    entries,
    read_revision,
    record,
)
from generator.history.stories import PREVIOUS, Earlier, further_back, tell
from generator.intake.records import Campaign
from generator.problems import HullbookError

#: Whoever is overtaken by so many other recorders in turn gives up, and tells so.
MOST_OVERTAKEN = 5

ReadCampaign = Callable[[Mapping[str, bytes]], Campaign]


@dataclass(frozen=True, slots=True, kw_only=True)
class Material:
    """What a new revision is recorded from.

    ``read`` reads the inputs of earlier revisions as this version of the program reads them; ``cause`` is
    "inputs" or "program version"; ``program`` is the version as people know it.
    """

    inputs: Mapping[str, bytes]
    campaign: Campaign
    findings: Findings
    cause: str
    moment: datetime
    program: str
    read: ReadCampaign


def record_story(folder: Path, material: Material) -> Revision:
    """Record a revision with its story; WriteError or LockedError where it can't be written.

    Where another program records one meanwhile, the story is told anew against that one.
    """
    for _ in range(MOST_OVERTAKEN - 1):
        try:
            return record(folder, _draft(folder, material))
        except OvertakenError:
            continue
    return record(folder, _draft(folder, material))


def _draft(folder: Path, material: Material) -> Draft:
    found = entries(folder)
    head = _newest(found)
    story = tell(_earlier(found, head, material), material.campaign, material.findings, material.moment)
    return Draft(
        inputs=material.inputs,
        results=lambda mark: results.dumps(replace(material.findings, revision=mark)),
        changes=story_files.to_bytes(story),
        headline=story.headline,
        cause=material.cause,
        moment=material.moment,
        program=material.program,
        engine=identity.engine(),
        since=head.digest if head else "",
    )


def _newest(found: Sequence[Entry]) -> Revision | None:
    """The newest revision whose record is undamaged: the one that a new one is chained to."""
    for entry in reversed(found):
        with contextlib.suppress(DamagedError):
            return read_revision(entry)
    return None


def _earlier(found: Sequence[Entry], head: Revision | None, material: Material) -> list[Earlier]:
    """What to compare with: the revision before, then useful earlier ones that can be read."""
    if head is None:
        return []
    earlier = [_read(head, PREVIOUS, material)]
    until = [entry for entry in found if entry.number <= head.number]
    moment = material.moment.astimezone(UTC)
    for position, title in further_back([entry.moment for entry in until], moment).items():
        with contextlib.suppress(DamagedError):
            one = _read(read_revision(until[position]), title, material)
            earlier += [one] if one.findings is not None else []
    return earlier


def _read(revision: Revision, title: str, material: Material) -> Earlier:
    """One earlier revision, as far as it can be read."""
    earlier = Earlier(
        number=revision.number,
        recorded=revision.recorded,
        title=title,
        campaign=None,
        findings=None,
        is_other_engine=revision.engine != identity.engine(),
    )
    try:
        held = contents(revision)
        findings = results.loads(held.results)
    except HullbookError:
        return earlier
    campaign = material.read(held.inputs)
    return replace(earlier, findings=findings, campaign=None if campaign.is_stopped else campaign)
