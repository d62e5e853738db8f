"""One campaign becomes one file: read, answered, recorded as a build would, and packed."""

from __future__ import annotations

import contextlib
from datetime import datetime
from pathlib import Path

from generator.chapter import tell
from generator.disk import write_whole
from generator.folders import find_campaigns, read_inputs
from generator.job import WrongUseError, history_of
from generator.problems import Problem
from generator.tasks import Task


def pack(
    campaign: Path,
    file: Path,
    *,
    moment: datetime,
    theme: str | None,
    edition: str,
    client: str,
    history: Path | None,
) -> tuple[int, tuple[Problem, ...]]:
    """Write the pack of one campaign; its size in bytes, and the problems that it shows.

    WrongUseError where the folder is not one campaign or the file can't be meant; EditionError for an
    edition or a client that the campaign does not know; ThemeError for a theme that can't be used.
    """
    folders = find_campaigns(campaign)
    if len(folders) != 1 or folders[0].path != campaign:
        raise WrongUseError(f"{campaign} is not the folder of one campaign; give the folder that holds assays.csv")
    if file.suffix.lower() not in (".html", ".htm") or file.is_dir():
        raise WrongUseError(f"{file} is not a file whose name ends in .html")
    folder = folders[0]
    if history is not None:
        with contextlib.suppress(OSError):  # a campaign that can't be recorded tells so
            history.mkdir(parents=True, exist_ok=True)
    told = tell(
        Task(
            folder=folder,
            inputs=read_inputs(folder),
            history=history_of(folder, history),
            theme=theme,
            moment=moment,
            edition=edition,
            client=client,
        )
    )
    from generator.report.pack import packed
    from generator.report.themes import load_theme

    data = packed(told.book, load_theme(told.theme))
    file.parent.mkdir(parents=True, exist_ok=True)
    write_whole(file, data)
    return len(data), told.book.banner_problems or told.book.campaign.problems
