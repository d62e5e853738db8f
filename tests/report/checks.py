"""What every page must hold, whatever it shows."""

from __future__ import annotations

import posixpath
from collections.abc import Mapping
from html.parser import HTMLParser
from urllib.parse import unquote, urlsplit

VOID = frozenset(["area", "base", "br", "col", "embed", "hr", "img", "input", "link", "meta", "source", "track", "wbr"])
LOADING = frozenset(["iframe", "object", "embed", "audio", "video", "source", "form", "base"])


class PageReader(HTMLParser):
    """The elements of one page: ids, links, texts, and faults of structure."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.ids: list[str] = []
        self.links: list[str] = []
        self.loads: list[str] = []
        self.references: list[str] = []
        self.tags: list[tuple[str, dict[str, str]]] = []
        self.faults: list[str] = []
        self.words: list[str] = []
        self._open: list[str] = []
        self._tables: list[set[str]] = []
        self._pictures: list[set[str]] = []
        self.feed(text)
        self.close()
        if self._open:
            self.faults.append(f"not closed: {self._open}")

    def handle_starttag(self, tag: str, attributes: list[tuple[str, str | None]]) -> None:
        values = {name: value or "" for name, value in attributes}
        self.tags.append((tag, values))
        self._note(tag, values)
        if tag not in VOID:
            self._open.append(tag)

    def handle_startendtag(self, tag: str, attributes: list[tuple[str, str | None]]) -> None:
        values = {name: value or "" for name, value in attributes}
        self.tags.append((tag, values))
        self._note(tag, values)

    def handle_endtag(self, tag: str) -> None:
        if not self._open or self._open[-1] != tag:
            self.faults.append(f"</{tag}> closes {self._open[-1:]}")
        else:
            self._open.pop()
        if tag == "table":
            for needed in {"caption", "column headers", "row headers"} - self._tables.pop():
                self.faults.append(f"a table has no {needed}")
        if tag == "svg":
            found = self._pictures.pop()
            if "hidden" not in found and not {"title", "desc"} <= found:
                self.faults.append("a drawing has no title and description")

    def handle_data(self, data: str) -> None:
        self.words.append(data)

    def _note(self, tag: str, values: dict[str, str]) -> None:
        if "id" in values:
            self.ids.append(values["id"])
        for name in values:
            if name.startswith("on"):
                self.faults.append(f"<{tag}> has {name}")
        if tag == "a" and "href" in values:
            self.links.append(values["href"])
        if tag == "link":
            self.loads.append(values["href"])
        if tag == "script" and "src" not in values and values.get("type") != "application/json":
            self.faults.append("a script stands in the page")
        if tag in LOADING:
            self.faults.append(f"<{tag}> is not wanted")
        if tag == "img" and not values.get("alt"):
            self.faults.append("a picture has no text")
        if "src" in values or "srcset" in values or "poster" in values:
            self.loads.append(values.get("src", "elsewhere"))
        for name in ("aria-labelledby", "aria-describedby"):
            self.references += values.get(name, "").split()
        for name in ("xlink:href", "href"):
            if tag == "use" and name in values:
                self.references.append(values[name].removeprefix("#"))
        if values.get("clip-path", "").startswith("url(#"):
            self.references.append(values["clip-path"][5:-1])
        if tag == "table":
            self._tables.append(set())
        if self._tables:
            names = {"caption": "caption"}
            if tag == "th":
                names["th"] = {"col": "column headers", "row": "row headers"}.get(
                    values.get("scope", ""), "stray header"
                )
            if tag in names:
                self._tables[-1].add(names[tag])
        if tag == "svg":
            self._pictures.append({"hidden"} if values.get("aria-hidden") == "true" else set())
        if self._pictures and tag in ("title", "desc"):
            self._pictures[-1].add(tag)


def check_page(files: Mapping[str, bytes], address: str) -> PageReader:
    """Assert that a page is whole: links lead somewhere, nothing comes from outside, all is told in words."""
    page = PageReader(files[address].decode())
    assert page.faults == [], f"{address}: {page.faults}"
    twice = {name for name in page.ids if page.ids.count(name) > 1}
    assert not twice, f"{address}: ids occur twice: {twice}"
    for reference in page.references:
        assert reference in page.ids, f"{address}: nothing has the id {reference!r}"
    for load in page.loads:
        assert load == "data:," or _target(address, load)[0] in files, f"{address} loads {load!r}"
    for link in page.links:
        _check_link(files, address, link, page)
    html = next(values for tag, values in page.tags if tag == "html")
    assert html.get("lang") == "en"
    assert sum(tag == "h1" for tag, _ in page.tags) == 1
    return page


def check_pages(files: Mapping[str, bytes]) -> None:
    """Assert that every page of an output is whole."""
    for address in files:
        if address.endswith(".html"):
            check_page(files, address)


def _check_link(files: Mapping[str, bytes], address: str, link: str, page: PageReader) -> None:
    scheme = urlsplit(link).scheme
    if scheme in ("http", "https", "mailto"):
        return
    assert scheme == "", f"{address}: link {link!r}"
    target, fragment = _target(address, link)
    assert target in files, f"{address}: link {link!r} leads nowhere"
    if fragment:
        ids = page.ids if target == address else PageReader(files[target].decode()).ids
        assert fragment in ids, f"{address}: link {link!r} leads to no part of {target}"


def _target(address: str, link: str) -> tuple[str, str]:
    path, _, fragment = link.partition("#")
    if not path:
        return address, unquote(fragment)
    return posixpath.normpath(posixpath.join(posixpath.dirname(address), unquote(path))), unquote(fragment)
