"""What monitoring may ask: ``status.json`` in the output folder tells how the last build went.

It is for programs: written whole, of one form always, and no page links to it.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from datetime import UTC, datetime
from pathlib import Path

from generator import __version__
from generator.disk import WriteError, write_whole
from generator.job import Outcome
from generator.problems import failing

FORMAT = "hullbook-status-1"
STATUS_NAME = "status.json"
#: Of one campaign no more problems than these are told: the pages tell all.
_MOST_PROBLEMS = 20


def write_status(output: Path, moment: datetime, outcome: Outcome) -> None:
    """Tell how a build went; a folder that refuses the file has told so already."""
    before = read_status(output)
    problems = {slug: failing(found) for slug, found in outcome.problems.items() if failing(found)}
    _write(
        output,
        {
            "state": "well" if outcome.is_well else "problems",
            "looked": _text(moment),
            "built": _text(moment) if outcome.has_changed else str(before.get("built", "")),
            "seconds": round(outcome.seconds, 2),
            "campaigns": len(outcome.made) + len(outcome.kept),
            "with_problems": outcome.with_problems,
            "files_held": len(outcome.pending),
            "problems": {
                slug: [problem.sentence() for problem in found[:_MOST_PROBLEMS]] for slug, found in problems.items()
            },
            "trouble": "",
        },
    )


def write_trouble(output: Path, moment: datetime, trouble: str) -> None:
    """Tell why nothing could be built, beside what the last build told."""
    before = read_status(output)
    known = {name: value for name, value in before.items() if name not in ("format", "program")}
    _write(output, {**known, "state": "trouble", "looked": _text(moment), "trouble": trouble})


def read_status(output: Path) -> Mapping[str, object]:
    """The status as it was written last; empty where there is none."""
    try:
        content = json.loads((output / STATUS_NAME).read_bytes())
        return content if content["format"] == FORMAT else {}
    except (OSError, ValueError, TypeError, KeyError, RecursionError):
        return {}


def _write(output: Path, content: Mapping[str, object]) -> None:
    path = output / STATUS_NAME
    if not output.is_dir() or (path.exists() and not read_status(output)):
        return  # the folder is away, or it is somebody else's file of that name
    whole = {"format": FORMAT, "program": __version__, **content}
    data = json.dumps(whole, indent=1, ensure_ascii=False).encode("utf-8", "surrogatepass") + b"\n"
    try:
        write_whole(path, data)
    except WriteError:
        return


def _text(moment: datetime) -> str:
    return f"{moment.astimezone(UTC).replace(tzinfo=None, microsecond=0).isoformat()}Z"
