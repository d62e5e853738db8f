"""Which program this is: what a fingerprint has to know besides the input."""

from __future__ import annotations

import functools
from collections.abc import Iterable
from importlib import metadata
from pathlib import Path

from generator.disk import digest_of, sha256

_PACKAGE = Path(__file__).parent
#: The rooms and modules that make the answers; the others only show, keep and publish them.
_ANSWERING = ("findings", "geometry", "intake", "numbers.py")
_LIBRARIES = ("jinja2", "markdown", "matplotlib", "numpy", "scipy")


@functools.cache
def engine() -> str:
    """Identify the code that finds answers: a short digest of its source text.

    A revision found by another engine is found again; only answers that differ make a new revision.
    """
    return _source_digest(_ANSWERING)[:12]


@functools.cache
def program() -> str:
    """Digest everything that pages depend on besides input and theme: all source, all libraries."""
    versions = {name: _version(name) for name in _LIBRARIES}
    return digest_of({"source": _source_digest((".",)), "libraries": versions})


def folder_digest(folder: Path) -> str:
    """Digest a folder's files, by relative path and content; the same wherever it stands."""
    files = (path for path in sorted(folder.rglob("*")) if path.is_file() and "__pycache__" not in path.parts)
    return digest_of({path.relative_to(folder).as_posix(): sha256(path.read_bytes()) for path in files})


def _source_digest(places: Iterable[str]) -> str:
    paths = [path for place in places for path in _sources(_PACKAGE / place)]
    return digest_of({path.relative_to(_PACKAGE).as_posix(): sha256(path.read_bytes()) for path in paths})


def _sources(place: Path) -> list[Path]:
    return [place] if place.is_file() else sorted(place.rglob("*.py"))


def _version(name: str) -> str:
    try:
        return metadata.version(name)
    except metadata.PackageNotFoundError:
        return ""
