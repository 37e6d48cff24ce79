"""One headless browser for all tests here; screenshots of failing ones are kept.

`SFCPART_ARTEFACTS` names the folder for screenshots (pytest's own temporary folder otherwise).
"""

from __future__ import annotations

import json
import os
import re
import shutil
from collections.abc import Iterator
from pathlib import Path

import pytest

HOW = (
    "no Chromium with its driver was found; on Debian: apt-get install chromium chromium-driver, "
    "elsewhere put `chromium` and `chromedriver` on the path"
)
FLAGS = (
    "--headless=new",
    "--no-sandbox",  # containers run as root
    "--disable-dev-shm-usage",
    "--use-angle=swiftshader",  # WebGL without a graphics card
    "--enable-unsafe-swiftshader",
    "--force-color-profile=srgb",
    "--force-prefers-reduced-motion",  # no smooth scrolling: clicks would miss
    "--window-size=1200,900",
)


def program(*names: str) -> str | None:
    """Return the first of some programs that is there."""
    return next(filter(None, map(shutil.which, names)), None)


def start(*more: str):
    """Start Chromium, told to keep logs; skip if there is none."""
    from selenium import webdriver
    from selenium.webdriver.chrome.service import Service

    chromium = program("chromium", "chromium-browser", "google-chrome")
    driver = program("chromedriver")
    if chromium is None or driver is None:
        pytest.skip(HOW)
    options = webdriver.ChromeOptions()
    options.binary_location = chromium
    for flag in (*FLAGS, *more):
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    browser = webdriver.Chrome(options=options, service=Service(driver))
    browser.set_page_load_timeout(180)
    browser.set_script_timeout(180)
    return browser


class Reader:
    """A person at the browser: opens pages, looks, types."""

    def __init__(self, browser) -> None:
        self.browser = browser

    def open(self, path: Path) -> None:
        """Open a file and wait until all of it is drawn."""
        self.browser.get_log("browser")
        self.browser.get_log("performance")
        self.browser.get(path.as_uri())
        assert self.ask("return document.documentElement.dataset.drawn") == "all"
        self.wait_a_frame()

    def ask(self, script: str, *arguments):
        """Run a script in the page."""
        return self.browser.execute_script(script, *arguments)

    def wait_a_frame(self) -> None:
        """Wait until what was asked for has been drawn."""
        self.browser.execute_async_script(
            "const done = arguments[0];"
            "requestAnimationFrame(() => requestAnimationFrame(() => setTimeout(done, 0)))"
        )

    def complaints(self) -> list[str]:
        """Return what the console said since the page was opened."""
        return [entry["message"] for entry in self.browser.get_log("browser")]

    def requests(self) -> list[str]:
        """Return the addresses asked for since the page was opened, the page's own included."""
        events = [json.loads(e["message"])["message"] for e in self.browser.get_log("performance")]
        sent = [e["params"] for e in events if e["method"] == "Network.requestWillBeSent"]
        urls = [params["request"]["url"] for params in sent]
        return [url for url in urls if not url.startswith(("data:", "blob:"))]

    def find(self, selector: str):
        """Return an element."""
        return self.browser.find_element("css selector", selector)

    def texts(self, selector: str) -> list[str]:
        """Return the texts of elements."""
        return self.ask(
            "return [...document.querySelectorAll(arguments[0])].map((e) => e.textContent)",
            selector,
        )

    def section(self, kind: str) -> str:
        """Return how the first section of a kind is selected."""
        return f"section.{kind}"

    def choose(self, selector: str, value: str) -> None:
        """Set a field as a person does."""
        self.ask(
            "const field = document.querySelector(arguments[0]); field.value = arguments[1];"
            "field.dispatchEvent(new Event('input', {bubbles: true}));"
            "field.dispatchEvent(new Event('change', {bubbles: true}));",
            selector,
            value,
        )
        self.wait_a_frame()

    def show_as(self, *, media: str = "screen", scheme: str = "light") -> None:
        """Switch to print, or to dark."""
        feature = {"name": "prefers-color-scheme", "value": scheme}
        self.browser.execute_cdp_cmd(
            "Emulation.setEmulatedMedia", {"media": media, "features": [feature]}
        )
        self.wait_a_frame()

    def size(self, width: int, height: int = 900) -> None:
        """Set the size of the window's inside."""
        size = {"width": width, "height": height, "deviceScaleFactor": 1, "mobile": width < 500}
        self.browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", size)
        self.wait_a_frame()


@pytest.fixture(scope="module")
def browser() -> Iterator:
    """Give one browser for a whole module."""
    pytest.importorskip("selenium")
    found = start()
    yield found
    found.quit()


@pytest.fixture
def reader(browser, request, tmp_path) -> Iterator[Reader]:
    """Give a person at the browser; what they saw last is kept if the test fails."""
    person = Reader(browser)
    person.size(1200)
    person.show_as()
    yield person
    if getattr(request.node, "failed", False):
        folder = Path(os.environ.get("SFCPART_ARTEFACTS") or tmp_path)
        folder.mkdir(parents=True, exist_ok=True)
        name = re.sub(r"\W+", "_", request.node.name)
        browser.save_screenshot(str(folder / f"{name}.png"))


@pytest.hookimpl(hookwrapper=True)
def pytest_runtest_makereport(item, call):
    """Note on the test whether it failed."""
    outcome = yield
    if outcome.get_result().failed:
        item.failed = True
