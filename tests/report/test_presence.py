import os
from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

import pytest

from generator.report.manifest import MANIFEST_NAME, FileList, Manifest, Published, dump, read_manifest
from generator.report.presence import STAMPS_NAME
from generator.report.publish import SHARED, Publication

NOON = datetime(2026, 3, 2, 12, tzinfo=UTC)
FILES = {"s/index.html": b"index", "s/orders/1.html": b"one", "s/orders/2.html": b"two", "assets/a.css": b"a"}


@pytest.fixture
def output(tmp_path: Path) -> Path:
    publication = Publication(tmp_path, moment=NOON)
    publication.put("s", Published(fingerprint="f", files={}), FILES)
    publication.put(SHARED, Published(fingerprint="i", files={}), {"index.html": b"top"})
    publication.finish()
    return tmp_path


def holds(output: Path, *, thorough: bool = False) -> list[bool]:
    """Whether campaign and shared pages stand as they were written; what was seen is remembered."""
    publication = Publication(output, moment=NOON, thorough=thorough)
    found = [publication.is_complete("s"), publication.is_complete(SHARED)]
    for campaign in ("s", SHARED):
        publication.keep(campaign)
    publication.finish()
    return found


def test_what_was_just_written_stands(output: Path) -> None:
    """A quick and a thorough look both find everything in place, and write nothing."""
    before = (output / STAMPS_NAME).stat()
    assert holds(output) == holds(output, thorough=True) == [True, True]
    assert (output / STAMPS_NAME).stat() == before


@pytest.mark.parametrize("path", ["s/orders/1.html", "s/index.html", "assets/a.css"])
def test_a_missing_file_is_noticed(output: Path, path: str) -> None:
    """A page or asset that is gone is noticed by a quick look."""
    (output / path).unlink()
    assert holds(output) == [False, True]


def test_a_missing_index_is_noticed(output: Path) -> None:
    """The index stands in a folder that changes all the time, and is looked at itself."""
    (output / "index.html").unlink()
    assert holds(output) == [True, False]


def test_a_page_replaced_by_another_is_noticed(output: Path) -> None:
    """An editor that saves by renaming changes the folder, so a quick look sees it."""
    (output / "s/orders/mine").write_text("ONE")
    (output / "s/orders/mine").replace(output / "s/orders/1.html")
    assert holds(output) == [False, True]


def test_a_page_written_into_is_noticed_by_a_thorough_look(output: Path) -> None:
    """A page changed in place, even to the same size, leaves its folder alone: only a thorough look sees it."""
    (output / "s/orders/1.html").write_bytes(b"ONE")
    assert holds(output) == [True, True]
    assert holds(output, thorough=True) == [False, True]


def test_a_page_that_was_only_touched_is_read_once(output: Path) -> None:
    """Another moment with the same content is no change, and is remembered."""
    os.utime(output / "s/orders/1.html", ns=(1, 1))
    assert holds(output, thorough=True) == [True, True]
    before = (output / STAMPS_NAME).read_bytes()
    assert holds(output, thorough=True) == [True, True]
    assert (output / STAMPS_NAME).read_bytes() == before


def test_foreign_files_beside_pages_are_none_of_our_business(output: Path) -> None:
    """A file that somebody puts beside the pages changes nothing."""
    (output / "s/orders/own.txt").write_text("mine")
    assert holds(output) == [True, True]


USELESS = [b"", b"{}", b'{"format": "hullbook-stamps-1", "campaigns": {"s": "1 2 x s"}}']
USELESS += [
    b'{"format": "hullbook-stamps-2", "campaigns": {"s": %b}}' % text for text in (b"5", b'"a b c d"', b'"1 2"')
]


@pytest.mark.parametrize("content", [None, *USELESS])
def test_lost_stamps_cost_only_time(output: Path, content: bytes | None) -> None:
    """Without usable stamps the files themselves are read."""
    if content is None:
        (output / STAMPS_NAME).unlink()
    else:
        (output / STAMPS_NAME).write_bytes(content)
    assert holds(output) == [True, True]
    (output / STAMPS_NAME).unlink()
    (output / "s/orders/1.html").write_bytes(b"ONE")
    assert holds(output) == [False, True]


def test_a_manifest_is_written_again_from_its_own_lines(tmp_path: Path) -> None:
    """What stays is written as it was read, what changed anew: the same bytes as if all were put into words."""
    names = ("a", "b", '\u2028 "odd", {', "ü")
    first = Manifest(
        campaigns={name: Published(fingerprint=name, files={"x/y.html": "1"}, about={"n": [name]}) for name in names}
    )
    (tmp_path / MANIFEST_NAME).write_bytes(dump(first))
    old = read_manifest(tmp_path)
    assert old.lines.keys() == set(names)
    assert dump(old) == dump(old, old) == dump(first)
    changed = replace(old, campaigns={**old.campaigns, "b": replace(old.campaigns["b"], fingerprint="new")})
    assert dump(changed, old) == dump(changed) != dump(first)
    assert dump(old.voided(["a"]), old) == dump(old.voided(["a"]))


@pytest.mark.parametrize("change", [lambda text: text.replace(b",\n", b", "), lambda text: text.replace(b"{", b"{\n")])
def test_a_manifest_laid_out_otherwise_is_read_all_the_same(tmp_path: Path, change: Callable[[bytes], bytes]) -> None:
    """Lines that are not those of this program are not passed on."""
    first = Manifest(campaigns={name: Published(fingerprint=name, files={}) for name in "abc"})
    (tmp_path / MANIFEST_NAME).write_bytes(change(dump(first)))
    old = read_manifest(tmp_path)
    assert dump(old, old) == dump(first)


def test_a_list_of_files_is_the_same_as_text() -> None:
    """Digests by address become one text and come back, assets first."""
    files = {"s/b.html": "2", "assets/z.css": "9", "s/a.html": "1", "assets/a.js": "8"}
    listed = FileList(files)
    assert dict(FileList(listed.text)) == files
    assert list(listed.assets()) == [("assets/a.js", "8"), ("assets/z.css", "9")]
    assert list(FileList("").assets()) == list(FileList("")) == []
