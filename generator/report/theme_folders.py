"""Where themes are, and whether one has changed: asked by every build, so nothing is imported for it."""

from __future__ import annotations

import hashlib
import os
import re
from pathlib import Path

from generator.disk import Stamp, stamp

PLAIN = "plain"
_OURS = re.compile(r"[\w-]+")
#: What a theme can be made of; a campaign may name any folder as its theme.
_KINDS = frozenset({".toml", ".css", ".js", ".html", ".svg", ".png"})


def own_themes() -> Path | None:
    """The folder of the program's own themes: inside the installed package, else beside it in a checkout."""
    package = Path(__file__).resolve().parents[1]
    for folder in (package / "themes", package.parent / "themes"):
        if (folder / PLAIN / "theme.toml").is_file():
            return folder
    return None


def theme_folder(name: str) -> Path:
    """Where the theme of that name would be: one of the program's own, else a folder of that path."""
    own = own_themes()
    if own is not None and _OURS.fullmatch(name) and (own / name).is_dir():
        return own / name
    return Path(name)


def theme_digest(name: str) -> str:
    """Digest the files of a theme and of the plain one, which lends it what it lacks; of what can't be read, that."""
    digest = hashlib.sha256(name.encode("utf-8", "surrogatepass"))
    for folder in dict.fromkeys((theme_folder(PLAIN), theme_folder(name))):
        for path in _files(folder):
            digest.update(f"\0{path.relative_to(folder).as_posix()}\0".encode("utf-8", "surrogatepass"))
            digest.update(_content(path))
    return digest.hexdigest()


def theme_stamps(folder: Path) -> tuple[tuple[str, Stamp], ...]:
    """The stamps of a theme's files, by path."""
    stamped = ((os.fspath(path), stamp(path)) for path in _files(folder))
    return tuple((path, found) for path, found in stamped if found is not None)


def _files(folder: Path) -> list[Path]:
    """The files that a theme is made of: those in its folder, and its templates."""
    places = (folder, folder / "templates")
    try:
        return sorted(
            path
            for place in places
            if place.is_dir()
            for path in place.iterdir()
            if path.suffix in _KINDS and path.is_file()
        )
    except OSError:
        return []


def _content(path: Path) -> bytes:
    try:
        return hashlib.sha256(path.read_bytes()).digest()
    except OSError as error:
        return str(error.errno).encode()
