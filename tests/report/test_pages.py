"""Pages are whole, complete, harmless and the same bytes every time."""

from __future__ import annotations

import os
import subprocess
import sys
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import pytest

from generator.report.pages import assets, draw_campaign, draw_index, draw_method
from generator.report.themes import Theme, load_theme
from generator.report.views import index_entry
from tests.report.checks import PageReader, check_page, check_pages
from tests.report.fixtures import (
    HOSTILE,
    full_book,
    make_beyond,
    make_book,
    make_campaign,
    make_findings,
    make_lot,
    make_midway,
    make_order,
    make_problem,
    output,
)


@pytest.fixture(scope="module")
def theme() -> Theme:
    return load_theme()


def words(files: dict[str, bytes], address: str) -> str:
    """The text of a page as one line."""
    return " ".join(" ".join(PageReader(files[address].decode()).words).split())


def test_every_page_of_a_campaign_is_whole(theme: Theme) -> None:
    """Links and anchors resolve, ids are unique, tables have headers and drawings words."""
    files = output(make_book(), theme)
    check_pages(files)
    assert {address for address in files if address.endswith(".html")} == {
        "index.html",
        "method.html",
        "spring/index.html",
        "spring/orders/midway.html",
        "spring/orders/beyond.html",
        "spring/lots/A.html",
        "spring/lots/B.html",
        "spring/lots/C.html",
    }


def test_pages_with_every_section_are_whole(theme: Theme) -> None:
    """All that later answers fill has its place, and the pages stay whole."""
    files = output(full_book(), theme)
    check_pages(files)
    ids = set(PageReader(files["spring/orders/midway.html"].decode()).ids)
    sections = "greatest cheapest assured limits hull room other-recipes without-lot worth left-out proof assays"
    folded = "roomiest closest fewest proof-exact proof-face proof-cap proof-cost"
    assert ids >= set(sections.split()) | set(folded.split())
    assert {"ways-out", "wanted-lot"} <= set(PageReader(files["spring/orders/beyond.html"].decode()).ids)
    assert {"orders", "changes", "hull", "plan", "lots", "notes", "revisions", "read", "problems"} <= set(
        PageReader(files["spring/index.html"].decode()).ids
    )


def test_sections_without_content_are_absent(theme: Theme) -> None:
    """An order without room, curve or other recipes shows no empty headings for them."""
    ids = PageReader(output(make_book(), theme)["spring/orders/midway.html"].decode()).ids
    assert not {"room", "worth", "other-recipes", "without-lot", "left-out", "ways-out"} & set(ids)


def test_the_verdict_comes_first(theme: Theme) -> None:
    """An order's page begins with its verdict and sentence, before any table."""
    text = output(make_book(), theme)["spring/orders/beyond.html"].decode()
    assert text.index("unreachable") < text.index("must be at least 124") < text.index("<table")


def test_a_blocking_proof_can_be_added_up_again(theme: Theme) -> None:
    """Weights, terms, products and totals all stand on the page."""
    text = words(output(make_book(), theme), "spring/orders/beyond.html")
    assert "3 N + 4 K₂O must be at least 124, and is at most 110 in every lot." in text
    for shown in ("3 × 10", "4 × (−4)", "3 × (−10.25)", "23.25"):
        assert shown in text


def test_a_recipe_proof_multiplies_shares_and_values(theme: Theme) -> None:
    """Each lot's share, value and product stand in a row, and the sum under them."""
    text = words(output(make_book(), theme), "spring/orders/midway.html")
    assert "A 0.5 10 5 B 0.5 30.25 15.125 Sum 20.125" in text


def test_a_recipe_on_another_basis_shows_two_sums_and_their_quotient(theme: Theme) -> None:
    """Where lots differ in their dry part, numerator and denominator are both summed."""
    campaign = make_campaign()
    dry = tuple(replace(component, basis="dry", limit_basis="dry") for component in campaign.components)
    lots = tuple(replace(lot, moisture=campaign.lots[1].moisture) for lot in campaign.lots)
    text = words(
        output(make_book(campaign=replace(campaign, components=dry, lots=lots)), theme), "spring/orders/midway.html"
    )
    assert "4.8 0.5 × 9.6 0.48 0.5 × 0.96" in text
    assert "19.32 ÷ 0.96 = 20.125" in text


def test_a_whole_of_three_is_drawn_as_a_triangle(theme: Theme) -> None:
    """Where three components make up a whole, campaign and order pages show their ternary diagram."""
    campaign = make_campaign()
    third = replace(campaign.components[0], name="S", label="sand")
    lots = tuple(replace(lot, assay={**lot.assay, "S": lot.assay["N"]}) for lot in campaign.lots)
    settings = replace(campaign.settings, whole=("N", "K", "S"))
    whole = replace(campaign, components=(*campaign.components, third), lots=lots, settings=settings)
    files = output(make_book(campaign=whole), theme)
    check_pages(files)
    for address in ("spring/index.html", "spring/orders/midway.html"):
        assert "ternary" in PageReader(files[address].decode()).ids


def test_values_stand_as_typed(theme: Theme) -> None:
    """The assay of a lot keeps its decimals and its detection limit."""
    text = words(output(make_book(), theme), "spring/lots/B.html")
    assert "30.25" in text
    assert "<5" in text


def test_printed_shares_sum_to_a_hundred(theme: Theme) -> None:
    """Thirds are printed as 33.4, 33.3 and 33.3."""
    third = Fraction(1, 3)
    recipe = replace(
        make_midway().recipes["cheapest"],
        shares=dict.fromkeys("ABC", 1 / 3),
        exact=dict.fromkeys("ABC", third),
        amounts=dict.fromkeys("ABC", 40 / 3),
        cost=None,
    )
    findings = make_findings(orders=(make_midway(recipes={"cheapest": recipe}), make_beyond()))
    text = words(output(make_book(findings=findings), theme), "spring/orders/midway.html")
    assert "A 33.4 13.34 40.00" in text
    assert "B 33.3 13.33 60.00" in text
    assert "C 33.3 13.33 unknown" in text
    assert "Blend 100.0 40.00 unknown" in text


def test_printed_shares_hold_the_limits_where_some_rounding_does(theme: Theme) -> None:
    """A blend on its limit is rounded inwards: what the page says can be weighed out and is within the limit."""
    shares = {"A": Fraction("0.512667"), "B": Fraction("0.487333")}
    value = 10 * shares["A"] + Fraction("30.25") * shares["B"]
    recipe = replace(make_midway().recipes["cheapest"], exact=shares, values={"N": float(value)})
    limit = replace(make_midway().limits[0], low=float(value), high=None)
    finding = make_midway(recipes={"cheapest": recipe}, limits=(limit,))
    text = words(output(make_book(findings=make_findings(orders=(finding,))), theme), "spring/orders/midway.html")
    assert "A 51.26 20.51" in text
    assert "B 48.74 19.49" in text


def test_shares_that_no_rounding_holds_say_so(theme: Theme) -> None:
    """An exact limit that needs thirds sends the reader to the exact shares in the proof."""
    shares = {"A": Fraction(1, 3), "B": Fraction(2, 3)}
    recipe = replace(make_midway().recipes["cheapest"], exact=shares, values={"N": 23.5})
    limit = replace(make_midway().limits[0], low=23.5, high=23.5)
    finding = make_midway(recipes={"cheapest": recipe}, limits=(limit,))
    text = words(output(make_book(findings=make_findings(orders=(finding,))), theme), "spring/orders/midway.html")
    assert "A 33.33" in text
    assert "the exact ones, which hold every limit, stand in the proof" in text


def test_a_stopped_campaign_without_answers_gets_one_problem_page(theme: Theme) -> None:
    """Its only page names every problem, and the index says that it is stopped."""
    campaign = make_campaign(problems=(make_problem(),))
    book = make_book(campaign=campaign, findings=make_findings(orders=()), revisions=(), changes=())
    files = output(book, theme)
    check_pages(files)
    assert set(draw_campaign(book, theme)) == {"spring/index.html"}
    text = words(files, "spring/index.html")
    assert "12,5o" in text
    assert "write 12.5" in text
    assert "the campaign is stopped" in words(files, "index.html")


def test_a_stopped_campaign_shows_its_last_good_answers_under_a_banner(theme: Theme) -> None:
    """Every page of it carries the problems at its head."""
    files = output(make_book(banner_problems=(make_problem(),)), theme)
    check_pages(files)
    for address in ("spring/index.html", "spring/orders/midway.html", "spring/lots/A.html"):
        text = words(files, address)
        assert text.index("last good answers") < text.index("write 12.5")


def test_an_empty_campaign_and_an_empty_index_are_pages_too(theme: Theme) -> None:
    """No lots, no orders, no notes, no revisions: still whole."""
    campaign = make_campaign(lots=(), orders=(), notes="", read=())
    findings = make_findings(lots=(), orders=(), hulls=())
    check_pages(output(make_book(campaign=campaign, findings=findings, revisions=(), changes=()), theme))
    files = {"index.html": draw_index([], theme), "method.html": draw_method(theme), **assets(theme)}
    assert "no campaign yet" in words(files, "index.html")
    check_pages(files)


def test_an_order_without_an_answer_has_a_page(theme: Theme) -> None:
    """A problem with an order's own data is told in its sentence."""
    blank = replace(
        make_midway(), verdict=None, sentence="No answer: no lot may be used.", recipes={}, limits=(), proof=None
    )
    files = output(make_book(findings=make_findings(orders=(blank,))), theme)
    check_pages(files)
    assert "No answer: no lot may be used." in words(files, "spring/orders/midway.html")


def test_hostile_text_stays_text_everywhere(theme: Theme) -> None:
    """Markup in any name, cell, title, note or problem shows as typed and makes no element."""
    lot = make_lot(
        HOSTILE,
        "10",
        "20",
        supplier=HOSTILE,
        location=HOSTILE,
        load_order=HOSTILE,
        materials=(HOSTILE,),
        remarks={HOSTILE: HOSTILE},
    )
    campaign = make_campaign()
    campaign = replace(
        campaign,
        slug="hostile",
        settings=replace(campaign.settings, title=HOSTILE, quantity_unit=HOSTILE, currency=HOSTILE),
        components=tuple(replace(c, label=HOSTILE + c.name, unit=HOSTILE) for c in campaign.components),
        lots=(*campaign.lots, lot),
        orders=(replace(make_order(HOSTILE), client=HOSTILE), campaign.orders[1]),
        notes=HOSTILE,
        problems=(make_problem(severity="note", file=HOSTILE, column=HOSTILE, found=HOSTILE, message=HOSTILE),),
    )
    findings = make_findings()
    orders = (replace(make_midway(), order=HOSTILE, sentence=HOSTILE), make_beyond(left_out={HOSTILE: HOSTILE}))
    book = make_book(campaign=campaign, findings=replace(findings, orders=orders), changes=(HOSTILE,))
    files = output(book, theme)
    plain = {tag for tag, _ in _tags(output(make_book(), theme))}
    check_pages(files)
    assert {tag for tag, _ in _tags(files)} <= plain | {"em"}
    assert HOSTILE in "".join(PageReader(files["hostile/index.html"].decode()).words)
    assert "49" not in words(files, "hostile/lots/C.html")


def _tags(files: dict[str, bytes]) -> list[tuple[str, dict[str, str]]]:
    return [
        tag for address, data in files.items() if address.endswith(".html") for tag in PageReader(data.decode()).tags
    ]


def test_names_that_clash_get_pages_of_their_own(theme: Theme) -> None:
    """Orders that differ only in case or in odd characters have different addresses."""
    names = ("A/1", "A?1", "a-1", "CON", "...")
    campaign = make_campaign(orders=tuple(make_order(name) for name in names))
    findings = make_findings(orders=tuple(make_midway(order=name) for name in names))
    files = output(make_book(campaign=campaign, findings=findings), theme)
    check_pages(files)
    pages = [address for address in files if address.startswith("spring/orders/")]
    assert len({address.casefold() for address in pages}) == len(names)


def test_pages_state_a_policy_that_forbids_foreign_scripts(theme: Theme) -> None:
    """The content security policy allows the report's own script files and none that stands in a page."""
    page = check_page(output(make_book(), theme), "spring/index.html")
    policy = next(values["content"] for _, values in page.tags if "Content-Security-Policy" in values.values())
    assert "default-src 'none'" in policy
    assert "script-src 'self' file:;" in policy


def test_cautions_stand_on_campaign_order_and_method_pages(theme: Theme) -> None:
    """Where the work can hurt, the page says what a calculated blend does not say."""
    files = output(make_book(), theme)
    for address in ("spring/index.html", "spring/orders/midway.html", "method.html"):
        assert "A calculated blend is a mass balance." in words(files, address)


def test_an_order_page_is_light(theme: Theme) -> None:
    """No page of a usual campaign outweighs 150 kB."""
    assert max(len(data) for data in output(full_book(), theme).values()) < 150_000


def test_an_index_of_two_hundred_campaigns_is_light(theme: Theme) -> None:
    """The index stays below 300 kB."""
    entries = [replace(index_entry(full_book()), slug=f"campaign-{number}") for number in range(200)]
    assert len(draw_index(entries, theme)) < 300_000


def test_the_index_sums_up_all_campaigns(theme: Theme) -> None:
    """Before the list stands how many orders of all campaigns can be made, and a bar of their verdicts."""
    entries = [replace(index_entry(make_book()), slug=f"campaign-{number}") for number in range(3)]
    text = draw_index(entries, theme).decode()
    assert "3 campaigns. 3 of 6 orders can be made, each taken alone." in text
    assert text.index('aria-label="3 makeable and 3 unreachable"') < text.index("Spring blends")


def test_a_lot_tells_what_it_is_good_for_and_what_counts(theme: Theme) -> None:
    """Its page begins with the orders that take it, and shows the value that a reading below detection counts as."""
    files = output(make_book(), theme)
    assert "In the cheapest recipe of 1 order, which is lost without it." in words(files, "spring/lots/A.html")
    assert "K₂O, % <5 2.5 as received" in words(files, "spring/lots/B.html")
    assert "Counts as" not in words(files, "spring/lots/A.html")


def test_what_was_left_out_is_told_on_the_first_screen(theme: Theme) -> None:
    """Where a problem drops a lot, campaign and order pages say so before any table, and lead to the problem."""
    book = make_book()
    dropped = replace(book, campaign=replace(book.campaign, problems=(make_problem(severity="drops"),)))
    files = output(dropped, theme)
    check_pages(files)
    for address, link in (
        ("spring/index.html", "index.html#problems"),
        ("spring/orders/midway.html", "../index.html#problems"),
    ):
        text = files[address].decode()
        assert text.index("1 problem in the input: it leaves out") < text.index("<table")
        assert link in PageReader(text).links
    assert b"in the input" not in output(book, theme)["spring/index.html"]


def test_an_order_page_says_its_verdict_once(theme: Theme) -> None:
    """The verdict's word stands beside its sign, and the sentence goes on from there."""
    text = words(output(make_book(), theme), "spring/orders/midway.html")
    assert "makeable Cheapest 50.00 EUR/t from 2 lots." in text


SCRIPT = """
import hashlib
from tests.report.fixtures import full_book, output
from generator.report.themes import load_theme
files = output(full_book(), load_theme())
print(hashlib.sha256(repr(sorted(files.items())).encode()).hexdigest())
"""


def test_the_bytes_do_not_depend_on_the_process() -> None:
    """Three processes with different hash seeds and time zones write the same files."""
    root = Path(__file__).parents[2]
    digests = set()
    for seed, zone in (("0", "UTC"), ("1", "Asia/Tokyo"), ("2", "America/New_York")):
        environment = {**os.environ, "PYTHONHASHSEED": seed, "TZ": zone, "PYTHONPATH": str(root)}
        run = subprocess.run(
            [sys.executable, "-c", SCRIPT], env=environment, cwd=root, capture_output=True, text=True, check=True
        )
        digests.add(run.stdout)
    assert len(digests) == 1
