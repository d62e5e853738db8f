"""Packs: one file with everything in it and nothing from outside."""

from __future__ import annotations

import base64
import hashlib
import random
import re
from dataclasses import replace
from pathlib import Path

import pytest

from generator.cli import main
from generator.findings.answers import find
from generator.findings.records import RevisionMark
from generator.intake.campaign import read_campaign
from generator.report.editions import edited
from generator.report.pack import packed
from generator.report.pages import draw_campaign
from generator.report.themes import load_theme
from generator.report.views import CampaignPages
from tests.report.checks import PageReader
from tests.report.fixtures import HOSTILE, full_book, make_campaign, make_lot
from tests.sample import put_campaign


def reader_of(data: bytes) -> PageReader:
    """The elements of a pack; inline scripts are what it may have and a page may not."""
    page = PageReader(data.decode())
    page.faults = [fault for fault in page.faults if fault != "a script stands in the page"]
    return page


@pytest.fixture(scope="module")
def pack() -> PageReader:
    book = full_book()
    mark = RevisionMark(number=7, recorded="2026-03-02T09:12:00Z", digest="3fa1c2" * 10)
    book = replace(book, findings=replace(book.findings, revision=mark))
    return reader_of(packed(edited(book), load_theme()))


def test_a_pack_is_one_whole_page(pack: PageReader) -> None:
    """Ids are unique, references and links lead within the file, headings begin with one h1."""
    assert pack.faults == []
    assert [name for name in pack.ids if pack.ids.count(name) > 1] == []
    assert set(pack.references) <= set(pack.ids)
    inner = [link for link in pack.links if not link.startswith(("http", "mailto"))]
    assert inner
    assert all(link.startswith("#") and link[1:] in pack.ids for link in inner)
    assert sum(tag == "h1" for tag, _ in pack.tags) == 1


def test_a_pack_loads_nothing(pack: PageReader) -> None:
    """No style sheet, picture, script or font comes from outside the file."""
    assert pack.loads == ["data:,"]


def test_a_pack_holds_cover_contents_pages_and_method(pack: PageReader) -> None:
    """Revision and digest stand on the cover, every order and lot in the contents, the method at the end."""
    text = " ".join(" ".join(pack.words).split())
    for part in (
        "Revision 7",
        "3fa1c2" * 10,
        "Contents",
        "Order midway",
        "Lot C",
        "A calculated blend is a mass balance",
    ):
        assert part in text
    assert text.index("Order midway") < text.index("Order beyond") < text.index("The question")


def test_scripts_of_a_pack_are_allowed_by_their_hash_alone() -> None:
    """The policy lists the hash of every script and has no other permission for scripts."""
    text = packed(edited(full_book()), load_theme()).decode()
    scripts = re.findall(r"<script>(.*?)</script>", text, re.DOTALL)
    hashes = {base64.b64encode(hashlib.sha256(script.encode()).digest()).decode() for script in scripts}
    policy = re.search(r"script-src ([^;]*);", text)
    assert policy is not None
    assert set(policy.group(1).split()) == {f"'sha256-{one}'" for one in hashes}


def test_hostile_text_in_a_pack_stays_text() -> None:
    """Markup in names and notes makes no element."""
    book = full_book()
    lots = (*make_campaign().lots, make_lot(HOSTILE, "12", "8", supplier=HOSTILE))
    hostile = replace(book, campaign=replace(book.campaign, lots=lots, notes=HOSTILE))
    page = reader_of(packed(edited(hostile), load_theme()))
    assert page.faults == []
    plain = {tag for tag, _ in reader_of(packed(edited(book), load_theme())).tags}
    assert {tag for tag, _ in page.tags} <= plain


def test_a_usual_pack_is_light() -> None:
    """Twelve orders and 24 lots stay below 1.5 MB."""
    chance = random.Random(4)
    lots = ["lot,stock,cost,N,K,P,S,Mg"]
    for number in range(24):
        values = ",".join(str(chance.randint(0, 400) / 10) for _ in range(5))
        lots.append(f"L-{number},{chance.randint(50, 900)},{chance.randint(20, 90)},{values}")
    orders = ["order,amount,N,K,P,S,Mg"]
    for number in range(12):
        limits = ",".join(f"{low}..{low + 8}" for low in (chance.randint(6, 22) for _ in range(4)))
        orders.append(f"O-{number},{chance.randint(20, 90)},{limits},<= 30")
    files = {"assays.csv": "\n".join(lots).encode(), "targets.csv": "\n".join(orders).encode()}
    campaign = read_campaign(files, slug="s", folder="s")
    book = CampaignPages(campaign=campaign, findings=find(campaign), version="0")
    theme = load_theme()
    assert len(packed(edited(book), theme)) < 1_500_000
    pages = draw_campaign(edited(book), theme)
    assert max(len(data) for address, data in pages.items() if "/orders/" in address) < 150_000


def test_the_command_packs_the_client_edition(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Without a word about editions no cost is in the file; the command says what it wrote."""
    folder = put_campaign(tmp_path, assays_csv="lot,cost,N\nA,83.17,10\nB,91.31,30\n", targets_csv="order,N\n1,>= 20\n")
    target = tmp_path / "out" / "pack.html"
    assert main(["pack", str(folder), str(target)]) == 0
    assert "edition client" in capsys.readouterr().err
    text = target.read_text("utf-8")
    assert "83.17" not in text
    assert main(["pack", str(folder), str(target), "--edition", "internal"]) == 0
    assert "83.17" in target.read_text("utf-8")


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--edition", "press"], "no edition is called 'press'; there are internal, client"),
        (["--client", "Quill"], "no order is for the client 'Quill'; no order names a client"),
        (["--theme", "nowhere"], "no such theme"),
    ],
)
def test_what_can_not_be_packed_is_said(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], arguments: list[str], message: str
) -> None:
    """An unknown edition, client or theme is wrong use, and no file is written."""
    folder = put_campaign(tmp_path)
    target = tmp_path / "pack.html"
    assert main(["pack", str(folder), str(target), *arguments]) == 2
    assert message in capsys.readouterr().err
    assert not target.exists()


def test_a_pack_needs_one_campaign_and_an_html_name(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A folder of campaigns, or a file of another kind, is wrong use."""
    folder = put_campaign(tmp_path / "campaigns")
    assert main(["pack", str(folder.parent), str(tmp_path / "x.html")]) == 2
    assert main(["pack", str(folder), str(tmp_path / "x.csv")]) == 2
    assert "ends in .html" in capsys.readouterr().err
