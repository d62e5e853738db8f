"""Where a page stands: names made into file names, and links from one address to another.

An address is a path below the output folder, with forward slashes: ``spring-blends/orders/A1.html``.
"""

from __future__ import annotations

import functools
import posixpath
import re
import unicodedata
from collections.abc import Iterable
from urllib.parse import quote

#: File names that Windows keeps for devices, whatever their extension.
RESERVED = frozenset(
    ["con", "prn", "aux", "nul", *(f"com{n}" for n in range(1, 10)), *(f"lpt{n}" for n in range(1, 10))]
)

#: Most file systems stop at 255 bytes; this leaves room for a number, an extension and a partial file's suffix.
LONGEST = 120
#: A name that is a slug as it stands.
_PLAIN = re.compile(r"[A-Za-z0-9_-][A-Za-z0-9_.-]*")


def slugify(name: str) -> str:
    """``name`` as part of an address: letters, digits, ``-``, ``_`` and ``.``, no leading dot, never empty."""
    if _PLAIN.fullmatch(name) and len(name) <= LONGEST:
        return name
    kept = "".join(
        character if character.isalnum() or character in "-_." else "-"
        for character in unicodedata.normalize("NFC", name)
    ).lstrip(".")
    while len(kept.encode()) > LONGEST:
        kept = kept[:-1]
    return kept or "-"


def slugs(names: Iterable[str], taken: Iterable[str] = ()) -> dict[str, str]:
    """One slug for each name, in order, no two alike even where upper and lower case are one.

    A clash, with an earlier name, with ``taken`` or with a name that Windows reserves, gets a number.
    """
    used = {_folded(slug) for slug in taken}
    result: dict[str, str] = {}
    for name in names:
        plain = slugify(name)
        slug, count = plain, 1
        while _folded(slug) in used or slug.split(".")[0].casefold() in RESERVED or slug.endswith("."):
            count += 1
            slug = f"{_stem(plain)}-{count}"
        used.add(_folded(slug))
        result[name] = slug
    return result


@functools.lru_cache(maxsize=8192)
def relative(source: str, target: str) -> str:
    """The link on page ``source`` that leads to ``target`` (which may carry a ``#fragment``)."""
    path, mark, fragment = target.partition("#")
    if path in ("", source):
        return mark + fragment if mark else quote(posixpath.basename(source))
    return quote(posixpath.relpath(path, posixpath.dirname(source) or ".")) + mark + quote(fragment)


def anchor(*words: str) -> str:
    """An id for an element of a page, made of ``words``."""
    return "-".join(slugify(word).lower() for word in words)


def _folded(slug: str) -> str:
    return slug.lower() if slug.isascii() else unicodedata.normalize("NFKC", slug).casefold()


def _stem(plain: str) -> str:
    """``plain`` such that a number behind it ends every clash with a reserved name or a trailing dot."""
    plain = plain.rstrip(".") or "-"
    first, _, rest = plain.partition(".")
    if first.casefold() in RESERVED:
        return f"{first}-{rest}" if rest else first
    return plain
