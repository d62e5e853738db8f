"""The chronicle: a history as its pages tell it, line by line, read back from the archive.

Only what is asked for is read: a history of a thousand revisions costs as much as one of fifty.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from generator.history.archive import DamagedError, Entry, read_revision, verified
from generator.history.records import Story
from generator.history.story_files import UnreadableStoryError, from_bytes

#: Revisions on one page of the timeline, and as far back as trends and short histories look.
GROUP = 50


@dataclass(frozen=True, slots=True, kw_only=True)
class Line:
    """One revision of the timeline.

    ``name`` is its folder's; ``recorded`` ISO text; ``story`` None where it is damaged, and ``damage`` says
    how.  ``cause`` is "inputs" or "program version".
    """

    number: int
    name: str
    recorded: str
    digest: str = ""
    program: str = ""
    headline: str = ""
    cause: str = ""
    story: Story | None = None
    damage: str = ""


def read_line(entry: Entry) -> Line:
    """Read one revision's line and story; what is damaged is said in the line."""
    line = Line(number=entry.number, name=entry.name, recorded=entry.moment.isoformat())
    try:
        revision = read_revision(entry)
        story = from_bytes(verified(revision, "changes.json"))
    except (DamagedError, UnreadableStoryError) as error:
        return Line(number=line.number, name=line.name, recorded=line.recorded, damage=str(error))
    return Line(
        number=revision.number,
        name=entry.name,
        recorded=revision.recorded,
        digest=revision.digest,
        program=revision.program,
        headline=revision.headline,
        cause=revision.cause,
        story=story,
    )


def read_lines(entries: Iterable[Entry]) -> tuple[Line, ...]:
    """Read several revisions' lines, in the order given."""
    return tuple(read_line(entry) for entry in entries)


def closed_groups(entries: Sequence[Entry]) -> list[list[Entry]]:
    """The groups of the timeline that no later revision can change: numbers 1–50, 51–100, …

    The group of the newest revision is open, and stands on the timeline's first page.
    """
    if not entries:
        return []
    newest = _group_of(entries[-1])
    groups: dict[int, list[Entry]] = {}
    for entry in entries:
        groups.setdefault(_group_of(entry), []).append(entry)
    return [group for number, group in groups.items() if number < newest]


def recent(entries: Sequence[Entry]) -> Sequence[Entry]:
    """The newest revisions, as many as one page of the timeline holds."""
    return entries[-GROUP:]


def _group_of(entry: Entry) -> int:
    return (entry.number - 1) // GROUP
