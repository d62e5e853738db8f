"""What passes between a build and those who make its campaigns, be they in this process or in others."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime
from pathlib import Path

from generator.folders import Folder, Inputs
from generator.report.views import IndexEntry


@dataclass(frozen=True, slots=True, kw_only=True)
class Task:
    """What one campaign's work needs: picklable, so that another process can do it.

    ``theme`` is the command's, None for the campaign's own; ``edition`` and ``client`` say whom the pages are for.
    """

    folder: Folder
    inputs: Inputs
    history: Path
    theme: str | None
    moment: datetime
    edition: str = "internal"
    client: str = ""
    drawn: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class Incident:
    """An unexpected error: the reference that pages show, and the traceback for the log file."""

    reference: str
    trace: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Chapter:
    """What came of a campaign: files by address (None: keep what is published) and its index line.

    ``is_recorded`` is False where a revision was due and could not be written.  ``is_makeshift``: drawn in
    another theme than the one wanted, to be published only where nothing is yet.  ``kept`` are addresses
    that stay as published, ``drawn`` the keys of pages that need no drawing again.  The next build makes the
    campaign again where it ``must_repeat``, or where the work ``overran`` so many seconds and may have more.
    """

    files: Mapping[str, bytes] | None
    entry: IndexEntry
    theme: str
    is_recorded: bool = True
    is_makeshift: bool = False
    kept: tuple[str, ...] = ()
    drawn: Mapping[str, str] = field(default_factory=dict)
    incident: Incident | None = None
    must_repeat: bool = False
    overran: float = 0.0
