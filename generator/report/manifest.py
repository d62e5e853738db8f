"""The program's own records in an output folder: the manifest of what is published, the journal of what is under way.

The manifest holds one line for each campaign.  Its list of files is one text, read only when somebody asks for it:
a build that finds nothing changed has to know that a campaign is published, not where each of its pages is.
"""

from __future__ import annotations

import contextlib
import json
from collections.abc import Collection, Iterable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

FORMAT = "hullbook-manifest-2"
MANIFEST_NAME = ".hullbook-manifest.json"
JOURNAL_NAME = ".hullbook-journal"
#: Where what pages share stands; named by content, so that two campaigns may own one file.
ASSETS = "assets/"


class FileList(Mapping[str, str]):
    """Digests by address; as text ``DIGEST ADDRESS`` one after the other, assets first, then by address.

    No address holds a space, and JSON reads a text without line ends much faster than one with.
    """

    __slots__ = ("_files", "text")

    def __init__(self, files: Mapping[str, str] | str) -> None:
        self._files: dict[str, str] | None = None
        if isinstance(files, str):
            self.text = files
        else:
            in_order = sorted(files, key=lambda path: (not path.startswith(ASSETS), path))
            self.text = " ".join(f"{files[path]} {path}" for path in in_order)

    def assets(self) -> Iterator[tuple[str, str]]:
        """Every asset with its digest, without reading the rest of the list."""
        rest = self.text
        while rest:
            digest, path, rest = [*rest.split(" ", 2), ""][:3]
            if not path.startswith(ASSETS):
                return
            yield path, digest

    def _all(self) -> dict[str, str]:
        if self._files is None:
            words = self.text.split()
            self._files = dict(zip(words[1::2], words[::2], strict=True))
        return self._files

    def __getitem__(self, path: str) -> str:
        return self._all()[path]

    def __contains__(self, path: object) -> bool:
        return path in self._all()

    def __iter__(self) -> Iterator[str]:
        return iter(self._all())

    def __len__(self) -> int:
        return len(self._all())


@dataclass(frozen=True, slots=True, kw_only=True)
class Published:
    """What was written for one campaign.

    ``files`` maps addresses to SHA-256 digests; ``about`` is JSON that ``book`` keeps with it;
    ``fingerprint`` is of everything that the files were made of, "" where they must be made again.
    """

    fingerprint: str
    files: Mapping[str, str]
    about: Mapping[str, object] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class Manifest:
    """What an output folder holds by right: files by campaign, and files that are no longer used.

    ``retired`` maps addresses to (digest, moment in ISO text since when, "" = remove at once).  ``lines`` are
    the lines of ``campaigns`` as they were read: what stays as it is need not be put into words again.
    """

    campaigns: Mapping[str, Published] = field(default_factory=dict)
    retired: Mapping[str, tuple[str, str]] = field(default_factory=dict)
    lines: Mapping[str, str] = field(default_factory=dict, compare=False, repr=False)

    def files(self) -> dict[str, str]:
        """Every address in use, with its digest."""
        return {path: digest for published in self.campaigns.values() for path, digest in published.files.items()}

    def voided(self, campaigns: Iterable[str]) -> Manifest:
        """The manifest with the fingerprints of these campaigns emptied: they must be made again."""
        emptied = {name: replace(self.campaigns[name], fingerprint="") for name in campaigns if name in self.campaigns}
        return replace(self, campaigns={**self.campaigns, **emptied}) if emptied else self


@dataclass(frozen=True, slots=True)
class Journal:
    """What a killed publication was about to write (digests by address), and for which campaigns."""

    files: Mapping[str, frozenset[str]] = field(default_factory=dict)
    campaigns: frozenset[str] = frozenset()


def read_manifest(output: Path) -> Manifest:
    """Read the manifest of an output folder; an empty one where there is none that can be read."""
    try:
        text = (output / MANIFEST_NAME).read_bytes().decode("utf-8", "surrogatepass")
        content = json.loads(text)
        if content["format"] != FORMAT:
            return Manifest()
        return Manifest(
            campaigns={
                name: Published(
                    fingerprint=_text(item["fingerprint"]),
                    files=FileList(_text(item["files"])),
                    about=dict(item["about"]),
                )
                for name, item in content["campaigns"].items()
            },
            retired={path: (_text(digest), _text(since)) for path, (digest, since) in content["retired"].items()},
            lines=_by_name(content["campaigns"], text),
        )
    except (OSError, ValueError, TypeError, KeyError, AttributeError, RecursionError):
        return Manifest()


def _text(value: object) -> str:
    if not isinstance(value, str):
        raise TypeError("not a text")
    return value


def _by_name(names: Collection[str], text: str) -> dict[str, str]:
    """The line of each campaign, as :func:`dump` wrote them; none where somebody has laid the text out otherwise."""
    lines = [line.removesuffix(",") for line in text.split("\n")[1:-2]]
    found = dict(zip(names, lines, strict=False))
    is_ours = len(lines) == len(names) and all(line.startswith(f"{_json(name)}: ") for name, line in found.items())
    return found if is_ours else {}


def dump(manifest: Manifest, old: Manifest | None = None) -> bytes:
    """The manifest as JSON of one form only, one line for each campaign; ``old`` lends the lines of what it shares."""
    known = old or Manifest()
    lines = [
        known.lines[name] if name in known.lines and known.campaigns.get(name) is item else _line(name, item)
        for name, item in sorted(manifest.campaigns.items())
    ]
    campaigns = ",\n".join(lines)
    text = f'{{"format": {_json(FORMAT)}, "retired": {_json(manifest.retired)}, "campaigns": {{\n{campaigns}\n}}}}\n'
    return text.encode("utf-8", "surrogatepass")


def _line(name: str, item: Published) -> str:
    told = {"fingerprint": item.fingerprint, "about": item.about, "files": _listed(item.files).text}
    return f"{_json(name)}: {_json(told)}"


def _listed(files: Mapping[str, str]) -> FileList:
    return files if isinstance(files, FileList) else FileList(files)


_json = json.JSONEncoder(ensure_ascii=False, sort_keys=True).encode


def journal_line(campaign: str, files: Mapping[str, str]) -> str:
    """One entry of the journal: these files of a campaign, with these digests, are about to be written."""
    return json.dumps({"campaign": campaign, "files": dict(files)}, ensure_ascii=False) + "\n"


def read_journal(output: Path) -> Journal:
    """Read what a killed publication has left; an empty journal where none was killed."""
    files: dict[str, frozenset[str]] = {}
    campaigns: set[str] = set()
    try:
        text = (output / JOURNAL_NAME).read_bytes().decode("utf-8", "replace")
    except OSError:
        return Journal()
    for line in text.splitlines():
        with contextlib.suppress(ValueError, TypeError, KeyError, AttributeError):  # a line that a kill cut off
            entry = json.loads(line)
            for path, digest in entry["files"].items():
                files[path] = files.get(path, frozenset()) | {digest}
            campaigns.add(entry["campaign"])
    return Journal(files, frozenset(campaigns))
