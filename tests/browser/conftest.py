"""The scene served on loopback, and Chromium to look at it. Pictures go to ``.artefacts``."""

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest
from browser.scene import scene
from web.builders import Hub

from hub.web.server import Pages

CHROMIUM = Path("/usr/bin/chromium")
ARGUMENTS = [
    *("--no-sandbox", "--disable-gpu", "--disable-background-networking", "--disable-component-update"),
    *("--disable-sync", "--no-first-run"),
]
PICTURES = Path(__file__).parents[2] / ".artefacts"


@dataclass
class Site:
    """The hub and where it is served."""

    hub: Hub
    base: str


@pytest.fixture(scope="session")
def site(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Site]:
    """The scene, served."""
    hub = scene(tmp_path_factory.mktemp("scene"))
    pages = Pages(hub.app(), hub.settings.web)
    pages.start()
    yield Site(hub, f"http://127.0.0.1:{pages.port}")
    pages.stop()
    hub.database.close()


@pytest.fixture(scope="session")
def chromium() -> Iterator[Any]:
    """Debian's Chromium."""
    if not CHROMIUM.exists():
        pytest.skip("Chromium is not on this machine; install Debian's package chromium")
    from playwright.sync_api import sync_playwright

    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=str(CHROMIUM), args=ARGUMENTS)
        yield browser
        browser.close()


@pytest.fixture
def look(site: Site, chromium: Any) -> Iterator[Any]:
    """Opens an address in a fresh browser window without scripts; logged in unless told otherwise."""
    contexts = []

    def open_page(path: str, width: int = 1280, *, scheme: str = "light", logged_in: bool = True) -> Any:
        context = chromium.new_context(
            viewport={"width": width, "height": 800},
            color_scheme=scheme,
            java_script_enabled=False,
            has_touch=width < 500,
            is_mobile=width < 500,
        )
        contexts.append(context)
        if logged_in:
            context.add_cookies([{"name": "packfold-session", "value": site.hub.grant("session"), "url": site.base}])
        page = context.new_page()
        page.troubles = []
        page.on("console", lambda message: page.troubles.append(message.text))
        page.on("requestfailed", lambda request: page.troubles.append(request.url))
        page.asked = []
        page.on("request", lambda request: page.asked.append(request.url))
        page.goto(f"{site.base}{path}")
        return page

    yield open_page
    for context in contexts:
        context.close()
