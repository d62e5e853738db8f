import errno
import json
import os
import re
import threading
from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest

from generator.disk import WriteError, stamp
from generator.report.manifest import JOURNAL_NAME, MANIFEST_NAME, Published, read_manifest
from generator.report.publish import ASSET_GRACE, SHARED, Publication, Written

NOON = datetime(2026, 3, 2, 12, tzinfo=UTC)


class Killed(BaseException):
    """What stands for kill -9 in these tests: nothing handles it."""


def site(word: str = "one", orders: str = "12") -> dict[str, bytes]:
    """The files of one campaign: an index that links to order pages, which load an asset."""
    asset = f"assets/{word}.css"
    links = "".join(f'<a href="orders/{order}.html">' for order in orders)
    pages = {f"s/orders/{order}.html": f'<link href="../../{asset}"> {word} {order}' for order in orders}
    files = {"s/index.html": f'<link href="../{asset}"> {word} {links}', **pages, asset: f"/* {word} */"}
    return {path: text.encode() for path, text in files.items()}


def publish(
    output: Path,
    files: dict[str, bytes] | None,
    *,
    moment: datetime = NOON,
    before_replace=None,
    sleep=lambda seconds: None,
) -> list[Written]:
    """Publish campaign s (None: it is gone) and an index."""
    publication = Publication(output, moment=moment, before_replace=before_replace, sleep=sleep)
    steps = []
    if files is not None:
        steps.append(publication.put("s", Published(fingerprint="f", files={}), files))
    link = b'<a href="s/index.html">' if files is not None else b"none"
    steps.append(publication.put(SHARED, Published(fingerprint="i", files={}), {"index.html": link}))
    return [*steps, publication.finish()]


def held(output: Path) -> dict[str, bytes]:
    """Every file of the folder but the program's own records."""
    paths = [path for path in output.rglob("*") if path.is_file() and not path.name.startswith(".hullbook")]
    return {path.relative_to(output).as_posix(): path.read_bytes() for path in paths}


def broken_links(output: Path) -> list[str]:
    """Links of pages that an index leads to, which lead nowhere."""
    broken = []
    for page in [*output.glob("index.html"), *output.glob("s/index.html")]:
        seen = [page]
        while seen:
            page = seen.pop()
            for href in re.findall(r'href="([^"]+)"', page.read_text()):
                target = (page.parent / href).resolve()
                if not target.is_file():
                    broken.append(f"{page.name} -> {href}")
                elif target.suffix == ".html" and "orders" in target.parts:
                    seen.append(target)
    return broken


def temporary(output: Path) -> list[str]:
    return [path.name for path in output.rglob("*.tmp")]


def test_all_files_are_published_and_recorded(tmp_path: Path) -> None:
    """The folder holds the files byte for byte, and the manifest their digests."""
    publish(tmp_path, site())
    assert held(tmp_path) == {**site(), "index.html": b'<a href="s/index.html">'}
    assert set(read_manifest(tmp_path).files()) == set(held(tmp_path))
    assert not (tmp_path / JOURNAL_NAME).exists()


def test_the_second_time_nothing_is_touched(tmp_path: Path) -> None:
    """Publishing the same files leaves every stamp, the manifest's too, and says so."""
    publish(tmp_path, site())
    before = {path: stamp(path) for path in tmp_path.rglob("*")}
    steps = publish(tmp_path, site(), moment=NOON + timedelta(days=9))
    assert {path: stamp(path) for path in tmp_path.rglob("*")} == before
    assert steps == [Written(), Written(), Written()]


def test_the_order_is_assets_new_changed_index_manifest(tmp_path: Path) -> None:
    """What is linked to comes before what links, the campaign's index after its pages, the manifest last."""
    publish(tmp_path, site("one", "12"))
    order: list[str] = []
    publish(
        tmp_path,
        site("two", "012"),
        before_replace=lambda path: order.append(path.relative_to(tmp_path).as_posix()),
    )
    assert order == [
        "assets/two.css",
        "s/orders/0.html",
        "s/orders/1.html",
        "s/orders/2.html",
        "s/index.html",
        MANIFEST_NAME,
    ]


def test_only_own_stale_files_are_pruned(tmp_path: Path) -> None:
    """Pages no longer made are removed with folders that they leave empty; foreign files stay."""
    publish(tmp_path, site("one", "12"))
    (tmp_path / "README.md").write_text("mine")
    (tmp_path / "s" / "photo.jpg").write_text("mine")
    publish(tmp_path, site("one", "1"))
    assert not (tmp_path / "s/orders/2.html").exists()
    publish(tmp_path, None)
    assert set(held(tmp_path)) == {"README.md", "s/photo.jpg", "index.html", "assets/one.css"}
    assert not (tmp_path / "s/orders").exists()


def test_a_stale_page_that_was_edited_stays(tmp_path: Path) -> None:
    """A page that somebody has made their own is not removed with the campaign."""
    publish(tmp_path, site())
    (tmp_path / "s/orders/1.html").write_text("my own words")
    publish(tmp_path, None)
    assert (tmp_path / "s/orders/1.html").read_text() == "my own words"


def test_assets_stay_for_a_day(tmp_path: Path) -> None:
    """A style sheet that no page names any more stays for those who have a page open, then goes."""
    publish(tmp_path, site("one"))
    publish(tmp_path, site("two"), moment=NOON + timedelta(hours=1))
    publish(tmp_path, site("two"), moment=NOON + timedelta(hours=1) + ASSET_GRACE)
    assert (tmp_path / "assets/one.css").exists()
    publish(tmp_path, site("two"), moment=NOON + timedelta(hours=1, seconds=1) + ASSET_GRACE)
    assert not (tmp_path / "assets/one.css").exists()
    assert set(read_manifest(tmp_path).retired) == set()


def test_a_clock_set_back_keeps_no_asset_for_years(tmp_path: Path) -> None:
    """What was retired at a moment that is yet to come, by a wrong clock, goes a day from now all the same."""
    publish(tmp_path, site("one"))
    publish(tmp_path, site("two"), moment=NOON + timedelta(days=9000))
    publish(tmp_path, site("two"), moment=NOON)
    assert (tmp_path / "assets/one.css").exists()
    publish(tmp_path, site("two"), moment=NOON + timedelta(seconds=1) + ASSET_GRACE)
    assert not (tmp_path / "assets/one.css").exists()


def test_an_asset_in_use_again_is_kept(tmp_path: Path) -> None:
    """A retired style sheet that a page names again is no longer retired."""
    for step, word in enumerate(["one", "two", "one", "one"]):
        publish(tmp_path, site(word), moment=NOON + step * ASSET_GRACE * 2)
    assert (tmp_path / "assets/one.css").exists()
    assert not (tmp_path / "assets/two.css").exists()


@pytest.mark.parametrize("name", ["index.html", "s/index.html", "s/orders/2.html", "assets/one.css"])
def test_a_foreign_file_in_the_way_is_a_problem(tmp_path: Path, name: str) -> None:
    """A file that this program did not write is not overwritten; the problem names it; the rest is published."""
    path = tmp_path / name
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text("mine")
    for _ in range(2):
        steps = publish(tmp_path, site())
        assert [problem.file for step in steps for problem in step.problems] == [name]
        assert path.read_text() == "mine"
    assert len(held(tmp_path)) == len(site()) + 1
    path.unlink()
    assert [problem for step in publish(tmp_path, site()) for problem in step.problems] == []


@pytest.mark.parametrize("name, blocks", [("s", "s"), ("s/orders", "s/orders")])
def test_a_foreign_file_in_a_folders_place_is_a_problem(tmp_path: Path, name: str, blocks: str) -> None:
    """A file where a folder of pages should be is named, and left."""
    (tmp_path / name).parent.mkdir(parents=True, exist_ok=True)
    (tmp_path / name).write_text("mine")
    steps = publish(tmp_path, site())
    assert {problem.file for step in steps for problem in step.problems} == {blocks}
    assert (tmp_path / name).read_text() == "mine"


def test_a_folder_in_a_files_place_is_a_problem(tmp_path: Path) -> None:
    """A folder where a page should be is named, and left."""
    (tmp_path / "s/index.html").mkdir(parents=True)
    steps = publish(tmp_path, site())
    assert [problem.file for step in steps for problem in step.problems] == ["s/index.html"]


def test_a_foreign_file_leaves_the_fingerprint_empty(tmp_path: Path) -> None:
    """A campaign with a page that could not be placed is made again next time."""
    tmp_path.joinpath("s").mkdir()
    tmp_path.joinpath("s/index.html").write_text("mine")
    publish(tmp_path, site())
    assert read_manifest(tmp_path).campaigns["s"].fingerprint == ""
    tmp_path.joinpath("s/index.html").unlink()
    publish(tmp_path, site())
    assert read_manifest(tmp_path).campaigns["s"].fingerprint == "f"


def test_killed_at_any_rename_the_site_is_whole_and_the_next_run_completes(tmp_path: Path) -> None:
    """Kill -9 before each rename in turn: links resolve at once, and the next run leaves no trace of it."""
    for fatal in range(30):
        output = tmp_path / str(fatal)
        publish(output, site("one", "12"))
        count = 0

        def strike(path: Path, fatal: int = fatal) -> None:
            nonlocal count
            count += 1
            if count > fatal:
                raise Killed

        try:
            publish(output, site("two", "023"), before_replace=strike)
        except Killed:
            assert broken_links(output) == []
            assert read_manifest(output).files().keys() == {**site("one", "12"), "index.html": b""}.keys()
            publish(output, site("two", "023"))
        else:
            assert fatal > 4
        assert set(held(output)) == {*site("two", "023"), "index.html", "assets/one.css"}
        assert broken_links(output) == []
        assert temporary(output) == []
        assert not (output / JOURNAL_NAME).exists()
        if count <= fatal:
            break
    else:
        pytest.fail("the publication never ran to its end")


def test_a_new_campaign_comes_whole(tmp_path: Path) -> None:
    """Pages that link to each other appear all at once: killed at any rename, none or all are there."""
    for fatal in range(10):
        output = tmp_path / str(fatal)
        publish(output, None)
        left = [fatal]

        def strike(path: Path, left: list[int] = left) -> None:
            if left[0] == 0:
                raise Killed
            left[0] -= 1

        try:
            publish(output, site(), before_replace=strike)
        except Killed:
            assert {path for path in held(output) if path.startswith("s/")} in (
                set(),
                {path for path in site() if path.startswith("s/")},
            )
            publish(output, site())
        assert set(held(output)) == {*site(), "index.html"}
        assert temporary(output) == []
        if left[0]:
            break


def test_a_new_folder_that_can_not_be_renamed_comes_page_by_page(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Where a file server refuses to rename a folder its pages are written one by one."""

    def refuse(source: Path, target: Path) -> Path:
        raise PermissionError(errno.EACCES, "Permission denied")

    monkeypatch.setattr(Path, "rename", refuse)
    publish(tmp_path, site())
    assert set(held(tmp_path)) == {*site(), "index.html"}
    assert temporary(tmp_path) == []


def test_pages_of_a_killed_run_are_known_as_own(tmp_path: Path) -> None:
    """What a killed run wrote is removed when the next one no longer makes it."""

    def strike(path: Path) -> None:
        if path.name == MANIFEST_NAME:
            raise Killed

    with pytest.raises(Killed):
        publish(tmp_path, site("one", "12"), before_replace=strike)
    publish(tmp_path, site("one", "1"))
    assert set(held(tmp_path)) == {*site("one", "1"), "index.html"}


def test_a_killed_run_voids_the_fingerprint(tmp_path: Path) -> None:
    """A campaign that a killed run was writing is not taken for current, whatever the manifest says."""
    publish(tmp_path, site("one"))

    def strike(path: Path) -> None:
        if path.name == "index.html":
            raise Killed

    with pytest.raises(Killed):
        publish(tmp_path, site("two"), before_replace=strike)
    assert Publication(tmp_path, moment=NOON).old.campaigns["s"].fingerprint == ""


def test_a_journal_line_cut_off_is_ignored(tmp_path: Path) -> None:
    """A kill while the journal is written leaves half a line, which means nothing."""
    publish(tmp_path, site())
    (tmp_path / JOURNAL_NAME).write_text('{"campaign": "s", "fil')
    publish(tmp_path, site())
    assert not (tmp_path / JOURNAL_NAME).exists()


def hold(monkeypatch: pytest.MonkeyPatch, *names: str) -> None:
    """Let a reader hold these files, as on a Windows share: replacing and removing are refused."""
    replace, unlink = Path.replace, Path.unlink

    def refuse_replace(source: Path, target: Path) -> Path:
        if target.name in names:
            raise PermissionError(errno.EACCES, "Permission denied")
        return replace(source, target)

    def refuse_unlink(path: Path, missing_ok: bool = False) -> None:
        if path.name in names:
            raise PermissionError(errno.EACCES, "Permission denied")
        unlink(path, missing_ok)

    monkeypatch.setattr(Path, "replace", refuse_replace)
    monkeypatch.setattr(Path, "unlink", refuse_unlink)


def test_a_held_page_is_pending_and_what_it_links_to_stays(tmp_path: Path) -> None:
    """While a reader holds the index, its old links resolve; when it lets go, the next run completes."""
    publish(tmp_path, site("one", "12"))
    pauses: list[float] = []
    with pytest.MonkeyPatch.context() as patch:
        tmp_name = "1.html"
        hold(patch, tmp_name)
        steps = publish(tmp_path, site("two", "1"), sleep=pauses.append)
    assert steps[0].pending == ("s/orders/1.html",)
    assert pauses
    assert (tmp_path / "s/orders/1.html").read_bytes() == site("one", "12")["s/orders/1.html"]
    assert (tmp_path / "s/orders/2.html").exists()
    assert read_manifest(tmp_path).campaigns["s"].fingerprint == ""
    publish(tmp_path, site("two", "1"))
    assert set(held(tmp_path)) == {*site("two", "1"), "index.html", "assets/one.css"}


def test_many_held_pages_wait_no_longer_than_a_limit(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where every page is held the waiting ends after a while, not after a while for each."""
    orders = "abcdefghijkl"
    publish(tmp_path, site("one", orders))
    hold(monkeypatch, *(f"{order}.html" for order in orders))
    pauses: list[float] = []
    steps = publish(tmp_path, site("two", orders), sleep=pauses.append)
    assert len(steps[0].pending) == len(orders)
    assert sum(pauses) < 25


def test_a_full_disk_stops_and_leaves_the_site_whole(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """When the disk fills up the error is clear, every link resolves, and the next run completes."""
    from generator import disk

    publish(tmp_path, site("one", "12"))
    create = disk.create
    for room in range(6):
        left = [room]

        def full(path: Path, data: bytes, *, durable: bool = False, left: list[int] = left) -> None:
            if left[0] == 0:
                raise OSError(errno.ENOSPC, "No space left on device")
            left[0] -= 1
            create(path, data, durable=durable)

        with monkeypatch.context() as patch:
            patch.setattr(disk, "create", full)
            with pytest.raises(WriteError, match="no space left on device"):
                publish(tmp_path, site(f"try{room}", "12345"))
        assert broken_links(tmp_path) == []
        assert temporary(tmp_path) == []
    publish(tmp_path, site("two", "12"))
    assert broken_links(tmp_path) == []
    assert {path for path in held(tmp_path) if path.endswith(".html")} == {
        "index.html",
        "s/index.html",
        "s/orders/1.html",
        "s/orders/2.html",
    }


def test_readers_never_meet_a_broken_link_or_a_part(tmp_path: Path) -> None:
    """Readers that follow links during 60 publications meet whole pages and existing targets only."""
    publish(tmp_path, site("w0", "12"))
    stop = threading.Event()
    faults: list[str] = []

    def read() -> None:
        while not stop.is_set():
            page = tmp_path / "s/index.html"
            text = page.read_text()
            if not re.search(r"(w\d+)\.css.* \1 ", text):
                faults.append(text)
            faults.extend(href for href in re.findall(r'href="([^"]+)"', text) if not (page.parent / href).exists())

    reader = threading.Thread(target=read)
    reader.start()
    try:
        for turn in range(1, 60):
            publish(tmp_path, site(f"w{turn}", "12" if turn % 2 else "1234"[: 2 + turn % 3]))
    finally:
        stop.set()
        reader.join()
    assert [fault for fault in faults if "orders" not in fault] == []


def test_a_missing_page_is_noticed(tmp_path: Path) -> None:
    """A campaign with a page that somebody removed is not complete."""
    publish(tmp_path, site())
    assert Publication(tmp_path, moment=NOON).is_complete("s")
    (tmp_path / "s/orders/1.html").unlink()
    assert not Publication(tmp_path, moment=NOON).is_complete("s")


@pytest.mark.parametrize("content", [b"", b"[]", b"{", b'{"format": "hullbook-manifest-9"}', b"\xff"])
def test_a_strange_manifest_is_an_empty_one(tmp_path: Path, content: bytes) -> None:
    """Without a manifest nothing is known as own: identical files are adopted, others are foreign."""
    publish(tmp_path, site("one"))
    (tmp_path / MANIFEST_NAME).write_bytes(content)
    assert [problem for step in publish(tmp_path, site("one")) for problem in step.problems] == []
    (tmp_path / MANIFEST_NAME).write_bytes(content)
    assert [problem for step in publish(tmp_path, site("two")) for problem in step.problems] != []


def test_kept_campaigns_stay(tmp_path: Path) -> None:
    """A campaign that is kept is neither read nor written, and stays in the manifest."""
    publish(tmp_path, site())
    publication = Publication(tmp_path, moment=NOON)
    publication.keep("s")
    publication.keep(SHARED)
    publication.finish()
    assert set(held(tmp_path)) == {*site(), "index.html"}


def test_the_manifest_is_the_same_bytes_for_the_same_site(tmp_path: Path) -> None:
    """Two folders with one content have one manifest, whatever the clock says."""
    publish(tmp_path / "a", site())
    publish(tmp_path / "b", dict(reversed(site().items())), moment=NOON + timedelta(days=400))
    assert (tmp_path / "a" / MANIFEST_NAME).read_bytes() == (tmp_path / "b" / MANIFEST_NAME).read_bytes()
    assert os.fspath(tmp_path) not in json.dumps(json.loads((tmp_path / "a" / MANIFEST_NAME).read_bytes()))
