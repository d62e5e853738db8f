"""Whether an output folder is whole: every link of every page leads to a file, and no file is a part of one."""

from __future__ import annotations

import json
from html.parser import HTMLParser
from pathlib import Path
from urllib.parse import unquote

#: A folder under way begins so: it is not in its place yet, and no page links to it.
_UNFINISHED = ".hullbook-"


class _Links(HTMLParser):
    def __init__(self) -> None:
        super().__init__()
        self.found: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.found += [
            value
            for name, value in attrs
            if name in ("href", "src") and value and not value.startswith(("#", "http:", "https:", "data:", "mailto:"))
        ]


def faults(output: Path) -> list[str]:
    """Everything that a reader of these pages could trip over; nothing where there are no pages yet."""
    found = []
    for path in sorted(output.rglob("*")):
        if not path.is_file() or any(part.startswith(_UNFINISHED) for part in path.relative_to(output).parts):
            continue
        address = path.relative_to(output).as_posix()
        if path.suffix == ".html":
            found += [f"{address}: {fault}" for fault in _page_faults(path)]
        elif path.suffix == ".json":
            try:
                json.loads(path.read_bytes())
            except ValueError:
                found.append(f"{address}: is not whole")
    return found


def _page_faults(page: Path) -> list[str]:
    text = page.read_text(encoding="utf-8")
    if not text.rstrip().endswith("</html>"):
        return ["is not whole"]
    links = _Links()
    links.feed(text)
    targets = {unquote(link.partition("#")[0]) for link in links.found} - {""}
    return [
        f"links to {target}, which is not there" for target in sorted(targets) if not (page.parent / target).exists()
    ]


def published(output: Path) -> dict[str, bytes]:
    """Every published file but the program's own records."""
    paths = [path for path in output.rglob("*") if path.is_file()]
    return {
        path.relative_to(output).as_posix(): path.read_bytes()
        for path in sorted(paths)
        if not path.name.startswith(_UNFINISHED) and path.relative_to(output).as_posix() != "status.json"
    }
