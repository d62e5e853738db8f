"""The folder of campaigns on disk: which campaigns there are, what they hold, when they were touched."""

from __future__ import annotations

import os
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

from generator import disk
from generator.disk import Listing, Stamp
from generator.intake.campaign import input_name
from generator.problems import HullbookError, Problem
from generator.report.addresses import slugify, slugs
from generator.report.theme_folders import PLAIN

SITE = "site.toml"
#: What makes a folder a campaign; notes alone don't.
_TELLING = frozenset({"assays.csv", "targets.csv", "stock.csv", "campaign.toml"})
#: Addresses in the output folder that no campaign can have.
_TAKEN = ("assets", "index.html", "method.html", "status.json")
#: A file is read up to here; ``intake`` refuses what is longer than its limit, which is less.
MOST_BYTES = 64_000_000


class NoCampaignsError(HullbookError):
    """The folder of campaigns is not there."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Folder:
    """One campaign's folder: its slug, its name as pages show it, where it is, and the site.toml that applies.

    ``listing`` is what was in it when it was found; None where it could not be listed.
    """

    slug: str
    name: str
    path: Path
    site: Path | None
    listing: Listing | None = field(default=None, compare=False, repr=False)


@dataclass(frozen=True, slots=True, kw_only=True)
class Inputs:
    """The input files of a campaign by canonical name, and what was wrong with reading them."""

    files: Mapping[str, bytes]
    problems: tuple[Problem, ...] = ()
    unreadable: frozenset[str] = field(default_factory=frozenset)


def find_campaigns(root: Path) -> tuple[Folder, ...]:
    """Find the campaigns in ``root``, by name; ``root`` may be one campaign itself.

    NoCampaignsError if there is no such folder.
    """
    if not root.is_dir():
        raise NoCampaignsError(f"there is no folder {root}")
    if _is_campaign(_listing(root)):
        real = Path(os.path.realpath(root))
        name = _shown(real.name)
        return (Folder(slug=slugs([name], _TAKEN)[name], name=name, path=root, site=_site_in(real.parent)),)
    try:
        with os.scandir(root) as inner:
            names = sorted(entry.name for entry in inner if not entry.name.startswith(".") and entry.is_dir())
    except OSError as error:
        raise NoCampaignsError(f"the folder {root} can't be read ({disk.reason(error)})") from error
    start = os.path.join(root, "")  # noqa: PTH118 - a thousand folders in a blink
    listings = {name: _listing(start + name) for name in names}
    real_names = {_shown(name): name for name, listing in listings.items() if _is_campaign(listing)}
    # A folder whose name is a slug already keeps it, whatever comes before it.
    by_claim = sorted(real_names, key=lambda name: (slugify(name) != name, name))
    found = slugs(by_claim, _TAKEN)
    site = _site_in(root)
    return tuple(
        Folder(slug=found[shown], name=shown, path=root / name, site=site, listing=listings[name])
        for shown, name in real_names.items()
    )


def read_inputs(folder: Folder, *, is_just_found: bool = False) -> Inputs:
    """Read a campaign's files, and the site.toml that applies to it; one just found is not listed again."""
    listing = folder.listing if is_just_found else None
    own = disk.read_folder(folder.path, input_name, at_most=MOST_BYTES, listing=listing)
    files, unreadable = dict(own.files), dict(own.unreadable)
    has_site = files.pop(SITE, None) is not None
    unreadable.pop(SITE, None)
    if folder.site is not None:
        try:
            files[SITE] = disk.read_file(folder.site, at_most=MOST_BYTES)
        except OSError as error:
            unreadable[SITE] = disk.reason(error)
    problems = [_unreadable(folder.name if name == "." else name, why) for name, why in unreadable.items()]
    problems += [_shadowed(name) for name in own.shadowed]
    if has_site:
        problems.append(_misplaced_site())
    return Inputs(
        files=dict(sorted(files.items())) if folder.site is not None else files,
        problems=tuple(problems),
        unreadable=frozenset(unreadable),
    )


def is_gone(folder: Folder) -> bool:
    """Whether a campaign's folder is not there any more; one that can't be asked is."""
    try:
        folder.path.stat()
    except (FileNotFoundError, NotADirectoryError):
        return True
    except OSError:
        return False
    return False


def scan(root: Path) -> dict[Path, tuple[tuple[str, Stamp], ...]]:
    """Stamp every input file below ``root``, by campaign folder; a site.toml under its own path.

    A file that is there and can't be asked is left out.  NoCampaignsError if ``root`` is gone.
    """
    folders = find_campaigns(root)
    stamps = {folder.path: _stamps(folder.path) for folder in folders}
    for site in {folder.site for folder in folders if folder.site is not None}:
        stamp = disk.stamp(site)
        if stamp is not None:
            stamps[site] = ((SITE, stamp),)
    return stamps


def is_site(place: Path) -> bool:
    """Whether a key of :func:`scan` is a site.toml, which every campaign reads."""
    return place.name.lower() == SITE


def _stamps(folder: Path) -> tuple[tuple[str, Stamp], ...]:
    try:
        entries, _ = disk.wanted_entries(folder, input_name)
    except OSError:
        return ()
    stamped = ((name, disk.stamp(os.path.join(folder, name))) for name in entries.values())  # noqa: PTH118 - fast
    return tuple((name, stamp) for name, stamp in stamped if stamp is not None)


def _site_in(folder: Path) -> Path | None:
    """Find the site.toml in a folder, in whatever letters it is named; the exact name goes first."""
    try:
        entries, _ = disk.wanted_entries(folder, _site_name)
    except OSError:
        return None
    return folder / entries[SITE] if SITE in entries else None


def site_theme(site: Path | None) -> str:
    """Find the theme that site.toml names for the index; what is wrong with the file is told elsewhere."""
    try:
        theme = tomllib.loads(site.read_text(encoding="utf-8-sig")).get("theme") if site else None
    except (OSError, ValueError):
        theme = None
    return theme if isinstance(theme, str) else PLAIN


def _site_name(name: str) -> str | None:
    return SITE if input_name(name) == SITE else None


def _listing(path: Path | str) -> Listing | None:
    try:
        return disk.wanted_entries(path, input_name)
    except OSError:
        return None


def _is_campaign(listing: Listing | None) -> bool:
    """Whether a folder holds a campaign; one that can't be read is taken for one, so that it is told."""
    return listing is None or not _TELLING.isdisjoint(listing[0])


def _shown(name: str) -> str:
    """A folder's name as text, also where the file system holds bytes that are none."""
    return os.fsencode(name).decode("utf-8", "replace")


def _unreadable(name: str, why: str) -> Problem:
    return Problem(
        file=name,
        message=f"it can't be read: {why}",
        remedy="close the program that holds it, or allow this program to read it",
        severity="stops",
    )


def _shadowed(name: str) -> Problem:
    return Problem(
        file=name,
        message="it is not read, since another file has this name in other letters",
        remedy="keep one of the two",
        severity="note",
    )


def _misplaced_site() -> Problem:
    """A site.toml inside a campaign would be read by nobody, and its house rules with it."""
    return Problem(
        file=SITE,
        message="it is not read, since it stands inside the campaign",
        remedy="put it beside the campaign's folder, or its settings into campaign.toml",
        severity="note",
    )
