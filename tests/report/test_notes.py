"""Notes become HTML that can do nothing but be read."""

from __future__ import annotations

import re
from html.parser import HTMLParser

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from generator.report.notes import MOST_BYTES, rendered

HARMLESS = frozenset(
    "p em strong code pre ul ol li a span blockquote br hr h3 h4 h5 h6 table thead tbody tr th td".split()  # noqa: SIM905
)
ALLOWED = {"href", "rel", "style", "start", "title"}

ATTACKS = [
    "<script>alert(1)</script>",
    "<img src=x onerror=alert(1)>",
    "<svg onload=alert(1)>",
    "<iframe src=javascript:alert(1)></iframe>",
    "<style>*{display:none}</style>",
    "<form action=http://x><input></form>",
    "<a href=javascript:alert(1)>x</a>",
    "[x](javascript:alert(1))",
    "[x](JaVaScRiPt:alert(1))",
    "[x](&#106;avascript:alert(1))",
    "[x](&#x6A;avascript&colon;alert(1))",
    "[x](java\tscript:alert(1))",
    "[x](<java\nscript:alert(1)>)",
    "[x](\x01javascript:alert(1))",
    "[x](data:text/html,<script>alert(1)</script>)",
    "[x](vbscript:msgbox(1))",
    "[x](file:///etc/passwd)",
    "[x](//host/share)",
    "[x](\\\\host\\share)",
    "[x](http:\\\\host)",
    "<javascript:alert(1)>",
    "<file://host/x>",
    "![x](http://host/x.png)",
    "![x](javascript:alert(1))",
    "![x](data:image/svg+xml,<svg onload=alert(1)>)",
    "[x]: javascript:alert(1)\n\n[x]",
    '[x](http://a "title" onclick=alert(1))',
    '[x](http://a" onclick="alert(1))',
    "[x](http://a){: onclick=alert(1) }",
    "# heading {: #main onclick=alert(1) }",
    "```html\n<script>alert(1)</script>\n```",
    "`<script>`",
    "<!-- <script>alert(1)</script> -->",
    "<![CDATA[<script>]]>",
    "&lt;script&gt;alert(1)&lt;/script&gt;",
    "\x02amp\x03 \x02wzxhzdk:0\x03",
    "*[x](javascript:alert(1))*",
    "| a |\n|---|\n| <img src=x onerror=y> |",
    "<mailto:a@b.c?subject=<script>>",
    "[x](mailto:a@b.c)",
]


class Reader(HTMLParser):
    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.tags: list[tuple[str, dict[str, str]]] = []
        self.words = ""
        self.feed(text)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, {name: value or "" for name, value in attrs}))

    def handle_data(self, data: str) -> None:
        self.words += data


def assert_harmless(text: str) -> Reader:
    """Only known elements and attributes, and links only to the web or to a mailbox."""
    reader = Reader(rendered(text))
    for tag, attributes in reader.tags:
        assert tag in HARMLESS, tag
        assert set(attributes) <= ALLOWED, attributes
        assert re.fullmatch(r"text-align: \w+;", attributes.get("style", "text-align: left;"))
        if "href" in attributes:
            assert re.match(r"(https?://|mailto:)[^\s\\]+$", attributes["href"], re.IGNORECASE), attributes
    return reader


@pytest.mark.parametrize("attack", ATTACKS)
def test_attacks_come_out_as_words(attack: str) -> None:
    """Markup, scripts, loads and odd links do nothing."""
    assert_harmless(attack)


@given(st.text(st.sampled_from(list("<>[]()!*_`#\"'&;:/\\ \n\tajvscript=ondata\x01\x02\x03|-")), max_size=60))
@settings(max_examples=150, deadline=None)
def test_no_text_comes_out_harmful(text: str) -> None:
    """Whatever is typed, the page stays harmless."""
    assert_harmless(text)


def test_ordinary_notes_keep_their_form() -> None:
    """Emphasis, lists, tables, code and safe links come out; headings sink below the page's own."""
    html = rendered("# Top\n\nSome *em* [web](https://example.org/a?b=1&c=2)\n\n- one\n\n| a |\n|---|\n| 1 |\n\n`a<b`")
    assert "<h3>Top</h3>" in html
    assert "<em>em</em>" in html
    assert 'href="https://example.org/a?b=1&amp;c=2"' in html
    assert "<li>one</li>" in html
    assert "<td>1</td>" in html
    assert "<code>a&lt;b</code>" in html


def test_pictures_and_files_become_their_words() -> None:
    """A picture leaves its description, a link to a file its text."""
    reader = assert_harmless("![the heap](heap.png) and [the list](list.csv)")
    assert reader.words.strip() == "the heap and the list"


def test_long_notes_are_cut_and_say_so() -> None:
    """Past 64 kB the rest is left out."""
    html = rendered("word " * (MOST_BYTES // 4))
    assert "longer than 64 kB" in html
    assert len(html) < MOST_BYTES + 500


@pytest.mark.parametrize("bomb", ["[" * 60_000, ">" * 5_000 + "x", "*a_" * 20_000, "`" * 60_000, "![" * 30_000])
def test_bombs_are_shown_as_typed(bomb: str) -> None:
    """What would keep Markdown busy for minutes is shown as preformatted text."""
    assert rendered(bomb).startswith("<pre>")
