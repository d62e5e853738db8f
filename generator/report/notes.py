"""notes.md becomes HTML that can do nothing: no markup of its own, no scripts, no loads, safe links only."""

from __future__ import annotations

import re
from html import escape, unescape
from xml.etree.ElementTree import Element

from markdown import Markdown
from markdown.extensions import Extension
from markdown.treeprocessors import Treeprocessor

#: Longer notes are cut.
MOST_BYTES = 64 * 1024

#: Markdown's patterns take quadratic time on many of these; past this count the note is shown as typed.
_COSTLY = "[]()*_`<>!&\\"
_MOST_COSTLY = 2000
_UNDERLINE = re.compile(r"^ *[=-]+ *$", re.MULTILINE)
_MOST_UNDERLINES = 300
_DEEP_QUOTE = re.compile(r"(?:\s*>){12}")

_SAFE_LINK = re.compile(r"(?:https?://|mailto:)[^\s]+", re.IGNORECASE)
_PLACEHOLDER = re.compile("\x02(?:amp|\\d+)\x03")
_HEADINGS = {"h1": "h3", "h2": "h4", "h3": "h5", "h4": "h6", "h5": "h6"}


def rendered(text: str) -> str:
    """The notes as HTML; as preformatted text where Markdown would take too long."""
    text, cut = _cut(text.replace("\x02", "").replace("\x03", "").replace("\x00", ""))
    ending = "<p><em>The notes are longer than 64 kB; the rest is left out.</em></p>" if cut else ""
    if _is_costly(text):
        return f"<pre>{escape(text)}</pre>{ending}"
    try:
        return _converter().convert(text) + ending
    except RecursionError:
        return f"<pre>{escape(text)}</pre>{ending}"


def _cut(text: str) -> tuple[str, bool]:
    data = text.encode("utf-8", "replace")
    return data[:MOST_BYTES].decode("utf-8", "ignore"), len(data) > MOST_BYTES


def _is_costly(text: str) -> bool:
    if sum(text.count(character) for character in _COSTLY) > _MOST_COSTLY:
        return True
    if len(_UNDERLINE.findall(text)) > _MOST_UNDERLINES:
        return True
    return any(_DEEP_QUOTE.match(line) for line in text.splitlines())


class _Harmless(Treeprocessor):
    """Keeps http, https and mailto links; unwraps other links, turns pictures into their words, sinks headings."""

    def run(self, root: Element) -> None:
        for parent in list(root.iter()):
            parent.tag = _HEADINGS.get(parent.tag, parent.tag)
            for child in list(parent):
                if child.tag == "img":
                    _replace(child, child.get("alt") or "picture")
                elif child.tag == "a":
                    _tame(child)


def _tame(link: Element) -> None:
    target = _decoded(link.get("href") or "")
    link.attrib.clear()
    if _SAFE_LINK.fullmatch(target) and not re.search(r"[\x00-\x20\x7f\"'<>\\]", target):
        link.set("href", target)
        link.set("rel", "noopener noreferrer")
    else:
        link.tag = "span"


def _decoded(target: str) -> str:
    """A link as a browser will read it: Markdown's placeholders and entities undone."""

    def undo(match: re.Match[str]) -> str:
        inner = match.group(0)[1:-1]
        return "&" if inner == "amp" else chr(int(inner))

    return unescape(unescape(_PLACEHOLDER.sub(undo, target))).strip()


def _replace(element: Element, text: str) -> None:
    tail = element.tail
    element.clear()
    element.tag, element.text, element.tail = "span", text, tail


class _HarmlessExtension(Extension):
    def extendMarkdown(self, md: Markdown) -> None:  # noqa: N802  (the library's name)
        md.preprocessors.deregister("html_block")
        md.inlinePatterns.deregister("html")
        md.treeprocessors.register(_Harmless(md), "harmless", -10)


def _converter() -> Markdown:
    return Markdown(extensions=[_HarmlessExtension(), "tables", "sane_lists"], output_format="html")
