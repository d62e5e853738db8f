"""Names become file names that every file system takes, and links that lead back."""

from __future__ import annotations

import posixpath
from urllib.parse import unquote

import pytest
from hypothesis import given
from hypothesis import strategies as st

from generator.report import addresses


@pytest.mark.parametrize(
    ("name", "slug"),
    [
        ("S-402 20-8-12 +SO3", "S-402-20-8-12--SO3"),
        (".hidden", "hidden"),
        ("a/b\\c:d", "a-b-c-d"),
        ("K₂O Größe", "K₂O-Größe"),
        ("", "-"),
        ("...", "-"),
    ],
)
def test_slugs_keep_letters_digits_and_three_signs(name: str, slug: str) -> None:
    """Everything else becomes a hyphen, and a leading dot is dropped."""
    assert addresses.slugify(name) == slug


def test_clashes_get_a_number() -> None:
    """Equal slugs, equal but for case, taken and reserved names are told apart."""
    found = addresses.slugs(["a/b", "a?b", "A-B", "con", "NUL.txt", "index", "end."], taken=["index"])
    assert list(found.values()) == ["a-b", "a-b-2", "A-B-3", "con-2", "NUL-txt-2", "index-2", "end-2"]


@given(st.lists(st.text(max_size=12), unique=True, max_size=12))
def test_slugs_are_distinct_safe_and_bounded(names: list[str]) -> None:
    """Whatever the names, no two slugs are one file, and none is reserved, hidden or too long."""
    found = list(addresses.slugs(names).values())
    assert len({slug.casefold() for slug in found}) == len(names)
    for slug in found:
        assert all(character.isalnum() or character in "-_." for character in slug)
        assert slug.split(".")[0].casefold() not in addresses.RESERVED
        assert not slug.startswith(".")
        assert not slug.endswith(".")
        assert len((slug + ".html").encode()) < 255


@given(st.text(min_size=100, max_size=400))
def test_long_names_are_cut(name: str) -> None:
    """A slug and its extension fit into a file name."""
    assert 0 < len(addresses.slugify(name).encode()) <= addresses.LONGEST


def test_relative_links_lead_from_page_to_page() -> None:
    """Links go up and down, quote what must be quoted, and keep the fragment."""
    assert addresses.relative("a/orders/x.html", "a/index.html") == "../index.html"
    assert addresses.relative("index.html", "a/index.html#lots") == "a/index.html#lots"
    assert addresses.relative("a/index.html", "a/index.html#lots") == "#lots"
    link = addresses.relative("a/index.html", "a/orders/Größe.html")
    assert link == "orders/Gr%C3%B6%C3%9Fe.html"
    assert posixpath.normpath(posixpath.join("a", unquote(link))) == "a/orders/Größe.html"
