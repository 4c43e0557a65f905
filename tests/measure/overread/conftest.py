"""A real browser, Debian's Chromium driven by playwright, on a page that is ready."""

import pytest

from tests.measure.overread.browsing import CHROMIUM, FOREIGN, LAPTOP, opened
from tests.measure.overread.made import digital_chain, page_chain, serving, worklist


@pytest.fixture(scope="session")
def browser():
    if not CHROMIUM.exists():
        pytest.skip(f"there is no {CHROMIUM}")
    sync_api = pytest.importorskip("playwright.sync_api", reason="playwright is not installed")
    pytest.importorskip("measure.overread.server", reason="the extra `overread` is missing")
    with sync_api.sync_playwright() as play:
        # inside a container the browser's own sandbox has no rights to start
        opened = play.chromium.launch(executable_path=CHROMIUM, args=["--no-sandbox", *FOREIGN])
        yield opened
        opened.close()


@pytest.fixture
def ready(tmp_path):
    with serving(worklist(tmp_path, page_chain(), digital_chain())) as guard:
        yield guard


@pytest.fixture
def page(browser, ready):
    context = browser.new_context(viewport=LAPTOP)
    page = context.new_page()
    page.faults, page.asked = [], []
    page.on("pageerror", lambda error: page.faults.append(str(error)))
    page.on("console", lambda m: page.faults.append(m.text) if m.type == "error" else None)
    page.on("request", lambda request: page.asked.append(request.url))
    opened(page, ready.address)
    yield page
    assert page.faults == []
    context.close()
