"""The plan's page and the batch cards: what they tell, and that they are whole."""

from __future__ import annotations

import csv
import io
import re
from dataclasses import replace

import pytest

from generator.findings.answers import find
from generator.findings.records import Plan
from generator.report.exports import exports
from generator.report.pages import draw_campaign, draw_index
from generator.report.themes import Theme, load_theme
from generator.report.views import CampaignPages, index_entry
from tests.findings.making import make_campaign
from tests.report.checks import PageReader, check_pages
from tests.report.fixtures import output

ASSAYS = (
    "lot,stock,cost,material,place,load order,N\n"
    "A,100,10,prills,bay 2,10,10\nB,60,20,salt,bay 1,2,30\nC,40,5,dust,yard,,0\n"
)
TARGETS = (
    "order,client,amount,price,priority,accept,N\n"
    "dear,Quill,100,50,1,whole,>= 20\ncheap,Quill,100,40,1,part,>= 20\nfar,Quill,10,90,2,whole,>= 31\n"
)
SETTINGS = "batch_size = 25\n[house]\nweigh_step = 0.5\n"


def book_of(assays: str = ASSAYS, targets: str = TARGETS, settings: str = SETTINGS) -> CampaignPages:
    campaign = make_campaign(assays, targets, settings)
    return CampaignPages(campaign=campaign, findings=find(campaign), version="0.1.0")


@pytest.fixture(scope="module")
def theme() -> Theme:
    return load_theme()


@pytest.fixture(scope="module")
def book() -> CampaignPages:
    return book_of()


@pytest.fixture(scope="module")
def files(book: CampaignPages, theme: Theme) -> dict[str, bytes]:
    return output(book, theme)


def words(files: dict[str, bytes], address: str) -> str:
    return " ".join(" ".join(PageReader(files[address].decode()).words).split())


def test_plan_and_cards_are_whole(files: dict[str, bytes]) -> None:
    """There is one plan page and a card for each served order, linked from everywhere, with whole links."""
    check_pages(files)
    assert {"trial/plan.html", "trial/batches/dear.html", "trial/batches/cheap.html"} <= files.keys()
    assert "trial/batches/far.html" not in files
    for page in ("trial/index.html", "trial/orders/dear.html", "trial/orders/far.html"):
        links = PageReader(files[page].decode()).links
        assert any(link.endswith("plan.html") for link in links)


def test_alone_and_together_are_told_apart(files: dict[str, bytes], book: CampaignPages, theme: Theme) -> None:
    """Campaign page, plan page and index say how many are makeable alone and how many served together."""
    told = "2 makeable alone, 2 served together, 1 of them in part"
    assert told in words(files, "trial/index.html")
    assert told in words(files, "trial/plan.html")
    index = draw_index([index_entry(book)], theme).decode()
    assert told in index


def test_the_plan_page_tells_who_loses(files: dict[str, bytes]) -> None:
    """A loser has the lot that is short, its worth, and who could give way; an unreachable one its page."""
    page = words(files, "trial/plan.html")
    assert "It is short of B" in page
    assert "One t more of B would bring 50.00 EUR" in page.replace("\N{NO-BREAK SPACE}", " ")
    assert "if order dear were dropped" in page
    assert "Taken alone it is unreachable" in page
    assert "It is short of B" in words(files, "trial/orders/cheap.html")
    assert "Never used: C." in page


def test_a_card_is_in_the_order_of_loading(files: dict[str, bytes]) -> None:
    """Lots stand in the order of loading with place, amount and what the scale shows; numbers sort as numbers."""
    page = words(files, "trial/batches/dear.html")
    assert page.index("bay 1") < page.index("bay 2")
    assert "4 equal batches of 25.0 t" in page.replace("\N{NO-BREAK SPACE}", " ")
    assert "12.5 12.5" in page
    assert "12.5 25.0" in page
    assert "Signature" in page
    assert "superseded if a newer revision exists" in page
    assert files["trial/batches/dear.html"].decode().count('class="box"') == 2 + 4


def test_an_order_page_leads_to_its_card_and_the_plan(files: dict[str, bytes]) -> None:
    """What the plan gives an order stands on its page, and why a lost one is lost is not told twice."""
    dear, far = words(files, "trial/orders/dear.html"), words(files, "trial/orders/far.html")
    assert "Beside the other orders in full Accepted 100" in dear
    assert "Beside the other orders not served All orders The whole plan" in far
    assert "its own page tells why" not in far


def test_cards_follow_each_other_and_lead_to_the_plan(files: dict[str, bytes]) -> None:
    """From one card the next is one step away, and so is the plan that it has to agree with."""
    links = PageReader(files["trial/batches/dear.html"].decode()).links
    assert {"cheap.html", "../plan.html", "../orders/dear.html"} <= set(links)


def test_a_card_says_what_of_the_plan_it_weighs(theme: Theme) -> None:
    """Where whole weigh steps come to less than the plan gives, the card names both amounts."""
    targets = "order,amount,accept,N\nx,9.7,part,>= 15\n"
    files = output(book_of("lot,stock,N\nA,100,10\nB,100,40\n", targets, "[house]\nweigh_step = 1\n"), theme)
    page = words(files, "trial/batches/x.html").replace("\N{NO-BREAK SPACE}", " ")
    assert re.search(r"\d+ t in 1 batch, of the 9\.7\d* t that the plan gives it\.", page)


def test_money_of_one_column_has_the_same_decimals(theme: Theme) -> None:
    """A gain of hundreds beside one of ten thousands is printed without hundredths too."""
    targets = "order,amount,price,N\nbig,1000,90,>= 20\nsmall,10,90.25,>= 20\n"
    page = words(output(book_of("lot,stock,cost,N\nA,9000,10.5,20\n", targets, ""), theme), "trial/plan.html")
    assert "79 500" in page
    assert "798" in page
    assert "797.50" not in page


def test_a_hull_of_one_component_is_told_in_words(theme: Theme) -> None:
    """Two inequalities on one number are a range: the page has no table of half-planes for it."""
    page = words(output(book_of(), theme), "trial/index.html")
    assert "N (as received basis) of a blend can be 0 to 30." in page
    assert "The hull as inequalities" not in page


def test_a_card_that_does_not_hold_says_so(theme: Theme) -> None:
    """A card without weighable amounts that hold names the limit that gives way, before anything is loaded."""
    files = output(
        book_of("lot,stock,N\nA,100,10\nB,100,40\n", "order,amount,N\nx,5,17 - 17.1\n", "[house]\nweigh_step = 1\n"),
        theme,
    )
    page = words(files, "trial/batches/x.html")
    assert "Not every limit holds" in page
    assert "None found" in page
    assert "These amounts break: N." in page


def with_plan(book: CampaignPages, **changes: object) -> CampaignPages:
    plan = book.findings.plan
    assert isinstance(plan, Plan)
    return replace(book, findings=replace(book.findings, plan=replace(plan, **changes)))  # type: ignore[arg-type]


def test_a_gap_is_told(book: CampaignPages, theme: Theme) -> None:
    """A plan that ran out of effort or time says so with its gap."""
    late = output(with_plan(book, status="out of time", gap=0.0123), theme)
    assert "ran out of time" in words(late, "trial/plan.html")
    assert "1.2 %" in words(late, "trial/plan.html").replace("\N{NO-BREAK SPACE}", " ")
    unknown = output(with_plan(book, status="within gap", gap=None), theme)
    assert "an unknown part" in words(unknown, "trial/plan.html")


def test_without_a_plan_there_are_no_such_pages(book: CampaignPages, theme: Theme) -> None:
    """Findings without a plan, as an older revision has them, draw as before."""
    files = output(replace(book, findings=replace(book.findings, plan=None, batches=())), theme)
    check_pages(files)
    assert not [address for address in files if "plan" in address or "batches" in address]
    assert "served together" not in words(files, "trial/index.html")


def rows_of(data: bytes) -> list[list[str]]:
    return list(csv.reader(io.StringIO(data.decode("utf-8-sig"))))


def test_plan_and_batches_as_csv(book: CampaignPages) -> None:
    """The exports hold every amount of the plan and of every batch, with the running total."""
    files = exports(book)
    plan = rows_of(files["trial/plan.csv"])
    assert plan[0] == ["order", "priority", "asked", "accepted", "served", "lot", "amount"]
    assert ["dear", "1", "100.0", "100.0", "full", "B", "50.0"] in plan
    assert ["far", "2", "10.0", "0.0", "none", "", ""] in plan
    batches = rows_of(files["trial/batches.csv"])
    dear = [row for row in batches if row[0] == "dear"]
    assert dear == [
        ["dear", "1", "4", "4", "2", "bay 1", "B", "12.5", "12.5", "yes"],
        ["dear", "1", "4", "4", "10", "bay 2", "A", "12.5", "25.0", "yes"],
    ]


def test_exports_run_nothing_in_a_spreadsheet() -> None:
    """Names that begin like formulas get an apostrophe in the plan's and the batches' files too."""
    book = book_of("lot,stock,place,N\n=A1,100,@yard,10\n", "order,amount,N\n+x,5,10\n", "")
    for name in ("plan", "batches"):
        cells = [cell for row in rows_of(exports(book)[f"trial/{name}.csv"]) for cell in row]
        assert not [cell for cell in cells if cell[:1] in ("=", "+", "-", "@")]
        assert "'=A1" in cells


def test_names_of_all_kinds_stay_text(theme: Theme) -> None:
    """Hostile names in lots, places and orders are shown as text on the new pages."""
    nasty = '<script>x</script>&"'
    assays = f'lot,stock,place,load order,N\n"{nasty.replace(chr(34), chr(34) * 2)}",100,<b>yard</b>,<i>1,10\n'
    files = output(book_of(assays, "order,amount,N\n<u>x</u>,5,10\n", ""), theme)
    check_pages(files)
    for address, data in files.items():
        if address.endswith(".html"):
            assert b"<script>x" not in data
            assert b"<b>yard" not in data


def test_pages_are_the_same_bytes(book: CampaignPages, theme: Theme) -> None:
    """Two drawings of the same plan are the same bytes."""
    assert draw_campaign(book, theme) == draw_campaign(book, theme)
