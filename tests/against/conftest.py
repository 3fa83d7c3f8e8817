"""One browser for all tests of pages."""

from __future__ import annotations

import pytest

from support.browser import CHROMIUM


@pytest.fixture(scope="session")
def browser():
    """Chromium, opened once; skips where Playwright is not installed."""
    playwright = pytest.importorskip("playwright.sync_api", reason="Playwright is not installed")
    with playwright.sync_playwright() as driver:
        made = driver.chromium.launch(
            executable_path=CHROMIUM, args=["--no-sandbox", "--disable-gpu"]
        )
        yield made
        made.close()


@pytest.fixture
def opened(browser):
    """Open a file in a fresh page that keeps every request and complaint."""
    contexts = []

    def open_file(path, *, ready=None, **settings):
        context = browser.new_context(**settings)
        contexts.append(context)
        page = context.new_page()
        page.asked, page.said = [], []
        page.on("request", lambda request: page.asked.append(request.url))
        page.on("console", lambda message: page.said.append(message.text))
        page.on("pageerror", lambda error: page.said.append(str(error)))
        page.goto(path.as_uri())
        if ready and settings.get("java_script_enabled", True):
            page.locator(ready).wait_for()
        return page

    yield open_file
    for context in contexts:
        context.close()
