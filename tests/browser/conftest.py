"""One server and one browser for all tests here; every tab is looked at for errors and for requests to other places."""

from __future__ import annotations

import shutil
from collections.abc import Callable, Iterator

import pytest
from playwright.sync_api import BrowserContext, sync_playwright

from tests.browser.server import Server
from tests.browser.visit import Visit

CHROMIUM = next((path for name in ("chromium", "chromium-browser") if (path := shutil.which(name))), None)

#: The browser itself is kept from asking anything of anybody.
OPTIONS = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--host-resolver-rules=MAP * ~NOTFOUND , EXCLUDE 127.0.0.1",
]


@pytest.fixture(scope="session")
def server(tmp_path_factory) -> Iterator[Server]:
    running = Server(tmp_path_factory.mktemp("server"))
    running.start()
    yield running
    running.stop()


@pytest.fixture(scope="session")
def context() -> Iterator[BrowserContext]:
    if CHROMIUM is None:
        pytest.fail("these tests need Debian's browser: apt-get install chromium")
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=CHROMIUM, args=OPTIONS)
        yield browser.new_context(viewport={"width": 1280, "height": 900}, accept_downloads=True)
        browser.close()


@pytest.fixture
def tab(server, context) -> Iterator[Callable[[], Visit]]:
    """Open tabs; at the end none of them may have complained."""
    opened: list[Visit] = []

    def new() -> Visit:
        opened.append(Visit(context.new_page(), server.url))
        return opened[-1]

    yield new
    complaints = [complaint for visit in opened for complaint in visit.complaints]
    for visit in opened:
        visit.page.close()
    assert not complaints


@pytest.fixture
def visit(tab) -> Visit:
    return tab()
