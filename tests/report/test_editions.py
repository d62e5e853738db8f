"""Editions: what is hidden is nowhere in what is written, and what is left is whole.

The law: over random campaigns whose hidden values and names occur nowhere else, no byte of any file of a
client edition, its name included, holds one of them.
"""

from __future__ import annotations

import json
import random
from collections.abc import Mapping
from dataclasses import dataclass, replace
from datetime import timedelta
from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from generator import numbers
from generator.findings import results
from generator.findings.answers import find
from generator.findings.records import BlockingProof, RecipeProof
from generator.intake.campaign import read_campaign
from generator.report.editions import edited
from generator.report.exports import csv_bytes, exports
from generator.report.pack import packed
from generator.report.pages import draw_campaign, draw_index
from generator.report.themes import load_theme
from generator.report.veil import EditionError, veil_of
from generator.report.views import CampaignPages, index_entry
from tests.report.checks import check_pages
from tests.report.fixtures import (
    full_book,
    make_book,
    make_campaign,
    make_findings,
    make_full,
    make_lot,
    make_plan,
    output,
)
from tests.sample import NOON, make_job, pages_of, put_campaign, run

HIDE = ("cost", "price", "stock", "supplier", "notes", "place")


@dataclass(frozen=True)
class Sealed:
    """Input files, and the texts of them that a client may not see."""

    files: Mapping[str, bytes]
    secrets: tuple[str, ...]


def sealed(seed: int, hide: tuple[str, ...] = HIDE, *, may_have_rules: bool = True) -> Sealed:
    """A random campaign: stock that is sometimes too small, orders in and out of reach, rules now and then."""
    chance = random.Random(seed)
    secrets: list[str] = []

    def secret(text: str) -> str:
        secrets.append(text)
        return text

    rows = ["lot,alias,material,stock,cost,supplier,place,N,K,P,lab remark"]
    count = chance.randint(4, 6)
    for number in range(count):
        name = secret(f"ZQX-{chance.randint(100, 999)}-{number}")
        stock = secret(f"{chance.choice([31, 4271])}.{chance.randint(101, 998)}7{number}")
        cost = secret(f"{chance.randint(83, 97)}.{chance.randint(101, 998)}3{number}")
        words = [secret(f"{word}{chance.randint(1000, 9999)}{number}") for word in ("Vorplix", "Schuppen", "Bemerk")]
        values = [str(chance.randint(0, 60) / 2) for _ in range(3)]
        alias = f"Sand {chr(65 + number)}"
        rows.append(",".join([name, alias, f"stuff{number}", stock, cost, *words[:2], *values, words[2]]))
    orders = ["order,amount,price,client,N,K,P,order remark"]
    for number in range(chance.randint(2, 3)):
        price = secret(f"{chance.randint(61, 79)}.{chance.randint(101, 998)}1{number}")
        low = chance.randint(0, 20)
        remark = secret(f"Notiz{chance.randint(1000, 9999)}{number}")
        limits = [f"{low}..{low + chance.randint(2, 12)}", f">= {chance.randint(0, 20)}", f"<= {chance.randint(8, 30)}"]
        orders.append(
            ",".join([f"R{number}", str(chance.choice([40, 90])), price, f"Client {number}", *limits, remark])
        )
    toml = f"[editions.client]\nhide = {json.dumps(list(hide))}\n[components.N]\nsd = 0.3\n"
    if may_have_rules and chance.random() < 0.5:
        toml += '[house]\nmax_lots = 3\nkeep_apart = [["ZQX*0", "stuff1"]]\n'
        secrets.append("ZQX*0")
    notes = secret(f"Vertraulich{chance.randint(1000, 9999)}")
    files = {
        "assays.csv": "\n".join(rows).encode(),
        "targets.csv": "\n".join(orders).encode(),
        "campaign.toml": toml.encode(),
        "notes.md": notes.encode(),
    }
    return Sealed(files, tuple(secrets))


def written_ways(secret: str) -> set[str]:
    """How a hidden text could be written: as typed, as a page, a file or a proof prints a number."""
    try:
        value = Fraction(secret)
    except ValueError:
        return {secret}
    places = numbers.exact_places(value) or 0
    return {secret, numbers.text(value, places), numbers.weight(value), repr(float(value)), secret.rstrip("0")}


def all_files(book: CampaignPages) -> dict[str, bytes]:
    """Everything that a build and a pack write of a campaign."""
    theme = load_theme()
    return {
        **draw_campaign(book, theme),
        **exports(book),
        "results.json": results.dumps(book.findings),
        "index.html": draw_index([index_entry(book)], theme),
        "pack.html": packed(book, theme),
    }


def found_in(files: Mapping[str, bytes], secrets: tuple[str, ...]) -> list[tuple[str, str]]:
    """Which secrets stand in which file, or in its name."""
    ways = {way for secret in secrets for way in written_ways(secret)}
    return [
        (address, way)
        for address, data in files.items()
        for text in [address + "\n" + data.decode()]
        for way in ways
        if way in text
    ]


def book_of(files: Mapping[str, bytes]) -> CampaignPages:
    campaign = read_campaign(files, slug="s", folder="s")
    assert not campaign.is_stopped, campaign.problems
    return CampaignPages(campaign=campaign, findings=find(campaign), version="0")


@settings(max_examples=4, deadline=None, suppress_health_check=list(HealthCheck))
@given(st.integers(0, 10**6))
def test_nothing_hidden_is_anywhere_in_a_client_edition(seed: int) -> None:
    """No byte of a page, drawing, export, pack or file name holds a hidden value or name."""
    case = sealed(seed)
    book = book_of(case.files)
    assert found_in(all_files(edited(book)), case.secrets), "the internal edition shows them"
    assert found_in(all_files(edited(book, "client")), case.secrets) == []


@settings(max_examples=2, deadline=None, suppress_health_check=list(HealthCheck))
@given(st.integers(0, 10**6))
def test_a_clients_pack_names_nobody_else(seed: int) -> None:
    """Other clients and their orders stand nowhere, in the internal edition neither."""
    book = book_of(sealed(seed).files)
    for edition in ("client", "internal"):
        files = all_files(edited(book, edition, "client 0"))
        assert found_in(files, ("Client 1", "Client 2", ">R1<", '"R1"', '"R2"', "R1.html", "Notiz")) == []
        assert "s/orders/R0.html" in files


@settings(max_examples=6, deadline=None, suppress_health_check=list(HealthCheck))
@given(st.integers(0, 10**6))
def test_the_plan_is_shown_where_stock_is(seed: int) -> None:
    """An edition that hides costs and names but not the stock shows plan and cards, without money or real names."""
    case = sealed(seed, ("cost", "price", "supplier", "notes", "place"))
    stocks = {line.split(",")[3] for line in case.files["assays.csv"].decode().splitlines()[1:]}
    shown = edited(book_of(case.files), "client")
    assert shown.findings.plan is not None
    assert shown.findings.plan.value is None
    secrets = tuple(secret for secret in case.secrets if secret not in stocks)
    assert found_in(all_files(shown), secrets) == []


@settings(max_examples=8, deadline=None)
@given(st.integers(0, 10**6))
def test_the_law_holds_for_records_too(seed: int) -> None:
    """The redacted records themselves hold nothing hidden, so that no later page can show it."""
    case = sealed(seed)
    shown = edited(book_of(case.files), "client")
    text = repr((shown.campaign, shown.findings))
    hidden = [way for secret in case.secrets for way in written_ways(secret) if way in text]
    assert hidden == []


def test_redaction_changes_nothing_of_the_internal_edition() -> None:
    """Campaign and answers are the very same."""
    book = full_book()
    shown = edited(book)
    assert (shown.campaign, shown.findings) == (book.campaign, book.findings)


def test_every_page_of_a_client_edition_is_whole() -> None:
    """Links resolve and no heading stands empty, with every answer that there can be."""
    check_pages(output(edited(full_book(), "client"), load_theme()))


def test_cost_takes_with_it_what_was_computed_from_it() -> None:
    """Costs, bounds, curves, worths, prices and the sentence's money go; shares, values and room stay."""
    campaign = make_campaign(settings=replace(make_campaign().settings, hidden={"client": ("cost",)}))
    book = make_book(campaign=campaign, findings=make_findings(orders=(make_full(),)))
    finding = edited(book, "client").findings.orders[0]
    recipe = finding.recipes["cheapest"]
    assert (recipe.cost, recipe.bound, finding.curve, finding.enters_at, finding.stays_up_to) == (
        None,
        None,
        (),
        {},
        {},
    )
    assert [limit.worth for limit in finding.limits] == [None]
    assert finding.without_lot == {"A": ("unreachable", None), "B": ("makeable", None)}
    assert "EUR" not in finding.sentence
    assert recipe.shares == {"A": 0.5, "B": 0.5}
    assert finding.greatest_amount == 37.5


def test_stock_takes_with_it_greatest_amounts_and_the_plan() -> None:
    """So do the lots that run out, and a short order's proof; costs stay."""
    campaign = make_campaign(settings=replace(make_campaign().settings, hidden={"client": ("stock",)}))
    book = make_book(campaign=campaign, findings=make_findings(orders=(make_full(),), plan=make_plan()))
    shown = edited(book, "client").findings
    finding = shown.orders[0]
    assert (finding.greatest_amount, finding.greatest_recipe, finding.runs_out, finding.proof) == (None, None, (), None)
    assert (shown.plan, shown.batches) == (None, ())
    assert [lot.stock for lot in shown.lots] == [None, None, None]
    assert finding.recipes["cheapest"].cost == 50.0
    assert finding.sentence == "Short: the stock is too small for the amount asked for."


def test_an_amount_that_is_a_lots_whole_stock_is_not_told() -> None:
    """A recipe that takes all of a lot would tell its stock by its amounts."""
    files = {
        "assays.csv": b"lot,stock,N\nA,10,10\nB,100,30\n",
        "targets.csv": b"order,amount,N\n1,40,>= 25\n2,20,>= 29\n",
    }
    findings = edited(book_of(files), "client").findings
    assert findings.orders[0].recipes["closest"].amounts is None
    assert findings.orders[1].recipes["cheapest"].amounts is not None


def test_a_hidden_component_leaves_the_verdict_alone() -> None:
    """Neither its name nor what was computed with it is left, and other orders keep their proofs."""
    files = {
        "assays.csv": b"lot,N,Zork\nA,10,5\nB,30,1\n",
        "targets.csv": b"order,N,Zork\n1,>= 20,<= 0.5\n2,>= 20,\n",
        "campaign.toml": b'[editions.client]\nhide = ["Zork"]\n',
    }
    shown = edited(book_of(files), "client")
    assert found_in(all_files(shown), ("Zork",)) == []
    first, second = shown.findings.orders
    assert (first.verdict, first.sentence, first.proof) == ("unreachable", "Not makeable from these lots.", None)
    assert isinstance(second.proof, RecipeProof)


def test_aliases_stand_in_proofs_and_sentences() -> None:
    """Every mapping by lot and every list of lots has the names that the client knows."""
    files = {
        "assays.csv": b"lot,alias,N\nA,Alpha,10\nB,Beta,10\nC,,5\n",
        "targets.csv": b"order,N\n1,>= 20\n2,10\n",
    }
    first, second = edited(book_of(files), "client").findings.orders
    assert isinstance(first.proof, BlockingProof)
    assert set(first.proof.scores) == {"Alpha", "Beta", "C"}
    assert second.sentence.startswith("Makeable, but on the edge: only Alpha and Beta can be used")


def test_lots_of_one_alias_are_told_apart() -> None:
    """A name that two lots would share, or that another lot has, gets a number."""
    lots = (make_lot("A", "1", "1", alias="X"), make_lot("B", "1", "1", alias="X"), make_lot("C", "1", "1", alias="D"))
    veil = veil_of(make_campaign(lots=(*lots, make_lot("D", "1", "1"))), "client")
    assert dict(veil.lots) == {"A": "X", "B": "X (2)", "C": "D (2)", "D": "D"}


def test_a_name_is_replaced_as_a_word_only() -> None:
    """The lot A does not change the words of a sentence that begin with A."""
    veil = veil_of(make_campaign(lots=(make_lot("A-1", "1", "1", alias="X"),)), "client")
    assert veil.text("A-1, not A-12 or BA-1; (A-1)") == "X, not A-12 or BA-1; (X)"


def test_editions_of_other_names() -> None:
    """A further edition hides what it says; one that nobody named is an error that lists those there are."""
    files = {
        "assays.csv": b"lot,cost,stock,N\nA,10,50,10\nB,20,50,30\n",
        "targets.csv": b"order,amount,N\n1,10,>= 20\n",
        "campaign.toml": b'[editions.auditor]\nhide = ["cost"]\n',
    }
    book = book_of(files)
    auditor = edited(book, "auditor").findings
    assert (auditor.lots[0].cost, auditor.lots[0].stock) == (None, 50.0)
    assert edited(book, "client").findings.lots[0].stock is None
    with pytest.raises(EditionError, match="internal, client, auditor"):
        edited(book, "press")
    with pytest.raises(EditionError, match="no order names a client"):
        edited(book, "client", "Quill")


def test_a_stopped_campaign_keeps_its_problems_to_itself() -> None:
    """A client learns that there are problems, and not what was found."""
    case = sealed(5)
    broken = {**case.files, "targets.csv": case.files["targets.csv"].replace(b"order,", b"order,order,", 1)}
    campaign = read_campaign(broken, slug="s", folder="s")
    assert campaign.is_stopped
    findings = replace(make_findings(), slug="s", orders=(), lots=(), hulls=(), problems=campaign.problems)
    shown = edited(CampaignPages(campaign=campaign, findings=findings, version="0"), "client")
    assert found_in({**all_files(shown)}, case.secrets) == []
    assert "ask those who sent you this report" in draw_campaign(shown, load_theme())["s/index.html"].decode()


def test_a_client_build_over_two_revisions_tells_nothing(tmp_path: Path) -> None:
    """History, index and the program's own records of the output folder hold nothing hidden either."""
    old, new = sealed(11, may_have_rules=False), sealed(12, may_have_rules=False)
    folder = put_campaign(tmp_path / "campaigns", "s", **{"x.txt": b""})
    for number, case in enumerate((old, new)):
        for name, data in case.files.items():
            (folder / name).write_bytes(data)
        for editions in (("client",), ("internal", "client")):
            output = tmp_path / "-".join(editions)
            run(make_job(tmp_path, output=output, editions=editions, moment=NOON + timedelta(days=number)))
    secrets = (*old.secrets, *new.secrets)
    for root in (tmp_path / "client", tmp_path / "internal-client" / "client"):
        files = {path.relative_to(root).as_posix(): path.read_bytes() for path in root.rglob("*") if path.is_file()}
        files = {name: data for name, data in files.items() if name != ".hullbook-lock"}
        assert "s/index.html" in files
        assert found_in(files, secrets) == []
    internal = tmp_path / "internal-client" / "internal"
    assert found_in({p.name: p.read_bytes() for p in internal.rglob("*.html")}, new.secrets)


def test_a_client_reads_what_changed_and_why(tmp_path: Path) -> None:
    """A lost order is told with the assay that did it, under the lot's alias; a change of cost is not."""
    assays = "lot,alias,cost,N\nZQX,Alpha,10,{n}\nB,Beta,{cost},10\n"
    files = {"targets_csv": "order,amount,N\n1,10,>= 25\n2,10,<= 20\n"}
    put_campaign(tmp_path / "campaigns", "s", assays_csv=assays.format(n="30.5", cost="20"), **files)
    run(make_job(tmp_path))
    put_campaign(tmp_path / "campaigns", "s", assays_csv=assays.format(n="24.5", cost="33.77"), **files)
    run(make_job(tmp_path, moment=NOON + timedelta(days=1), editions=("client",)))
    page = (tmp_path / "output" / "s" / "index.html").read_text("utf-8")
    assert "Order 1 is now unreachable" in page
    assert "lot Alpha&#39;s N re-assayed from 30.5 to 24.5" in page
    assert "33.77" not in page
    assert "ZQX" not in page
    assert "Order 1 lost on 3 March" in (tmp_path / "output" / "index.html").read_text("utf-8")


def test_several_editions_and_back(tmp_path: Path) -> None:
    """Each edition has a folder of its own; with one edition the others' folders are removed again."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    assert "index.html" in pages_of(tmp_path / "output")
    run(make_job(tmp_path, editions=("internal", "client")))
    pages = {name.split("/")[0] for name in pages_of(tmp_path / "output") if name.endswith(".html")}
    assert pages == {"internal", "client"}
    run(make_job(tmp_path, editions=("client",)))
    pages = {name.split("/")[0] for name in pages_of(tmp_path / "output") if name.endswith(".html")}
    assert pages == {"index.html", "method.html", "spring"}


def test_an_unchanged_client_edition_is_not_written_again(tmp_path: Path) -> None:
    """The fingerprint knows edition and client: the same again writes nothing, another one everything."""
    put_campaign(tmp_path / "campaigns")
    first = run(make_job(tmp_path, editions=("client",)))
    again = run(make_job(tmp_path, editions=("client",)))
    other = run(make_job(tmp_path))
    assert (first.made, again.made, again.written, other.made) == (("spring",), (), 0, ("spring",))


@pytest.mark.parametrize(
    ("value", "cell"),
    [
        ("=1+1", "'=1+1"),
        ("  @x", "'  @x"),
        ("-2+3", "'-2+3"),
        ("+1 555", "'+1 555"),
        ("\t1", "'\t1"),
        ("＝1", "'＝1"),
        ("-5.2", "-5.2"),
        ("<0.01", "<0.01"),
        (-5.25, "-5.25"),
        (None, ""),
        ('a"b', '"a""b"'),
    ],
)
def test_exports_are_safe_for_spreadsheets(value: str | float | None, cell: str) -> None:
    """A text that a spreadsheet would run has an apostrophe before it; numbers stay numbers."""
    assert csv_bytes([[value, "x"]]) == b"\xef\xbb\xbf" + f"{cell},x\r\n".encode()
