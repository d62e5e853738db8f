"""Packs: one campaign, one edition, one HTML file that opens and prints anywhere.

The pages are those of the report, laid out by the same templates.  Of each the content is taken, its ids
are made its own, links between pages become links within the file, and links out of it become text.
"""

from __future__ import annotations

import base64
import hashlib
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from html import escape
from html.parser import HTMLParser
from posixpath import dirname, join, normpath
from urllib.parse import unquote

from generator.report import words
from generator.report.page_records import Sheet
from generator.report.pages import METHOD, campaign_sheets, draw_method, rendered_sheet
from generator.report.themes import Theme
from generator.report.views import CampaignPages

#: Attributes that hold ids.
_IDS = ("id", "for", "aria-labelledby", "aria-describedby", "aria-controls")
#: Parts of a page that lead around a report and mean nothing within one file.
_DROPPED = frozenset({"nav"})
_KINDS = {"campaign": "Summary", "order": "Orders", "lot": "Lots", "method": "Method"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Leaf:
    """One page of a pack: the anchor of its beginning, its title, its kind, its content as markup."""

    anchor: str
    title: str
    kind: str
    content: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Cover:
    """What the first sheet says."""

    title: str
    lead: str
    edition: str
    client: str
    revision: str
    recorded: str
    digest: str
    version: str


def packed(book: CampaignPages, theme: Theme) -> bytes:
    """The whole pack; ``book`` is already as its audience may see it."""
    sheets = campaign_sheets(book, theme)
    pages = [(sheet.address, sheet.page.kind, sheet.page.title, rendered_sheet(sheet, theme)) for sheet in sheets]
    pages.append((METHOD, "method", "Method", draw_method(theme, book.version).decode()))
    anchors = {address: f"p{number}" for number, (address, *_) in enumerate(pages, 1)}
    leaves = tuple(
        Leaf(anchor=anchors[address], title=title, kind=kind, content=_content(text, address, anchors))
        for address, kind, title, text in pages
    )
    scripts = tuple(theme.scripts[name] for name in theme.scripts)
    text = theme.render(
        "pack.html",
        cover=_cover(book, sheets),
        leaves=leaves,
        contents=_contents(leaves),
        style=theme.style.replace("</", "<\\/"),
        scripts=scripts,
        hashes=" ".join(f"'sha256-{_hash(script)}'" for script in scripts) or "'none'",
        logo=theme.logo.inline if theme.logo else "",
        logo_words=theme.logo.words if theme.logo else "",
    )
    return text.encode()


def _hash(script: str) -> str:
    return base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()


def _cover(book: CampaignPages, sheets: Sequence[Sheet]) -> Cover:
    mark = book.findings.revision
    return Cover(
        title=book.campaign.settings.title,
        lead=sheets[0].page.lead,
        edition=words.edition_in_words(book.edition),
        client=book.client,
        revision=str(mark.number) if mark else "not recorded",
        recorded=words.moment(mark.recorded) if mark else "",
        digest=mark.digest if mark else "",
        version=book.version,
    )


def _contents(leaves: Sequence[Leaf]) -> tuple[tuple[str, tuple[Leaf, ...]], ...]:
    """The pages under headings of their kinds, in the order of the pack."""
    kinds = dict.fromkeys(leaf.kind for leaf in leaves)
    return tuple(
        (_KINDS.get(kind, kind.capitalize()), tuple(leaf for leaf in leaves if leaf.kind == kind)) for kind in kinds
    )


def _content(text: str, address: str, anchors: Mapping[str, str]) -> str:
    """The inside of a page's ``main``, with ids and links that hold within the pack."""
    main = re.search(r'<main id="main">(.*)</main>', text, re.DOTALL)
    reader = _Rewriter(address, anchors)
    reader.feed(main.group(1) if main else "")
    reader.close()
    return "".join(reader.parts)


class _Rewriter(HTMLParser):
    """Copies markup, with ids prefixed, headings one level lower, and links turned inwards."""

    def __init__(self, address: str, anchors: Mapping[str, str]) -> None:
        super().__init__(convert_charrefs=False)
        self.parts: list[str] = []
        self._address = address
        self._anchors = anchors
        self._prefix = f"{anchors[address]}-"
        self._links: list[str] = []
        self._dropping = 0

    def handle_starttag(self, tag: str, attributes: list[tuple[str, str | None]]) -> None:
        if tag in _DROPPED or self._dropping:
            self._dropping += tag in _DROPPED
            return
        raw = self.get_starttag_text() or ""
        if tag == "a":
            self._link(dict(attributes))
            return
        level = re.fullmatch(r"h([1-5])", tag)
        if level:
            tag = f"h{int(level.group(1)) + 1}"
            raw = re.sub(r"^<h\d", f'<{tag} data-was="{level.group(1)}"', raw)
        if tag == "section":
            # Named sections are landmarks, and every page has those of the same names.
            raw = re.sub(r'\saria-labelledby="[^"]*"', "", raw)
        self.parts.append(self._own_ids(raw))

    def handle_startendtag(self, tag: str, attributes: list[tuple[str, str | None]]) -> None:  # noqa: ARG002
        if not self._dropping:
            self.parts.append(self._own_ids(self.get_starttag_text() or ""))

    def handle_endtag(self, tag: str) -> None:
        if self._dropping:
            self._dropping -= tag in _DROPPED
            return
        level = re.fullmatch(r"h([1-5])", tag)
        name = self._links.pop() if tag == "a" else f"h{int(level.group(1)) + 1}" if level else tag
        self.parts.append(f"</{_cased(name)}>")

    def handle_data(self, data: str) -> None:
        self._keep(data)

    def handle_entityref(self, name: str) -> None:
        self._keep(f"&{name};")

    def handle_charref(self, name: str) -> None:
        self._keep(f"&#{name};")

    def _keep(self, text: str) -> None:
        if not self._dropping:
            self.parts.append(text)

    def _link(self, attributes: Mapping[str, str | None]) -> None:
        """Open a link that leads somewhere in the pack; any other becomes a span."""
        href = attributes.get("href") or ""
        path, _, fragment = href.partition("#")
        target = normpath(join(dirname(self._address), unquote(path))) if path else self._address
        anchor = self._anchors.get(target)
        if anchor is None:
            self._links.append("span")
            self.parts.append("<span>")
            return
        self._links.append("a")
        inner = f"{anchor}-{unquote(fragment)}" if fragment else anchor
        self.parts.append(f'<a href="#{escape(inner)}">')

    def _own_ids(self, tag: str) -> str:
        """A tag whose ids, and references to ids, begin with the page's prefix."""
        tag = re.sub(
            rf'\s({"|".join(_IDS)})="([^"]*)"',
            lambda m: f' {m.group(1)}="{" ".join(self._own(name) for name in m.group(2).split())}"',
            tag,
        )
        tag = re.sub(r"url\(#([^)\"]+)\)", lambda m: f"url(#{self._own(m.group(1))})", tag)
        # The small drawn signs stand once in the pack; other references are to the page's own figures.
        return re.sub(r'href="#(?!m-)([^"]+)"', lambda m: f'href="#{self._own(m.group(1))}"', tag)

    def _own(self, name: str) -> str:
        return f"{self._prefix}{name}"


#: Elements of SVG whose names have capitals, which the parser makes small.
_CAPITALS = {name.lower(): name for name in ("clipPath", "linearGradient", "textPath", "foreignObject")}


def _cased(name: str) -> str:
    return _CAPITALS.get(name, name)
