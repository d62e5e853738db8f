"""The pages that belong to no campaign: the index, the method, and what they load."""

from __future__ import annotations

from dataclasses import dataclass

from generator import __version__
from generator.problems import HullbookError
from generator.report.theme_folders import PLAIN
from generator.report.views import IndexEntry


@dataclass(frozen=True, slots=True)
class SharedPages:
    """Files by address, and a remark for the log where the theme that was wanted can't be used."""

    files: dict[str, bytes]
    remark: str = ""


def draw_shared(entries: tuple[IndexEntry, ...], theme: str) -> SharedPages:
    """Draw the shared pages; in the plain theme where the one that is wanted can't be used."""
    try:
        return SharedPages(_drawn(entries, theme))
    except HullbookError as error:
        if theme == PLAIN:
            raise
        return SharedPages(_drawn(entries, PLAIN), f"{error}; the index is shown in the theme {PLAIN}")


def _drawn(entries: tuple[IndexEntry, ...], name: str) -> dict[str, bytes]:
    from generator.report.pages import assets, draw_index, draw_method
    from generator.report.themes import load_theme

    theme = load_theme(name)
    return {
        **assets(theme),
        "method.html": draw_method(theme, __version__),
        "index.html": draw_index(entries, theme),
    }
