"""Pages in a real browser, from files, without a network."""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from generator.report.themes import load_theme
from tests.report.fixtures import HOSTILE, full_book, make_campaign, make_lot, output

playwright = pytest.importorskip("playwright.sync_api")
pytestmark = pytest.mark.browser

WIDTHS = (390, 820, 1600)


@pytest.fixture(scope="module")
def browser() -> Iterator[playwright.Browser]:
    found = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
    if found is None:
        pytest.skip("no Chromium on this machine")
    with playwright.sync_playwright() as driver:
        one = driver.chromium.launch(executable_path=found, args=["--no-sandbox", "--disable-dev-shm-usage"])
        yield one
        one.close()


@pytest.fixture(scope="module")
def site(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """An output with every section, and hostile text in a lot and in the notes."""
    folder = tmp_path_factory.mktemp("site")
    book = full_book()
    lots = (*make_campaign().lots, make_lot(HOSTILE, "12", "8", supplier=HOSTILE))
    book = replace(book, campaign=replace(book.campaign, lots=lots, notes=HOSTILE))
    for address, data in output(book, load_theme()).items():
        path = folder / address
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(data)
    return folder


def test_pages_open_from_files_without_a_fault(browser: playwright.Browser, site: Path) -> None:
    """No console message, no error, no dialog, no request but for files; nothing wider than the window."""
    faults: list[str] = []
    for scheme, width in zip(("light", "dark", "light"), WIDTHS, strict=True):
        context = browser.new_context(offline=True, color_scheme=scheme, viewport={"width": width, "height": 800})
        page = context.new_page()
        page.on("console", lambda message: faults.append(message.text))
        page.on("pageerror", lambda error: faults.append(str(error)))
        page.on("dialog", lambda dialog: faults.append(dialog.message))
        page.on(
            "request",
            lambda request: faults.extend([] if request.url.startswith(("file:", "data:")) else [request.url]),
        )
        for path in sorted(site.rglob("*.html")):
            page.goto(path.as_uri())
            excess = page.evaluate("document.documentElement.scrollWidth - document.documentElement.clientWidth")
            if excess > 0:
                faults.append(f"{path.name} is {excess} px too wide at {width}")
        context.close()
    assert faults == []


def test_the_style_sheet_applies(browser: playwright.Browser, site: Path) -> None:
    """The policy lets the style sheet in, and dark readers get dark paper."""
    grounds = []
    for scheme in ("light", "dark"):
        context = browser.new_context(offline=True, color_scheme=scheme)
        page = context.new_page()
        page.goto((site / "index.html").as_uri())
        grounds.append(page.evaluate("getComputedStyle(document.body).backgroundColor"))
        context.close()
    assert grounds == ["rgb(251, 250, 247)", "rgb(21, 25, 27)"]


def test_everything_is_printed(browser: playwright.Browser, site: Path) -> None:
    """On paper folded parts are open and no scroll box cuts a table."""
    context = browser.new_context(offline=True, color_scheme="dark", viewport={"width": 680, "height": 900})
    page = context.new_page()
    page.emulate_media(media="print", color_scheme="dark")
    page.goto((site / "spring" / "orders" / "midway.html").as_uri())
    assert page.locator("#roomiest table").first.is_visible()
    assert page.evaluate("getComputedStyle(document.querySelector('.scroll')).overflowX") == "visible"
    assert page.evaluate("getComputedStyle(document.body).backgroundColor") == "rgb(255, 255, 255)"
    context.close()
