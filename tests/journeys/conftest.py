"""A real browser on a served registry; what the content policy or a script complains of fails the journey."""

from __future__ import annotations

import shutil
import threading
from collections.abc import Iterator
from datetime import UTC, datetime

import pytest
from playwright.sync_api import Browser, ConsoleMessage, Page, sync_playwright
from werkzeug.serving import make_server

from registry.services.opening import Database
from registry.services.settings import Settings
from seed_demo.building import build_demo
from tests.conftest import in_ci
from tests.support.studies import CHEAP, PASSWORD
from web import create_app

FLAGS = [
    "--no-sandbox", "--disable-dev-shm-usage", "--disable-gpu", "--disable-quic", "--no-first-run",
    "--disable-background-networking", "--disable-component-update", "--disable-sync",
]  # fmt: skip


@pytest.fixture(scope="session")
def browser() -> Iterator[Browser]:
    """Start chromium once; its absence fails in CI and skips elsewhere."""
    found = shutil.which("chromium")
    if found is None:
        reason = "no chromium here: apt-get install chromium"
        if in_ci():
            pytest.fail(reason)
        pytest.skip(reason)
    with sync_playwright() as playwright:
        started = playwright.chromium.launch(executable_path=found, args=FLAGS)
        yield started
        started.close()


@pytest.fixture
def served(sqlite: Database) -> Iterator[str]:
    """Serve the demo; gives its address."""
    build_demo(sqlite, now=datetime(2026, 12, 1, tzinfo=UTC), password=PASSWORD, hashing=CHEAP)
    settings = Settings(database_url="", secret="s" * 40, secure_cookies=False, hashing=CHEAP, build="journey")
    server = make_server("127.0.0.1", 0, create_app(sqlite, settings), threaded=True)
    thread = threading.Thread(target=server.serve_forever)
    thread.start()
    yield f"http://127.0.0.1:{server.server_port}"
    server.shutdown()
    thread.join()
    server.server_close()


@pytest.fixture
def page(browser: Browser, served: str) -> Iterator[Page]:
    """Open a page on the served registry, signed in as its keeper."""
    context = browser.new_context(base_url=served, viewport={"width": 390, "height": 844})
    opened = context.new_page()
    complaints: list[str] = []

    def listen(message: ConsoleMessage) -> None:
        # A refused form answers 422, which the browser's console tells as an error of its own.
        if message.type in ("error", "warning") and "status of 422" not in message.text:
            complaints.append(message.text)

    opened.on("console", listen)
    opened.on("pageerror", lambda error: complaints.append(str(error)))
    opened.goto("/sign-in")
    opened.fill("input[name=address]", "keeper@osierholm.example")
    opened.fill("input[name=password]", PASSWORD)
    opened.click("main button[type=submit]")
    opened.wait_for_url("**/")
    yield opened
    context.close()
    assert complaints == []
