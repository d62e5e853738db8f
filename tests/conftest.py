"""What tests of several rooms share: one browser for all of them."""

from __future__ import annotations

import os
import shutil
from collections.abc import Iterator
from typing import Any

import pytest


@pytest.fixture(scope="session")
def browser() -> Iterator[Any]:
    """Headless Chromium; without one the test is skipped, or fails where HULLBOOK_BROWSER_REQUIRED is 1."""
    found = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
    try:
        from playwright.sync_api import sync_playwright
    except ImportError:
        found = None
    if found is None:
        why = "no Chromium, or no playwright, on this machine"
        if os.environ.get("HULLBOOK_BROWSER_REQUIRED") == "1":
            pytest.fail(why)
        pytest.skip(why)
    with sync_playwright() as driver:
        one = driver.chromium.launch(executable_path=found, args=["--no-sandbox", "--disable-dev-shm-usage"])
        yield one
        one.close()
