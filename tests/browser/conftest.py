"""A real Chromium before a real server on loopback. Where the browser is missing, every test here fails."""

from __future__ import annotations

import shutil
import threading
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from urllib.parse import urlsplit

import pytest
import waitress
from playwright.sync_api import Browser, BrowserContext, Page, Request, Route, sync_playwright

from tests.databases import SqliteFiles, file_of
from tests.pages import invented
from tests.pages.invented import Kept, password_of

CHROMIUM = shutil.which("chromium") or "/usr/bin/chromium"
ARGUMENTS = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
]


@dataclass
class Site:
    """The running service, and every request that a page made past it."""

    address: str
    kept: Kept
    strangers: list[str] = field(default_factory=list)

    def submission(self, case: str) -> str:
        return f"{self.address}/submissions/{self.kept.submissions[case]}"


@pytest.fixture(scope="session")
def made(tmp_path_factory: pytest.TempPathFactory) -> Kept:
    return invented.make_store(SqliteFiles(tmp_path_factory.mktemp("browser")).new())


@pytest.fixture
def site(made: Kept, tmp_path: Path) -> Iterator[Site]:
    # what a browser shows does not depend on the kind of database; tests/pages runs on both
    copy = tmp_path / "store.db"
    shutil.copy(file_of(made.url), copy)
    app = invented.application(f"sqlite:///{copy}")
    server = waitress.create_server(app, host="127.0.0.1", port=0, threads=4)
    thread = threading.Thread(target=server.run, daemon=True)
    thread.start()
    yield Site(f"http://127.0.0.1:{server.effective_port}", made)
    server.close()
    thread.join(5)
    invented.close(app)


@pytest.fixture(scope="session")
def chromium() -> Iterator[Browser]:
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=CHROMIUM, args=ARGUMENTS)
        yield browser
        browser.close()


Opened = Callable[..., Page]


@pytest.fixture
def opened(chromium: Browser, site: Site) -> Iterator[Opened]:
    """Open a page as somebody; without a name, as a stranger."""
    contexts: list[BrowserContext] = []

    def open_page(
        person: str | None = None, *, width: int = 1280, scripts: bool = False, height: int = 900
    ) -> Page:
        # a page of ours needs no script; the reading of it by axe does, past its policy
        context = chromium.new_context(
            viewport={"width": width, "height": height}, java_script_enabled=scripts, bypass_csp=scripts
        )
        contexts.append(context)
        context.route("**/*", lambda route, request: _stay_here(site, route, request))
        page = context.new_page()
        page.set_default_timeout(15_000)
        page.goto(f"{site.address}/sign-in")
        if person is not None:
            page.get_by_label("Account name").fill(person)
            page.get_by_label("Password").fill(password_of(person))
            page.get_by_role("button", name="Sign in").click()
            page.wait_for_url(f"{site.address}/")
        return page

    yield open_page
    for context in contexts:
        context.close()
    assert site.strangers == []


def _stay_here(site: Site, route: Route, request: Request) -> None:
    """Note and stop every request that would leave the machine."""
    if urlsplit(request.url).netloc == urlsplit(site.address).netloc:
        route.continue_()
    else:
        site.strangers.append(request.url)
        route.abort()
