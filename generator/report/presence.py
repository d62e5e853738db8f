"""Whether published files still stand as they were written, at the cost of one look at each folder.

A file that comes, goes or is replaced changes its folder's stamp; only then are its files looked at one by one, and
only one that was touched is read.  A file rewritten in place leaves its folder's stamp alone: a thorough look, which
asks for every file's stamp, finds that as well.  The stamps are kept beside the manifest and are no part of it: they
may be lost at any time, at the cost of reading the files once.
"""

from __future__ import annotations

import hashlib
import json
import os
from collections.abc import Iterable, Mapping
from pathlib import Path

from generator.disk import WriteError, sha256, write_whole

STAMPS_NAME = ".hullbook-stamps.json"
FORMAT = "hullbook-stamps-2"

#: When a folder's entries changed last, its number on the disk, and a digest of its files' sizes and moments.
Look = tuple[str, str, str]


class Presence:
    """What is known of the published files' stamps; ``thorough`` asks for every file's, not only for every folder's."""

    def __init__(self, output: Path, *, thorough: bool = False) -> None:
        self._output = os.fspath(output)
        self._thorough = thorough
        self._before = _read(output)
        self._now: dict[str, str] = {}
        self._folders: dict[str, tuple[str, str]] = {}

    def holds(self, campaign: str, files: Mapping[str, str]) -> bool:
        """Whether every file of a campaign, digests by address, is there with its content."""
        text = self._before.get(campaign, "")
        if text and not self._thorough and self._stand(text):
            self._now[campaign] = text
            return True
        before = _looks(text)
        looks = {}
        for name, own in _by_folder(files).items():
            look = self._look(name, own)
            if look is None:
                return False
            is_known = name in before and before[name][2] == look[2]
            if not is_known and not all(_has(f"{self._output}/{path}", files[path]) for path in own):
                return False
            looks[name] = look
        self._now[campaign] = _text(looks)
        return True

    def note(self, campaign: str, files: Iterable[str]) -> None:
        """Remember how the files of a campaign, just written, look."""
        self._folders.clear()
        looks = {name: self._look(name, own) for name, own in _by_folder(files).items()}
        self._now[campaign] = _text({name: look for name, look in looks.items() if look is not None})

    def keep(self, campaign: str) -> None:
        """Remember of a campaign what was known before."""
        if campaign not in self._now and campaign in self._before:
            self._now[campaign] = self._before[campaign]

    def save(self) -> None:
        """Write down what is remembered, if that differs; a folder that refuses it costs only time."""
        if self._now == self._before:
            return
        text = json.dumps({"format": FORMAT, "campaigns": self._now}, sort_keys=True)
        try:
            write_whole(Path(self._output) / STAMPS_NAME, text.encode("utf-8", "surrogatepass"))
        except WriteError:
            return

    def _stand(self, looks: str) -> bool:
        """Whether the folders of these looks are as they were; a thousand campaigns are asked in a blink."""
        for line in looks.split("\n"):
            parts = line.split(" ", 3)
            # The program writes its own records into the top folder all the time: its stamp tells nothing.
            if len(parts) < 4 or not parts[3] or self._folder(parts[3]) != (parts[0], parts[1]):
                return False
        return True

    def _folder(self, name: str) -> tuple[str, str] | None:
        found = self._folders.get(name)
        if found is None:
            try:
                status = os.stat(f"{self._output}/{name}")  # noqa: PTH116 - ten thousand folders in a blink
            except OSError:
                return None
            found = self._folders[name] = (str(status.st_mtime_ns), str(status.st_ino)) if name else ("0", "0")
        return found

    def _look(self, name: str, own: Iterable[str]) -> Look | None:
        """Look at a folder and the files in it that are the campaign's; None where one is gone."""
        folder = self._folder(name)
        if folder is None:
            return None
        digest = hashlib.sha256()
        for path in own:
            try:
                status = os.stat(f"{self._output}/{path}")  # noqa: PTH116 - as above
            except OSError:
                return None
            digest.update(f"{path}\0{status.st_size}\0{status.st_mtime_ns}\0{status.st_ino}\n".encode())
        return (*folder, digest.hexdigest()[:16])


def _by_folder(files: Iterable[str]) -> dict[str, list[str]]:
    found: dict[str, list[str]] = {}
    for path in sorted(files):
        found.setdefault(path.rpartition("/")[0], []).append(path)
    return found


def _has(path: str, digest: str) -> bool:
    try:
        return sha256(Path(path).read_bytes()) == digest
    except OSError:
        return False


def _text(looks: Mapping[str, Look]) -> str:
    """Looks as one text, which a build that keeps the campaign passes on as it is."""
    return "\n".join(f"{moment} {number} {digest} {name}" for name, (moment, number, digest) in looks.items())


def _looks(text: str) -> dict[str, Look]:
    """Looks by folder, from their text; empty where it is none."""
    looks: dict[str, Look] = {}
    try:
        for line in text.split("\n") if text else ():
            moment, number, digest, name = line.split(" ", 3)
            looks[name] = (moment, number, digest)
    except ValueError:
        return {}
    return looks


def _read(output: Path) -> dict[str, str]:
    try:
        content = json.loads((output / STAMPS_NAME).read_bytes())
        if content["format"] != FORMAT:
            return {}
        return {campaign: text for campaign, text in content["campaigns"].items() if isinstance(text, str)}
    except (OSError, ValueError, TypeError, KeyError, AttributeError, RecursionError):
        return {}
