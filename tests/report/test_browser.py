"""Pages in a real browser, from files, without a network."""

from __future__ import annotations

import platform
import random
import re
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import replace
from datetime import timedelta
from fractions import Fraction
from pathlib import Path
from typing import Any
from urllib.parse import unquote

import pytest

from generator import numbers
from generator.findings.answers import find
from generator.findings.measures import blend_value, measures_of
from generator.findings.values import table_of
from generator.folders import find_campaigns, read_inputs
from generator.intake.campaign import read_campaign
from generator.intake.records import Campaign
from generator.report.editions import edited
from generator.report.pack import packed
from generator.report.themes import load_theme
from generator.report.views import CampaignPages
from tests.report.checks import PageReader
from tests.report.fixtures import HOSTILE, full_book, make_campaign, make_lot, output
from tests.sample import NOON, make_job, put_campaign, run

pytestmark = pytest.mark.browser

WIDTHS = (390, 820, 1600)
#: Preloading asks for the style sheets again, which the pages' policy refuses.
EVERY_RULE = {
    "preload": False,
    "runOnly": {"type": "tag", "values": ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]},
}
COLOURS = {"preload": False, "runOnly": {"type": "rule", "values": ["color-contrast", "link-in-text-block"]}}

#: Orders made, lost, barred and short; a ratio, a blend rule, a dry basis, materials kept apart, groups.
TRADE = {
    "assays_csv": (
        "lot,alias,material,stock,cost,moisture,N,K,density\n"
        + "".join(
            f"L-{n},Alpha {n},{'urea' if n % 4 == 0 else 'nitrate' if n % 4 == 1 else 'salt'},"
            f"{40 + 7 * n},{20 + 3 * n}.5,{n % 5}.5,{5 + 3 * n}.25,{40 - 2 * n}.5,1.{10 + n}\n"
            for n in range(14)
        )
    ),
    "targets_csv": (
        "order,client,amount,N,K,ratio,density,salts\n"
        "1001,Quill,60,15..30,>= 12,,<= 1.2,\n"
        "1002,Quill,40,20..28,>= 14,<= 2.5,,<= 60\n"
        "1003,Marsh,20,>= 44,>= 38,,,\n"
        "1004,Marsh,5000,15..30,>= 12,,,\n"
    ),
    "campaign_toml": (
        'title = "Trade"\nbasis = "dry"\n'
        '[components.density]\nrule = "harmonic"\nbasis = "as received"\n[components.N]\nsd = 0.2\n'
        '[derived]\nratio = "N / K"\n[groups.salts]\nlots = ["salt"]\n'
        '[house]\nkeep_apart = [["urea", "nitrate"]]\n'
    ),
    "notes_md": "Some *notes*.",
}


@pytest.fixture(scope="module")
def site(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """An output with every section, and hostile text in a lot and in the notes; and its pack."""
    folder = tmp_path_factory.mktemp("site")
    book = full_book()
    lots = (*make_campaign().lots, make_lot(HOSTILE, "12", "8", supplier=HOSTILE))
    book = edited(replace(book, campaign=replace(book.campaign, lots=lots, notes=HOSTILE)))
    for address, data in {**output(book, load_theme()), "pack.html": packed(book, load_theme())}.items():
        path = folder / address
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(data)
    return folder


@pytest.fixture(scope="module")
def trade(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A campaign of two revisions as the program builds it: internal and client in plain, internal in letter."""
    root = tmp_path_factory.mktemp("trade")
    campaigns = root / "campaigns"
    put_campaign(campaigns, "trade", **{**TRADE, "assays_csv": TRADE["assays_csv"].replace("L-3,", "L-33,")})
    put_campaign(campaigns, "broken", targets_csv="order,N\n1,>= twelve\n", assays_csv="lot,N\n")
    run(make_job(root))
    put_campaign(campaigns, "trade", **TRADE)
    run(make_job(root, output=root / "plain", editions=("internal", "client"), moment=NOON + timedelta(days=1)))
    run(make_job(root, output=root / "letter", theme="letter", moment=NOON + timedelta(days=1)))
    campaign, findings = answers(root)
    book = edited(CampaignPages(campaign=campaign, findings=findings, version="0"), "client")
    (root / "pack.html").write_bytes(packed(book, load_theme("letter")))
    return root


def answers(root: Path) -> tuple[Campaign, Any]:
    """The campaign named trade, read and answered."""
    folder = next(folder for folder in find_campaigns(root / "campaigns") if folder.slug == "trade")
    campaign = read_campaign(read_inputs(folder).files, slug="trade", folder="trade")
    return campaign, find(campaign)


@contextmanager
def opened(browser: Any, path: Path, **options: Any) -> Iterator[Any]:
    """A page in a context of its own, whose every complaint is a failure."""
    faults: list[str] = []
    context = browser.new_context(offline=True, **options)
    page = context.new_page()
    page.on("console", lambda message: faults.append(message.text))
    page.on("pageerror", lambda error: faults.append(str(error)))
    page.on("dialog", lambda dialog: faults.append(dialog.message))
    page.on("request", lambda request: faults.extend([] if _is_own(request.url) else [request.url]))
    page.goto(path.as_uri())
    yield page
    context.close()
    assert faults == []


def _is_own(url: str) -> bool:
    return url.startswith(("file:", "data:"))


def kinds(root: Path) -> dict[str, Path]:
    """One page of each kind below an output folder."""
    found: dict[str, Path] = {}
    for path in sorted(root.rglob("*.html")):
        kind = re.search(r'<body class="is-(\w+)', path.read_text("utf-8"))
        verdict = re.search(r'class="verdict v-(\w+)', path.read_text("utf-8"))
        if kind:
            found.setdefault(kind.group(1) + (f" {verdict.group(1)}" if verdict else ""), path)
    return found


def test_pages_open_from_files_without_a_fault(browser: Any, site: Path) -> None:
    """No console message, no error, no dialog, no request but for files; nothing wider than the window."""
    for scheme, width in zip(("light", "dark", "light"), WIDTHS, strict=True):
        for path in sorted(site.rglob("*.html")):
            with opened(browser, path, color_scheme=scheme, viewport={"width": width, "height": 800}) as page:
                excess = page.evaluate("document.documentElement.scrollWidth - document.documentElement.clientWidth")
                assert excess <= 0, f"{path.name} is {excess} px too wide at {width}"
                assert page.evaluate("document.querySelectorAll('[onclick], iframe, object, embed, form').length") == 0


def test_built_pages_open_without_a_fault(browser: Any, trade: Path) -> None:
    """The same for what the program builds, in both themes, and for a pack."""
    pages = [*kinds(trade / "plain" / "internal").values(), *kinds(trade / "letter").values(), trade / "pack.html"]
    for path in pages:
        with opened(browser, path, viewport={"width": 390, "height": 800}) as page:
            excess = page.evaluate("document.documentElement.scrollWidth - document.documentElement.clientWidth")
            assert excess <= 0, f"{path.name} is {excess} px too wide"


def test_the_style_sheet_applies(browser: Any, site: Path, trade: Path) -> None:
    """The policy lets the style sheet in, dark readers get dark paper, and each theme has its own."""
    grounds = []
    for path in (site / "index.html", trade / "letter" / "index.html"):
        for scheme in ("light", "dark"):
            with opened(browser, path, color_scheme=scheme) as page:
                grounds.append(page.evaluate("getComputedStyle(document.body).backgroundColor"))
    assert grounds == ["rgb(251, 250, 247)", "rgb(21, 25, 27)", "rgb(255, 255, 255)", "rgb(22, 24, 28)"]


@pytest.mark.parametrize(
    ("theme", "scheme", "rules"),
    [
        ("plain", "light", EVERY_RULE),
        ("plain", "dark", COLOURS),
        ("letter", "light", COLOURS),
        ("letter", "dark", COLOURS),
    ],
)
def test_no_page_kind_breaks_a_rule_of_accessibility(
    browser: Any, trade: Path, theme: str, scheme: str, rules: Mapping[str, Any]
) -> None:
    """The open rule engine axe-core finds no violation of WCAG 2.2 A and AA, nor of good practice.

    Themes and schemes differ in nothing but colours and measures: what hangs on the markup is looked at once.
    """
    from axe_playwright_python.sync_playwright import Axe

    axe = Axe()
    pages = kinds(trade / "plain" / "internal" if theme == "plain" else trade / "letter")
    assert {"index", "campaign", "lot", "method", "order makeable", "order unreachable"} <= set(pages)
    if scheme == "light":
        pages["pack"] = trade / "pack.html"
    found = []
    for kind, path in pages.items():
        with opened(browser, path, color_scheme=scheme) as page:
            page.evaluate("document.querySelectorAll('details').forEach(part => { part.open = true })")
            found += [
                f"{kind}: {rule['id']}: {node['html'][:160]} {node['failureSummary'][:200]}"
                for rule in axe.run(page, options=rules).response["violations"]
                for node in rule["nodes"][:2]
            ]
    assert found == []


def test_rows_laid_out_as_cards_stay_a_table(browser: Any, trade: Path) -> None:
    """On a narrow screen rows of text become cards, and a reader of the page aloud is still told a table."""
    path = next((trade / "plain" / "internal").rglob("trade/index.html"))
    counts = []
    for width in (1280, 390):
        with opened(browser, path, viewport={"width": width, "height": 800}) as page:
            shown = page.evaluate("getComputedStyle(document.querySelector('#orders-table tbody tr')).display")
            nodes = page.context.new_cdp_session(page).send("Accessibility.getFullAXTree")["nodes"]
            roles = [node.get("role", {}).get("value") for node in nodes]
            counts.append((shown, *(roles.count(role) for role in ("table", "row", "rowheader", "columnheader"))))
    assert counts[0][0] == "table-row"
    assert counts[1][0] == "flex"
    assert counts[0][1:] == counts[1][1:]


def test_everything_can_be_reached_by_keyboard(browser: Any, trade: Path) -> None:
    """The tab key visits every link and control in the order of the page, and each shows that it has the focus."""
    path = kinds(trade / "plain" / "internal")["order makeable"]
    with opened(browser, path) as page:
        page.evaluate("document.querySelectorAll('details').forEach(part => { part.open = true })")
        wanted = page.evaluate(
            "[...document.querySelectorAll('a[href], button, input, select, summary, [tabindex=\"0\"]')]"
            ".filter(item => item.checkVisibility() && !item.disabled).length"
        )
        visited = 0
        for _ in range(wanted + 5):
            page.keyboard.press("Tab")
            state = page.evaluate(
                "(() => { const it = document.activeElement; if (it === document.body) return null;"
                "const was = it.dataset.seen; it.dataset.seen = '1';"
                "return [was || '', getComputedStyle(it).outlineStyle, it.tagName] })()"
            )
            if state is None or state[0]:
                break
            assert state[1] != "none", f"a {state[2]} does not show the focus"
            visited += 1
        assert visited == wanted


def test_hostile_text_in_every_cell_does_nothing(browser: Any, tmp_path: Path) -> None:
    """Names, units, titles, notes, remarks and headers full of markup run nothing and make no element."""
    bad = '"<img src=x onerror=alert(1)></script><script>alert(2)</script>{{ 7*7 }} javascript:alert(3)"'
    plain = bad.strip('"')
    put_campaign(
        tmp_path / "campaigns",
        "x' onload='alert(4)",
        assays_csv=f"lot,alias,material,supplier,place,stock,N,K,{bad}\n"
        f"{bad},{bad},{bad},{bad},{bad},50,10,20,{bad}\nB,,,,,50,30,5,\nC,,,,,50,20,1,\n",
        targets_csv=f"order,client,amount,N,K,{bad}\n{bad},{bad},10,>= 15,>= 6,{bad}\n2,,10,>= 29,>= 19,\n",
        campaign_toml=f"title = '{plain}'\nquantity_unit = '{plain}'\ncurrency = '{plain}'\n"
        f"[components.N]\nlabel = '{plain}'\nunit = '{plain}'\n",
        notes_md=f"{plain}\n\n[link](javascript:alert(5)) ![x](x onerror=alert(6))",
    )
    run(make_job(tmp_path, editions=("internal", "client")))
    pages = sorted((tmp_path / "output").rglob("*.html"))
    assert len(pages) > 10
    for path in pages:
        with opened(browser, path) as page:
            assert page.evaluate("document.querySelectorAll('img, [onerror], [onload]').length") == 0
            assert page.evaluate("[...document.scripts].every(it => it.src.includes('/assets/') || it.type)")


def test_no_output_tells_where_it_was_made(trade: Path) -> None:
    """No page, drawing or data file holds a path of this machine, its name or its user's."""
    telling = [str(trade), str(Path.home()), str(Path(__file__).parents[2])]
    host = platform.node()
    telling += [host] if len(host) > 3 else []
    for path in trade.rglob("*"):
        if path.is_file() and not path.name.startswith(".hullbook-lock") and "campaigns" not in path.parts:
            text = path.read_bytes().decode("utf-8", "replace")
            assert [word for word in telling if word in text] == [], path


def test_every_link_of_a_build_leads_somewhere(trade: Path) -> None:
    """Links between built pages, to data files and to parts of pages resolve."""
    for root in (trade / "plain" / "internal", trade / "plain" / "client"):
        readers = {path: PageReader(path.read_text("utf-8")) for path in root.rglob("*.html")}
        for path, reader in readers.items():
            for link in reader.links:
                if link.startswith(("http", "mailto")):
                    continue
                name, _, fragment = link.partition("#")
                target = (path.parent / unquote(name)).resolve() if name else path
                assert target.is_file(), f"{path}: {link}"
                if fragment:
                    assert unquote(fragment) in readers[target].ids, f"{path}: {link}"


# --- paper


def test_everything_is_printed(browser: Any, site: Path) -> None:
    """On paper folded parts are open, no scroll box cuts a table, and trials and filters are gone."""
    path = site / "spring" / "orders" / "midway.html"
    with opened(browser, path, color_scheme="dark", viewport={"width": 680, "height": 900}) as page:
        page.emulate_media(media="print", color_scheme="dark")
        assert page.locator("#roomiest table").first.is_visible()
        assert page.evaluate("getComputedStyle(document.querySelector('.scroll')).overflowX") == "visible"
        assert page.evaluate("getComputedStyle(document.body).backgroundColor") == "rgb(255, 255, 255)"
        assert not page.locator("#trial").is_visible()


def test_a_pack_prints_in_order(browser: Any, trade: Path) -> None:
    """Cover, contents and each order begin a sheet of their own."""
    with opened(browser, trade / "pack.html") as page:
        sheets = page.pdf(prefer_css_page_size=True)
        count = len(re.findall(rb"/Type\s*/Page\b", sheets))
        page.emulate_media(media="print")
        breaks = page.evaluate(
            "[...document.querySelectorAll('.contents, .leaf.is-order, .leaf.is-campaign, .leaf.is-method')]"
            ".map(part => getComputedStyle(part).breakBefore)"
        )
    assert len(breaks) >= 6
    assert set(breaks) == {"page"}
    assert len(breaks) + 1 <= count <= 80


# --- comfort


def test_a_table_is_sorted_by_its_headers(browser: Any, trade: Path) -> None:
    """Numbers sort as numbers and texts as texts, up and down, and the header says which."""
    with opened(browser, kinds(trade / "plain" / "internal")["campaign"]) as page:
        page.locator("#lots-table th button").nth(3).click()
        rows = page.locator("#lots-table tbody tr")
        costs = [float(text) for text in page.locator("#lots-table tbody tr td:nth-child(4)").all_inner_texts()]
        assert costs == sorted(costs)
        assert page.locator("#lots-table th").nth(3).get_attribute("aria-sort") == "ascending"
        page.locator("#lots-table th button").nth(0).click()
        page.locator("#lots-table th button").nth(0).click()
        assert rows.nth(0).locator("th").inner_text().strip() == "L-13"
        assert page.locator("#lots-table th[aria-sort]").count() == 1


def test_a_long_table_is_filtered(browser: Any, trade: Path) -> None:
    """Only rows with all the words stay, and how many they are is told."""
    with opened(browser, kinds(trade / "plain" / "internal")["campaign"]) as page:
        section = page.locator("#lots")
        section.locator("input[type=search]").fill("l-1 corner")
        names = [text.strip() for text in page.locator("#lots-table tbody tr:not([hidden]) th").all_inner_texts()]
        assert names
        assert all(name.startswith("L-1") for name in names)
        assert section.locator("[role=status]").inner_text() == f"{len(names)} of 14 rows"


def test_marks_and_rows_light_up_together(browser: Any, site: Path) -> None:
    """The row of a lot lights up its mark in the figure, and the mark its rows."""
    with opened(browser, site / "spring" / "index.html") as page:
        page.locator('#lots-table tr[data-key="lot A"]').hover()
        assert page.locator('circle.lit[data-key="lot A"]').count() == 1
        page.locator('circle[data-key="lot B"]').hover()
        assert page.locator('tr.lit[data-key="lot B"]').count() == 1
        assert page.locator('tr.lit[data-key="lot A"]').count() == 0


def trial_values(page: Any) -> list[str]:
    """What the trial says of each limit."""
    return [
        text.strip() for text in page.locator(".trial table").nth(1).locator("tbody td:nth-child(3)").all_inner_texts()
    ]


def expected_values(campaign: Campaign, order: Any, shares: Mapping[str, Fraction]) -> list[Fraction]:
    """The program's own values of a blend, exactly."""
    table, measures = table_of(campaign), measures_of(campaign)
    names = [lot.name for lot in campaign.lots]
    by_position = {names.index(name): share for name, share in shares.items()}
    found = []
    for limit in order.limits:
        value = blend_value(measures[limit.on], table, list(by_position), by_position)
        assert value is not None
        found.append(value)
    return found


def fill(page: Any, shares: Mapping[str, Fraction]) -> None:
    """Make the trial of these shares: remove all lots, add these, type."""
    while page.locator(".trial button[aria-label^='Take out']").count():
        page.locator(".trial button[aria-label^='Take out']").first.click()
    for lot, share in shares.items():
        page.locator(".trial select").select_option(label=lot)
        page.locator(".trial button", has_text="Add").click()
        page.get_by_label(f"Share of {lot}, percent").fill(str(float(share * 100)))


def test_a_trial_blend_reckons_as_the_program_does(browser: Any, trade: Path) -> None:
    """For random shares the trial's values are the program's: ratio, blend rule, dry basis and group too."""
    campaign, findings = answers(trade)
    chance = random.Random(8)
    lots = [lot.name for lot in campaign.lots if "salt" in lot.materials or "urea" in lot.materials]
    for order in findings.orders[:2]:
        with opened(browser, trade / "plain" / "internal" / "trade" / "orders" / f"{order.order}.html") as page:
            for _ in range(4):
                chosen = chance.sample(lots, 3)
                first, second = sorted(chance.sample(range(1, 100), 2))
                parts = (first, second - first, 100 - second)
                shares = {lot: Fraction(part, 100) for lot, part in zip(chosen, parts, strict=True)}
                fill(page, shares)
                values = expected_values(campaign, order, shares)
                for shown, value in zip(trial_values(page), values, strict=True):
                    places = len(shown.partition(".")[2])
                    assert shown == numbers.text(value, places)


def test_a_trial_tells_the_verdict(browser: Any, trade: Path) -> None:
    """The cheapest recipe is makeable; what breaks a limit says which; a wrong sum says so; buttons move shares."""
    with opened(browser, trade / "plain" / "internal" / "trade" / "orders" / "1001.html") as page:
        told = page.locator(".told-trial")
        assert told.inner_text() == "Makeable: within all limits."
        page.locator(".trial button[aria-label^='One percent more']").first.click()
        assert "The shares sum to 101.00 %, not 100 %" in told.inner_text()
        page.locator(".trial button", has_text="Scale to 100 %").click()
        assert "sum to" not in told.inner_text()
        fill(page, {"L-13": Fraction(1)})
        assert told.inner_text().startswith("Outside the limits: N")
        assert page.locator(".trial").get_attribute("data-verdict") == "outside"


def test_a_trial_never_joins_what_is_kept_apart(browser: Any, trade: Path) -> None:
    """While one material stands in the trial, lots of the other can't be chosen, and the list says why."""
    with opened(browser, trade / "plain" / "internal" / "trade" / "orders" / "1001.html") as page:
        fill(page, {"L-0": Fraction(1)})
        options = page.locator(".trial select option")
        disabled = {options.nth(n).inner_text() for n in range(options.count()) if options.nth(n).is_disabled()}
        assert disabled == {f"L-{n}, kept apart from L-0" for n in (1, 5, 9, 13)}
        assert page.locator(".trial select").input_value() != ""


def test_pages_are_complete_without_scripts(browser: Any, trade: Path) -> None:
    """With scripts off nothing is missing but the comfort: no empty trial, no dead control."""
    path = kinds(trade / "plain" / "internal")["order makeable"]
    with opened(browser, path, java_script_enabled=False) as page:
        assert page.locator("#cheapest table").first.is_visible()
        assert not page.locator("#trial").is_visible()
        assert page.locator("button, input, select").count() == 0
