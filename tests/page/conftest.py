"""A service on a free port of this machine, and a browser that looks at its page.

The browser lives as long as the tests of this package and no longer: while it runs, no test of its process
can start an event loop of its own.
"""

from __future__ import annotations

import shutil
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path

import pytest
import uvicorn
from playwright.sync_api import BrowserContext, Page, sync_playwright

from service.app import create_app
from service.settings import Settings

ARGUMENTS = ["--no-sandbox", "--disable-gpu", "--disable-background-networking"]
DESKTOP, TABLET, PHONE = (1280, 900), (768, 1024), (390, 844)

# What a browser says of an answer with an error status; the page tells the person itself.
STATUS_NOTICE = "Failed to load resource: the server responded with a status of 422"


@dataclass
class Watched:
    """A page and what went wrong or went outside while it was looked at."""

    page: Page
    complaints: list[str] = field(default_factory=list)
    expected: list[str] = field(default_factory=lambda: [STATUS_NOTICE])
    outside: list[str] = field(default_factory=list)

    def hear(self, kind: str, text: str) -> None:
        """Note what the browser complains of."""
        if kind in ("error", "warning"):
            self.complaints.append(text)

    def see(self, url: str, own: tuple[str, ...]) -> None:
        """Note an address that is not of the service's own."""
        if not url.startswith(own):
            self.outside.append(url)


@contextmanager
def running(settings: Settings) -> Iterator[str]:
    """The address of a service that runs in a thread, as it would by itself."""
    configuration = uvicorn.Config(create_app(settings), host="127.0.0.1", port=0, log_level="warning")
    server = uvicorn.Server(configuration)
    thread = threading.Thread(target=server.run)
    thread.start()
    try:
        deadline = time.monotonic() + 20
        while not server.started:
            assert thread.is_alive(), "the service did not start"
            assert time.monotonic() < deadline, "the service did not start in time"
            time.sleep(0.02)
        port = server.servers[0].sockets[0].getsockname()[1]
        yield f"http://127.0.0.1:{port}"
    finally:
        server.should_exit = True
        thread.join()


@pytest.fixture(scope="package")
def address(tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    """Where the page is served."""
    folder: Path = tmp_path_factory.mktemp("store")
    settings = Settings(
        store_path=folder / "problems.sqlite3", studies_folder=folder / "studies", worker_threads=2, study_workers=1
    )
    with running(settings) as address:
        yield address


@pytest.fixture(scope="package")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[BrowserContext]:
    """The system's Chromium; pages share what they have loaded, and keep what is typed each to itself.

    A profile on disk lets it keep the plotting script compiled, which saves two seconds a test.
    """
    chromium = shutil.which("chromium")
    assert chromium, "these tests need Chromium; on Debian: apt-get install chromium fonts-liberation"
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch_persistent_context(
            tmp_path_factory.mktemp("profile"),
            executable_path=chromium,
            args=ARGUMENTS,
            reduced_motion="reduce",
        )
        yield browser
        browser.close()


@pytest.fixture
def watched(address: str, browser: BrowserContext, request: pytest.FixtureRequest) -> Iterator[Watched]:
    """The page, just opened, as wide as a desk's or, by a parameter, another screen."""
    width, height = getattr(request, "param", DESKTOP)
    page = browser.new_page()
    page.set_viewport_size({"width": width, "height": height})
    page.set_default_timeout(20_000)
    watched = Watched(page)
    page.on("pageerror", lambda error: watched.complaints.append(str(error)))
    page.on("console", lambda message: watched.hear(message.type, message.text))
    page.on("request", lambda sent: watched.see(sent.url, (address, "data:", "blob:")))
    page.goto(address)
    yield watched
    page.close()
    assert not watched.outside
    assert not [text for text in watched.complaints if not text.startswith(tuple(watched.expected))]


@pytest.fixture
def page(watched: Watched) -> Page:
    """The page alone."""
    return watched.page
